"""The loops of the comparison by their letter."""

from . import dc_drive, friction_drive, geared_servo, linear_plant
from .problem import Problem

PROBLEMS: dict[str, Problem] = {
    module.PROBLEM.letter: module.PROBLEM for module in (linear_plant, friction_drive, dc_drive, geared_servo)
}

__all__ = ["PROBLEMS", "Problem"]

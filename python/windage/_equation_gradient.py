"""Gradients of equation programs in double precision, for advice on a study; no part of any trial."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
from numpy.typing import NDArray

from ._equation_program import Instruction, Program
from ._equation_reference import FUNCTIONS

Values = NDArray[np.float64]
#: Step of a difference quotient, relative; about the cube root of the rounding unit.
STEP = 6e-6
#: Functions that are not smooth at 0: the step must not reach it.
_NEAR_ZERO = frozenset(("sqrt", "log", "pow"))
_FLAT = frozenset(
    (
        *("sign", "floor", "round", "less", "less_equal", "equal", "not_equal"),
        *("logical_and", "logical_or", "logical_not", "constant"),
    )
)


def reads(program: Program) -> list[set[str]]:
    """Return for each output the names of the inputs that it reads, through whatever is between."""
    found: list[set[str]] = []
    for step in program.code:
        if step.op == "load":
            found.append({program.inputs[step.a]})
        else:
            found.append(set[str]().union(*(found[i] for i in _operands(step))))
    return [found[output] for output in program.outputs]


def gradients(program: Program, values: Mapping[str, float], names: Sequence[str]) -> Values:
    """Return the derivatives of each output by some of the inputs.

    Parameters
    ----------
    program : Program
        From `compile_equations`.
    values : mapping of str to float
        A number for each input that is loaded.
    names : sequence of str
        The inputs to differentiate by.

    Returns
    -------
    ndarray, shape (outputs, names)
        Exact for arithmetic, by central differences for other functions; at a kink that of one side; NaN where
        the equations have no value.
    """
    results: list[float] = []
    slopes: list[Values] = []
    for step in program.code:
        if step.op == "load":
            name = program.inputs[step.a]
            results.append(values[name])
            slopes.append(np.array([1.0 if name == other else 0.0 for other in names]))
            continue
        operands = [results[i] for i in _operands(step)]
        value = (
            step.constant
            if step.op == "constant"
            else float(np.asarray(FUNCTIONS[step.op](*map(np.float64, operands))))
        )
        slope = np.zeros(len(names))
        for partial, i in zip(_partials(step.op, operands, value), _operands(step), strict=True):
            if slopes[i].any():
                slope = slope + partial * slopes[i]
        results.append(value)
        slopes.append(slope)
    return np.array([slopes[output] for output in program.outputs])


def _partials(op: str, x: Sequence[float], value: float) -> list[float]:
    """Return the derivatives of an operation by its operands."""
    if op in _FLAT:
        return [0.0] * len(x)
    if op in ("add", "sub"):
        return [1.0, 1.0 if op == "add" else -1.0]
    if op == "mul":
        return [x[1], x[0]]
    if op == "div":
        return [1.0 / x[1], -value / x[1]] if x[1] != 0.0 else [np.nan, np.nan]
    if op == "mod":
        return [1.0, -float(np.floor(np.divide(x[0], x[1])))]
    if op == "neg":
        return [-1.0]
    if op == "abs":
        return [float(np.sign(x[0]))]
    if op == "select":
        return [0.0, 1.0, 0.0] if x[0] != 0.0 else [0.0, 0.0, 1.0]
    if op in ("min", "max"):
        second = x[1] < x[0] if op == "min" else x[1] > x[0]
        return [0.0, 1.0] if second else [1.0, 0.0]
    return [_quotient(op, x, place) for place in range(len(x))]


def _quotient(op: str, x: Sequence[float], place: int) -> float:
    size = abs(x[place])
    step = STEP * (size if op in _NEAR_ZERO and size > 0.0 else max(1.0, size))

    def at(moved: float) -> float:
        return _applied(op, [moved if i == place else other for i, other in enumerate(x)])

    return (at(x[place] + step) - at(x[place] - step)) / (2.0 * step)


def _applied(op: str, operands: Sequence[float]) -> float:
    return float(np.asarray(FUNCTIONS[op](*map(np.float64, operands))))


def _operands(step: Instruction) -> tuple[int, ...]:
    if step.op in ("constant", "load"):
        return ()
    return tuple(value for value in (step.a, step.b, step.c) if value >= 0)

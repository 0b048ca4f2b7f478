"""Advice on limits that look like percent where a measure is a fraction."""

from __future__ import annotations

from collections.abc import Sequence

from ._measures import Requirement, shown
from ._numbers import low_of

#: Measures that are fractions of the change.
FRACTIONS = ("overshoot", "undershoot")


def fraction_advice(requirements: Sequence[Requirement]) -> list[str]:
    """Return which limits allow more than the whole change, in words."""
    found = []
    for requirement in requirements:
        limit = requirement.at_most
        if requirement.measure.kind in FRACTIONS and limit is not None and low_of(limit) > 1.0:
            allowed, meant = 100.0 * low_of(limit), 0.01 * low_of(limit)
            found.append(
                f"requirements: {requirement.label!r} allows {allowed:.4g} % of the change; it is a fraction, and "
                f"{shown(low_of(limit))} % would be {shown(meant)}"
            )
    return found

"""How far two computations of a measure may lie apart: on the scale of the signals that the measure reads.

The value of a measure is no scale of its own error: the last error of a settled loop is 1e-16 or 0 by chance, while
the output that it is the difference of is 1. So the largest magnitude of each signal is measured beside it, within
the measure's window and over the whole trial, in the same run. Every trial has scales of its own: one that grows
without bound says nothing about its neighbours.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from ._describe import Described
from ._loop import Loop
from ._numbers import high_of
from ._runner import Columns

#: Of the signal within the measure's window.
OF_SIZE = 1e-6
#: Of the limit, where the measure has one that is not beyond the signal.
OF_LIMIT = 1e-3
#: Of the signal over the whole trial: what a transient leaves behind it, and what rounding does.
OF_WHOLE = 1e-9
#: What the step-controlled reference can tell apart at all (its tolerance is 1e-10 of 1e-3).
FLOOR = 1e-12

#: Kinds of the engine that are times, known to a sample period.
TIMES = ("rise_time", "settling_time", "settling_time_absolute", "time_outside", "time_at_limits", "time_of_peak")
#: Kinds that are counts: one more or less is what a difference near a dead band makes of it.
COUNTS = ("reversals",)
#: Kinds that are fractions of a change.
FRACTIONS = ("overshoot", "undershoot")
#: Kinds that add up without a sign, so that the value is its own scale; powers of signal and duration.
SUMS = {
    "integral_absolute": (1, 1),
    "integral_square": (2, 1),
    "integral_time_absolute": (1, 2),
    "total_variation": (1, 0),
}
#: Signals that are differences of each other: rounding of one reaches the others.
RELATED = ("error", "output", "reference", "measured")

Values = NDArray[np.float64]


@dataclass(frozen=True)
class Sized:
    """A described study with the measures of its scales behind its own, and where they are.

    The operands of differences and ratios come right behind the study's own measures, each after what it is part of;
    they have scales too.
    """

    described: Described
    own: int  # the study's own measures
    operands: tuple[tuple[int, ...], ...]  # for each measure and operand: the rows of what it is made of, or none
    inside: tuple[int, ...]  # for each measure: the row of its signal's peak in its window
    whole: tuple[tuple[int, ...], ...]  # for each measure: rows of peaks over the whole trial


def with_scales(described: Described) -> Sized:
    """Return the study with the peaks that its scales are made of as further measures."""
    own: list[dict[str, Any]] = described.study["measures"]
    nodes, operands = _with_operands(own)
    rows = list(nodes)

    def row(wanted: dict[str, Any]) -> int:
        if wanted not in rows:
            rows.append(wanted)
        return rows.index(wanted)

    inside: list[int] = []
    whole: list[tuple[int, ...]] = []
    for measure, made_of in zip(nodes, operands, strict=True):
        if made_of:
            inside.append(-1)
            whole.append(())
            continue
        window: dict[str, Any] = {name: measure[name] for name in ("after", "before") if name in measure}
        inside.append(row({"kind": "peak", "signal": measure["signal"], **window}))
        read = RELATED[:3] if measure["signal"] in RELATED else ()
        names = dict.fromkeys((measure["signal"], *read))
        whole.append(tuple(row({"kind": "peak", "signal": name, "after": 0.0}) for name in names))
    study = described.study | {"measures": rows}
    return Sized(replace(described, study=study), len(own), operands, tuple(inside), tuple(whole))


def _with_operands(own: list[dict[str, Any]]) -> tuple[list[dict[str, Any]], tuple[tuple[int, ...], ...]]:
    nodes = list(own)
    operands: list[tuple[int, ...]] = []
    for node in nodes:  # which grow while they are walked through
        inner = node.get("operands", [])
        operands.append(tuple(range(len(nodes), len(nodes) + len(inner))))
        nodes.extend(inner)
    return nodes, tuple(operands)


def allowed_differences(sized: Sized, loop: Loop, columns: Columns, limits: list[Values]) -> tuple[Values, Values]:
    """Return by how much each measure of each trial may differ from the reference, and its size.

    Both of shape (measures, trials).
    """
    described = sized.described
    allowed, sizes = np.empty((2, len(sized.operands), columns.trials))
    for place in reversed(range(len(allowed))):
        kind = described.study["measures"][place]["kind"]
        if made_of := list(sized.operands[place]):
            both = (allowed[made_of], sizes[made_of])
            allowed[place], sizes[place] = _combined(kind, *both, np.abs(columns.measures[[place, made_of[1]]]))
        else:
            size, rounding = _sizes(sized, kind, place, loop, columns)
            sizes[place] = size
            allowed[place] = OF_SIZE * size + OF_WHOLE * rounding + FLOOR
        if kind in TIMES:
            allowed[place] += high_of(loop.sample_period)
        if kind in COUNTS:
            allowed[place] += 1.0
        on_it = [limit for limit, row in zip(limits, described.requirement_rows, strict=True) if row == place]
        if on_it:
            limited = np.minimum(np.min(np.abs(on_it), axis=0), sizes[place])
            allowed[place] = np.maximum(allowed[place], OF_LIMIT * limited)
    return allowed[: sized.own], sizes[: sized.own]


def _combined(kind: str, allowed: Values, sizes: Values, values: Values) -> tuple[Values, Values]:
    """Return the same of a difference or ratio, from those of its two operands, shape (2, trials).

    `values` are the magnitudes of the measure itself and of its second operand: errors carry over to a ratio a / b as
    those of a plus |a / b| times those of b, over |b|.
    """
    if kind == "difference":
        return allowed.sum(axis=0), sizes.max(axis=0)
    ratio, divisor = _finite(values)
    carried = (allowed[0] + ratio * allowed[1]) / np.where(divisor > 0.0, divisor, np.inf)
    return carried + FLOOR, ratio


def _sizes(sized: Sized, kind: str, place: int, loop: Loop, columns: Columns) -> tuple[Values, Values]:
    """Return the scale of a measure in each trial, and that of what rounding and past transients do to it."""
    value = _finite(columns.measures[place])
    if kind in FRACTIONS + TIMES + COUNTS:
        size = np.maximum(value, 1.0) if kind in FRACTIONS else value
        return size, size
    peaks = _finite(np.max(columns.measures[list(sized.whole[place])], axis=0))
    if kind in SUMS:
        power, lengths = SUMS[kind]
        with np.errstate(over="ignore"):
            return value, _finite(peaks**power * high_of(loop.duration) ** lengths)
    return _finite(columns.measures[sized.inside[place]]), peaks


def _finite(values: Values) -> Values:
    """Return magnitudes, 0 where there is none."""
    magnitudes: Values = np.abs(values)
    return np.where(np.isfinite(magnitudes), magnitudes, 0.0)

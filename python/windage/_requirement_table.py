"""What each requirement asked for and what came of it: one table, the same in every place that shows it."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from ._errors import WindageError
from ._measures import Measure, Requirement, shown
from ._numbers import Number, Spread
from ._text_table import html_table, plainly_grouped, text_table

if TYPE_CHECKING:
    from ._outcome import Outcome
    from ._replay import Replay

Values = NDArray[np.float64]
OUTCOME_HEADER = ("Requirement", "Limit", "Missed", "Median", "Extreme", "Nominal")
REPLAY_HEADER = ("Requirement", "Limit", "Value", "Slack", "Met")
#: Digits of a measured value; more only where it would read like the limit that it is not at.
DIGITS = 4


@dataclass(frozen=True, slots=True)
class Line:
    """One requirement of an outcome, or a measure without a limit.

    Attributes
    ----------
    name : str
        Name and measure in words.
    limit : str
        The limit in words; that of a drawn one is the range it was drawn in.
    missed : int or None
        In how many trials; None without a limit.
    median : float
        Of the trials that have a value; NaN if none has.
    extreme : float
        The value in the trial with the least slack; the largest one where there is no limit.
    nominal : float
        In the nominal unit; NaN where that cannot be run or has no value.
    numbers : tuple of float
        The numbers that the limit names.
    """

    name: str
    limit: str
    missed: int | None
    median: float
    extreme: float
    nominal: float
    numbers: tuple[float, ...]

    def cells(self) -> tuple[str, ...]:
        """Return what the table shows."""
        missed = "" if self.missed is None else plainly_grouped(self.missed)
        values = (number_beside(value, self.numbers) for value in (self.median, self.extreme, self.nominal))
        return (self.name, self.limit, missed, *values)

    def to_dict(self) -> dict[str, Any]:
        """Return the values for JSON; None where there is none, or where it is not finite."""
        values = {"median": self.median, "extreme": self.extreme, "nominal": self.nominal}
        return {"limit": self.limit, **{key: x if math.isfinite(x) else None for key, x in values.items()}}


def requirement_lines(outcome: Outcome) -> tuple[Line, ...]:
    """Return a line for each requirement and for each further measure of an outcome."""
    study, described, columns = outcome.study, outcome._described, outcome._columns
    nominal = _nominal_values(outcome)
    lines = []
    for i, requirement in enumerate(study.requirements):
        row = described.requirement_rows[i]
        values, slack = columns.measures[row], outcome.slack[:, i]
        limit = described.limits[i]
        drawn = columns.parameters[limit[1]] if isinstance(limit, tuple) else None
        words, numbers = _limit_in_words(requirement, drawn)
        missed = int(np.count_nonzero(~(slack >= 0.0)))
        extreme = _at_least_slack(values, slack, columns.status)
        name = name_of(requirement)
        lines.append(Line(name, words, missed, _median(values, columns.status), extreme, nominal[row], numbers))
    for row, measure in enumerate(described.measures):
        if row not in described.requirement_rows:
            lines.append(_unlimited(measure, columns.measures[row], columns.status, nominal[row]))
    return tuple(lines)


def outcome_notes(outcome: Outcome) -> list[str]:
    """Return what has to be said beneath the table."""
    without = int(np.count_nonzero(outcome.status))
    if not without:
        return []
    trials = f"{plainly_grouped(without)} diverged {'trial has' if without == 1 else 'trials have'}"
    return [f"{trials} no value and missed every requirement; median and extreme are of the others."]


def outcome_text(outcome: Outcome, lines: Sequence[Line], width: int) -> list[str]:
    """Return the table of an outcome as lines of text."""
    import textwrap

    notes = [part for note in outcome_notes(outcome) for part in textwrap.wrap(note, width - 2)]
    return [*text_table(OUTCOME_HEADER, [line.cells() for line in lines], width), *(f"  {note}" for note in notes)]


def outcome_html(outcome: Outcome, lines: Sequence[Line]) -> str:
    """Return the table of an outcome in HTML."""
    notes = "".join(f"<p>{note}</p>" for note in outcome_notes(outcome))
    return html_table(OUTCOME_HEADER, [line.cells() for line in lines]) + notes


def replay_text(replay: Replay, width: int) -> list[str]:
    """Return the table of a replay as lines of text."""
    return text_table(REPLAY_HEADER, replay_cells(replay), width)


def replay_cells(replay: Replay) -> list[tuple[str, ...]]:
    """Return the cells of the table of a replay: limit, value and slack in this one trial."""
    cells: list[tuple[str, ...]] = []
    for i, requirement in enumerate(replay.requirements):
        limit = limit_in(replay, i)
        value = list(replay.measures.values())[replay._described.requirement_rows[i]]
        slack = float(replay.slack[i])
        met = "met" if slack >= 0.0 else "MISSED"
        limited = f"{_sign(requirement)} {shown(limit)}"
        cells.append((name_of(requirement), limited, number_beside(value, (limit,)), _number(slack), met))
    for row, (label, value) in enumerate(replay.measures.items()):
        if row not in replay._described.requirement_rows:
            cells.append((label, "", _number(value), "", ""))
    return cells


def limit_in(replay: Replay, place: int) -> float:
    """Return the limit of a requirement in the trial of a replay, which may be drawn."""
    limit = replay._described.limits[place]
    if not isinstance(limit, tuple):
        return float(limit)
    return replay.parameters[replay._described.columns[limit[1]].name]


def requirement_limit(replay: Replay, place: int) -> tuple[str, float]:
    """Return the limit of a requirement in the trial of a replay, in words and as a number."""
    limit = limit_in(replay, place)
    return f"{_sign(replay.requirements[place])} {shown(limit)}", limit


def name_of(requirement: Requirement) -> str:
    """Return the measure in words, after the requirement's own name if it has one."""
    label = requirement.measure.label
    return label if requirement.name is None else f"{requirement.name}: {label}"


def number_beside(value: float, others: Sequence[float]) -> str:
    """Write a number briefly, with as many digits as tell it apart from some others."""
    for digits in range(DIGITS, 18):
        text = _number(value, digits)
        if all(value == other or text != _number(other, digits) for other in others):
            break
    return text


def _number(value: float, digits: int = DIGITS) -> str:
    if math.isnan(value):
        return "none"
    return f"{value:.{digits}g}".replace("inf", "infinite")


def _sign(requirement: Requirement) -> str:
    return "<=" if requirement.at_most is not None else ">="


def _limit_in_words(requirement: Requirement, drawn: Values | None) -> tuple[str, tuple[float, ...]]:
    """Return the limit, or the range in which the trials drew it, and the numbers in it."""
    limit: Number = requirement.limit
    if not isinstance(limit, Spread):
        return f"{_sign(requirement)} {shown(limit)}", (limit,)
    if drawn is None or not len(drawn):
        return f"{_sign(requirement)} drawn", ()
    low, high = float(drawn.min()), float(drawn.max())
    return f"{_sign(requirement)} {_number(low)} .. {_number(high)}", ()


def _median(values: Values, status: NDArray[np.uint8]) -> float:
    valid = values[(status == 0) & ~np.isnan(values)]
    if not len(valid):
        return math.nan
    # The lower of two middle ones: their mean is no value of a trial, and undefined for two infinities.
    return float(np.partition(valid, (len(valid) - 1) // 2)[(len(valid) - 1) // 2])


def _at_least_slack(values: Values, slack: Values, status: NDArray[np.uint8]) -> float:
    valid = np.flatnonzero((status == 0) & ~np.isnan(values))
    return float(values[valid[np.argmin(slack[valid])]]) if len(valid) else math.nan


def _unlimited(measure: Measure, values: Values, status: NDArray[np.uint8], nominal: float) -> Line:
    valid = values[(status == 0) & ~np.isnan(values)]
    largest = float(valid.max()) if len(valid) else math.nan
    return Line(measure.label, "", None, _median(values, status), largest, nominal, ())


def _nominal_values(outcome: Outcome) -> list[float]:
    """Return the measures of the nominal unit; NaN where it diverges or cannot be run, or no trial was."""
    if not outcome.trials:  # a run stopped while its steps were being chosen is not to go on when it is printed
        return [math.nan] * len(outcome._described.measures)
    try:
        return outcome.study._nominal_measures
    except WindageError:
        # A text must not fail because a unit that nobody asked for cannot be run.
        return [math.nan] * len(outcome._described.measures)

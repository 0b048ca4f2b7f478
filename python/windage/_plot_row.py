"""One requirement of an outcome as it is plotted: values on the axis of the measure, and their range."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Any

import numpy as np
from matplotlib.axes import Axes
from numpy.typing import NDArray

from ._numbers import Spread
from ._plot_style import INK, VERMILLION, Values
from ._requirement_table import name_of

if TYPE_CHECKING:
    from ._outcome import Outcome

#: Values at the ends of the body of a distribution, and of its tails, as fractions of the trials.
BODY, TAIL = 0.05, 0.005

Flags = NDArray[np.bool_]


@dataclass(frozen=True)
class Row:
    """A requirement with the value of its measure in each trial.

    Attributes
    ----------
    label : str
        As in `Outcome.requirements`.
    words : str
        The requirement in full.
    axis_words : str
        What the axis shows.
    values : ndarray, shape (trials,)
        The measure, or the slack where each trial has a limit of its own. NaN where there is none.
    slack : ndarray, shape (trials,)
        The slack.
    limit : float
        On the axis.
    missed_side : int
        1 if larger values miss the limit, -1 if smaller ones do.
    is_slack : bool
        Whether the axis shows the slack.
    """

    label: str
    words: str
    axis_words: str
    values: Values
    slack: Values
    limit: float
    missed_side: int
    is_slack: bool

    @property
    def trials(self) -> int:
        """Number of trials."""
        return len(self.values)

    @cached_property
    def is_missed(self) -> Flags:
        """Which trials missed it."""
        return ~(self.slack >= 0.0)

    @cached_property
    def missed(self) -> int:
        """How many trials missed it."""
        return int(np.count_nonzero(self.is_missed))

    @cached_property
    def undefined(self) -> int:
        """How many trials have no value."""
        return int(np.count_nonzero(~np.isfinite(self.slack)))

    @property
    def share_words(self) -> str:
        """What the curve shows."""
        return "trials with at most this value" if self.missed_side < 0 else "trials with at least this value"

    @cached_property
    def _range(self) -> tuple[float, float]:
        """Ends of the axis: a few wild trials must not squeeze all others into a line."""
        ordered = self._ascending
        finite = ordered[np.searchsorted(ordered, -np.inf, "right") : np.searchsorted(ordered, np.inf, "left")]
        if not finite.size:
            width = abs(self.limit) or 1.0
            return self.limit - width, self.limit + width
        last = len(finite) - 1
        first, low, high, end = (finite[round(share * last)] for share in (TAIL, BODY, 1.0 - BODY, 1.0 - TAIL))
        scale = float(high - low) or abs(float(high) - self.limit) or abs(self.limit) or 1.0
        bottom = max(float(finite[0]), min(float(first), self.limit) - 3.0 * scale)
        top = min(float(finite[last]), max(float(end), self.limit) + 3.0 * scale)
        bottom, top = min(bottom, self.limit), max(top, self.limit)
        margin = 0.04 * (top - bottom) or 0.5 * scale
        return bottom - margin, top + margin

    @property
    def low(self) -> float:
        """Lower end of the axis."""
        return self._range[0]

    @property
    def high(self) -> float:
        """Upper end of the axis."""
        return self._range[1]

    @cached_property
    def _ascending(self) -> Values:
        """The values in rising order; those that are missing lie beyond the missed side."""
        beyond = self.missed_side * np.inf
        return np.sort(np.where(np.isnan(self.values), beyond, self.values))

    def worst_first(self) -> Values:
        """Return the values from the worst trial to the best."""
        return self._ascending if self.missed_side < 0 else self._ascending[::-1]

    def share_beyond(self, value: float) -> float:
        """Return the fraction of trials that lie beyond a value on the missed side."""
        place = float(np.searchsorted(self._ascending, value))
        return place / self.trials if self.missed_side < 0 else 1.0 - place / self.trials

    def shown(self, places: NDArray[np.int64]) -> Values:
        """Return values of some trials, moved to the edge where they lie outside the axis."""
        edge = self.high if self.missed_side > 0 else self.low
        values = self.values[places]
        return np.clip(np.where(np.isnan(values), edge, values), self.low, self.high)

    def slack_at(self, value: Any) -> Any:
        """Return the slack of a value."""
        return self.missed_side * (self.limit - value)

    def value_at(self, slack: Any) -> Any:
        """Return the value that has a slack."""
        return self.limit - self.missed_side * slack

    def mark_limit(self, axes: Axes, *, vertical: bool) -> None:
        """Draw the limit and the side on which it is missed."""
        span, line = (axes.axvspan, axes.axvline) if vertical else (axes.axhspan, axes.axhline)
        edge = self.high if self.missed_side > 0 else self.low
        low, high = sorted((edge, self.limit))
        span(low, high, facecolor=VERMILLION, alpha=0.07, hatch="//", edgecolor=VERMILLION, linewidth=0)
        line(self.limit, color=INK, linewidth=1.2, linestyle="--")


def row_of(outcome: Outcome, place: int) -> Row:
    """Return a requirement of an outcome as it is plotted."""
    requirement, slack = outcome.study.requirements[place], outcome.slack[:, place]
    label, words = outcome.requirements[place], requirement.in_full
    limit = requirement.limit
    if isinstance(limit, Spread):
        axis, words = f"slack of {name_of(requirement)}", f"{name_of(requirement)}, limit drawn"
        values = np.where(np.isneginf(slack), np.nan, slack)
        return Row(label, words, axis, values, slack, 0.0, -1, is_slack=True)
    measured = outcome._columns.measures[outcome._described.requirement_rows[place]]
    values = np.where(outcome.status == 0, measured, np.nan)
    side = 1 if requirement.at_most is not None else -1
    return Row(label, words, requirement.measure.label, values, slack, limit, side, is_slack=False)

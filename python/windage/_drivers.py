"""A first hint at what drives slack and failure: rank correlations with the drawn parameters."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass
from statistics import NormalDist
from typing import TYPE_CHECKING, NoReturn

import numpy as np
from numpy.typing import NDArray

from ._errors import DescriptionError, suggestion
from ._numbers import checked_integer

if TYPE_CHECKING:
    from ._outcome import Outcome

#: Below this many failures a ranking of causes is mostly noise.
FEW_FAILURES = 20
FAILING = "failing"
CONFIDENCE = 0.95

Values = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Driver:
    """How one drawn parameter goes along with one result.

    Attributes
    ----------
    parameter : str
        Name of the drawn parameter.
    against : str
        The requirement whose slack is meant, or "failing".
    correlation : float
        Spearman's rank correlation; positive: a larger value goes with more slack (or with failing).
    low, high : float
        Interval with 95 % confidence, each by itself.
    """

    parameter: str
    against: str
    correlation: float
    low: float
    high: float

    @property
    def is_clear(self) -> bool:
        """Whether the interval leaves 0 out."""
        return self.low > 0.0 or self.high < 0.0


@dataclass(frozen=True, slots=True)
class Drivers:
    """Rank correlations of drawn parameters with slacks and with failing, the strongest first.

    Attributes
    ----------
    rows : tuple of Driver
        The correlations.
    note : str
        What to keep in mind, empty if nothing in particular.
    results : tuple of str
        What `of` takes: the requirements under their names, and "failing".
    """

    rows: tuple[Driver, ...]
    note: str
    results: tuple[str, ...] = (FAILING,)

    def __iter__(self) -> Iterator[Driver]:
        return iter(self.rows)

    def __len__(self) -> int:
        return len(self.rows)

    def __getitem__(self, key: int | str) -> Driver:
        """Return a row by its place, or the strongest one of a parameter by its name."""
        if isinstance(key, str):
            known = [row.parameter for row in self.rows]
            if key not in known:
                raise DescriptionError("drivers", key, "a drawn parameter that varies", suggestion(key, set(known)))
            return self.rows[known.index(key)]
        count = len(self.rows)
        place = checked_integer(key, "drivers", -count, count - 1) if count else _no_rows(key)
        return self.rows[place]

    def of(self, against: str) -> tuple[Driver, ...]:
        """Return the rows of one requirement, or of "failing", the strongest first.

        Raises
        ------
        DescriptionError
            If it is neither. A result without any variation has no rows.
        """
        if against not in self.results:
            mend = suggestion(str(against), self.results)
            raise DescriptionError("drivers.of", against, f"a requirement of the study, or {FAILING!r}", mend)
        return tuple(row for row in self.rows if row.against == against)

    def __str__(self) -> str:
        lines = [
            f"{row.correlation:+.2f}  ({row.low:+.2f} .. {row.high:+.2f})  {row.parameter} with "
            + (FAILING if row.against == FAILING else f"slack of {row.against}")
            for row in self.rows
        ]
        return "\n".join(
            ["Rank correlation (95 % interval, each by itself)", *lines, *([self.note] if self.note else [])]
        )

    def _repr_html_(self) -> str:
        import html  # costs import time and is seldom needed

        return f"<pre>{html.escape(str(self))}</pre>"


def find_drivers(outcome: Outcome) -> Drivers:
    """Return the rank correlation of each drawn parameter with each slack and with failing.

    Notes
    -----
    Intervals: Fisher's z with variance 1.06/(n - 3) for Spearman's correlation (Fieller, Hartley & Pearson
    1957, Biometrika 44:470-481, from memory). Parameters or results without any variation are left out. Ties
    share their mean rank; diverged trials rank lowest in slack.
    """
    against = dict(zip(outcome.requirements, outcome.slack.T, strict=True))
    against[FAILING] = (~outcome.passed).astype(np.float64)
    varying = {name: _unit_ranks(values) for name, values in outcome.parameters.items()}
    rows = []
    for result, values in against.items():
        result_ranks = _unit_ranks(values)
        for name, own in varying.items():
            if own is not None and result_ranks is not None:
                correlation = _product(own, result_ranks)
                rows.append(Driver(name, result, correlation, *fisher_interval(correlation, outcome.trials)))
    rows.sort(key=lambda row: -abs(row.correlation))
    return Drivers(tuple(rows), _note(outcome), tuple(against))


def ranks(values: Values) -> Values:
    """Return the ranks from 1 on; equal values share the mean of their ranks."""
    order = np.argsort(values, kind="stable")
    ordered = values[order]
    starts = np.flatnonzero(np.concatenate([[True], ordered[1:] != ordered[:-1]]))
    counts = np.diff(np.append(starts, len(values)))
    result = np.empty(len(values))
    result[order] = np.repeat(starts + 0.5 * (counts + 1), counts)
    return result


def fisher_interval(correlation: float, count: int) -> tuple[float, float]:
    """Return the interval of a rank correlation from `count` pairs."""
    if count <= 3:
        return -1.0, 1.0
    if abs(correlation) >= 1.0:
        return correlation, correlation
    half = NormalDist().inv_cdf(0.5 + 0.5 * CONFIDENCE) * math.sqrt(1.06 / (count - 3))
    z = math.atanh(correlation)
    return math.tanh(z - half), math.tanh(z + half)


def _unit_ranks(values: Values) -> Values | None:
    """Return ranks with mean 0 and length 1, whose product is their correlation; None where nothing varies."""
    centred = ranks(values)
    centred -= centred.mean()
    length = math.sqrt(_sum_of_products(centred, centred))
    return centred / length if length > 0.0 else None


def _product(a: Values, b: Values) -> float:
    return min(max(_sum_of_products(a, b), -1.0), 1.0)


def _sum_of_products(a: Values, b: Values) -> float:
    # Not by a matrix library: its threads would wait for each other longer than they work.
    return float(np.einsum("i,i", a, b, optimize=False))


def _no_rows(key: object) -> NoReturn:
    raise DescriptionError("drivers", key, "a row", "There are none: no drawn parameter or no result varies.")


def _note(outcome: Outcome) -> str:
    failures = len(outcome.failures)
    if failures >= FEW_FAILURES:
        return ""
    return (
        f"Too few failures ({failures}) to rank causes of failing; {FEW_FAILURES} or more are needed. "
        "The slacks use all trials."
    )

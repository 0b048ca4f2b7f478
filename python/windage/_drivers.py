"""A first hint at what drives slack and failure: rank correlations with the drawn parameters."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import TYPE_CHECKING, NoReturn

import numpy as np
from numpy.typing import NDArray

from ._errors import DescriptionError, suggestion
from ._measures import FAILING
from ._numbers import checked_integer
from ._rank_correlation import CONFIDENCE, correlation, fisher_interval, holm, p_value, ranked
from ._text_table import plainly_grouped

if TYPE_CHECKING:
    from ._outcome import Outcome

#: Below this many failures a ranking of causes is mostly noise.
FEW_FAILURES = 20
#: Ranking sorts, and more trials tell nothing more of correlations: beyond, every n-th trial is ranked.
MOST_RANKED = 200_000

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
    p_value : float
        Chance of a correlation this strong where there is none, adjusted for the number of rows that were looked
        at together (Holm).
    """

    parameter: str
    against: str
    correlation: float
    low: float
    high: float
    p_value: float

    @property
    def is_clear(self) -> bool:
        """Whether there is a correlation: where nothing matters, any row of a table is clear in 5 % of studies."""
        return self.p_value <= 1.0 - CONFIDENCE


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
    trials, failures : int
        Trials that were ranked, and how many of them failed.
    """

    rows: tuple[Driver, ...]
    note: str
    results: tuple[str, ...] = (FAILING,)
    trials: int = 0
    failures: int = 0

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
            f"{'*' if row.is_clear else ' '} {row.correlation:+.2f}  ({row.low:+.2f} .. {row.high:+.2f})  "
            f"{row.parameter} with " + (FAILING if row.against == FAILING else f"slack of {row.against}")
            for row in self.rows
        ]
        head = "Rank correlation (95 % interval, each by itself)"
        if any(row.is_clear for row in self.rows):
            head += f"; * clear at 95 %, all {len(self.rows)} rows together"
        return "\n".join([head, *lines, *([self.note] if self.note else [])])

    def _repr_html_(self) -> str:
        import html  # costs import time and is seldom needed

        return f"<pre>{html.escape(str(self))}</pre>"


def find_drivers(outcome: Outcome) -> Drivers:
    """Return the rank correlation of each drawn parameter with each slack and with failing.

    Notes
    -----
    Parameters or results without any variation are left out. Ties share their mean rank; diverged trials rank
    lowest in slack. P-values are adjusted over all rows (Holm). Of more than `MOST_RANKED` trials every n-th is ranked.
    """
    some = slice(None, None, max(1, -(-outcome.trials // MOST_RANKED)))
    against = dict(zip(outcome.requirements, outcome.slack[some].T, strict=True))
    against[FAILING] = (~outcome.passed[some]).astype(np.float64)
    trials, failures = len(against[FAILING]), int(np.count_nonzero(against[FAILING]))
    parameters = {name: ranked(values[some]) for name, values in outcome.parameters.items()}
    found: list[tuple[str, str, float, float]] = []
    for result, values in against.items():
        other = ranked(values)
        for name, own in parameters.items():
            if own is not None and other is not None:
                strength = correlation(own, other)
                found.append((name, result, strength, p_value(own, other, strength)))
    adjusted = holm([row[3] for row in found])
    rows = [
        Driver(name, result, strength, *fisher_interval(strength, trials), p)
        for (name, result, strength, _), p in zip(found, adjusted, strict=True)
    ]
    rows.sort(key=lambda row: -abs(row.correlation))
    return Drivers(tuple(rows), _note(outcome.trials, trials, failures), tuple(against), trials, failures)


def _no_rows(key: object) -> NoReturn:
    raise DescriptionError("drivers", key, "a row", "There are none: no drawn parameter or no result varies.")


def _note(run: int, trials: int, failures: int) -> str:
    is_all = trials == run
    notes = [] if is_all else [f"Ranked: {plainly_grouped(trials)} of {plainly_grouped(run)} trials, evenly taken."]
    if failures < FEW_FAILURES:
        among = "" if is_all else " among them"
        notes.append(
            f"Too few failures ({failures}{among}) to rank causes of failing; {FEW_FAILURES} or more are needed. "
            f"The slacks use all {'trials' if is_all else 'of them'}."
        )
    return " ".join(notes)

"""What the trials of an outcome are, which decides what may follow from them.

The bounds of a verdict are for independent trials whose number was fixed beforehand. Three kinds of trials are
something else. A table run row after row is a list: its verdict is a count, exact and without any claim beyond.
A loop in which nothing varies has one trial, however often it is repeated. A run that was stopped has a number of
trials that was chosen with the results in sight, and no bound of this kind holds for it.
"""

from __future__ import annotations

from dataclasses import dataclass
from decimal import Decimal
from typing import Literal

from windage import _statistics
from windage._errors import DescriptionError

Decision = Literal["pass", "fail", "inconclusive"]
Kind = Literal["sample", "list", "one trial", "interim"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Basis:
    """What the trials are.

    Attributes
    ----------
    kind : {"sample", "list", "one trial", "interim"}
        Independent trials, their number fixed beforehand; the rows of a table, each run once and in order; one
        trial, repeated; trials of a run that was stopped.
    planned : int
        Rows of the list, or trials asked for of a run that was stopped; otherwise 0.
    """

    kind: Kind = "sample"
    planned: int = 0


#: Independent trials, their number fixed beforehand.
SAMPLE = Basis()


@dataclass(frozen=True, slots=True)
class Finding:
    """What follows from the counts: the decision, the bounds of the pass probability, and what is missing."""

    decision: Decision
    lower: float
    upper: float
    further: int | None


def find(basis: Basis, fewest: int, most: int, seen: int, trials: int, at_least: float, confidence: float) -> Finding:
    """Decide a claim.

    Parameters
    ----------
    basis : Basis
        What the trials are.
    fewest, most, seen : int
        Failed trials: at least, at most (numerical error in mind), and as they were counted.
    trials : int
        Trials run.
    at_least, confidence : float
        The claim.

    Returns
    -------
    Finding
        For a sample by the bounds of Clopper and Pearson; for a list by counting, the rows that were not run
        left open; for one trial a fail if it fails; otherwise inconclusive, with the bounds 0 and 1.
    """
    if basis.kind == "sample":
        return _of_sample(fewest, most, seen, trials, at_least, confidence)
    if basis.kind == "list":
        return _of_list(fewest, most, trials, basis.planned, at_least)
    if basis.kind == "one trial":
        fails = trials > 0 and fewest == trials
        return Finding("fail", 0.0, 0.0, 0) if fails else Finding("inconclusive", 0.0, 1.0, None)
    return Finding("inconclusive", 0.0, 1.0, max(basis.planned - trials, 1))


def _of_sample(fewest: int, most: int, seen: int, trials: int, at_least: float, confidence: float) -> Finding:
    lower = _statistics.clopper_pearson_lower(most, trials, confidence)
    upper = _statistics.clopper_pearson_upper(fewest, trials, confidence)
    further = _statistics.further_trials(seen, trials, at_least, confidence)
    if _statistics.claim_demonstrated(most, trials, at_least, confidence):
        # The decision compares tail probabilities. Where the bound equals the limit its last digit may fall
        # below it; reported is what was decided.
        return Finding("pass", max(lower, at_least), upper, further)
    refuted = _statistics.claim_refuted(fewest, trials, at_least, confidence)
    return Finding("fail" if refuted else "inconclusive", lower, upper, further)


def _of_list(fewest: int, most: int, trials: int, rows: int, at_least: float) -> Finding:
    if rows < max(trials, 1):
        raise DescriptionError("basis.planned", rows, f"at least the {trials} rows that were run")
    # In decimals, as it was written: 93 of 100 rows are at least 0.93 of them.
    wanted = Decimal(repr(at_least)) * rows
    passed, may_pass = trials - most, rows - fewest
    decision: Decision = "pass" if passed >= wanted else "fail" if may_pass < wanted else "inconclusive"
    return Finding(decision, passed / rows, may_pass / rows, 0 if decision != "inconclusive" else rows - trials)

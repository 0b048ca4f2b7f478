"""The words of a verdict: headline, labelled lines and cautions, for one claim and for several."""

from __future__ import annotations

import textwrap
from typing import TYPE_CHECKING

from windage._cautions import (
    REPEATED_LOOKS,
    grouped,
    listed,
    no_failure_seen,
    percent,
    percent_above,
    percent_below,
    percent_near,
    situational_cautions,
    standing_cautions,
    trials_in_words,
)

if TYPE_CHECKING:
    from windage._verdict import Verdict, VerdictTable

METHODS = {
    "sample": "Clopper-Pearson, exact, one-sided",
    "list": "a count of the list, exact",
    "one trial": "none: one trial, repeated",
    "interim": "none: the number of trials was not fixed beforehand",
}


def word_of(verdict: Verdict) -> str:
    """Return the decision as it is printed; what cannot be decided says why."""
    if verdict.decision == "inconclusive":
        if verdict.numerics.is_stopped:
            return "INTERIM"
        return {"interim": "INTERIM", "one trial": "NO CLAIM"}.get(verdict.basis.kind, "INCONCLUSIVE")
    return verdict.decision.upper()


def headline(verdict: Verdict) -> str:
    """Return the decision and the claim in one sentence."""
    if verdict.numerics.is_open and verdict.basis.kind in ("sample", "list"):
        whose = "trials" if verdict.basis.kind == "sample" else "rows"
        claim = f"whether at least {percent(verdict.at_least)} of all {whose} pass"
        return f"{word_of(verdict)}: {claim} is open until the numerical error is known."
    sentence = {"sample": _of_sample, "list": _of_list, "one trial": _of_one_trial, "interim": _of_interim}
    return f"{word_of(verdict)}: {sentence[verdict.basis.kind](verdict)}"


def _of_sample(verdict: Verdict) -> str:
    at_least, sure = percent(verdict.at_least), f"at confidence {percent(verdict.confidence)}"
    if verdict.looks > 1:
        sure += f" for a single look, but this is look {grouped(verdict.looks)}"
    if verdict.decision == "inconclusive":
        run = trials_in_words(verdict.trials)
        return f"{run} cannot tell whether at least {at_least} of all trials pass, {sure}."
    share = "at least" if verdict.decision == "pass" else "fewer than"
    return f"{share} {at_least} of all trials pass, {sure}."


def _of_list(verdict: Verdict) -> str:
    at_least, rows = percent(verdict.at_least), grouped(verdict.basis.planned)
    if verdict.decision == "inconclusive":
        return f"{grouped(verdict.trials)} of {rows} rows cannot tell whether at least {at_least} of the rows pass."
    share = "at least" if verdict.decision == "pass" else "fewer than"
    rows += " row" if verdict.basis.planned == 1 else " rows"
    return f"{share} {at_least} of the {rows} of the table pass."


def _of_one_trial(verdict: Verdict) -> str:
    if not verdict.trials:
        return "nothing varies, and no trial was run."
    times = "" if verdict.trials == 1 else f", repeated {grouped(verdict.trials)} times"
    if verdict.decision == "fail":
        return f"one trial{times}, fails; nothing varies, so that none passes."
    passes = "passes" if not (verdict.failures or verdict.numerics.is_open) else "is not safe from numerical error"
    return f"one trial{times}, {passes}; nothing varies, so that nothing follows for other units."


def _of_interim(verdict: Verdict) -> str:
    planned, run = grouped(verdict.basis.planned), grouped(verdict.trials)
    return f"stopped after {run} of {planned} trials; this is no verdict, neither a pass nor a fail."


def rows_of(verdict: Verdict) -> list[tuple[str, str]]:
    """Return the labelled lines between the headline and the cautions."""
    rows = [("Study", verdict.title)] if verdict.title else []
    rows.append(("Requirement", verdict.requirement))
    if verdict.basis.kind in ("sample", "list"):
        rows.append(("Bound", _bound(verdict)))
    rows.append(("Method", METHODS[verdict.basis.kind]))
    if verdict.family > 1 and verdict.basis.kind == "sample":
        together = f"{grouped(verdict.family)} verdicts hold together at {percent(verdict.family_confidence)}"
        rows.append(("Correction", f"Bonferroni: {together}"))
    rows.append(("Observed", _observed(verdict)))
    if verdict.numerics.text:
        rows.append(("Numerics", verdict.numerics.text))
    if verdict.spreads:
        rows.append(("Spreads", listed(verdict.spreads)))
    if verdict.decision == "inconclusive":
        rows.append(("To decide", _to_decide(verdict)))
    return rows


def _bound(verdict: Verdict) -> str:
    low, high = percent_below(verdict.lower_bound), percent_above(verdict.upper_bound)
    if verdict.basis.kind == "list":
        is_known = verdict.lower_bound == verdict.upper_bound
        return f"{percent_near(verdict.lower_bound)} pass" if is_known else f"between {low} and {high} of the rows pass"
    if verdict.decision == "pass":
        return f"at least {low} of all trials pass"
    if verdict.decision == "fail":
        return f"at most {high} of all trials pass"
    return f"at least {low} and at most {high} pass; each bound by itself at {percent(verdict.confidence)}"


def _observed(verdict: Verdict) -> str:
    run = trials_in_words(verdict.trials)
    if not verdict.trials:
        return run
    seen = verdict.failures - verdict.numerics.hidden
    failed = f"{grouped(seen)} of {run} failed, {grouped(verdict.diverged)} of them diverged"
    return f"{failed}; {percent_near(verdict.estimate)} passed"


def _to_decide(verdict: Verdict) -> str:
    if verdict.basis.kind == "interim":
        return "run the study again to its end."
    if verdict.basis.kind == "one trial":
        return "give a number a spread, or the sensor or a disturbance noise."
    # With several looks the cautions carry this sentence already.
    warning = "" if verdict.looks > 1 or verdict.basis.kind == "list" else f" {REPEATED_LOOKS}"
    further, numerics = verdict.further_trials, verdict.numerics
    if numerics.is_open or (further == 0 and (numerics.hidden or numerics.doubtful)):
        return f"the numerical error has to be known better; see below.{warning}"
    if verdict.basis.kind == "list":
        return f"run the other {grouped(verdict.basis.planned - verdict.trials)} rows."
    if further is None:
        return f"the observed rate is too near the limit for any practicable number of trials.{warning}"
    ending = "a pass" if not verdict.failures or verdict.estimate >= verdict.at_least else "a fail"
    rate = "without any failure" if not verdict.failures else "with failures at the observed rate"
    total = grouped(verdict.trials + further)
    return (
        f"about {grouped(further)} further trials ({total} in all) {rate} would make it {ending}; "
        f"that is a projection, not a promise.{warning}"
    )


def cautions_of(verdict: Verdict) -> tuple[str, ...]:
    """Return what a verdict does not cover; the sentences that this outcome calls for come first."""
    numerical = (verdict.numerics.caution,) if verdict.numerics.caution else ()
    return (*numerical, *situational_cautions(verdict), *standing_cautions(verdict))


def cautions_of_table(table: VerdictTable) -> tuple[str, ...]:
    """Return what several verdicts do not cover, each sentence once; "no failure seen" with its requirement."""
    unfailed = [
        f"{verdict.requirement}: {no_failure_seen(0, verdict.trials, verdict.confidence)}"
        for verdict in table
        if verdict.trials and not verdict.failures and verdict.basis.kind == "sample"
    ]
    numerical = [verdict.numerics.caution for verdict in table]
    situation = [line for verdict in table for line in situational_cautions(verdict, unfailed=False)]
    return (*unfailed, *filter(None, dict.fromkeys([*numerical, *situation])), *standing_cautions(table[0]))


def table_headline(table: VerdictTable) -> str:
    """Return in one sentence what was judged, and how sure all verdicts are together."""
    first = table[0]
    of = f"Study {first.title}: " if first.title else ""
    count = f"{grouped(len(table))} requirement{'' if len(table) == 1 else 's'}"
    if first.basis.kind == "list":
        return f"{of}{count}, each counted by itself ({METHODS['list']})."
    if first.basis.kind != "sample":
        return f"{of}{count}. {headline(first)}"
    together = percent(table.confidence)
    if len(table) == 1:
        return f"{of}{count}, judged at confidence {together} ({METHODS['sample']})."
    return (
        f"{of}{count}, each judged by itself; all verdicts hold together at confidence {together} "
        f"({table.correction} correction: each verdict, and each bound by itself, at {percent(first.confidence)}; "
        f"{METHODS['sample']})."
    )


def table_cells(table: VerdictTable, shortened: bool = True) -> list[tuple[str, ...]]:
    """Return the rows of the table of several verdicts, their titles first."""
    rows: list[tuple[str, ...]] = [("Verdict", "Requirement", "Claimed", "Failed", "Pass bound")]
    for verdict in table:
        name = verdict.requirement
        rows.append(
            (
                word_of(verdict),
                textwrap.shorten(name, 34, placeholder="...") if shortened else name,
                percent(verdict.at_least),
                f"{grouped(verdict.failures)}/{grouped(verdict.trials)}",
                _short_bound(verdict),
            )
        )
    return rows


def _short_bound(verdict: Verdict) -> str:
    """Write the bound that the decision rests on; where there is none, both, each by itself."""
    low, high = percent_below(verdict.lower_bound), percent_above(verdict.upper_bound)
    if verdict.basis.kind in ("interim", "one trial"):
        return "none"
    if verdict.decision == "pass":
        return f">= {low}"
    return f"<= {high}" if verdict.decision == "fail" else f">= {low}, <= {high}"

"""The verdict: what an outcome lets us claim about the pass probability, and at which confidence.

One rule decides everything here. A claim "at least P of all trials pass, at confidence C" is a *pass* if the
exact one-sided lower Clopper-Pearson bound at confidence C reaches P, a *fail* if the one-sided upper bound
at the same confidence stays below P, and *inconclusive* otherwise. Whatever the true pass probability, a
wrong verdict has at most the probability 1 - C, provided that the number of trials was fixed beforehand.
"""

from __future__ import annotations

import textwrap
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import asdict, dataclass
from typing import Any, Literal

from windage import _statistics
from windage._cautions import (
    REPEATED_LOOKS,
    grouped,
    listed,
    no_failure_seen,
    percent,
    percent_above,
    percent_below,
    percent_near,
    repeated_looks,
    situational_cautions,
    standing_cautions,
    trials_in_words,
    truncated_spreads,
)
from windage._errors import DescriptionError, suggestion
from windage._evidence import checked_count, checked_counts, checked_probability
from windage._numerics import UNKNOWN, Numerics

Decision = Literal["pass", "fail", "inconclusive"]

METHOD = "Clopper-Pearson, exact, one-sided"
ALL_REQUIREMENTS = "all requirements met"
WIDTH = 100
MOST_LOOKS = 10**9


@dataclass(frozen=True, slots=True, kw_only=True)
class Verdict:
    """What the trials of an outcome say about one claim. Built by `judge`.

    As a truth value a verdict is true only for a pass.

    Attributes
    ----------
    decision : {"pass", "fail", "inconclusive"}
        The verdict.
    at_least, confidence : float
        The claim: at least this fraction of all trials passes, at this confidence.
    trials, failures, diverged : int
        What was run, and what counts as failed for the claim: the trials that failed, diverged ones among them, and
        those whose pass is not safe from numerical error (`numerics.hidden`).
    lower_bound, upper_bound : float
        One-sided Clopper-Pearson bounds of the pass probability, each by itself at `confidence`. The upper one
        leaves out failures that are not safe from numerical error (`numerics.doubtful`).
    estimate : float
        Observed pass fraction; NaN without trials.
    further_trials : int or None
        Trials that would decide an inconclusive claim if failures went on at the observed rate: a projection.
        0 if decided, None if no practicable number would do (the observed rate is at the limit).
    requirement : str
        What a trial has to meet.
    not_varied, spreads, truncated : tuple of str
        Numbers held at one value, spreads drawn from, and those spreads whose tails are cut off.
    looks : int
        Times these trials have been judged, this one included.
    family : int
        Number of claims judged together; 1 for a claim by itself.
    family_confidence : float
        Confidence that all claims of the family hold together; `confidence` for a claim by itself.
    numerics : Numerics
        What is known of the numerical error behind the counts.
    title : str
        Of the study.
    """

    decision: Decision
    at_least: float
    confidence: float
    trials: int
    failures: int
    diverged: int
    lower_bound: float
    upper_bound: float
    estimate: float
    further_trials: int | None
    requirement: str
    not_varied: tuple[str, ...]
    spreads: tuple[str, ...]
    truncated: tuple[str, ...]
    looks: int
    family: int
    family_confidence: float
    numerics: Numerics = UNKNOWN
    title: str = ""

    @property
    def headline(self) -> str:
        """The decision and the claim in one sentence."""
        return _plain(_headline(self))

    @property
    def cautions(self) -> tuple[str, ...]:
        """Sentences on what the verdict does not cover; those that this outcome calls for come first."""
        situation = situational_cautions(self.failures, self.trials, self.confidence, self.looks, self.truncated)
        numerical = (self.numerics.caution,) if self.numerics.caution else ()
        return (*numerical, *situation, *standing_cautions(self.diverged, self.not_varied, self.looks))

    def __bool__(self) -> bool:
        return self.decision == "pass"

    def __str__(self) -> str:
        lines = _wrapped(_headline(self), indent=2)
        for label, text in _rows(self):
            lines += _labelled(label, text)
        return _finished([*lines, *_cautions_as_text(self.cautions)])

    def _repr_html_(self) -> str:
        rows = "".join(
            f"<tr><th style='text-align:left'>{_escaped(label)}</th>"
            f"<td style='text-align:left'>{_escaped(text)}</td></tr>"
            for label, text in _rows(self)
        )
        head = f"<p><strong>{_escaped(_headline(self))}</strong></p>"
        return f"<div>{head}<table>{rows}</table>{_cautions_as_html(self.cautions)}</div>"

    def to_dict(self) -> dict[str, Any]:
        """Return the verdict as plain data for JSON: the attributes, the method and the cautions.

        Returns
        -------
        dict
            Tuples become lists; an estimate without trials becomes None.
        """
        plain = {key: list(item) if isinstance(item, tuple) else item for key, item in asdict(self).items()}
        plain["estimate"] = self.estimate if self.trials else None
        return {**plain, "method": METHOD, "cautions": [_plain(line) for line in self.cautions]}


@dataclass(frozen=True, slots=True, kw_only=True)
class VerdictTable:
    """Verdicts on several requirements, corrected so that they hold together. Built by `judge_many`.

    Attributes
    ----------
    verdicts : tuple of Verdict
        One a requirement, in the order given; each at the corrected confidence.
    confidence : float
        Confidence that all of them hold together.
    correction : str
        Name of the correction for multiplicity.
    """

    verdicts: tuple[Verdict, ...]
    confidence: float
    correction: str

    def __len__(self) -> int:
        return len(self.verdicts)

    def __iter__(self) -> Iterator[Verdict]:
        return iter(self.verdicts)

    def __getitem__(self, requirement: str | int) -> Verdict:
        """Return a verdict by the text of its requirement or by its place."""
        if isinstance(requirement, int):
            return self.verdicts[requirement]
        named = {verdict.requirement: verdict for verdict in self.verdicts}
        if requirement not in named:
            raise DescriptionError(
                "requirement", requirement, "a requirement of this table", suggestion(requirement, named)
            )
        return named[requirement]

    @property
    def cautions(self) -> tuple[str, ...]:
        """Sentences on what the verdicts do not cover, each once; "no failure seen" with its requirement."""
        unfailed = [
            f"{verdict.requirement}: {no_failure_seen(0, verdict.trials, verdict.confidence)}"
            for verdict in self.verdicts
            if verdict.trials and not verdict.failures
        ]
        first = self.verdicts[0]
        numerical = list(dict.fromkeys(verdict.numerics.caution for verdict in self.verdicts))
        situation = [*numerical, repeated_looks(first.looks), truncated_spreads(first.truncated)]
        standing = standing_cautions(first.diverged, first.not_varied, first.looks)
        return (*unfailed, *filter(None, situation), *standing)

    def __str__(self) -> str:
        header, *body = _table_cells(self)
        widths = [max(len(row[column]) for row in (header, *body)) for column in range(len(header))]
        lines = _wrapped(_table_headline(self), indent=2)
        lines += [
            ("  " + "  ".join(cell.ljust(w) for cell, w in zip(row, widths, strict=True))).rstrip()
            for row in (header, *body)
        ]
        text = self.verdicts[0].numerics.text
        lines += _labelled("Numerics", text) if text else []
        return _finished([*lines, *_cautions_as_text(self.cautions)])

    def _repr_html_(self) -> str:
        header, *body = _table_cells(self, shortened=False)
        head = "".join(f"<th style='text-align:left'>{_escaped(cell)}</th>" for cell in header)
        rows = "".join(
            "<tr>" + "".join(f"<td style='text-align:left'>{_escaped(cell)}</td>" for cell in row) + "</tr>"
            for row in body
        )
        title = f"<p><strong>{_escaped(_table_headline(self))}</strong></p>"
        return (
            f"<div>{title}<table><thead><tr>{head}</tr></thead><tbody>{rows}</tbody></table>"
            f"{_cautions_as_html(self.cautions)}</div>"
        )

    def to_dict(self) -> dict[str, Any]:
        """Return the table as plain data for JSON."""
        return {
            "confidence": self.confidence,
            "correction": self.correction,
            "verdicts": [verdict.to_dict() for verdict in self.verdicts],
        }


def judge(
    failures: int,
    trials: int,
    diverged: int,
    at_least: float,
    confidence: float,
    *,
    requirement: str = ALL_REQUIREMENTS,
    not_varied: Sequence[str] = (),
    spreads: Sequence[str] = (),
    truncated: Sequence[str] = (),
    title: str = "",
    looks: int = 1,
    numerics: Numerics = UNKNOWN,
) -> Verdict:
    """Judge the claim that at least a stated fraction of all trials passes.

    Parameters
    ----------
    failures : int
        Failed trials, diverged ones included; 0 to `trials`.
    trials : int
        Independent trials run, their number fixed beforehand; 0 to 2^53.
    diverged : int
        Trials among the failures that diverged.
    at_least : float
        Pass probability claimed, above 0 and below 1.
    confidence : float
        Confidence of the verdict, 0.5 up to but not including 1.
    requirement : str
        What a trial had to meet.
    not_varied, spreads, truncated : sequence of str
        Numbers held at one value, spreads drawn from, and spreads with cut tails: printed with the verdict.
    title : str
        Of the study, printed with the verdict.
    looks : int
        Times these trials have been judged, this one included; 1 or more. More than one voids the confidence,
        and the verdict says so.
    numerics : Numerics
        What is known of the numerical error behind the counts; by default nothing, and nothing is said of it.

    Returns
    -------
    Verdict
        Pass, fail or inconclusive, with exact bounds.

    Raises
    ------
    DescriptionError
        If a count or a probability is out of range.

    Notes
    -----
    Clopper & Pearson 1934, Biometrika 26:404-413. Below a confidence of 0.5 the two bounds could change
    places, so that a claim would be shown and refuted at once; such a confidence is refused.

    Examples
    --------
    >>> judge(13, 4000, 0, at_least=0.99, confidence=0.90).decision
    'pass'
    """
    failures, trials = checked_counts(failures, trials)
    diverged = checked_count("diverged", diverged, 0, failures)
    at_least = checked_probability("at_least", at_least)
    confidence = _checked_confidence(confidence)
    return _judged(
        failures,
        trials,
        diverged,
        at_least,
        confidence,
        requirement=requirement,
        not_varied=_checked_names("not_varied", not_varied),
        spreads=_checked_names("spreads", spreads),
        truncated=_checked_names("truncated", truncated),
        title=title,
        looks=checked_count("looks", looks, 1, MOST_LOOKS),
        family=1,
        family_confidence=confidence,
        numerics=numerics,
    )


def judge_many(
    failures: Mapping[str, int],
    trials: int,
    diverged: int,
    at_least: float | Mapping[str, float],
    confidence: float,
    *,
    not_varied: Sequence[str] = (),
    spreads: Sequence[str] = (),
    truncated: Sequence[str] = (),
    title: str = "",
    looks: int = 1,
    numerics: Mapping[str, Numerics] | None = None,
) -> VerdictTable:
    """Judge several requirements, each by itself, so that all verdicts hold together at one confidence.

    Parameters
    ----------
    failures : mapping of str to int
        Failed trials of each requirement; a diverged trial fails every requirement.
    trials, diverged : int
        As for `judge`.
    at_least : float or mapping of str to float
        Pass probability claimed, one for all or one a requirement.
    confidence : float
        Confidence that no verdict of the table is wrong, 0.5 up to but not including 1.
    not_varied, spreads, truncated, title, looks
        As for `judge`.
    numerics : mapping of str to Numerics, optional
        What is known of the numerical error behind the count of each requirement.

    Returns
    -------
    VerdictTable
        One verdict a requirement, each at confidence 1 - (1 - confidence) / m for m requirements.

    Raises
    ------
    DescriptionError
        If there is no requirement, a count or a probability is out of range, or `at_least` names other
        requirements.

    Notes
    -----
    Bonferroni: the risks add up to at most 1 - confidence whatever the dependence between the requirements
    (Dunn 1961, "Multiple comparisons among means", J. Am. Stat. Assoc. 56:52-64). That all requirements are
    met in the same trial is a different claim, made by `judge`, and needs no correction.
    """
    if not failures:
        raise DescriptionError("failures", failures, "the failed trials of at least one requirement")
    limits = _limits(at_least, failures)
    confidence = _checked_confidence(confidence)
    each = 1.0 - _statistics.complement(confidence) / len(failures)
    # A family of one is the plain claim; the detour through the risk could change the last digit.
    each = confidence if len(failures) == 1 else checked_probability("confidence", each)
    looks = checked_count("looks", looks, 1, MOST_LOOKS)
    names = {
        "not_varied": _checked_names("not_varied", not_varied),
        "spreads": _checked_names("spreads", spreads),
        "truncated": _checked_names("truncated", truncated),
    }
    verdicts = []
    for requirement, failed in failures.items():
        failed, run = checked_counts(failed, trials)
        verdicts.append(
            _judged(
                failed,
                run,
                checked_count("diverged", diverged, 0, failed),
                limits[requirement],
                each,
                requirement=requirement,
                title=title,
                looks=looks,
                family=len(failures),
                family_confidence=confidence,
                numerics=(numerics or {}).get(requirement, UNKNOWN),
                **names,
            )
        )
    return VerdictTable(verdicts=tuple(verdicts), confidence=confidence, correction="Bonferroni")


def _judged(
    failures: int,
    trials: int,
    diverged: int,
    at_least: float,
    confidence: float,
    *,
    requirement: str,
    not_varied: tuple[str, ...],
    spreads: tuple[str, ...],
    truncated: tuple[str, ...],
    title: str,
    looks: int,
    family: int,
    family_confidence: float,
    numerics: Numerics,
) -> Verdict:
    """Decide on checked arguments: against numerical error on either side."""
    most = failures + checked_count("numerics.hidden", numerics.hidden, 0, trials - failures)
    fewest = failures - checked_count("numerics.doubtful", numerics.doubtful, 0, failures)
    lower = _statistics.clopper_pearson_lower(most, trials, confidence)
    upper = _statistics.clopper_pearson_upper(fewest, trials, confidence)
    decision: Decision = "inconclusive"
    if numerics.is_open:
        pass
    elif _statistics.claim_demonstrated(most, trials, at_least, confidence):
        decision = "pass"
        # The decision compares tail probabilities. Where the bound equals the limit its last digit may fall
        # below it; reported is what was decided.
        lower = max(lower, at_least)
    elif _statistics.claim_refuted(fewest, trials, at_least, confidence):
        decision = "fail"
    return Verdict(
        decision=decision,
        at_least=at_least,
        confidence=confidence,
        trials=trials,
        failures=most,
        diverged=diverged,
        lower_bound=lower,
        upper_bound=upper,
        estimate=(trials - failures) / trials if trials else float("nan"),
        further_trials=_statistics.further_trials(failures, trials, at_least, confidence),
        requirement=requirement,
        not_varied=not_varied,
        spreads=spreads,
        truncated=truncated,
        title=title,
        looks=looks,
        family=family,
        family_confidence=family_confidence,
        numerics=numerics,
    )


def _checked_confidence(confidence: object) -> float:
    number = checked_probability("confidence", confidence)
    if number < 0.5:
        raise DescriptionError(
            "confidence",
            confidence,
            "at least 0.5",
            "State the confidence, not the risk: 0.95 admits a risk of 0.05.",
        )
    return number


def _checked_names(field: str, names: Sequence[str]) -> tuple[str, ...]:
    # A single text is a sequence of its letters, which nobody means.
    if isinstance(names, str) or not all(isinstance(name, str) for name in names):
        raise DescriptionError(field, names, "a sequence of names")
    return tuple(names)


def _limits(at_least: float | Mapping[str, float], failures: Mapping[str, int]) -> dict[str, float]:
    """Return the pass probability claimed for each requirement."""
    if not isinstance(at_least, Mapping):
        return dict.fromkeys(failures, checked_probability("at_least", at_least))
    for name in failures:
        if name not in at_least:
            raise DescriptionError("at_least", sorted(at_least), f"a number for the requirement {name!r} too")
    for name in at_least:
        if name not in failures:
            known = suggestion(name, failures)
            raise DescriptionError("at_least", name, "a requirement that was judged", known)
    return {name: checked_probability(f"at_least[{name!r}]", at_least[name]) for name in failures}


def _headline(verdict: Verdict) -> str:
    at_least, sure = percent(verdict.at_least), f"at confidence {percent(verdict.confidence)}"
    if verdict.looks > 1:
        sure += f" for a single look, but this is look {grouped(verdict.looks)}"
    if verdict.decision == "pass":
        return f"PASS: at least {at_least} of all trials pass, {sure}."
    if verdict.decision == "fail":
        return f"FAIL: fewer than {at_least} of all trials pass, {sure}."
    run = trials_in_words(verdict.trials)
    return f"INCONCLUSIVE: {run} cannot tell whether at least {at_least} of all trials pass, {sure}."


def _rows(verdict: Verdict) -> list[tuple[str, str]]:
    """Return the labelled lines between the headline and the cautions."""
    rows = [("Study", verdict.title)] if verdict.title else []
    rows += [("Requirement", verdict.requirement), ("Bound", _bound(verdict)), ("Method", METHOD)]
    if verdict.family > 1:
        together = f"{grouped(verdict.family)} claims hold together at {percent(verdict.family_confidence)}"
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
    if verdict.decision == "pass":
        return f"at least {percent_below(verdict.lower_bound)} of all trials pass"
    if verdict.decision == "fail":
        return f"at most {percent_above(verdict.upper_bound)} of all trials pass"
    low, high = percent_below(verdict.lower_bound), percent_above(verdict.upper_bound)
    return f"at least {low} and at most {high} pass; each bound by itself at {percent(verdict.confidence)}"


def _observed(verdict: Verdict) -> str:
    run = trials_in_words(verdict.trials)
    if not verdict.trials:
        return run
    seen = verdict.failures - verdict.numerics.hidden
    failed = f"{grouped(seen)} of {run} failed, {grouped(verdict.diverged)} of them diverged"
    return f"{failed}; {percent_near(verdict.estimate)} passed"


def _to_decide(verdict: Verdict) -> str:
    # With several looks the cautions carry this sentence already.
    warning = "" if verdict.looks > 1 else f" {REPEATED_LOOKS}"
    further = verdict.further_trials
    if verdict.numerics.is_open or (further == 0 and (verdict.numerics.hidden or verdict.numerics.doubtful)):
        return f"the numerical error has to be known better; see below.{warning}"
    if further is None:
        return f"the observed rate is too near the limit for any practicable number of trials.{warning}"
    ending = "a pass" if not verdict.failures or verdict.estimate >= verdict.at_least else "a fail"
    rate = "without any failure" if not verdict.failures else "with failures at the observed rate"
    total = grouped(verdict.trials + further)
    return (
        f"about {grouped(further)} further trials ({total} in all) {rate} would make it {ending}; "
        f"that is a projection, not a promise.{warning}"
    )


def _table_headline(table: VerdictTable) -> str:
    together, title = percent(table.confidence), table.verdicts[0].title
    of = f"Study {title}: " if title else ""
    if len(table) == 1:
        return f"{of}1 requirement, judged at confidence {together} ({METHOD})."
    each = percent(table.verdicts[0].confidence)
    return (
        f"{of}{grouped(len(table))} requirements, each judged by itself; all verdicts hold together at "
        f"confidence {together} ({table.correction} correction: each at {each}; {METHOD})."
    )


def _table_cells(table: VerdictTable, shortened: bool = True) -> list[tuple[str, ...]]:
    rows: list[tuple[str, ...]] = [("Verdict", "Requirement", "Claimed", "Failed", "Pass bounds")]
    for verdict in table:
        name = verdict.requirement
        rows.append(
            (
                verdict.decision.upper(),
                textwrap.shorten(name, 34, placeholder="...") if shortened else name,
                percent(verdict.at_least),
                f"{grouped(verdict.failures)}/{grouped(verdict.trials)}",
                f"{percent_below(verdict.lower_bound)} .. {percent_above(verdict.upper_bound)}",
            )
        )
    return rows


def _wrapped(text: str, indent: int, first: str = "") -> list[str]:
    return textwrap.wrap(text, WIDTH, initial_indent=first, subsequent_indent=" " * indent, break_on_hyphens=False)


def _labelled(label: str, text: str) -> list[str]:
    return _wrapped(text, indent=15, first=f"  {label:<13}")


def _cautions_as_text(cautions: Sequence[str]) -> list[str]:
    lines = ["Read with care:"]
    for caution in cautions:
        lines += _wrapped(caution, indent=4, first="  - ")
    return lines


def _cautions_as_html(cautions: Sequence[str]) -> str:
    items = "".join(f"<li>{_escaped(line)}</li>" for line in cautions)
    return f"<p>Read with care:</p><ul>{items}</ul>"


def _escaped(text: str) -> str:
    import html  # costs import time and is seldom needed

    return html.escape(text, quote=True)


def _plain(text: str) -> str:
    """Replace the no-break spaces, which have done their work once the lines are broken."""
    return text.replace("\u00a0", " ")


def _finished(lines: Sequence[str]) -> str:
    return _plain("\n".join(lines))


__all__ = ["Decision", "Verdict", "VerdictTable", "judge", "judge_many"]

"""The verdict: what an outcome lets us claim about the pass probability, and at which confidence.

One rule decides everything here. A claim "at least P of all trials pass, at confidence C" is a *pass* if the
exact one-sided lower Clopper-Pearson bound at confidence C reaches P, a *fail* if the one-sided upper bound
at the same confidence stays below P, and *inconclusive* otherwise. Whatever the true pass probability, a
wrong verdict has at most the probability 1 - C, provided that the number of trials was fixed beforehand. What
holds for trials of another kind is in `windage._basis`.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import asdict, dataclass
from math import nextafter
from typing import Any

from windage import _statistics
from windage import _verdict_layout as layout
from windage import _verdict_words as words
from windage._basis import SAMPLE, Basis, Decision, find
from windage._cautions import few_listed
from windage._errors import DescriptionError, suggestion
from windage._evidence import checked_count, checked_counts, checked_probability
from windage._numerics import UNKNOWN, Numerics

ALL_REQUIREMENTS = "all requirements met"
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
    few_values : tuple of str
        Spreads that draw from too few observed values to tell of the fraction that may fail.
    advice : tuple of str
        What looks wrong with the study but is allowed.
    looks : int
        Ranges of trials at which the study has been judged, this one included.
    basis : Basis
        What the trials are: a sample, a list, one trial repeated, or those of a run that was stopped. Only for a
        sample do the bounds have a confidence.
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
    few_values: tuple[str, ...] = ()
    advice: tuple[str, ...] = ()
    basis: Basis = SAMPLE

    @property
    def headline(self) -> str:
        """The decision and the claim in one sentence."""
        return layout.plain(words.headline(self))

    @property
    def cautions(self) -> tuple[str, ...]:
        """Sentences on what the verdict does not cover; those that this outcome calls for come first."""
        return words.cautions_of(self)

    def __bool__(self) -> bool:
        return self.decision == "pass"

    def __str__(self) -> str:
        lines = layout.wrapped(words.headline(self), indent=2)
        for label, text in words.rows_of(self):
            lines += layout.labelled(label, text)
        return layout.finished([*lines, *layout.cautions_as_text(self.cautions)])

    def _repr_html_(self) -> str:
        return layout.html_of_rows(words.headline(self), words.rows_of(self), self.cautions)

    def to_dict(self) -> dict[str, Any]:
        """Return the verdict as plain data for JSON: the attributes, the method and the cautions.

        Returns
        -------
        dict
            Tuples become lists; an estimate without trials becomes None.
        """
        plain = {key: list(item) if isinstance(item, tuple) else item for key, item in asdict(self).items()}
        plain["estimate"] = self.estimate if self.trials else None
        cautions = [layout.plain(line) for line in self.cautions]
        return {**plain, "method": words.METHODS[self.basis.kind], "cautions": cautions}


@dataclass(frozen=True, slots=True, kw_only=True)
class VerdictTable:
    """Verdicts on several requirements, corrected so that they hold together. Built by `judge_many`.

    As a truth value a table is true only where every verdict of it is a pass.

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

    def __bool__(self) -> bool:
        return all(self.verdicts)

    def __getitem__(self, requirement: str | int) -> Verdict:
        """Return a verdict by the text of its requirement or by its place."""
        if isinstance(requirement, int):
            return self.verdicts[requirement]
        named = {verdict.requirement: verdict for verdict in self.verdicts}
        if requirement not in named:
            mend = suggestion(str(requirement), named)
            raise DescriptionError("requirement", requirement, "a requirement of this table", mend)
        return named[requirement]

    @property
    def cautions(self) -> tuple[str, ...]:
        """Sentences on what the verdicts do not cover, each once; "no failure seen" with its requirement."""
        return words.cautions_of_table(self)

    def __str__(self) -> str:
        lines = layout.wrapped(words.table_headline(self), indent=2) + layout.aligned(words.table_cells(self))
        text = self.verdicts[0].numerics.text
        lines += layout.labelled("Numerics", text) if text else []
        return layout.finished([*lines, *layout.cautions_as_text(self.cautions)])

    def _repr_html_(self) -> str:
        cells = words.table_cells(self, shortened=False)
        return layout.html_of_table(words.table_headline(self), cells, self.cautions)

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
    listed_values: Mapping[str, int] | None = None,
    advice: Sequence[str] = (),
    looks: int = 1,
    basis: Basis = SAMPLE,
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
    listed_values : mapping of str to int
        Spreads that draw from observed values, and how many values each has.
    advice : sequence of str
        What looks wrong with the study but is allowed: printed with the verdict.
    looks : int
        Times trials of the study have been judged, this one included; 1 or more. More than one voids the confidence,
        and the verdict says so.
    basis : Basis
        What the trials are; by default independent ones, their number fixed beforehand.
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
        few_values=few_listed(listed_values or {}, at_least),
        advice=_checked_names("advice", advice),
        title=title,
        looks=checked_count("looks", looks, 1, MOST_LOOKS),
        family=1,
        family_confidence=confidence,
        numerics=numerics,
        basis=basis,
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
    listed_values: Mapping[str, int] | None = None,
    advice: Sequence[str] = (),
    looks: int = 1,
    basis: Basis = SAMPLE,
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
    not_varied, spreads, truncated, title, listed_values, advice, looks, basis
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
    each = _shared(confidence, len(failures))
    looks = checked_count("looks", looks, 1, MOST_LOOKS)
    names = {
        "not_varied": _checked_names("not_varied", not_varied),
        "spreads": _checked_names("spreads", spreads),
        "truncated": _checked_names("truncated", truncated),
        "advice": _checked_names("advice", advice),
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
                few_values=few_listed(listed_values or {}, limits[requirement]),
                basis=basis,
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
    few_values: tuple[str, ...],
    advice: tuple[str, ...],
    title: str,
    looks: int,
    family: int,
    family_confidence: float,
    numerics: Numerics,
    basis: Basis,
) -> Verdict:
    """Decide on checked arguments: against numerical error on either side."""
    most = failures + checked_count("numerics.hidden", numerics.hidden, 0, trials - failures)
    fewest = failures - checked_count("numerics.doubtful", numerics.doubtful, 0, failures)
    found = find(basis, fewest, most, failures, trials, at_least, confidence)
    return Verdict(
        decision="inconclusive" if numerics.is_open else found.decision,
        at_least=at_least,
        confidence=confidence,
        trials=trials,
        failures=most,
        diverged=diverged,
        lower_bound=found.lower,
        upper_bound=found.upper,
        estimate=(trials - failures) / trials if trials else float("nan"),
        further_trials=found.further,
        requirement=requirement,
        not_varied=not_varied,
        spreads=spreads,
        truncated=truncated,
        few_values=few_values,
        advice=advice,
        title=title,
        looks=looks,
        family=family,
        family_confidence=family_confidence,
        numerics=numerics,
        basis=basis,
    )


def _shared(confidence: float, count: int) -> float:
    """Return the confidence of each of several verdicts whose risks add up to that of all."""
    risk = _statistics.complement(confidence) / count
    # A family of one is the plain claim; the detour through the risk could change the last digit.
    each = confidence if count == 1 else 1.0 - risk
    while each < 1.0 and _statistics.complement(each) > risk:
        each = nextafter(each, 1.0)
    if each == 1.0:
        expected = f"a confidence whose risk {count} verdicts can share in double precision"
        raise DescriptionError("confidence", confidence, expected)
    return each


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


__all__ = ["Decision", "Verdict", "VerdictTable", "judge", "judge_many"]

"""Counting very many trials in flat memory."""

from __future__ import annotations

import dataclasses
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from ._arguments import explained
from ._audit_trials import Watch
from ._basis import SAMPLE, Basis
from ._descriptions import FrozenMapping
from ._errors import DescriptionError
from ._looks import Look, look, stopped
from ._numerics import UNEXAMINED
from ._outcome import ALL_THE_SAME, Outcome, joint_requirement
from ._portable import Portable, freeze
from ._reporter import Report, Reporter
from ._text_table import plainly_grouped, text_table

if TYPE_CHECKING:
    from ._audit import Audit
    from ._not_varied import Cautions
    from ._study import Study
    from ._verdict import Verdict, VerdictTable


@dataclass(frozen=True, repr=False)
class Tally(Portable):
    """Counts of failed trials, without the columns. Made by `Study.count`.

    Attributes
    ----------
    study : Study
        What was run.
    trials, failures, diverged : int
        Counts; diverged trials are among the failures.
    requirement_failures : mapping of str to int
        Trials that missed each requirement.
    first_failures : ndarray of int64
        Indices of the first failing trials, as many as were asked to be kept.
    requested : int
        Trials asked for.
    watch : Watch
        What an audit needs of the trials.
    measures : tuple of float or None
        The measures, if they are the same in all trials.
    """

    study: Study
    trials: int
    failures: int
    diverged: int
    requirement_failures: Mapping[str, int]
    first_failures: NDArray[np.int64]
    requested: int
    watch: Watch = field(repr=False, compare=False)
    measures: tuple[float, ...] | None = None

    def __post_init__(self) -> None:
        object.__setattr__(self, "requirement_failures", FrozenMapping(self.requirement_failures))
        freeze(self.first_failures)

    @explained
    def audit(self, threads: int = 0, progress: bool | Report | None = None) -> Audit:
        """Find out what numerical error can have changed, once; see `Outcome.audit`."""
        from ._audit import audit
        from ._audit_run import Run

        known: Audit | None = self.__dict__.get("_audit")
        if known is not None:
            return known
        missed = list(self.requirement_failures.values()) or [self.failures]
        run = Run(self.watch.rows, self.watch.scales, self.trials, self.failures, missed, self.watch)
        # Without any trial the steps may not be chosen yet, and are not wanted.
        described = self.study._run_description if self.trials else self.study._describe(1)
        with Reporter(progress, self.trials, afterwards=True) as reporter:
            found = audit(self.study, described, run, threads, reporter)
        if not found.interrupted:
            self.__dict__["_audit"] = found
        return found

    @explained
    def verdict(self, at_least: float, confidence: float = 0.95, audit: bool = True) -> Verdict:
        """Judge the claim that at least a fraction of all trials passes; see `Outcome.verdict`."""
        from windage._verdict import judge

        return judge(
            self.failures,
            self.trials,
            self.diverged,
            at_least,
            confidence,
            requirement=joint_requirement(self.study.requirements),
            **self._cautions(),
            looks=self._look(),
            numerics=self.audit().numerics if audit and not self._is_interrupted else UNEXAMINED,
        )

    @explained
    def verdicts(
        self, at_least: float | Mapping[str, float], confidence: float = 0.95, audit: bool = True
    ) -> VerdictTable:
        """Judge each requirement by itself; see `Outcome.verdicts`."""
        from windage._verdict import judge_many

        if not self.requirement_failures:
            raise DescriptionError("study.requirements", "none", "at least one requirement to judge")
        counts = dict(self.requirement_failures)
        numerics = (
            self.audit().by_requirement if audit and not self._is_interrupted else dict.fromkeys(counts, UNEXAMINED)
        )
        return judge_many(
            counts,
            self.trials,
            self.diverged,
            at_least,
            confidence,
            **self._cautions(),
            looks=self._look(),
            numerics=numerics,
        )

    @property
    def _is_interrupted(self) -> bool:
        return self.trials < self.requested

    def _cautions(self) -> Cautions:
        found = self.study.cautions()
        if self._is_interrupted:
            found["basis"] = Basis(kind="interim", planned=self.requested)
        if self.trials > 1 and found["basis"] == SAMPLE and self.measures is not None:
            found["advice"] += (ALL_THE_SAME,)
        return found

    def _look(self) -> int:
        if self._is_interrupted:
            stopped(self.study._claim, 0, self.trials, self.requested)
            return 1
        known: frozenset[Look] = self.__dict__.get("_judged", frozenset())
        self.__dict__["_judged"] = judged = look(self.study._claim, 0, self.trials, known)
        return len(judged)

    def __repr__(self) -> str:
        asked = f" (stopped; {plainly_grouped(self.requested)} asked for)" if self.trials < self.requested else ""
        counts = f"{plainly_grouped(self.failures)} failed, {plainly_grouped(self.diverged)} of them diverged"
        head = f"Tally of {plainly_grouped(self.trials)} trials{asked}: {counts}"
        rows = [(label, plainly_grouped(missed)) for label, missed in self.requirement_failures.items()]
        return "\n".join([head, *text_table(("Requirement", "Missed"), rows)])


class Counter:
    """Adds up outcomes into a tally."""

    def __init__(self, study: Study, keep_failures: int) -> None:
        self._keep = keep_failures
        self._tally = Tally(
            study,
            0,
            0,
            0,
            {r.label: 0 for r in study.requirements},
            np.empty(0, dtype=np.int64),
            requested=0,
            watch=Watch(),
        )

    def add(self, outcome: Outcome) -> None:
        """Count one more outcome: wholly, or not at all if an exception arrives meanwhile."""
        old, missed = self._tally, (~outcome.met).sum(axis=0).tolist()
        room = self._keep - len(old.first_failures)
        first = np.concatenate([old.first_failures, outcome.failures[:room]]) if room else old.first_failures
        self._tally = Tally(
            old.study,
            old.trials + outcome.trials,
            old.failures + len(outcome.failures),
            old.diverged + len(outcome.diverged),
            {label: n + more for (label, n), more in zip(old.requirement_failures.items(), missed, strict=True)},
            first,
            requested=0,
            watch=old.watch.joined(*outcome._audit_rows()) if outcome.trials else old.watch,
            measures=outcome._same_measures if outcome._same_measures == old.measures or not old.trials else None,
        )

    def tally(self, requested: int) -> Tally:
        """Return what was counted, of so many trials asked for."""
        return dataclasses.replace(self._tally, requested=requested)

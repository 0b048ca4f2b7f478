"""Counting very many trials in flat memory."""

from __future__ import annotations

import dataclasses
from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from ._descriptions import FrozenMapping
from ._outcome import Outcome, joint_requirement
from ._portable import Portable, freeze
from ._text_table import plainly_grouped, text_table

if TYPE_CHECKING:
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
    """

    study: Study
    trials: int
    failures: int
    diverged: int
    requirement_failures: Mapping[str, int]
    first_failures: NDArray[np.int64]
    requested: int

    def __post_init__(self) -> None:
        object.__setattr__(self, "requirement_failures", FrozenMapping(self.requirement_failures))
        freeze(self.first_failures)

    def verdict(self, at_least: float, confidence: float = 0.95) -> Verdict:
        """Judge the claim that at least a fraction of all trials passes; see `Outcome.verdict`."""
        from windage._verdict import judge

        return judge(
            self.failures,
            self.trials,
            self.diverged,
            at_least,
            confidence,
            requirement=joint_requirement(self.study.requirements),
            **self.study.cautions(),
        )

    def verdicts(self, at_least: float | Mapping[str, float], confidence: float = 0.95) -> VerdictTable:
        """Judge each requirement by itself; see `Outcome.verdicts`."""
        from windage._verdict import judge_many

        counts = dict(self.requirement_failures)
        return judge_many(counts, self.trials, self.diverged, at_least, confidence, **self.study.cautions())

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
            study, 0, 0, 0, {r.label: 0 for r in study.requirements}, np.empty(0, dtype=np.int64), requested=0
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
        )

    def tally(self, requested: int) -> Tally:
        """Return what was counted, of so many trials asked for."""
        return dataclasses.replace(self._tally, requested=requested)

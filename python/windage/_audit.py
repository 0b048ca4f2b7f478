"""The audit of an outcome: what numerical error can have changed in it.

Trials of the run are integrated again by the method of Cash and Karp (order 5) with a multiple of the steps, so many
that twice as many change a few of them no more, and that those which diverge do so under step control too.
Which trials, and what is concluded, is told in `_audit_run`.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from ._audit_run import REST, Counts, Examination, Run, RunAgain, changes, shares
from ._audit_trials import ONE_BY_ONE, SCALE_TRIALS, Rows, Values, scales_of
from ._cautions import grouped, trials_in_words
from ._describe import Described
from ._errors import EngineError
from ._loop import MOST_STEPS
from ._numerics import Numerics
from ._pilots import FIXED_STEPS, limits_of
from ._portable import Portable, freeze
from ._reporter import Reporter
from ._runner import Columns, make_campaign, run_chosen
from ._slack import slack_of

if TYPE_CHECKING:
    from ._study import Study

#: Steps of the tighter integration, as a multiple of the run's; raised by the same factor until it is confirmed.
TIGHTER, ATTEMPTS = 4, 3
#: Steps beyond which it is not raised any more.
MOST_TIGHTER_STEPS = 1024
#: Trials that confirm it with still smaller steps, and trials that diverge, which step control then decides.
CONFIRMING, CONFIRMING_DIVERGED = 4, 2
FINER = 2
#: A difference from the confirming run that is as good as none, as a share of slack and scale.
NONE = 1e-6
#: A difference from it that is too large, however much worse the run itself is.
MOST_MISSING = 0.1
#: A share of trials in question above which more integration steps are advised.
MANY = 5e-3


class Stopped(Exception):
    """The audit was interrupted."""


@dataclass(frozen=True, repr=False)
class Audit(Portable):
    """What numerical error can have changed in an outcome. Made by `Outcome.audit` and `Tally.audit`.

    Attributes
    ----------
    trials : int
        Trials that were run again.
    steps : int
        Integration steps in a sample period of the runs again; 0 where the step was controlled.
    flips : ndarray of uint64
        Indices of trials that pass one way and fail the other.
    undecided : int
        Trials that are nearer to a limit than their numerical error, known or assumed.
    largest_change : mapping of str to float
        For each requirement the largest finite change of its slack among the trials run again, as a share of slack
        and limit.
    interrupted : bool
        Whether it was stopped; then nothing is concluded.
    """

    trials: int
    steps: int
    flips: NDArray[np.uint64]
    undecided: int
    largest_change: Mapping[str, float]
    numerics: Numerics
    by_requirement: Mapping[str, Numerics]
    interrupted: bool = False

    def __post_init__(self) -> None:
        freeze(self.flips)

    @property
    def flipped(self) -> int:
        """Number of flips."""
        return len(self.flips)

    def __repr__(self) -> str:
        lines = [f"Audit: {self.numerics.text}"]
        lines += [f"  {change:.2g} of slack and limit: {label}" for label, change in self.largest_change.items()]
        lines += [f"  {self.numerics.caution}"] if self.numerics.caution else []
        return "\n".join(lines).replace("\u00a0", " ")


def not_examined(
    labels: tuple[str, ...], text: str, caution: str = "", *, is_open: bool = False, interrupted: bool = False
) -> Audit:
    """Return the audit of an outcome that was not examined, for a reason."""
    numerics = Numerics(text=text, caution=caution, is_open=is_open or interrupted, is_stopped=interrupted)
    every = dict.fromkeys(labels, numerics)
    return Audit(0, 0, np.empty(0, dtype=np.uint64), 0, {}, numerics, every, interrupted)


@dataclass(frozen=True)
class _Work:
    """A run, the study as it was run, and how to run trials of it again."""

    study: Study
    described: Described
    run: Run
    threads: int
    reporter: Reporter

    @property
    def steps(self) -> int:
        """Integration steps of the run in a sample period."""
        return int(self.described.study["loop"]["steps_per_sample"])

    def again(self, steps: int, integrator: str = "cash_karp5") -> RunAgain:
        """Return what runs rows again with another integration."""
        loop = self.described.study["loop"] | {"integrator": integrator, "steps_per_sample": steps}
        described = replace(self.described, study=self.described.study | {"loop": loop})
        campaign = make_campaign(described.study)

        def run(rows: Rows) -> Rows:
            go_on = self.reporter.beside("trials run again", len(rows.trials))
            columns = run_chosen(campaign, rows.trials, go_on, self.threads)
            if columns.trials < len(rows.trials):
                raise Stopped
            return rows_of(self.study, described, columns, rows.trials)

        return run


def rows_of(study: Study, described: Described, columns: Columns, trials: NDArray[np.uint64]) -> Rows:
    """Return trials with their slacks; without any requirement there is one, that the trial finishes."""
    run = (columns.parameters, columns.measures, columns.status)
    if study.requirements:
        slack = slack_of(described, study.requirements, *run).T
    else:
        slack = np.where(columns.status == 0, 1.0, -np.inf)[None, :]
    return Rows(trials, columns.parameters, slack, columns.status)


def scales_for(study: Study, described: Described, columns: Columns) -> Values:
    """Return a scale for each limit, taken from the first trials."""
    if not study.requirements:
        return np.ones(1)
    few = slice(0, SCALE_TRIALS)
    columns = Columns(columns.parameters[:, few], columns.measures[:, few], columns.status[few], 0)
    measured = columns.measures[list(described.requirement_rows)]
    return scales_of(np.array(limits_of(described, columns)), measured)


def audit(study: Study, described: Described, run: Run, threads: int, reporter: Reporter) -> Audit:
    """Examine a run; see `Outcome.audit`."""
    labels = tuple(requirement.label for requirement in study.requirements)
    if not run.trials:
        return not_examined(labels, "nothing to examine: no trial was run")
    work = _Work(study, described, run, threads, reporter)
    try:
        return _sampled_exactly(work, labels) if study.loop.plant.is_linear else _integrated(work, labels)
    except Stopped:
        caution = "The examination of the numerical error was stopped: call verdict again to have it done."
        return not_examined(labels, "not examined: stopped before it was done", caution, interrupted=True)


def _sampled_exactly(work: _Work, labels: tuple[str, ...]) -> Audit:
    """Examine a linear plant by step control, which shares nothing with the matrix exponential."""
    try:
        examination = Examination(work.run, work.again(1, "reference"), ONE_BY_ONE)
        examination.first_round()
        examination.further_rounds()
    except (ValueError, EngineError) as error:
        if "cannot be audited" not in str(error):
            raise
        caution = "Numerical error was not examined: the plant is too fast to be integrated beside its exact sampling."
        return not_examined(labels, "not audited: the plant is too fast for an independent integration", caution)
    return _concluded(work, examination, labels, 0)


def _integrated(work: _Work, labels: tuple[str, ...]) -> Audit:
    steps = work.steps
    for attempt in range(1, ATTEMPTS + 1):
        steps *= TIGHTER
        examination = Examination(work.run, work.again(steps))
        examination.first_round()
        is_sound = _diverges_rightly(work, examination)
        if is_sound and _is_confirmed(work, examination, steps):
            break
        examination.rest = 1.0
        if attempt == ATTEMPTS or steps * TIGHTER > MOST_TIGHTER_STEPS:
            if not is_sound:
                caution = (
                    "Trials diverge for want of integration steps: "
                    'set steps_per_sample="auto" in the loop and run again.'
                )
                return not_examined(labels, "not examined: no number of steps tried was enough", caution, is_open=True)
            break
    examination.further_rounds()
    return _concluded(work, examination, labels, steps)


def _is_confirmed(work: _Work, examination: Examination, steps: int) -> bool:
    """Compare a few of the trials run again with still tighter runs.

    One trial may differ: where a rounding of sensor or actuator falls otherwise, no integration is to blame.
    """
    largest = np.max(examination.share, axis=0, initial=0.0)
    order = np.argsort(-np.where(np.isfinite(largest), largest, -1.0), kind="stable")
    chosen = np.unique(np.concatenate([order[: CONFIRMING // 2], np.arange(len(order))[: CONFIRMING // 2]]))
    tight = examination.tight.at(chosen)
    finest = work.again(steps * FINER)(tight)
    missing = shares(changes(tight.slack, finest.slack), finest.slack, examination.scales)
    allowed = np.maximum(NONE, np.minimum(examination.share[:, chosen] * REST, MOST_MISSING))
    return bool(np.sum((missing > allowed).any(axis=0)) <= 1)


def _diverges_rightly(work: _Work, examination: Examination) -> bool:
    """Return whether trials that diverge in the tighter run do so under a reference that needs no choice of steps."""
    diverged = np.flatnonzero(examination.tight.status != 0)[:CONFIRMING_DIVERGED]
    if not diverged.size:
        return True
    may_jump = work.study.loop.plant.may_jump
    reference = work.again(FIXED_STEPS) if may_jump else work.again(1, "reference")
    return bool(np.all(reference(examination.tight.at(diverged)).status != 0))


def _advice(work: _Work) -> str:
    return f"set steps_per_sample={min(work.steps * TIGHTER, MOST_STEPS)} in the loop and run again"


def _concluded(work: _Work, examination: Examination, labels: tuple[str, ...], steps: int) -> Audit:
    counts = examination.count(range(len(work.run.scales)))
    largest = [float(np.max(row, where=np.isfinite(row), initial=0.0)) for row in examination.share]
    each = {label: _numerics(work, examination, examination.count([i]), steps) for i, label in enumerate(labels)}
    return Audit(
        trials=len(examination.places),
        steps=steps,
        flips=np.sort(np.concatenate([counts.lost, counts.won])),
        undecided=counts.undecided_passing + counts.undecided_failing,
        largest_change=dict(zip(labels, largest, strict=False)),
        numerics=_numerics(work, examination, counts, steps),
        by_requirement=each,
    )


def _numerics(work: _Work, examination: Examination, counts: Counts, steps: int) -> Numerics:
    share = examination.share
    largest = float(np.max(share, where=np.isfinite(share), initial=0.0))
    flipped = len(counts.lost) + len(counts.won)
    undecided = counts.undecided_passing + counts.undecided_failing
    how = f"{grouped(steps)} steps of order 5 a sample period" if steps else "step control, not sampled exactly"
    text = (
        f"{trials_in_words(len(examination.places))} run again with {how}: "
        f"largest change {largest:.1g} of slack and limit; {grouped(flipped)} flipped, {grouped(undecided)} undecided"
    )
    cautions = [work.study._choice.caution]
    if flipped + undecided > MANY * work.run.trials:
        advice = f": {_advice(work)}." if steps else "."
        cautions.append(
            f"Numerical error can change the outcome of {trials_in_words(flipped + undecided)}, which count against "
            f"either decision{advice}"
        )
    return Numerics(
        text=text,
        hidden=len(counts.lost) + counts.undecided_passing,
        doubtful=len(counts.won) + counts.undecided_failing,
        caution=" ".join(filter(None, cautions)),
    )

"""The outcome of a run: what each trial drew, measured and met."""

from __future__ import annotations

import os
from collections.abc import Mapping, Sequence
from functools import cached_property
from types import MappingProxyType
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from ._arguments import explained
from ._basis import SAMPLE, Basis
from ._describe import Described
from ._errors import DescriptionError, suggestion
from ._looks import Look, look, stopped
from ._numbers import checked_integer
from ._numerics import UNEXAMINED
from ._portable import Portable, freeze
from ._reporter import Report, Reporter
from ._runner import Columns
from ._slack import slack_of
from ._text_table import WIDTH, plainly_grouped

if TYPE_CHECKING:
    from ._audit import Audit
    from ._audit_trials import Rows
    from ._drivers import Drivers
    from ._measures import Requirement
    from ._not_varied import Cautions
    from ._plot_style import StudyFigure
    from ._requirement_table import Line
    from ._study import Study
    from ._verdict import Verdict, VerdictTable

Values = NDArray[np.float64]
STATUS = ("finished", "diverged")
ALL_THE_SAME = "all trials measured the same; see whether any spread or noise reaches what is measured"


class Outcome(Portable):
    """Drawn parameters, measures and slacks of a contiguous range of trials. Made by `Study.run`.

    Arrays are read-only views of the engine's columns. Position i of an array belongs to trial `first + i`;
    `failures` and `diverged` hold indices of trials, which `Study.replay` takes.
    """

    def __init__(
        self,
        study: Study,
        described: Described,
        columns: Columns,
        first: int = 0,
        judged: frozenset[Look] = frozenset(),
    ) -> None:
        self.study = study
        self.first = first
        self.requested = columns.requested
        self._described = described
        self._columns = columns
        self._judged = set(judged)
        self._audit: Audit | None = None
        freeze(columns.parameters, columns.measures, columns.status)

    @property
    def trials(self) -> int:
        """Number of trials that were run."""
        return self._columns.trials

    @property
    def interrupted(self) -> bool:
        """Whether the run was stopped before all trials asked for were run."""
        return self.trials < self.requested

    @cached_property
    def parameters(self) -> Mapping[str, Values]:
        """Drawn parameters by name, each an array of shape (trials,)."""
        named = zip(self._described.columns, self._columns.parameters, strict=True)
        return MappingProxyType({column.name: values for column, values in named})

    @cached_property
    def measures(self) -> Mapping[str, Values]:
        """Measures by their words, each an array of shape (trials,); NaN where a trial diverged."""
        named = zip(self._described.measure_names, self._columns.measures, strict=True)
        return MappingProxyType(dict(named))

    @cached_property
    def slack(self) -> Values:
        """Distance to each limit, shape (trials, requirements): at least 0 where met.

        It is -infinity where the trial diverged or the measure is undefined.
        """
        columns = self._columns
        return slack_of(self._described, self.study.requirements, columns.parameters, columns.measures, columns.status)

    @property
    def met(self) -> NDArray[np.bool_]:
        """Which requirements are met, shape (trials, requirements)."""
        return self.slack >= 0.0

    @cached_property
    def passed(self) -> NDArray[np.bool_]:
        """Which trials finished and met every requirement, shape (trials,)."""
        passed: NDArray[np.bool_] = (self._columns.status == 0) & (self.slack >= 0.0).all(axis=1)
        passed.flags.writeable = False
        return passed

    @cached_property
    def failures(self) -> NDArray[np.int64]:
        """Indices of the trials that failed."""
        return self._indices(~self.passed)

    @cached_property
    def diverged(self) -> NDArray[np.int64]:
        """Indices of the trials that diverged; they are among the failures."""
        return self._indices(self._columns.status != 0)

    @property
    def status(self) -> NDArray[np.uint8]:
        """0 where a trial finished, 1 where it diverged, shape (trials,)."""
        return self._columns.status

    @property
    def requirements(self) -> tuple[str, ...]:
        """The requirements under their names."""
        return tuple(requirement.label for requirement in self.study.requirements)

    @explained
    def failed(self, requirement: int | str) -> NDArray[np.int64]:
        """Return the indices of the trials that missed one requirement, given by its place or name."""
        return self._indices(~(self.slack[:, self._place(requirement)] >= 0.0))

    @explained
    def audit(self, threads: int = 0, progress: bool | Report | None = None) -> Audit:
        """Find out what numerical error can have changed, once; later calls return what was found.

        The trials that matter (near a limit, extreme in a spread, failing, and a sample of all) are integrated again
        with a multiple of the steps, as many of them as the changes call for. `verdict` does so by itself.

        Parameters
        ----------
        threads, progress
            As for `Study.run`; a bar shows nothing of the first second.

        Returns
        -------
        Audit
            After Ctrl-C or a stop one without a result, and the next call begins anew.
        """
        from ._audit import audit
        from ._audit_run import Run

        if self._audit is None:
            rows, scales = self._audit_rows()
            missed = (~(rows.slack >= 0.0)).sum(axis=1).tolist()
            run = Run(rows, scales, self.trials, len(self.failures), missed)
            with Reporter(progress, self.trials, afterwards=True) as reporter:
                found = audit(self.study, self._described, run, threads, reporter)
            if found.interrupted:
                return found
            self._audit = found
        return self._audit

    @explained
    def verdict(self, at_least: float, confidence: float = 0.95, audit: bool = True) -> Verdict:
        """Judge the claim that at least a fraction of all trials passes, at a confidence.

        Parameters
        ----------
        at_least : float
            Pass probability claimed, above 0 and below 1.
        confidence : float
            Confidence of the verdict, 0.5 up to but not including 1.
        audit : bool
            Whether numerical error is examined, by `audit`, and counted against either decision. If not, the verdict
            says that it was not.

        Returns
        -------
        Verdict
            Pass, fail or inconclusive, by exact one-sided Clopper-Pearson bounds. Another range of trials of
            the same study, by `extend`, a longer run, a batch or a tally, is a further look, and the verdict says so.
            Of a run that was stopped it is inconclusive: the number of trials was not fixed beforehand.
        """
        from windage._verdict import judge

        return judge(
            len(self.failures),
            self.trials,
            len(self.diverged),
            at_least,
            confidence,
            requirement=joint_requirement(self.study.requirements),
            **self._cautions(),
            looks=self._look(),
            numerics=self.audit().numerics if audit and not self.interrupted else UNEXAMINED,
        )

    @explained
    def verdicts(
        self, at_least: float | Mapping[str, float], confidence: float = 0.95, audit: bool = True
    ) -> VerdictTable:
        """Judge each requirement by itself, corrected so that all verdicts hold together (Bonferroni)."""
        from windage._verdict import judge_many

        if not self.requirements:
            raise DescriptionError("study.requirements", "none", "at least one requirement to judge")
        missed = dict(zip(self.requirements, (~self.met).sum(axis=0).tolist(), strict=True))
        return judge_many(
            missed,
            self.trials,
            len(self.diverged),
            at_least,
            confidence,
            **self._cautions(),
            looks=self._look(),
            numerics=self.audit().by_requirement
            if audit and not self.interrupted
            else dict.fromkeys(missed, UNEXAMINED),
        )

    @explained
    def extend(self, trials: int, threads: int = 0, progress: bool | Report | None = None) -> Outcome:
        """Return an outcome with further trials, equal to the last bit to one longer run.

        Parameters
        ----------
        trials : int
            How many further trials to run.
        threads, progress
            As for `Study.run`.
        """
        trials = checked_integer(trials, "trials", 1, 1 << 40)
        self.study._check_fits(trials, held=self.trials)
        mine = self._columns
        with Reporter(progress, trials) as reporter:
            more = self.study._columns(self.first + self.trials, trials, threads, reporter, reporter.go_on)
            joined = Columns(
                np.concatenate([mine.parameters, more.parameters], axis=1),
                np.concatenate([mine.measures, more.measures], axis=1),
                np.concatenate([mine.status, more.status]),
                mine.trials + trials,
            )
            described = self.study._run_description if more.trials else self._described
            # Another number than was asked for is chosen with what was seen of a run that was stopped.
            is_as_planned = not self.interrupted or self.trials + trials == self.requested
            judged = self._judged if is_as_planned else self._judged | {(self.first, self.trials, self.requested)}
            return Outcome(self.study, described, joined, self.first, frozenset(judged))

    def table(self) -> Any:
        """Return a `pyarrow.Table`, one row a trial.

        Columns: "trial", the drawn parameters, the measures, "slack of ..." for each requirement, "passed"
        and "status". Columns of numbers share the memory of this outcome.
        """
        from ._arrow import outcome_table

        return outcome_table(self)

    @explained
    def save(self, path: str | os.PathLike[str]) -> None:
        """Write the outcome to a Parquet file with its study inside, which `load_outcome` reads.

        Parameters
        ----------
        path : str or path
            The file; an old one is replaced when the new one is complete.

        Raises
        ------
        OutputError
            If the file cannot be written.
        """
        from ._outcome_file import save_outcome

        save_outcome(self, path)

    def drivers(self) -> Drivers:
        """Return how strongly each drawn parameter goes along with slack and failure: a first hint."""
        return self._drivers

    @cached_property
    def _drivers(self) -> Drivers:
        from ._drivers import find_drivers

        return find_drivers(self)

    @explained
    def plot(
        self,
        *,
        requirements: Sequence[int | str] | None = None,
        parameters: int = 3,
        confidence: float = 0.95,
        verdict: Verdict | None = None,
    ) -> StudyFigure:
        """Plot how the measures are distributed, and which spreads they depend on.

        Each requirement has a row. On the left: the fraction of trials that are at least so near to missing the
        limit, or beyond it, on a logarithmic axis because it is the tail that decides; where the curve crosses
        the limit the missed fraction is read. The axis below is the measure, that above the slack. The band
        holds the true fraction, at each point by itself. On the right: the measure over the drawn parameters with
        the largest rank correlation. Where each trial draws its own limit, the slack takes the measure's place.

        Parameters
        ----------
        requirements : sequence of int or str, optional
            Which requirements to show, by place or name; by default all, or the six missed most often.
        parameters : int
            Panels a requirement, 0 to 6.
        confidence : float
            Of the band: two-sided Clopper-Pearson, point by point.
        verdict : Verdict, optional
            Its claim and decision head the picture.

        Returns
        -------
        matplotlib.figure.Figure
            Belongs to the caller; notebooks show it, `outcome.plot().savefig("outcome.png")` writes it.

        Raises
        ------
        WindageError
            If Matplotlib is not installed.
        DescriptionError
            If there is no trial or no requirement, or an argument is out of range.
        """
        from ._plots import plot_outcome

        return plot_outcome(
            self, requirements=requirements, parameters=parameters, confidence=confidence, verdict=verdict
        )

    def __len__(self) -> int:
        return self.trials

    def __repr__(self) -> str:
        return self._text()

    def _repr_html_(self) -> str:
        import html  # costs import time and is seldom needed

        from ._requirement_table import outcome_html

        title = f"<p>{html.escape(self.study.title)}</p>" if self.study.title else ""
        head = f"<p><strong>{html.escape(self._headline())}</strong></p>"
        return f"{title}{head}{outcome_html(self, self._lines)}"

    def _text(self, width: int = WIDTH) -> str:
        """Return the counts, and what each requirement asked for and what came of it."""
        from ._requirement_table import outcome_text

        title = [f"Study: {self.study.title}"] if self.study.title else []
        return "\n".join([*title, self._headline(), *outcome_text(self, self._lines, width)])

    @cached_property
    def _lines(self) -> tuple[Line, ...]:
        from ._requirement_table import requirement_lines

        return requirement_lines(self)

    def _headline(self) -> str:
        asked = f" (stopped; {plainly_grouped(self.requested)} asked for)" if self.interrupted else ""
        run = f"{plainly_grouped(self.trials)} trial{'' if self.trials == 1 else 's'}"
        failed, diverged = plainly_grouped(len(self.failures)), plainly_grouped(len(self.diverged))
        return f"Outcome of {run}{asked}: {failed} failed, {diverged} of them diverged"

    def _indices(self, chosen: NDArray[np.bool_]) -> NDArray[np.int64]:
        indices = np.flatnonzero(chosen).astype(np.int64) + self.first
        indices.flags.writeable = False
        return indices

    def _place(self, requirement: int | str) -> int:
        names = self.requirements
        if isinstance(requirement, str):
            if requirement not in names:
                mend = suggestion(requirement, names)
                raise DescriptionError("requirement", requirement, "a requirement of the study", mend)
            return names.index(requirement)
        return checked_integer(requirement, "requirement", 0, len(names) - 1)

    def _audit_rows(self) -> tuple[Rows, Values]:
        """Return what an audit looks at in each trial, and the scale of each limit."""
        from ._audit import rows_of, scales_for

        trials = np.arange(self.first, self.first + self.trials, dtype=np.uint64)
        rows = rows_of(self.study, self._described, self._columns, trials)
        return rows, scales_for(self.study, self._described, self._columns)

    def _cautions(self) -> Cautions:
        """Return what a verdict has to name of the study and of this run of it."""
        found = self.study.cautions()
        if self.interrupted:
            found["basis"] = Basis(kind="interim", planned=self.requested)
        if self.trials > 1 and found["basis"] == SAMPLE and self._same_measures is not None:
            found["advice"] += (ALL_THE_SAME,)
        return found

    @cached_property
    def _same_measures(self) -> tuple[float, ...] | None:
        """The measures, if they are the same in all trials."""
        values = self._columns.measures
        is_same = self.trials > 0 and bool((values == values[:, :1]).all())
        return tuple(values[:, 0].tolist()) if is_same else None

    def _look(self) -> int:
        """Count this judgement; one that decides nothing is no look."""
        if self.interrupted:
            stopped(self.study._claim, self.first, self.trials, self.requested)
            return max(1, len(self._judged))
        self._judged |= look(self.study._claim, self.first, self.trials, self._judged)
        return len(self._judged)


def joint_requirement(requirements: Sequence[Requirement]) -> str:
    """Return in words what a trial has to do to pass."""
    if not requirements:
        return "the trial finishes"
    count = len(requirements)
    return requirements[0].in_full if count == 1 else f"all {count} requirements met in the same trial"

"""The study: a loop, its requirements and a seed; everything needed to repeat the work."""

from __future__ import annotations

import dataclasses
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any, Self

import numpy as np

from ._accuracy import Choice, chosen_steps
from ._arguments import explained, unknown_name
from ._controllers import Controller
from ._describe import Described, describe
from ._descriptions import Description, rebuilt
from ._errors import DescriptionError
from ._loop import Loop
from ._measures import Measure, Requirement
from ._memory import check_memory
from ._not_varied import Cautions, basis_of, listed_values, not_varied
from ._numbers import Spread, checked_choice, checked_integer, high_of, low_of, nominal_of
from ._outcome import Outcome
from ._replay import Replay
from ._reporter import GoOn, Report, Reporter
from ._runner import Columns, make_campaign, no_columns, run_columns
from ._study_checks import (
    DRAWN,
    IN_ORDER,
    check_positive_definite,
    check_title,
    check_windows,
    checked_correlations,
    checked_measures,
    checked_requirements,
    checked_table,
    with_table,
)
from ._tally import Counter, Tally

MOST_TRIALS = 1 << 40
#: Bytes a trial that the audit of a verdict takes: slacks and nearness of each requirement, and room to sort.
AUDIT_EACH, AUDIT_BESIDE = 17, 64


@dataclass(frozen=True, repr=False, eq=False)
class Study(Description):
    """A loop, what is required of it, and the seed of all random numbers.

    Parameters
    ----------
    loop : Loop
        The control loop.
    requirements : sequence of Requirement
        What each trial has to meet: `measure <= limit` or `measure >= limit`. At most 1000.
    seed : int
        0 to 2^64 - 1. A trial is a function of study and index alone: the same digits on every machine.
    measures : sequence of Measure
        Further measures, without a limit. At most 1000.
    table : mapping of str to array_like, shape (rows,), optional
        The user's own table of joint parameter values, read by `column(name)`.
    table_rows : {"drawn", "in_order"}
        "drawn": each trial draws a row, all equally likely, by its own random number. "in_order": trial i has
        row i, there are as many trials as rows, and the verdict is an exact count of the list, no claim about
        units beyond it.
    correlations : mapping of (str, str) to float, optional
        Rank correlations (Spearman) between drawn parameters, by their path ("plant.inertia") or shared name,
        through a Gaussian copula. Pairs not given within a group count as uncorrelated; at most 500
        parameters may hang together. Listed values (`choice`, `samples`) are taken in ascending order, however
        they are listed; ties between them weaken the correlation that is found, the more the fewer there are.
    title : str
        What outcomes, verdicts and plots are headed with. It decides no digit and is no part of the digest.

    A study has at most 10 000 drawn parameters.

    Raises
    ------
    DescriptionError
        If a signal or parameter does not exist, a window lies outside the duration, or correlations
        contradict each other.
    """

    loop: Loop
    requirements: Sequence[Requirement] = ()
    seed: int = 0
    measures: Sequence[Measure] = ()
    table: Mapping[str, Sequence[float]] | None = None
    correlations: Mapping[tuple[str, str], float] | None = None
    title: str = ""
    table_rows: str = DRAWN

    def __post_init__(self) -> None:
        if not isinstance(self.loop, Loop):
            raise DescriptionError("study.loop", self.loop, "Loop(...)")
        put = object.__setattr__
        put(self, "requirements", checked_requirements(self.requirements))
        put(self, "measures", checked_measures(self.measures))
        put(self, "seed", checked_integer(self.seed, "study.seed", 0, 2**64 - 1))
        put(self, "table", checked_table(self.table))
        put(self, "table_rows", checked_choice(self.table_rows, "study.table_rows", (DRAWN, IN_ORDER)))
        put(self, "correlations", checked_correlations(self.correlations))
        check_title(self.title)
        if not self.requirements and not self.measures:
            mend = "Add for example peak('error') <= 0.01."
            raise DescriptionError("study.requirements", "none", "at least one requirement or measure", mend)
        loop, requirements, measures = self._bound
        check_windows(loop, requirements, measures)
        check_positive_definite(self._describe(1).study["correlations"])

    @explained
    def run(self, trials: int, threads: int = 0, progress: bool | Report | None = None) -> Outcome:
        """Run the trials 0 to trials - 1.

        Parameters
        ----------
        trials : int
            Number of trials, at least 1.
        threads : int
            0: every core. It has no influence on any digit.
        progress : bool or callable or None
            None: a bar if the standard error stream is a terminal; True or False: always or never; a callable
            gets the trials done and asked for and stops the run by returning False.

        Returns
        -------
        Outcome
            After Ctrl-C or a stop: of the trials finished so far.
        """
        count = checked_integer(trials, "trials", 1, MOST_TRIALS)
        self._check_fits(count)
        with Reporter(progress, count) as reporter:
            return self._outcome(0, count, threads, reporter)

    @explained
    def batches(
        self, trials: int, size: int = 100_000, threads: int = 0, progress: bool | Report | None = None
    ) -> Iterator[Outcome]:
        """Run the trials 0 to trials - 1 in batches, for more trials than memory holds.

        Yields
        ------
        Outcome
            Of up to `size` trials each; `Outcome.first` is the index of its first trial. After an interrupted
            batch, which may have no trial at all, there is none. Ctrl-C between two batches is the caller's.
        """
        count = checked_integer(trials, "trials", 1, MOST_TRIALS)
        size = checked_integer(size, "size", 1, MOST_TRIALS)
        self._check_fits(min(size, count), "size")
        reporter = Reporter(progress, count)
        outcomes = self._batches(count, size, threads, reporter)
        try:
            while True:
                # Between two batches Ctrl-C belongs to the caller.
                with reporter.listening():
                    outcome = next(outcomes, None)
                if outcome is None:
                    return
                yield outcome
        finally:
            reporter.close()

    @explained
    def count(
        self,
        trials: int,
        keep_failures: int = 10_000,
        size: int = 100_000,
        threads: int = 0,
        progress: bool | Report | None = None,
    ) -> Tally:
        """Run the trials 0 to trials - 1 and count the failures, in memory that does not grow with `trials`.

        Parameters
        ----------
        trials : int
            Number of trials.
        keep_failures : int
            How many indices of failing trials to keep, the first ones.
        size, threads, progress
            As for `batches`.

        Returns
        -------
        Tally
            After Ctrl-C or a stop: of the trials counted so far.
        """
        count = checked_integer(trials, "trials", 1, MOST_TRIALS)
        size = checked_integer(size, "size", 1, MOST_TRIALS)
        self._check_fits(min(size, count), "size")
        counter = Counter(self, checked_integer(keep_failures, "keep_failures", 0, MOST_TRIALS))
        with Reporter(progress, count) as reporter:
            try:
                for outcome in self._batches(count, size, threads, reporter):
                    counter.add(outcome)
            except KeyboardInterrupt:  # of a program with a handler of its own
                if not counter.tally(count).trials:
                    raise
            return counter.tally(count)

    @explained
    def replay(self, trial: int) -> Replay:
        """Run one trial again and return every signal, with the same digits as in `run`."""
        trial = checked_integer(trial, "trial", 0, MOST_TRIALS)
        _check_replay_fits(self._bound[0])
        described = self._describe(self.resolved_steps(), every_signal=True)
        return _replay(self, self._bound[0], described, trial, trial)

    def nominal(self) -> Replay:
        """Run the nominal unit: every spread at its nominal value, noise as in trial 0."""
        loop, requirements, measures = _at_nominal(self._bound)
        _check_replay_fits(loop)
        described = describe(loop, requirements, measures, {}, self.seed, self.resolved_steps(), every_signal=True)
        return _replay(self, loop, described, 0, None)

    def resolved_steps(self) -> int:
        """Return the integration steps in a sample period, chosen once if the loop says "auto".

        Raises
        ------
        DescriptionError
            If no number of steps is enough; see `windage._accuracy`.
        """
        return self._choice.steps

    @property
    def parameters(self) -> dict[str, Spread]:
        """The drawn parameters by name."""
        return {column.name: column.spread for column in self._describe(1).columns}

    @cached_property
    def digest(self) -> str:
        """SHA-256 of everything that decides the digits of a trial, in hexadecimal digits.

        The order of names in a mapping has no meaning; the version of the study format is included. Nominal
        values that are stated decide no trial and are left out.
        """
        from ._study_text import digest_of

        return digest_of(self)

    @cached_property
    def _claim(self) -> str:
        """What identifies the claim that trials of this study pass, whatever it is called and measured besides."""
        from ._study_text import claim_of

        return claim_of(self)

    def warnings(self) -> list[str]:
        """Return what looks wrong with the study but is allowed, in words."""
        from ._fraction_advice import fraction_advice
        from ._window_advice import window_advice

        return [*self._bound[0].warnings(), *window_advice(*self._bound), *fraction_advice(self.requirements)]

    def with_(self, **changes: Any) -> Self:
        """Return a copy with some arguments changed, those of the study or those of its loop.

        Examples
        --------
        `study.with_(seed=7)`, `study.with_(controller=faster, sample_period=1e-3)`
        """
        of_study = [f.name for f in dataclasses.fields(self)]
        of_loop = [f.name for f in dataclasses.fields(Loop)]
        for name in changes:
            if name not in of_study + of_loop:
                raise unknown_name("Study", name, of_study + of_loop)
        inner = {name: value for name, value in changes.items() if name in of_loop}
        outer = {name: value for name, value in changes.items() if name in of_study}
        if inner:
            outer["loop"] = outer.get("loop", self.loop).with_(**inner)
        return dataclasses.replace(self, **outer)

    def with_controller(self, controller: Controller) -> Self:
        """Return a copy with another controller."""
        return self.with_(controller=controller)

    def cautions(self) -> Cautions:
        """Return what a verdict has to name: what is drawn and how, what is held, what the trials are."""
        columns = self._describe(1).columns
        return Cautions(
            not_varied=not_varied(self.loop),
            spreads=tuple(f"{c.name}: {c.spread!r}" for c in columns),
            truncated=tuple(c.name for c in columns if c.spread._is_truncated()),
            title=self.title,
            listed_values=listed_values(columns),
            advice=tuple(self.warnings()),
            basis=basis_of(self._bound[0], columns),
        )

    def __eq__(self, other: object) -> bool:
        """Tell whether all trials have the same digits, and the nominal units too."""
        if not isinstance(other, Study):
            return NotImplemented
        return self.digest == other.digest and self._nominal_values == other._nominal_values

    def __hash__(self) -> int:
        return hash(self.digest)

    def __repr__(self) -> str:
        steps: Any = self.loop.steps_per_sample
        if steps == "auto":
            chosen = self.__dict__.get("_choice")
            steps = "auto" if chosen is None else f"auto ({chosen.steps})"
        loop, plant = self.loop, type(self.loop.plant).__name__
        lines = [f"Title: {self.title}"] if self.title else []
        lines += [
            f"Study {self.digest[:12]}: {plant} under {type(loop.controller).__name__} of order "
            f"{loop.controller.order}, seed {self.seed}, steps per sample {steps}"
        ]
        lines += [f"  {name}: {spread!r}" for name, spread in self.parameters.items()]
        lines += [f"  requires {requirement.in_full}" for requirement in self.requirements]
        lines += [f"  measures {measure.label}" for measure in self.measures]
        return "\n".join(lines)

    def __getstate__(self) -> dict[str, Any]:
        # The choice of steps takes time and decides digits, so a copy keeps it.
        kept = {"_choice": self._choice} if "_choice" in self.__dict__ else {}
        return super().__getstate__() | kept

    @cached_property
    def _bound(self) -> tuple[Loop, tuple[Requirement, ...], tuple[Measure, ...]]:
        """Loop, requirements and measures whose columns know their values."""
        parts: Any = (self.loop, self.requirements, self.measures)
        bound: Any = with_table(parts, self.table, self.table_rows)  # type: ignore[arg-type]
        return bound  # type: ignore[no-any-return]

    @cached_property
    def _nominal_values(self) -> dict[str, float]:
        return {name: spread.nominal for name, spread in self.parameters.items()}

    @cached_property
    def _choice(self) -> Choice:
        with Reporter(False, 0) as reporter:
            return chosen_steps((*self._bound, self.correlations or {}, self.seed), reporter)

    @cached_property
    def _run_description(self) -> Described:
        return self._describe(self.resolved_steps())

    @cached_property
    def _nominal_measures(self) -> list[float]:
        """Measures of the nominal unit in the order of a run's, NaN if it diverges; without its signals."""
        loop, requirements, measures = _at_nominal(self._bound)
        described = describe(loop, requirements, measures, {}, self.seed, self.resolved_steps())
        columns = run_columns(make_campaign(described.study), 0, 1, 1)
        if columns.trials < 1:
            raise KeyboardInterrupt
        # Measures that differ in a spread only may be the same one here.
        rows = [described.measures.index(_at_nominal(measure)) for measure in self._run_description.measures]
        return [float(columns.measures[row, 0]) for row in rows]

    @cached_property
    def _campaign(self) -> Any:
        return make_campaign(self._run_description.study)

    def _describe(self, steps: int, *, every_signal: bool = False) -> Described:
        return describe(*self._bound, self.correlations or {}, self.seed, steps, every_signal=every_signal)

    def _check_fits(self, trials: int, field: str = "trials", held: int = 0) -> None:
        """Refuse an outcome that the memory does not hold beside the trials that are held already."""
        described = self._describe(1)
        numbers, judged = len(described.columns) + len(described.measures), len(self.requirements)
        # Columns from the engine, then slacks and what follows from them, which a verdict examines in copies; a longer
        # outcome is a copy of both parts.
        each, worked_out = 8 * numbers + 1, 9 * judged + 2 + AUDIT_EACH * max(1, judged) + AUDIT_BESIDE
        needed = float(trials) * each + (held and float(held + trials) * each) + float(held + trials) * worked_out
        mend = "Use study.count(...) or study.batches(...), whose memory does not grow with the trials."
        if field == "size":
            mend = "Take smaller batches."
        check_memory(field, trials, needed, mend)

    def _batches(self, count: int, size: int, threads: int, reporter: Reporter) -> Iterator[Outcome]:
        done = 0
        while done < count:
            outcome = self._outcome(done, min(size, count - done), threads, reporter)
            done += outcome.trials
            yield outcome
            if outcome.interrupted:
                return

    def _outcome(self, first: int, count: int, threads: int, reporter: Reporter) -> Outcome:
        """Run some of the trials that a reporter tells of, which has to be entered."""
        columns = self._columns(first, count, threads, reporter, reporter.after(first))
        described = self._run_description if "_choice" in self.__dict__ else self._describe(1)
        return Outcome(self, described, columns, first)

    def _columns(self, first: int, count: int, threads: int, reporter: Reporter, go_on: GoOn) -> Columns:
        if "_choice" not in self.__dict__:
            try:
                # As the property, but told to whoever waits for the run, and stopped by them.
                parts = (*self._bound, self.correlations or {}, self.seed)
                self.__dict__["_choice"] = chosen_steps(parts, reporter)
            except KeyboardInterrupt:
                if not reporter.stopped:
                    raise
                return no_columns(self._describe(1), count)
        return run_columns(self._campaign, first, count, threads, go_on)


def _at_nominal(part: Any) -> Any:
    """Return a description with every spread at its nominal value."""
    return rebuilt(part, lambda x: nominal_of(x) if isinstance(x, Spread) else None)


def _check_replay_fits(loop: Loop) -> None:
    samples = high_of(loop.duration) / low_of(loop.sample_period)
    found = f"{len(loop.signal_names)} signals of {samples:.3g} samples"
    check_memory("replay", found, 8.0 * len(loop.signal_names) * samples, "Shorten the trial.")


def _replay(study: Study, loop: Loop, described: Described, index: int, trial: int | None) -> Replay:
    campaign = make_campaign(described.study)
    with Reporter(False, 1) as reporter:
        columns = run_columns(campaign, index, 1, 1, reporter.go_on)
        values = campaign.replay(index, reporter.go_on)
    if columns.trials < 1 or not values.size:
        raise KeyboardInterrupt
    names = campaign.signal_names()
    values.flags.writeable = False
    run = (columns.parameters, columns.measures, columns.status)
    signals = dict(zip(names, np.asarray(values), strict=True))
    return Replay(study, loop, described, run, signals, trial)

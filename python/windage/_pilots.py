"""Pilot trials: the first ones and the extremes of every spread, computed by a reference that needs no choice."""

from __future__ import annotations

import time
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from ._describe import Described, describe
from ._errors import DescriptionError
from ._loop import Loop
from ._measures import Measure, Requirement
from ._reporter import Reporter
from ._runner import Columns, make_campaign, run_chosen
from ._scales import Sized, Values, allowed_differences, with_scales
from ._slack import slack_of

#: Trials from the first one on that are pilots.
FIRST_TRIALS = 8
#: Trials whose drawn parameters are looked at for extremes: stiff ones hide in the tails of a spread.
LOOKED_AT = 512
#: Most pilots, and most where the equations may jump, which the reference then pays for with fixed small steps.
MOST_PILOTS, MOST_JUMPING = 40, 16
#: Steps of the reference for equations that may jump.
FIXED_STEPS = 512
#: Longest time that the pilot trials may take.
REFERENCE_SECONDS = 600.0

Parts = tuple[Loop, Sequence[Requirement], Sequence[Measure], Mapping[tuple[str, str], float], int]
Trials = NDArray[np.uint64]


@dataclass(frozen=True)
class Pilots:
    """The pilot trials as the reference computes them.

    Attributes
    ----------
    trials : ndarray of uint64
        Their indices.
    sized : Sized
        The study, with scales, one step a sample and the reference as integrator.
    columns : Columns
        What the reference found.
    slack : ndarray, shape (trials, requirements)
    allowed, size : ndarray, shape (measures, trials)
        By how much a measure may differ, and the scale that this is taken from.
    """

    parts: Parts
    trials: Trials
    sized: Sized
    columns: Columns
    slack: Values
    allowed: Values
    size: Values

    @property
    def finished(self) -> NDArray[np.bool_]:
        """Pilots that can be compared: those that do not diverge under the reference."""
        finished: NDArray[np.bool_] = self.columns.status == 0
        return finished

    def with_steps(self, steps: int, integrator: str, reporter: Reporter | None = None) -> Columns:
        """Return what fixed steps find for the same trials."""
        loop = {"steps_per_sample": steps, "integrator": integrator}
        return _checked_run(_changed(self.sized.described, loop), self.trials, reporter)


def pilots_of(parts: Parts, reporter: Reporter | None = None) -> Pilots:
    """Choose the pilot trials of a study and compute them with the reference.

    Roundings of sensor and actuator are left out: they turn a difference in the last digit into a whole step of
    their resolution, which says nothing about the integrator.
    """
    loop, requirements, *_ = parts
    smooth = loop.with_(sensor=loop.sensor.with_(resolution=0.0), actuator=loop.actuator.with_(resolution=0.0))
    parts = (smooth, *parts[1:])
    sized = with_scales(describe(*parts, 1))
    # Step control creeps through every jump, and along a line on which a sign changes it never arrives.
    jumping: dict[str, object] = {"integrator": "cash_karp5", "steps_per_sample": FIXED_STEPS}
    settings = jumping if loop.plant.may_jump else dict[str, object](integrator="reference")
    trials = _chosen(sized.described, MOST_JUMPING if loop.plant.may_jump else MOST_PILOTS)
    columns = _checked_run(_changed(sized.described, settings), trials, reporter)
    limits = limits_of(sized.described, columns)
    slack = slack_of(sized.described, requirements, columns.parameters, columns.measures, columns.status)
    return Pilots(parts, trials, sized, columns, slack, *allowed_differences(sized, loop, columns, limits))


def limits_of(described: Described, columns: Columns) -> list[Values]:
    """Return the limit of each requirement in each trial."""
    limits = []
    for limit in described.limits:
        drawn = columns.parameters[limit[1]] if isinstance(limit, tuple) else np.full(columns.trials, limit)
        limits.append(np.asarray(drawn, dtype=np.float64))
    return limits


def _chosen(described: Described, most: int) -> Trials:
    campaign = make_campaign(described.study)
    available = int(campaign.trials_available)
    drawn = campaign.draw(0, min(LOOKED_AT, available))
    extremes = [int(end) for values in drawn for end in (np.argmin(values), np.argmax(values))]
    chosen = dict.fromkeys((*range(min(FIRST_TRIALS, available)), *extremes))
    return np.array(list(chosen)[:most], dtype=np.uint64)


def _changed(described: Described, loop: dict[str, object]) -> Described:
    return replace(described, study=described.study | {"loop": described.study["loop"] | loop})


def _checked_run(described: Described, trials: Trials, reporter: Reporter | None) -> Columns:
    """Run trials of the comparison; give up on equations that no step control gets through.

    The budget decides only whether there is an error, never which number of steps is chosen.
    """
    deadline = time.perf_counter() + REFERENCE_SECONDS
    told = reporter.beside("pilot trials", len(trials)) if reporter else None

    def go_on(done: int) -> bool:
        return time.perf_counter() < deadline and (told is None or told(done))

    columns = run_chosen(make_campaign(described.study), trials, go_on)
    if columns.trials == len(trials):
        return columns
    if time.perf_counter() < deadline or (reporter and reporter.stopped):
        raise KeyboardInterrupt
    expected = f"pilot trials that end within {REFERENCE_SECONDS:g} s with control of the step"
    mend = "Something in them chatters (write tanh for sign), or set steps_per_sample to a number of your own."
    raise DescriptionError("loop.steps_per_sample", "auto", expected, mend)

"""How many integration steps a study needs: chosen by comparison with a tightly controlled reference.

Eight pilot trials are run with 1, 2, 4, ... steps in a sample period, and once with step control to a
relative tolerance of 1e-10 or, where the equations may jump, with 512 steps. The smallest number of steps is
taken with which no measure differs from the reference by more than a millionth of its size or a thousandth of
its limit.
"""

from __future__ import annotations

import time
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ._describe import Described, describe
from ._errors import DescriptionError
from ._loop import Loop
from ._measures import Measure, Requirement
from ._numbers import high_of
from ._runner import Columns, make_campaign, run_columns

PILOT_TRIALS = 8
CANDIDATES = (1, 2, 4, 8, 16, 32, 64, 128, 256)
#: Steps of the reference for equations that may jump.
FIXED_STEPS = 512
OF_SIZE = 1e-6
OF_LIMIT = 1e-3
#: Longest time that the pilot trials may take.
REFERENCE_SECONDS = 600.0

_TIMES = ("rise_time", "settling_time", "time_outside", "time_in_saturation")
_FRACTIONS = ("overshoot", "undershoot")
Values = NDArray[np.float64]


@dataclass(frozen=True)
class _Pilot:
    """The reference: what every candidate is compared with."""

    described: Described
    senses: tuple[float, ...]
    columns: Columns
    allowed: Values  # (measures, trials)
    counted: NDArray[np.bool_]  # (trials,)


def chosen_steps(
    loop: Loop,
    requirements: Sequence[Requirement],
    measures: Sequence[Measure],
    correlations: Mapping[tuple[str, str], float],
    seed: int,
) -> int:
    """Return the integration steps in a sample period.

    Raises
    ------
    DescriptionError
        If 256 steps are not enough.

    Notes
    -----
    Roundings of sensor and actuator are left out here: they turn a difference in the last digit into a whole
    step of their resolution, which says nothing about the integrator. Measures that are times are known to a
    sample period. A pilot trial that misses a limit by more than the limit itself, or diverges, does so with
    any step and is left out.
    """
    if isinstance(loop.steps_per_sample, int):
        return loop.steps_per_sample
    if loop.plant.is_linear:
        return 1
    smooth = loop.with_(sensor=loop.sensor.with_(resolution=0.0), actuator=loop.actuator.with_(resolution=0.0))
    parts = (smooth, requirements, measures, correlations, seed)
    pilot = _reference(*parts)
    worst = ""
    for steps in CANDIDATES:
        described = describe(*parts, steps)
        columns = _checked_run(described, pilot.columns.trials)
        worst = _complaint(pilot, columns)
        if not worst:
            return steps
    expected = f"at most {CANDIDATES[-1]} steps in a sample period to be enough"
    mend = (
        f"With {CANDIDATES[-1]} steps {worst}. Jumps in the equations may be the reason (write tanh for "
        "sign); or set steps_per_sample to a number of your own."
    )
    raise DescriptionError("loop.steps_per_sample", "auto", expected, mend)


def _reference(
    loop: Loop,
    requirements: Sequence[Requirement],
    measures: Sequence[Measure],
    correlations: Mapping[tuple[str, str], float],
    seed: int,
) -> _Pilot:
    described = describe(loop, requirements, measures, correlations, seed, 1)
    if loop.plant.may_jump:
        # Step control creeps through every jump, and along a line on which a sign changes it never arrives.
        described.study["loop"] |= {"integrator": "cash_karp5", "steps_per_sample": FIXED_STEPS}
    else:
        described.study["loop"]["integrator"] = "reference"
    available = int(make_campaign(described.study).trials_available)
    trials = min(PILOT_TRIALS, available)
    columns = _checked_run(described, trials)
    senses = tuple(1.0 if r.at_most is not None else -1.0 for r in requirements)
    limits = _limits(described, columns)
    return _Pilot(
        described,
        senses,
        columns,
        _allowed(described, loop, columns, limits),
        _counted(described, senses, columns, limits),
    )


def _checked_run(described: Described, count: int) -> Columns:
    """Run trials of the comparison; give up on equations that no step control gets through.

    The budget decides only whether there is an error, never which number of steps is chosen.
    """
    deadline = time.perf_counter() + REFERENCE_SECONDS
    columns = run_columns(make_campaign(described.study), 0, count, 0, lambda *_: time.perf_counter() < deadline)
    if columns.trials == count:
        return columns
    if time.perf_counter() < deadline:
        raise KeyboardInterrupt
    expected = f"pilot trials that end within {REFERENCE_SECONDS:g} s with control of the step"
    mend = "Something in them chatters (write tanh for sign), or set steps_per_sample to a number of your own."
    raise DescriptionError("loop.steps_per_sample", "auto", expected, mend)


def _limits(described: Described, columns: Columns) -> list[Values]:
    """Return the limit of each requirement in each trial."""
    limits = []
    for limit in described.limits:
        drawn = columns.parameters[limit[1]] if isinstance(limit, tuple) else np.full(columns.trials, limit)
        limits.append(np.asarray(drawn, dtype=np.float64))
    return limits


def _allowed(described: Described, loop: Loop, columns: Columns, limits: list[Values]) -> Values:
    """Return by how much each measure of each trial may differ from the reference."""
    allowed = np.empty((len(described.measures), columns.trials))
    for row, measure in enumerate(described.measures):
        values = np.abs(columns.measures[row])
        size = float(np.max(values, where=np.isfinite(values), initial=0.0))
        if measure.kind in _FRACTIONS:
            size = max(size, 1.0)
        allowed[row] = OF_SIZE * size + (high_of(loop.sample_period) if measure.kind in _TIMES else 0.0)
        on_it = [limit for limit, r in zip(limits, described.requirement_rows, strict=True) if r == row]
        if on_it:
            allowed[row] = np.maximum(allowed[row], OF_LIMIT * np.min(np.abs(on_it), axis=0))
    return allowed


def _counted(
    described: Described, senses: Sequence[float], columns: Columns, limits: list[Values]
) -> NDArray[np.bool_]:
    counted: NDArray[np.bool_] = columns.status == 0
    for limit, row, sense in zip(limits, described.requirement_rows, senses, strict=True):
        missed_by = sense * (columns.measures[row] - limit)
        counted &= ~(missed_by > np.abs(limit))
    return counted


def _complaint(pilot: _Pilot, columns: Columns) -> str:
    """Say which measure of which trial differs most, or nothing if all are near enough."""
    other_fate = (columns.status != pilot.columns.status) & pilot.counted
    if other_fate.any():
        return f"trial {int(np.argmax(other_fate))} diverges, and with the reference it does not"
    with np.errstate(invalid="ignore", divide="ignore"):
        difference = np.abs(columns.measures - pilot.columns.measures)
        same = (columns.measures == pilot.columns.measures) | (
            np.isnan(columns.measures) & np.isnan(pilot.columns.measures)
        )
        excess = np.where(same, 0.0, difference / pilot.allowed)
    excess = np.where(np.isnan(excess), np.inf, excess)[:, pilot.counted]
    if not excess.size or float(np.max(excess)) <= 1.0:
        return ""
    row, place = np.unravel_index(int(np.argmax(excess)), excess.shape)
    trial = int(np.flatnonzero(pilot.counted)[place])
    label = pilot.described.measures[int(row)].label
    return f"'{label}' of trial {trial} differs from the reference by {float(difference[row, trial]):.3g}"

"""Where windows begin and end: at samples, at jumps of the reference, with drawn ends and drawn sample periods."""

from __future__ import annotations

import functools
import math

import numpy as np
import pytest

import windage as wd
from windage._window_advice import jump_times

PERIOD = 0.01
Values = np.ndarray


def loop(reference: object, **options: object) -> wd.Loop:
    settings: dict[str, object] = {
        "plant": wd.SecondOrder(gain=wd.uniform(0.8, 1.2), time_constant=0.1, damping=0.3),
        "controller": wd.ErrorADRC(2, controller_bandwidth=12.0, observer_bandwidth=60.0, b0=100.0),
        "sample_period": PERIOD,
        "duration": 2.0,
        "reference": reference,
        "disturbances": {"load": 0.0},
    }
    return wd.Loop(**{**settings, **options})  # type: ignore[arg-type]


def overshoot_of(y: Values, target: float) -> float:
    """The engine's own operations, so that the result is the same to the last bit."""
    change = target - y[0]
    return float(np.max(np.append(0.0, np.sign(change) * (y - target))) / abs(change))


STEPS = {
    "step on a step": wd.Table([0.0, 1.0], [1.0, 3.0], interpolation="hold"),
    "vertical part": wd.Table([0.0, 1.0, 1.0, 2.0], [1.0, 1.0, 3.0, 3.0]),
    "pulse": wd.Pulse(1.0, 0.0, 1.0),
    "step at a time with a rounding error": wd.Table([0.0, 0.1 + 0.2 + 0.7], [1.0, -2.0], interpolation="hold"),
}


@pytest.mark.parametrize("reference", STEPS)
def test_a_window_that_ends_at_a_step_is_compared_with_the_reference_before_it(reference: str) -> None:
    measures = [
        wd.overshoot(before=1.0),
        wd.rise_time(before=1.0),
        wd.settling_time(before=1.0),
        wd.undershoot(before=1.0),
    ]
    sooner = [wd.overshoot(before=0.99), wd.rise_time(before=0.99), wd.settling_time(before=0.99)]
    replay = wd.Study(loop(STEPS[reference]), measures=[*measures, *sooner], seed=3).replay(1)
    values = list(replay.measures.values())
    assert values[0] == overshoot_of(replay["output"][:101], 1.0) > 0.1
    assert values[3] == 0.0
    # The step at the last sample has no influence on the output up to it.
    assert values[:3] == values[4:]


def test_a_step_inside_the_window_is_the_target_even_at_its_last_sample() -> None:
    step = wd.Step(2.0, at=1.0, initial=1.0)
    measures = [wd.overshoot(before=1.005), wd.overshoot(before=1.01)]
    replay = wd.Study(loop(step, disturbances={"load": wd.Step(1.0, at=0.5)}), measures=measures).replay(0)
    y = replay["output"]
    assert list(replay.measures.values()) == [overshoot_of(y[:101], 3.0), overshoot_of(y[:102], 3.0)]


def test_a_step_at_the_end_of_the_trial_holds_for_no_time() -> None:
    """Output and reference stay at 0: no change to compare with, so nothing can be met."""
    study = wd.Study(loop(wd.Step(1.0, at=2.0)), [wd.overshoot() <= 0.2])
    assert study.replay(0).measures["overshoot of output"] == math.inf
    assert not study.run(3, progress=False).passed.any()


@pytest.mark.parametrize("before", [0.5, 0.503, 1.0, math.inf])
@pytest.mark.parametrize("reference", [wd.Ramp(2.0), wd.Sine(1.0, 0.7, phase=0.4), wd.Quintic(1.0, 0.1, 3.0)], ids=repr)
def test_a_moving_reference_is_read_at_the_last_sample_to_the_bit(reference: object, before: float) -> None:
    replay = wd.Study(loop(reference), measures=[wd.overshoot(before=before)]).replay(0)
    inside = replay.time <= before + 1e-9
    y, r = replay["output"][inside], replay["reference"][inside]
    assert replay.measures.popitem()[1] == overshoot_of(y, r[-1])


def test_a_window_that_starts_at_a_step_starts_before_the_response() -> None:
    step = wd.Step(1.0, at=1.0)
    replay = wd.Study(loop(step), measures=[wd.overshoot(after=1.0), wd.peak("error", after=1.0)]).replay(0)
    y = replay["output"]
    assert y[100] == 0.0
    assert list(replay.measures.values()) == [overshoot_of(y[100:], 1.0), 1.0]


def test_ends_and_periods_that_are_drawn_follow_the_same_rule() -> None:
    """Steps at 1.0 s; the window ends there, sooner or later, and the sample grid differs from trial to trial."""
    end = wd.choice([0.9, 1.0, 1.004, 1.1])
    period = wd.choice([0.01, 0.0125, 0.008, 0.015])
    case = loop(wd.Table([0.0, 1.0], [1.0, 3.0], interpolation="hold"), sample_period=period)
    study = wd.Study(case, measures=[wd.overshoot(before=end)], seed=12)
    trials = 64
    found = next(iter(study.run(trials, progress=False).measures.values()))
    seen = set()
    for trial in range(trials):
        replay = study.replay(trial)
        before, ts = replay.parameters["measures[0].before"], replay.parameters["sample_period"]
        inside = replay.time <= before + 1e-6 * ts
        last = replay.time[inside][-1]
        jumps_at_its_end = abs(last - 1.0) < 1e-9 and abs(before - last) < 1e-9
        target = 1.0 if jumps_at_its_end else replay["reference"][inside][-1]
        assert found[trial] == overshoot_of(replay["output"][inside], target), (trial, before, ts)
        seen.add((before, ts))
    assert len(seen) == 16


@functools.cache
def held_error() -> wd.Replay:
    measures = [wd.peak("error", after=0.5, before=1.0), wd.peak("error", after=0.5, before=0.99)]
    return wd.Study(loop(wd.Step(1.0, at=1.0)), measures=measures).replay(0)


def test_the_sample_at_the_end_is_part_of_the_window() -> None:
    """Said in the documentation: at the instant of a step the error is that after it."""
    assert list(held_error().measures.values()) == [1.0, 0.0]


@pytest.mark.parametrize(
    ("reference", "times"),
    [
        (wd.Step(1.0, at=1.0), [1.0]),
        (wd.Pulse(1.0, 0.25, 0.5), [0.25, 0.75]),
        (wd.Pulse(1.0, 0.25, wd.uniform(0.1, 0.2)), [0.25]),
        (STEPS["step on a step"], [1.0]),
        (STEPS["vertical part"], [1.0]),
        (wd.Ramp(1.0), []),
        (wd.Step(1.0, at=wd.uniform(0.1, 0.2)), []),
    ],
    ids=repr,
)
def test_jumps_of_a_reference(reference: wd.Step, times: list[float]) -> None:
    assert jump_times(reference) == times


def test_a_window_whose_last_sample_shows_a_step_is_pointed_out() -> None:
    late = wd.peak("error", before=1.0)
    study = wd.Study(
        loop(wd.Step(1.0, at=1.0), signals={"effort": "abs(command)"}),
        [late <= 0.1, wd.rms("effort", before=1.0) - late <= 1.0, wd.overshoot(before=1.0) <= 9.0],
        measures=[wd.peak("error", before=0.99), wd.peak("error", after=1.0), wd.final("measured", before=1.0)],
    )
    advice = [text for text in study.warnings() if text.startswith("measures")]
    assert len(advice) == 2
    assert "peak of error before 1 s" in advice[0]
    assert "before=0.99 leaves that sample out" in advice[0]
    assert "rms of effort before 1 s" in advice[1]

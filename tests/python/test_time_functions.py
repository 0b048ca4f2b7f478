"""Time functions against their formulas, and noises against their stated moments."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest

import windage as wd

PERIOD = 0.01


def loop_of(reference: Any = 0.0, load: Any = 0.0, duration: float = 4.0) -> wd.Loop:
    return wd.Loop(
        plant=wd.IntegratorChain(1, gain=1.0),
        controller=wd.OutputADRC(1, b0=1.0, controller_bandwidth=2.0, observer_bandwidth=10.0),
        sample_period=PERIOD,
        duration=duration,
        reference=reference,
        disturbances={"load": load},
    )


def signal(name: str, trial: int = 0, **options: Any) -> tuple[np.ndarray, np.ndarray]:
    replay = wd.Study(loop_of(**options), [wd.peak("error") <= 1e9], seed=11).replay(trial)
    return replay.time, replay[name]


def quintic(s: np.ndarray) -> np.ndarray:
    s = np.clip(s, 0.0, 1.0)
    return 10.0 * s**3 - 15.0 * s**4 + 6.0 * s**5


@pytest.mark.parametrize(
    ("function", "formula"),
    [
        (wd.Constant(2.5), lambda t: np.full_like(t, 2.5)),
        (wd.Step(2.0, at=1.005, initial=-1.0), lambda t: np.where(t >= 1.005, 1.0, -1.0)),
        (
            wd.Ramp(0.5, start=1.005, stop=3.005, initial=1.0),
            lambda t: 1.0 + 0.5 * (np.clip(t, 1.005, 3.005) - 1.005),
        ),
        (wd.Ramp(0.5), lambda t: 0.5 * t),
        (
            wd.Sine(2.0, period=1.5, phase=0.3, offset=0.1, start=0.505),
            lambda t: 0.1 + np.where(t >= 0.505, 2.0 * np.sin(2 * math.pi * (t - 0.505) / 1.5 + 0.3), 0.0),
        ),
        (wd.Pulse(3.0, start=1.005, width=0.5), lambda t: np.where((t >= 1.005) & (t < 1.505), 3.0, 0.0)),
        (
            wd.Quintic(2.0, start=0.5, duration=2.0, initial=1.0),
            lambda t: 1.0 + 2.0 * quintic((t - 0.5) / 2.0),
        ),
        (
            wd.Table([1.0, 2.0, 3.5], [0.0, 4.0, 1.0]),
            lambda t: np.interp(t, [1.0, 2.0, 3.5], [0.0, 4.0, 1.0]),
        ),
        (
            wd.Table([1.005, 2.005], [5.0, 7.0], interpolation="hold"),
            lambda t: np.where(t >= 2.005, 7.0, 5.0),
        ),
    ],
)
@pytest.mark.parametrize("place", ["reference", "load"])
def test_functions_follow_their_formula(function: Any, formula: Any, place: str) -> None:
    time, values = signal(place, **{place: function})
    np.testing.assert_allclose(values, formula(time), rtol=0, atol=1e-12)


def test_jerk_limited_move_keeps_its_limits() -> None:
    move = wd.JerkLimited(-3.0, start=0.2, speed=2.0, acceleration=8.0, jerk=60.0, initial=1.0)
    time, values = signal("reference", reference=move)
    speed, acceleration, jerk = (np.diff(values, n) / PERIOD**n for n in (1, 2, 3))
    assert values[0] == 1.0
    assert values[-1] == pytest.approx(-2.0, abs=1e-12)
    assert np.abs(speed).max() == pytest.approx(2.0, rel=1e-6)
    assert np.abs(acceleration).max() == pytest.approx(8.0, rel=1e-6)
    assert np.abs(jerk).max() <= 60.0 * (1.0 + 1e-6)
    # Distance / speed + speed / acceleration + acceleration / jerk: all limits are reached.
    assert time[np.flatnonzero(values > -2.0 + 1e-9)[-1]] == pytest.approx(0.2 + 1.5 + 0.25 + 8.0 / 60.0, abs=0.02)


def test_numbers_of_functions_may_be_spread() -> None:
    study = wd.Study(loop_of(wd.Step(wd.uniform(1.0, 2.0), at=wd.uniform(1.0, 2.0))), [wd.peak("error") <= 9.0])
    replay = study.replay(5)
    amplitude, at = replay.parameters["reference.amplitude"], replay.parameters["reference.at"]
    assert np.array_equal(replay["reference"], np.where(replay.time >= at, amplitude, 0.0))


def test_gust_has_its_standard_deviation_and_correlation_time() -> None:
    # 200 trials of 4 s with a correlation time of 0.2 s: about 200 * 4 / (2 * 0.2) = 2000 independent values;
    # the standard error of the deviation is about 1/sqrt(2 * 2000) = 1.6 %; bounds at four of them.
    gust = wd.Gust(intensity=3.0, correlation_time=0.2)
    study = wd.Study(loop_of(load=gust), [wd.peak("error") <= 1e9], seed=3)
    values = np.array([study.replay(trial)["load"] for trial in range(200)])
    assert values.std() == pytest.approx(3.0, rel=0.07)
    assert values[:, 0].std() == pytest.approx(3.0, rel=0.25)
    lag = 20
    correlation = np.mean(values[:, lag:] * values[:, :-lag]) / np.mean(values**2)
    assert correlation == pytest.approx(math.exp(-lag * PERIOD / 0.2), abs=0.1)


def test_white_noise_has_its_density() -> None:
    values = signal("load", load=wd.WhiteNoise(density=0.04), duration=100.0)[1]
    # Variance density / sample period = 4; 10 000 independent values: standard error of the variance 1.4 %.
    assert values.var() == pytest.approx(4.0, rel=0.06)
    assert np.mean(values[1:] * values[:-1]) == pytest.approx(0.0, abs=0.16)


def test_noises_of_two_places_and_trials_differ() -> None:
    loop = wd.Loop(
        plant=wd.StateSpace([[-1.0]], [1.0], [1.0], e=[[1.0, 1.0]]),
        controller=wd.OutputADRC(1, b0=1.0, controller_bandwidth=2.0, observer_bandwidth=10.0),
        sample_period=PERIOD,
        duration=10.0,
        reference=0.0,
        disturbances={"load_1": wd.WhiteNoise(1.0), "load_2": wd.WhiteNoise(1.0)},
        sensor=wd.Sensor(noise=10.0),
    )
    study = wd.Study(loop, [wd.peak("error") <= 1e9])
    one, other = study.replay(0), study.replay(1)
    noise = one["measured"] - one["output"]
    for a, b in ((one["load_1"], one["load_2"]), (one["load_1"], noise), (one["load_1"], other["load_1"])):
        assert abs(np.corrcoef(a, b)[0, 1]) < 4.0 / math.sqrt(len(a))


def test_a_table_whose_times_fall_says_which() -> None:
    with pytest.raises(wd.DescriptionError) as caught:
        wd.Table([0.0, 2.0, 1.0], [0.0, 1.0, 2.0])
    assert str(caught.value) == (
        "Table.times[2]: found 1.0; expected at least 2, that of times[1]. "
        "Times rise from each to the next; two equal ones make a jump."
    )
    with pytest.raises(wd.DescriptionError, match=r"Table\.times\[1\]"):
        wd.Table([wd.uniform(0.0, 2.0), 1.0], [0.0, 1.0])

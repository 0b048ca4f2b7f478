"""Measures against NumPy on the replayed signals, and requirements as comparisons."""

from __future__ import annotations

import functools
import math
from collections.abc import Callable
from typing import Any

import numpy as np
import pytest

import windage as wd

PERIOD = 0.01
Values = np.ndarray


@functools.cache
def loop() -> wd.Loop:
    return wd.Loop(
        plant=wd.SecondOrder(gain=wd.uniform(1.5, 2.5), time_constant=0.4, damping=0.3),
        # An observer that is not told of the limits winds up and overshoots.
        controller=wd.OutputADRC(
            2, b0=12.5, controller_bandwidth=6.0, observer_bandwidth=25.0, observer_input="commanded"
        ),
        sample_period=PERIOD,
        duration=4.0,
        reference=wd.Step(1.0, at=0.0),
        sensor=wd.Sensor(noise=1e-3),
        actuator=wd.Actuator(limits=(-0.8, 0.8), delay=0.015),
        disturbances={"load": wd.Step(0.1, at=2.0)},
    )


def both(measure: wd.Measure) -> tuple[float, wd.Replay]:
    """The measure of a trial of a run, and the replay of that trial."""
    study = wd.Study(loop(), measures=[measure], seed=4)
    trial = 2
    outcome, replay = study.run(trial + 1, progress=False), study.replay(trial)
    value = outcome.measures[measure.label][trial]
    assert value == replay.measures[measure.label]
    return float(value), replay


def trapezium(x: Values) -> float:
    return float(PERIOD * (x.sum() - 0.5 * (x[0] + x[-1])))


WINDOW: dict[str, float] = {"after": 0.5, "before": 3.0}
INSIDE = slice(50, 301)

REDUCERS: list[tuple[Callable[..., wd.Measure], Callable[[Values], float]]] = [
    (wd.peak, lambda x: np.abs(x).max()),
    (wd.minimum, np.min),
    (wd.maximum, np.max),
    (wd.mean, np.mean),
    (wd.rms, lambda x: math.sqrt(np.mean(x**2))),
    (wd.standard_deviation, np.std),
    (wd.final, lambda x: x[-1]),
    (wd.integral_absolute, lambda x: trapezium(np.abs(x))),
    (wd.integral_square, lambda x: trapezium(x**2)),
    (wd.integral_time_absolute, lambda x: trapezium(PERIOD * np.arange(len(x)) * np.abs(x))),
    (wd.total_variation, lambda x: np.abs(np.diff(x)).sum()),
    (wd.rms_change, lambda x: math.sqrt(np.mean(np.diff(x) ** 2))),
]


@pytest.mark.parametrize(("make", "formula"), REDUCERS, ids=lambda f: getattr(f, "__name__", "formula"))
@pytest.mark.parametrize("signal", ["command", "output"])
def test_reducers_match_numpy(make: Any, formula: Any, signal: str) -> None:
    value, replay = both(make(signal, **WINDOW))
    assert value == pytest.approx(formula(replay[signal][INSIDE]), rel=1e-11)
    whole, replay = both(make(signal))
    assert whole == pytest.approx(formula(replay[signal]), rel=1e-11)


@pytest.mark.parametrize(
    ("make", "formula"),
    [
        (wd.iae, lambda e: trapezium(np.abs(e))),
        (wd.ise, lambda e: trapezium(e**2)),
        (wd.itae, lambda e: trapezium(PERIOD * np.arange(len(e)) * np.abs(e))),
    ],
)
def test_classical_integrals_are_of_the_error(make: Any, formula: Any) -> None:
    value, replay = both(make(**WINDOW))
    assert value == pytest.approx(formula(replay["error"][INSIDE]), rel=1e-11)


def test_times_outside_and_in_saturation() -> None:
    value, replay = both(wd.time_outside("output", 0.9, 1.1))
    outside = (replay["output"][:-1] < 0.9) | (replay["output"][:-1] > 1.1)
    assert value == pytest.approx(PERIOD * outside.sum())
    value, replay = both(wd.time_in_saturation())
    assert value == pytest.approx(PERIOD * (np.abs(replay["command"][:-1]) >= 0.8).sum())
    assert value > 0.0


def test_response_measures_follow_their_definitions() -> None:
    value, replay = both(wd.overshoot(before=2.0))
    y, t = replay["output"][:201], replay.time[:201]
    assert value == pytest.approx(y.max() - 1.0, rel=1e-12)
    assert both(wd.undershoot(before=2.0))[0] == pytest.approx(max(0.0, -y.min()), abs=1e-12)

    def crossing(level: float) -> float:
        i = int(np.argmax(y >= level))
        return float(np.interp(level, y[i - 1 : i + 1], t[i - 1 : i + 1]))

    assert both(wd.rise_time(before=2.0))[0] == pytest.approx(crossing(0.9) - crossing(0.1), rel=1e-9)
    last = int(np.flatnonzero(np.abs(y - 1.0) > 0.02)[-1])
    ends = np.abs(y[last : last + 2] - 1.0)
    settled = float(t[last] + PERIOD * (ends[0] - 0.02) / (ends[0] - ends[1]))
    assert both(wd.settling_time(before=2.0))[0] == pytest.approx(settled, rel=1e-9)
    assert both(wd.settling_time(tolerance=0.02, before=2.0))[0] == pytest.approx(settled, rel=1e-9)
    assert both(wd.settling_time(tolerance=1e-9))[0] == math.inf


def test_measures_read_as_words() -> None:
    requirements = [
        wd.peak("error", after=5) <= 5e-3,
        wd.rms("torque", before=2.0) >= wd.uniform(1.0, 2.0),
        wd.settling_time(band=0.05) <= 1,
        wd.settling_time(tolerance=0.1) <= 1,
        wd.time_outside("output", -1, 1) <= 0,
        wd.time_in_saturation(after=1) <= 0.5,
        wd.iae() <= 2,
        (wd.overshoot() <= 0.1).named("overshoot"),
    ]
    assert [requirement.label for requirement in requirements] == [
        "peak of error after 5 s <= 0.005",
        "rms of torque before 2 s >= uniform(low=1.0, high=2.0)",
        "settling time (band 0.05) of output <= 1",
        "settling time (tolerance 0.1) of error <= 1",
        "time outside (low -1, high 1) of output <= 0",
        "time in saturation after 1 s <= 0.5",
        "IAE of error <= 2",
        "overshoot",
    ]


@pytest.mark.parametrize("limit", [5.0, 5, np.float64(5.0), np.int64(5)])
def test_comparisons_make_requirements_either_way_round(limit: Any) -> None:
    measure = wd.peak("error")
    upper, lower = measure <= limit, measure >= limit
    assert (upper.at_most, upper.at_least) == (5.0, None)
    assert (lower.at_most, lower.at_least) == (None, 5.0)
    assert (limit >= measure) == upper
    assert (limit <= measure) == lower
    assert upper.limit == lower.limit == 5.0


@pytest.mark.parametrize(
    "compare",
    [
        lambda m: m < 1.0,
        lambda m: m > 1.0,
        lambda m: m == 1.0,
        lambda m: m != 1.0,
        lambda m: 0.5 <= m <= 1.0,
        lambda m: (m <= 1.0) and (m >= 0.5),
        lambda m: not (m <= 1.0),
        lambda m: bool(m),
    ],
)
def test_comparisons_that_mean_something_else_are_refused(compare: Any) -> None:
    with pytest.raises(wd.DescriptionError, match=r"^requirement: .*(measure <= limit|two requirements)"):
        compare(wd.peak("error"))


def test_measures_are_values() -> None:
    assert wd.peak("error", after=1) == wd.peak("error", after=1.0)
    assert wd.peak("error") != wd.peak("output")
    assert len({wd.rms("error"), wd.rms("error"), wd.rms("output")}) == 2


def test_slack_is_the_distance_to_the_limit_of_the_trial() -> None:
    low, high = wd.uniform(0.0, 0.3), wd.uniform(0.05, 0.15)
    study = wd.Study(loop(), [wd.overshoot() <= high, wd.overshoot() >= low, wd.overshoot() <= 0.1], seed=4)
    outcome = study.run(64, progress=False)
    value = outcome.measures["overshoot of output"]
    limits = outcome.parameters
    assert np.array_equal(outcome.slack[:, 0], limits["requirements[0].limit"] - value)
    assert np.array_equal(outcome.slack[:, 1], value - limits["requirements[1].limit"])
    assert np.array_equal(outcome.slack[:, 2], 0.1 - value)
    assert np.array_equal(outcome.met, outcome.slack >= 0.0)
    assert np.array_equal(outcome.failed(2), np.flatnonzero(value > 0.1))
    assert 0 < len(outcome.failed(2)) < 64


def test_a_measure_used_twice_is_computed_once() -> None:
    study = wd.Study(loop(), [wd.overshoot() <= 0.2, wd.overshoot() >= 0.0], measures=[wd.overshoot()])
    assert list(study.run(2, progress=False).measures) == ["overshoot of output"]


def test_arguments_of_measures_may_be_spread() -> None:
    start = wd.uniform(0.5, 1.5)
    study = wd.Study(loop(), measures=[wd.final("time", before=start), wd.final("time", before=start)])
    outcome = study.run(8, progress=False)
    names = ["measures[0].before", "measures[1].before"]
    for name, values in zip(names, outcome.measures.values(), strict=True):
        drawn = outcome.parameters[name]
        np.testing.assert_allclose(values, PERIOD * np.floor(drawn / PERIOD + 1e-6), atol=1e-12)
    assert not np.array_equal(*(outcome.parameters[name] for name in names))

"""Measures: response measures against exact values of standard systems, reducers against NumPy.

Terms: IEC 60050-351:2013, overshoot 351-45-38, settling time 351-45-37, step response time and rise time
351-45-36. The base of every fraction is the change from the initial to the final value.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray

import windage as wd
from windage._loader import engine

Values = NDArray[np.float64]

# Standard second-order step response, wn = 1 (computed, exact last crossing): damping ratio, overshoot in
# percent, 2 % and 5 % settling time, rise time from 10 to 90 %.
SECOND_ORDER = [
    (0.1, 72.9248, 38.38328, 28.96785, 1.10420),
    (0.2, 52.6621, 19.60190, 13.74444, 1.20343),
    (0.4, 25.3827, 8.40932, 7.60878, 1.46349),
    (0.5, 16.3034, 8.07635, 5.28909, 1.63757),
    (0.7, 4.5988, 5.97879, 2.89982, 2.12620),
    (0.707107, 4.3214, 5.96258, 2.92984, 2.14804),
    (0.8, 1.5165, 3.75584, 3.38535, 2.46749),
    (1.0, 0.0, 5.83392, 4.74386, 3.35791),
    (1.5, 0.0, 10.65469, 8.25581, 5.85828),
]
STEP = 2e-3


def step_response(damping: float, t: Values) -> Values:
    """The exact response of 1/(s^2 + 2 damping s + 1) to a unit step."""
    if damping == 1.0:
        return 1.0 - (1.0 + t) * np.exp(-t)
    if damping < 1.0:
        w = math.sqrt(1.0 - damping**2)
        return 1.0 - np.exp(-damping * t) * (np.cos(w * t) + damping / w * np.sin(w * t))
    root = math.sqrt(damping**2 - 1.0)
    slow, fast = damping - root, damping + root
    return 1.0 - (fast * np.exp(-slow * t) - slow * np.exp(-fast * t)) / (fast - slow)


def measured(
    kind: str, time: Values, values: Values, target: float = 1.0, period: float = STEP, **options: Any
) -> float:
    value: float = engine().evaluate_measure({"kind": kind, **options}, time, values, target, period)
    return value


@pytest.mark.parametrize(("start", "change"), [(0.0, 1.0), (3.0, -2.0), (-0.5, 40.0)])
@pytest.mark.parametrize(("damping", "overshoot", "two", "five", "rise"), SECOND_ORDER)
def test_second_order_response(
    damping: float, overshoot: float, two: float, five: float, rise: float, start: float, change: float
) -> None:
    time = STEP * np.arange(int(60.0 / STEP))
    y = start + change * step_response(damping, time)
    target = start + change
    # Half a unit of the last printed digit; what sampling leaves is below: STEP^2/8 of the curvature.
    assert abs(100.0 * measured("overshoot", time, y, target) - overshoot) < 0.6e-4
    assert abs(measured("settling_time", time, y, target, a=0.02) - two) < 0.6e-5 + 5e-6
    assert abs(measured("settling_time", time, y, target, a=0.05) - five) < 0.6e-5 + 5e-6
    assert abs(measured("rise_time", time, y, target, a=0.1, b=0.9) - rise) < 0.6e-5
    assert measured("undershoot", time, y, target) == 0.0
    exact = 100.0 * math.exp(-math.pi * damping / math.sqrt(1.0 - damping**2)) if damping < 1.0 else 0.0
    assert abs(100.0 * measured("overshoot", time, y, target) - exact) < 1e-4


@pytest.mark.parametrize("damping", [0.1, 0.4, 0.7, 0.8])
def test_rise_time_to_the_first_crossing_of_the_final_value(damping: float) -> None:
    """tr0-100 = (pi - acos z)/sqrt(1 - z^2) (computed with the table above)."""
    time = STEP * np.arange(int(20.0 / STEP))
    expected = (math.pi - math.acos(damping)) / math.sqrt(1.0 - damping**2)
    assert abs(measured("rise_time", time, step_response(damping, time), a=0.0, b=1.0) - expected) < 1e-6


@pytest.mark.parametrize("constant", [0.3, 2.0])
def test_first_order_response(constant: float) -> None:
    """Settling 3.912023 T (2 %) and 2.995732 T (5 %), rise ln 9 T = 2.197225 T (computed)."""
    period = STEP * constant
    time = period * np.arange(5000)
    y = -np.expm1(-time / constant)
    assert abs(measured("settling_time", time, y, 1.0, period, a=0.02) / constant - 3.912023) < 1e-6
    assert abs(measured("settling_time", time, y, 1.0, period, a=0.05) / constant - 2.995732) < 1e-6
    assert abs(measured("rise_time", time, y, 1.0, period, a=0.1, b=0.9) / constant - math.log(9.0)) < 1e-6
    assert measured("overshoot", time, y, 1.0, period) == 0.0


def test_undershoot_of_a_non_minimum_phase_response() -> None:
    """(1 - s)/(s + 1)^2 goes to 1 - 2 exp(-1/2) = -0.213061 at t = 1/2 first (derived)."""
    time = STEP * np.arange(int(20.0 / STEP))
    y = 1.0 - (1.0 + 2.0 * time) * np.exp(-time)
    assert abs(measured("undershoot", time, y) - (2.0 * math.exp(-0.5) - 1.0)) < 1e-6
    assert abs(measured("undershoot", time, -5.0 * y, -5.0) - (2.0 * math.exp(-0.5) - 1.0)) < 1e-6


def test_response_measures_count_from_the_start_of_their_window() -> None:
    """A second step at t = 20 from 1 to 3; the window starts there."""
    time = STEP * np.arange(int(50.0 / STEP))
    y = step_response(0.5, time) + 2.0 * np.where(time >= 20.0, step_response(0.5, np.maximum(time - 20.0, 0.0)), 0.0)
    options = {"after": 20.0, "before": 45.0}
    assert abs(100.0 * measured("overshoot", time, y, 3.0, **options) - 16.3034) < 2e-2  # the first step rings on
    assert abs(measured("settling_time", time, y, 3.0, a=0.02, **options) - 8.07635) < 2e-3
    assert abs(measured("rise_time", time, y, 3.0, a=0.1, b=0.9, **options) - 1.63757) < 1e-3


def test_settling_is_infinite_outside_the_band_and_zero_inside_it() -> None:
    time = STEP * np.arange(1000)
    assert measured("settling_time", time, np.full(1000, 0.5), a=0.02) == math.inf
    assert measured("settling_time", time, np.ones(1000), a=0.02) == 0.0
    assert measured("settling_time_absolute", time, np.full(1000, -0.1), a=0.1) == 0.0
    assert measured("settling_time_absolute", time, np.full(1000, -0.1), a=0.09) == math.inf
    assert measured("rise_time", time, np.full(1000, 0.5) + time * 1e-6, a=0.1, b=0.9) == math.inf
    assert measured("overshoot", time, np.ones(1000)) == math.inf  # no change to compare with


def test_absolute_settling_time_of_an_exponential() -> None:
    time = STEP * np.arange(5000)
    y = -3.0 * np.exp(-time / 0.8)
    assert abs(measured("settling_time_absolute", time, y, a=0.05) - 0.8 * math.log(60.0)) < 1e-6


def outside(x: Values, t: Values) -> float:  # noqa: ARG001
    return 0.01 * float(np.sum((x[:-1] < -0.8) | (x[:-1] > 0.5)))


def at_limits(x: Values, t: Values) -> float:  # noqa: ARG001
    return 0.01 * float(np.sum((x[:-1] <= -0.8) | (x[:-1] >= 0.5)))


REDUCERS: dict[str, Callable[[Values, Values], float]] = {
    "peak": lambda x, t: np.max(np.abs(x)),  # noqa: ARG005
    "minimum": lambda x, t: np.min(x),  # noqa: ARG005
    "maximum": lambda x, t: np.max(x),  # noqa: ARG005
    "mean": lambda x, t: np.mean(x),  # noqa: ARG005
    "rms": lambda x, t: np.sqrt(np.mean(x**2)),  # noqa: ARG005
    "standard_deviation": lambda x, t: np.std(x),  # noqa: ARG005
    "final_value": lambda x, t: x[-1],  # noqa: ARG005
    "integral_absolute": lambda x, t: np.trapezoid(np.abs(x), t),
    "integral_square": lambda x, t: np.trapezoid(x**2, t),
    "integral_time_absolute": lambda x, t: np.trapezoid(t * np.abs(x), t),
    "total_variation": lambda x, t: np.sum(np.abs(np.diff(x))),  # noqa: ARG005
    "rms_change": lambda x, t: np.sqrt(np.mean(np.diff(x) ** 2)),  # noqa: ARG005
    "time_outside": outside,
    "time_at_limits": at_limits,
}
WINDOWS = [(0.0, math.inf), (1.0, math.inf), (0.0, 2.5), (1.23, 3.21), (0.005, 0.034), (2.004, 2.993)]


@pytest.mark.parametrize(("after", "before"), WINDOWS)
@pytest.mark.parametrize("kind", REDUCERS)
def test_reducer_equals_its_numpy_formula(kind: str, after: float, before: float) -> None:
    rng = np.random.default_rng(7)
    time = 0.01 * np.arange(400)
    for offset in (0.0, 100.0):
        x = offset + np.clip(0.5 * rng.normal(size=400), -0.8, 0.5)
        inside = (time >= after - 1e-9) & (time <= before + 1e-9)
        expected = REDUCERS[kind](x[inside], time[inside] - after)
        found = measured(kind, time, x, 0.0, 0.01, after=after, before=before, a=-0.8, b=0.5)
        assert found == pytest.approx(expected, rel=2e-12, abs=1e-14)
    assert np.any(x == 100.5)  # the limits were touched


@pytest.mark.parametrize("kind", REDUCERS)
def test_window_without_a_sample_leaves_the_measure_undefined(kind: str) -> None:
    time = 0.01 * np.arange(100)
    assert math.isnan(measured(kind, time, np.ones(100), 0.0, 0.01, after=0.503, before=0.507, a=-1.0, b=1.0))


@pytest.mark.parametrize("kind", [*REDUCERS, "overshoot", "undershoot", "rise_time", "settling_time"])
@pytest.mark.parametrize("where", [0, 50, 99])
def test_an_undefined_sample_leaves_no_measure_defined(kind: str, where: int) -> None:
    """A signal that is undefined at one sample must not pass for one that keeps its limits."""
    time = 0.01 * np.arange(100)
    x = -np.expm1(-5.0 * time)
    x[where] = math.nan
    value = measured(kind, time, x, 1.0, 0.01, a=0.1, b=0.9)
    is_of_another_sample = kind == "final_value" and where < 99
    assert is_of_another_sample or math.isnan(value) or value == math.inf


def test_requirement_on_an_undefined_signal_is_missed() -> None:
    plant = wd.Plant(states={"h": 1.0}, equations={"h": "u - h"}, input="u", output="h")
    loop = wd.Loop(
        plant=plant,
        controller=wd.OutputADRC(order=1, controller_bandwidth=2.0, observer_bandwidth=10.0, b0=1.0),
        sample_period=0.01,
        duration=3.0,
        reference=-1.0,
        signals={"flow": "sqrt(h)"},
    )
    outcome = wd.Study(loop, requirements=[wd.peak("flow", after=2.0) <= 1.0]).run(3, progress=False)
    assert not np.any(outcome.passed)


def test_measures_of_a_study_are_those_of_the_replayed_signals() -> None:
    """Every kind, through a loop: the streaming measures against the NumPy formulas over the replay."""
    loop = wd.Loop(
        plant=wd.SecondOrder(wd.uniform(1.0, 2.0), 0.3, 0.5),
        controller=wd.OutputADRC(order=2, controller_bandwidth=6.0, observer_bandwidth=40.0, b0=15.0),
        sample_period=0.01,
        duration=4.0,
        reference=wd.Step(1.0, at=0.5),
        sensor=wd.Sensor(noise=0.002),
        actuator=wd.Actuator(limits=(-0.8, 0.5)),
        disturbances={"load": wd.Gust(0.2, 0.5)},
    )
    names = {"final_value": "final", "time_at_limits": "time_in_saturation"}
    functions = {k: getattr(wd, names.get(k, k)) for k in REDUCERS}
    window = {"after": 1.0, "before": 3.0}
    measures = [
        f("command", -0.8, 0.5, **window) if k == "time_outside"
        else f(**window) if k == "time_at_limits" else f("command", **window)
        for k, f in functions.items()
    ]  # fmt: skip
    study = wd.Study(loop, measures=measures, seed=9)
    outcome = study.run(20, progress=False)
    for trial in (0, 7, 19):
        replay = study.replay(trial)
        inside = (replay.time > 0.999) & (replay.time < 3.001)
        for (kind, formula), values in zip(REDUCERS.items(), outcome.measures.values(), strict=True):
            expected = formula(replay["command"][inside], replay.time[inside] - 1.0)
            assert values[trial] == pytest.approx(expected, rel=1e-12, abs=1e-13), kind

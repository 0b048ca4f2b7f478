"""Disturbances of linear plants are exact between samples too, wherever they jump or bend.

The truth is a closed form (a first-order lag under a sine, a step or a pulse), or DOP853 (Hairer, Norsett, Wanner 1993,
Solving Ordinary Differential Equations I, section II.5, as in SciPy) at rtol 1e-13, restarted at every break.
"""

from __future__ import annotations

import cmath
import itertools
import math
import sys
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from scipy.integrate import solve_ivp

import windage as wd

sys.path.insert(0, str(Path(__file__).parent))
from linear_reference import uncontrolled
from reference_loop import Values
from test_breaks_of_disturbances import COURSES, Course
from test_integrator_order import idle

PERIOD, INTERVALS = 0.5, 8
END = PERIOD * INTERVALS
DELAY = 0.37 * PERIOD

MODELS: dict[str, tuple[list[list[float]], list[float], list[float]]] = {
    "one lag": ([[-2.0]], [1.5], [1.5]),
    "two": ([[0.0, 1.0], [-9.0, -0.6]], [0.0, 2.0], [0.3, 1.0]),
    "three": ([[0.0, 1.0, 0.0], [0.0, 0.0, 1.0], [0.0, -40.0, -4.0]], [0.0, 0.0, 5.0], [0.0, 0.5, 1.0]),
    "six": (
        [
            [-1.0, 4.0, 0.0, 0.0, 0.0, 0.0],
            [-4.0, -1.0, 2.0, 0.0, 0.0, 0.0],
            [0.0, 0.0, -30.0, 3.0, 0.0, 0.0],
            [0.0, 0.0, 0.0, -0.2, 1.0, 0.0],
            [0.0, 0.0, 0.0, 0.0, -80.0, 6.0],
            [0.0, 1.0, 0.0, 0.0, 0.0, -5.0],
        ],
        [0.0, 0.0, 1.0, 0.0, 0.0, 3.0],
        [0.0, 0.0, 0.0, 1.0, 8.0, 0.0],
    ),
}


def states_of(model: str, load: Any, delay: float, **actuator: float) -> Values:
    a, b, e = MODELS[model]
    plant = wd.StateSpace(
        a, b=b, c=[1.0] + [0.0] * (len(a) - 1), e=[[x] for x in e], initial=[0.3] + [0.0] * (len(a) - 1)
    )
    loop = wd.Loop(
        plant=plant, controller=idle(), sample_period=PERIOD, duration=END, reference=wd.Sine(0.8, period=3.1),
        actuator=wd.Actuator(delay=delay, **actuator), disturbances={"load": load},
    )  # fmt: skip
    measures = [wd.final(name) for name in plant.state_names]
    return np.array(list(wd.Study(loop, measures=measures).replay(0).measures.values()))


def truth(model: str, course: Course, delay: float, lag: float) -> Values:
    a, b, e = (np.array(x) for x in MODELS[model])
    omega = 2.0 * math.pi / 3.1
    changes = [k * PERIOD + delay for k in range(INTERVALS)]
    corners = sorted({0.0, END, *(t for t in (*changes, *course.breaks) if 0.0 < t < END)})
    x = np.array([0.3] + [0.0] * len(a))
    for start, stop in itertools.pairwise(corners):
        inside = 0.5 * (start + stop)
        sent = math.floor((inside - delay) / PERIOD)
        u = 0.8 * omega * math.cos(omega * sent * PERIOD) if sent >= 0 else 0.0

        def rate(t: float, z: Values, u: float = u, inside: float = inside) -> Values:
            acting = z[-1] if lag else u
            moved = a @ z[:-1] + b * acting + e * course.value(t, inside)
            return np.append(moved, (u - z[-1]) / lag if lag else 0.0)

        x = solve_ivp(rate, (start, stop), x, method="DOP853", rtol=1e-13, atol=1e-15).y[:, -1]
    return x[:-1]


@pytest.mark.parametrize("course", COURSES)
@pytest.mark.parametrize("model", MODELS)
@pytest.mark.parametrize(("delay", "lag"), [(0.0, 0.0), (DELAY, 0.0), (DELAY, 0.2)])
def test_every_function_of_time_is_exact_for_every_order(model: str, course: str, delay: float, lag: float) -> None:
    found = states_of(model, COURSES[course].load, delay, time_constant=lag)
    expected = truth(model, COURSES[course], delay, lag)
    assert np.max(np.abs(found - expected)) < 5e-12 * max(1.0, np.max(np.abs(expected)))


@pytest.mark.parametrize("ratio", [1e-3, 0.05, 1.0, 1e3])
@pytest.mark.parametrize("angle", [1e-9, 1e-3, 1.5, 2.0 * math.pi, 40.0])
def test_a_sine_of_any_frequency_through_a_lag_of_any_speed(ratio: float, angle: float) -> None:
    """x' = (sin(omega t) - x) / T from 0: x = Im(g (exp(i omega t) - exp(-t / T))), g = 1 / (1 + i omega T)."""
    omega, lag = angle / 0.01, ratio * 0.01
    replay = uncontrolled(wd.FirstOrder(1.0, lag), 0.01, 200, wd.Sine(1.0, period=2.0 * math.pi / omega))
    gain = 1.0 / (1.0 + 1j * omega * lag)
    expected = np.array([(gain * (cmath.exp(1j * omega * t) - math.exp(-t / lag))).imag for t in replay.time])
    rounding = 4e-16 * omega * replay.time[-1] * abs(gain)  # of the angle
    assert np.max(np.abs(replay["output"] - expected)) < 2e-12 * np.max(np.abs(expected)) + rounding


def instants(trials: int) -> wd.Outcome:
    """Pulses that start anywhere and may lie inside one interval, on a lag with a drawn delay of the command."""
    loop = wd.Loop(
        plant=wd.FirstOrder(2.0, wd.uniform(0.002, 0.5)),
        controller=idle(),
        sample_period=0.01,
        duration=0.4,
        reference=0.0,
        actuator=wd.Actuator(delay=wd.uniform(0.0, 0.02)),
        disturbances={"load": wd.Pulse(3.0, start=wd.uniform(0.1, 0.2), width=wd.uniform(1e-4, 0.05))},
    )
    return wd.Study(loop, measures=[wd.final("output"), wd.iae()], seed=7).run(trials, progress=False)


def test_drawn_instants_are_exact_in_every_trial() -> None:
    outcome = instants(300)
    lag, start, width = (
        next(v for k, v in outcome.parameters.items() if k.endswith(name))
        for name in ("time_constant", "start", "width")
    )
    expected = 6.0 * (np.exp(-(0.4 - start - width) / lag) - np.exp(-(0.4 - start) / lag))
    found = outcome.measures["final of output"]
    np.testing.assert_allclose(found, expected, rtol=1e-10, atol=1e-15)


def test_a_trial_has_the_same_digits_beside_trials_that_break_elsewhere() -> None:
    many = instants(130)
    for trial in (0, 1, 17, 64, 129):
        alone = many.study.replay(trial).measures
        assert {name: values[trial] for name, values in many.measures.items()} == dict(alone)


def test_a_break_at_a_sample_instant_is_that_of_the_sample() -> None:
    exact = 1.0 - math.exp(-0.5 / 0.2)
    for off in (0.0, 1e-13, -1e-13):
        replay = uncontrolled(wd.FirstOrder(1.0, 0.2), 0.01, 100, wd.Step(1.0, at=0.5 + off))
        assert abs(replay["output"][-1] - exact) < 1e-12

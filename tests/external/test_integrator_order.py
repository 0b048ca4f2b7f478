"""The order of each integrator by slope, and the Arenstorf orbit.

Orders: explicit Euler 1, the classical Runge-Kutta method 4, Cash & Karp 1990 (ACM TOMS 16(3) 201-222) 5. The
order is the slope of the logarithm of the error over that of the step (Hairer, Norsett, Wanner 1993, Solving
Ordinary Differential Equations I, section II.3); the error is taken against DOP853 at rtol 1e-13.
"""

from __future__ import annotations

import copy
import math
import sys
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from scipy.integrate import solve_ivp

import windage as wd
from windage._loader import engine

sys.path.insert(0, str(Path(__file__).parent))
from reference_loop import Values

PERIOD, INTERVALS = 1.0, 4
ORDERS = {
    "euler": (1, (128, 256, 512, 1024)),
    "rk4": (4, (32, 64, 128, 256)),
    "cash_karp5": (5, (32, 64, 128)),
}


def idle() -> wd.OutputADRC:
    """Return a controller whose command is the derivative of the reference and nothing else."""
    return wd.OutputADRC(order=1, controller_gains=[0.0], observer_gains=[0.0, 0.0], b0=1.0, cancel_disturbance=False)


def pendulum(integrator: str, steps: int, delay: float, load: Any) -> wd.Study:
    """A nonlinear plant under a command that changes at each sample and acts after a delay."""
    plant = wd.Plant(
        states={"x": 0.3, "v": 0.0},
        equations={"x": "v", "v": "u + w - 4*sin(2*x) - 0.3*v*(1 + 0.5*cos(t))"},
        input="u",
        output="x",
        disturbances=["w"],
    )
    loop = wd.Loop(
        plant=plant,
        controller=idle(),
        sample_period=PERIOD,
        duration=INTERVALS * PERIOD,
        reference=wd.Sine(0.8, period=3.1),
        actuator=wd.Actuator(delay=delay),
        disturbances={"w": load},
        integrator=integrator,
        steps_per_sample=steps,
    )
    return wd.Study(loop, measures=[wd.final("x"), wd.final("v")])


def exact(delay: float, amplitude: float) -> Values:
    """The same motion by DOP853, restarted wherever the command changes."""
    omega = 2.0 * math.pi / 3.1

    def command(k: int) -> float:
        return 0.8 * omega * math.cos(omega * k * PERIOD) if k >= 0 else 0.0

    whole = math.floor(delay / PERIOD)
    phi = delay - whole * PERIOD
    x = np.array([0.3, 0.0])
    for k in range(INTERVALS):
        for start, stop, u in ((0.0, phi, command(k - whole - 1)), (phi, PERIOD, command(k - whole))):
            if stop > start:

                def rate(t: float, z: Values, u: float = u) -> list[float]:
                    w = amplitude * math.sin(2.0 * math.pi * t / 0.7)
                    return [z[1], u + w - 4.0 * math.sin(2.0 * z[0]) - 0.3 * z[1] * (1.0 + 0.5 * math.cos(t))]

                span = (k * PERIOD + start, k * PERIOD + stop)
                x = solve_ivp(rate, span, x, method="DOP853", rtol=1e-13, atol=1e-15).y[:, -1]
    return x


def finals(study: wd.Study, **integration: Any) -> Values:
    """Return the measures of trial 0, with the integration of the engine's loop changed."""
    described = copy.deepcopy(study._run_description.study)
    described["loop"].update(integration)
    measures: Values = engine().Campaign(described).run(0, 1, 1)[1][:, 0]
    return measures


@pytest.mark.parametrize("load", ["none", "sine"])
@pytest.mark.parametrize("delay", [0.0, 0.5 * PERIOD, 1.5 * PERIOD])
@pytest.mark.parametrize("integrator", ORDERS)
def test_error_falls_with_the_order_of_the_method(integrator: str, delay: float, load: str) -> None:
    order, counts = ORDERS[integrator]
    amplitude = 0.5 if load == "sine" else 0.0
    truth = exact(delay, amplitude)
    errors = []
    for steps in counts:
        study = pendulum(integrator, steps, delay, wd.Sine(amplitude, period=0.7))
        errors.append(np.max(np.abs(finals(study) - truth)))
    # A split interval has one step more than asked for.
    lengths = PERIOD / (np.array(counts) + (1.0 if delay else 0.0))
    assert errors[-1] > 1e-13, "the error must be well above rounding for a slope to mean something"
    slope = np.polyfit(np.log(lengths), np.log(errors), 1)[0]
    assert abs(slope - order) < 0.15, f"errors {errors}, slope {slope:.3f}"


@pytest.mark.parametrize("delay", [0.0, 0.37 * PERIOD])
def test_reference_integrator_meets_dop853(delay: float) -> None:
    study = pendulum("rk4", 1, delay, wd.Sine(0.5, period=0.7))
    truth = exact(delay, 0.5)
    loose = finals(study, integrator="reference", reference_tolerance=1e-6)
    tight = finals(study, integrator="reference", reference_tolerance=1e-12)
    assert np.max(np.abs(tight - truth)) < 1e-11
    assert np.max(np.abs(tight - truth)) < np.max(np.abs(loose - truth)) < 1e-4


def test_lag_of_the_actuator_keeps_the_order_of_the_method() -> None:
    """The lag is integrated together with the plant; here with a closed form."""
    plant = wd.Plant(states={"x": 0.0}, equations={"x": "u"}, input="u", output="x")

    def error(steps: int) -> float:
        loop = wd.Loop(
            plant=plant, controller=idle(), sample_period=0.25, duration=1.0,
            reference=wd.Ramp(2.0), actuator=wd.Actuator(time_constant=0.2), integrator="rk4",
            steps_per_sample=steps,
        )  # fmt: skip
        # A constant command 2 through 1/(0.2 s + 1), integrated: 2 (t - 0.2 (1 - exp(-t/0.2))).
        closed_form = 2.0 * (1.0 - 0.2 * -math.expm1(-1.0 / 0.2))
        replay = wd.Study(loop, measures=[wd.final("x")]).replay(0)
        assert abs(replay["input"][-1] - 2.0 * -math.expm1(-1.0 / 0.2)) < 1e-3
        return abs(float(replay["x"][-1]) - closed_form)

    counts = (8, 16, 32, 64)
    slope = -np.polyfit(np.log(counts), np.log([error(n) for n in counts]), 1)[0]
    assert abs(slope - 4.0) < 0.15


@pytest.mark.parametrize("delay", [0.0, 3e-3])
@pytest.mark.parametrize("steps", [1, 2, 8])
@pytest.mark.parametrize("integrator", ORDERS)
def test_a_load_that_jumps_between_two_steps_costs_no_order(integrator: str, steps: int, delay: float) -> None:
    """x' = w is exact for any method, if no stage of the step before the jump sees what comes after it.

    Some of the instants are no exact multiples of the sample period in binary.
    """
    plant = wd.Plant(states={"x": 0.0}, equations={"x": "u + w"}, input="u", output="x", disturbances=["w"])
    for at in (0.29, 0.3, 0.57, 0.58):
        for load in (
            wd.Step(1.0, at=at),
            wd.Pulse(1.0, start=at, width=2.0),
            wd.Table([0.0, at], [0.0, 1.0], "hold"),
        ):
            loop = wd.Loop(
                plant=plant, controller=idle(), sample_period=0.01, duration=1.0, reference=0.0,
                actuator=wd.Actuator(delay=delay), disturbances={"w": load}, integrator=integrator,
                steps_per_sample=steps,
            )  # fmt: skip
            study = wd.Study(loop, measures=[wd.final("x")])
            assert abs(finals(study)[0] - (1.0 - at)) < 2e-14
            assert abs(finals(study, integrator="reference")[0] - (1.0 - at)) < 2e-14


# Arenstorf orbit: Hairer, Norsett, Wanner 1993, Solving Ordinary Differential Equations I, section II.0
# (transcribed second-hand): restricted three-body problem, closed after the period below.
ARENSTORF_PERIOD = 17.0652165601579625588917206249
ARENSTORF_START = np.array([0.994, 0.0, 0.0, -2.00158510637908252240537862224])


def arenstorf(samples: int, steps: int) -> wd.Study:
    plant = wd.Plant(
        states=dict(zip(("y1", "y2", "v1", "v2"), ARENSTORF_START.tolist(), strict=True)),
        parameters={"mu": 0.012277471},
        auxiliaries={
            "far": "(y1 + mu)**2 + y2**2",
            "near": "(y1 - (1 - mu))**2 + y2**2",
            "d1": "far*sqrt(far)",
            "d2": "near*sqrt(near)",
        },
        equations={
            "y1": "v1",
            "y2": "v2",
            "v1": "y1 + 2*v2 - (1 - mu)*(y1 + mu)/d1 - mu*(y1 - (1 - mu))/d2",
            "v2": "y2 - 2*v1 - (1 - mu)*y2/d1 - mu*y2/d2",
        },
        input="u",
        output="y1",
    )
    loop = wd.Loop(
        plant=plant, controller=idle(), sample_period=ARENSTORF_PERIOD / samples, duration=ARENSTORF_PERIOD,
        reference=0.0, integrator="cash_karp5", steps_per_sample=steps,
    )  # fmt: skip
    return wd.Study(loop, measures=[wd.final(name) for name in plant.state_names])


def test_arenstorf_orbit_closes() -> None:
    """At rtol 3e-14 DOP853 closes the positions to 4.1e-10 (computed)."""
    coarse = np.abs(finals(arenstorf(1000, 75)) - ARENSTORF_START)
    fine = np.abs(finals(arenstorf(1000, 150)) - ARENSTORF_START)
    assert np.max(fine[:2]) < 1.5e-9
    assert np.max(fine[2:]) < 2.5e-7
    assert np.all(fine < coarse / 16.0)  # the fifth order, near a close passage
    adaptive = finals(arenstorf(1000, 1), integrator="reference", reference_tolerance=1e-12)
    assert np.max(np.abs(adaptive - ARENSTORF_START)[:2]) < 1e-11

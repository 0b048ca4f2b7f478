"""Linear loops against an independent simulation by `scipy.linalg.expm`, every signal to 1e-12 of its size.

A linear plant under a held command and held disturbances moves by the matrix exponential exactly (Van Loan
1978, "Computing integrals involving the matrix exponential", IEEE TAC 23(3) 395-404), so both programs
compute the same numbers and differ by rounding only. The sampled controller is that of Herbst 2013,
Electronics 2(3) 246-279, doi 10.3390/electronics2030246, and of Madonski, Herbst, Stankovic 2023, doi
10.1007/s11768-023-00129-y.
"""

from __future__ import annotations

import math
import sys
from collections.abc import Callable, Sequence
from pathlib import Path
from typing import Any

import numpy as np
import pytest

import windage as wd

sys.path.insert(0, str(Path(__file__).parent))
from reference_loop import (
    Adrc,
    Linear,
    ReferenceLoop,
    Smooth,
    Values,
    assert_same_signals,
    controller_gains,
    observer_gains,
)

TOLERANCE = 1e-12
PERIOD, SAMPLES = 0.01, 301


def chain(order: int, gain: float) -> Linear:
    b = np.zeros(order)
    b[-1] = 1.0
    return Linear(np.eye(order, k=1), gain * b, b[:, None], np.eye(order)[0])


def second_order(gain: float, time_constant: float, damping: float) -> Linear:
    a = np.array([[0.0, 1.0], [-1.0 / time_constant**2, -2.0 * damping / time_constant]])
    b = np.array([0.0, gain / time_constant**2])
    return Linear(a, b, b[:, None], np.array([1.0, 0.0]))


def companion(numerator: list[float], denominator: list[float]) -> Linear:
    """Controllable canonical form, coefficients in descending powers."""
    d = np.array(denominator) / denominator[0]
    n = len(d) - 1
    a = np.eye(n, k=1)
    a[-1] = -d[:0:-1]
    b = np.eye(n)[-1]
    c = np.zeros(n)
    c[: len(numerator)] = np.array(numerator[::-1]) / denominator[0]
    return Linear(a, b, b[:, None], c)


def both(
    plant: wd.Plant | Any,
    model: Linear,
    order: int,
    *,
    form: str = "output",
    bandwidths: tuple[float, float] = (4.0, 20.0),
    b0: float = 1.0,
    initial: list[float] | None = None,
    reference: tuple[Any, list[Callable[[float], float]]] | None = None,
    loads: dict[str, tuple[Any, Callable[[float], float]]] | None = None,
    controller: dict[str, Any] | None = None,
    sensor: dict[str, Any] | None = None,
    actuator: dict[str, Any] | None = None,
    dead_time: float = 0.0,
    samples: int = SAMPLES,
) -> tuple[dict[str, Values], dict[str, Values]]:
    """Simulate one loop by the engine and by the reference; return the signals of both."""
    controller, sensor, actuator = controller or {}, sensor or {}, actuator or {}
    shape, derivatives = reference or (wd.Step(1.0), [lambda t: 1.0 if t >= 0.0 else 0.0])
    loads = loads or {name: (wd.Step(0.7, at=1.0), step_at_one) for name in plant.disturbance_names}
    adrc = wd.OutputADRC if form == "output" else wd.ErrorADRC
    wc, wo = bandwidths
    loop = wd.Loop(
        plant=plant,
        controller=adrc(order=order, controller_bandwidth=wc, observer_bandwidth=wo, b0=b0, **controller),
        sample_period=PERIOD,
        duration=(samples - 1) * PERIOD,
        reference=shape,
        sensor=wd.Sensor(**sensor),
        actuator=wd.Actuator(**actuator),
        disturbances={name: engine for name, (engine, _) in loads.items()},
    )
    replay = wd.Study(loop, measures=[wd.peak("error")]).replay(0)
    n = len(model.a)
    mirror = ReferenceLoop(
        plant=model,
        controller=Adrc(
            form,
            order,
            b0,
            controller.get("controller_gain_factor", 1.0) * controller_gains(order, wc),
            controller.get("observer_gain_factor", 1.0)
            * np.array(observer_gains(order, wo, PERIOD, controller.get("discretisation", "zero_order_hold"))),
            **{key: value for key, value in controller.items() if not key.endswith("_factor")},
        ),
        period=PERIOD,
        samples=samples,
        reference=derivatives + [lambda _: 0.0] * (order + 1 - len(derivatives)),
        initial_state=initial or [0.0] * n,
        disturbances={name: function for name, (_, function) in loads.items()},
        gain=sensor.get("gain", 1.0),
        bias=sensor.get("bias", 0.0),
        filter_frequency=sensor.get("filter_frequency", 0.0),
        sensor_resolution=sensor.get("resolution", 0.0),
        sensor_range=sensor.get("range", (-math.inf, math.inf)),
        limits=actuator.get("limits", (-math.inf, math.inf)),
        rate_limit=actuator.get("rate_limit", math.inf),
        resolution=actuator.get("resolution", 0.0),
        delay=actuator.get("delay", 0.0) + dead_time,
        lag=actuator.get("time_constant", 0.0),
        initial_command=actuator.get("initial", 0.0),
    )
    expected = mirror.run()
    assert set(expected) <= set(replay.signals)
    assert len(replay.time) == samples
    return {name: replay[name] for name in replay.signals}, expected


def step_at_one(t: float) -> float:
    return 0.7 if t >= 1.0 else 0.0


@pytest.mark.parametrize("discretisation", ["zero_order_hold", "euler"])
@pytest.mark.parametrize("form", ["output", "error"])
@pytest.mark.parametrize("order", [1, 2, 3, 4])
def test_integrator_chain_under_adrc_of_every_order_form_and_discretisation(
    order: int, form: str, discretisation: str
) -> None:
    found, expected = both(
        wd.IntegratorChain(order, gain=1.2),
        chain(order, 1.2),
        order,
        form=form,
        bandwidths=(2.0, 10.0),
        controller={"discretisation": discretisation},
    )
    largest = float(np.max(np.abs(expected["output"])))
    assert largest < 10.0  # a stable loop, so that the comparison means something
    # The observer differentiates the rounding of y; the scale of y^(i) in a loop of bandwidth omega_c is
    # omega_c^i y.
    scales = {f"estimate_{i + 1}": 2.0**i * largest for i in range(order + 1)} | {"command": 2.0**order * largest}
    assert_same_signals(found, expected, TOLERANCE, scales)


LIMITED = {"limits": (-0.5, 2.5), "rate_limit": 40.0}
LOOPS: dict[str, dict[str, Any]] = {
    "lag": {"actuator": {"time_constant": 0.03, "initial": 0.25}},
    "whole_delay": {"actuator": {"delay": 2 * PERIOD, "initial": 0.25}},
    "fractional_delay": {"actuator": {"delay": 1.37 * PERIOD}},
    "lag_delay_limits": {"actuator": {"time_constant": 0.02, "delay": 0.0043, **LIMITED}},
    "limits": {"actuator": LIMITED},
    "limits_not_told": {"actuator": LIMITED, "controller": {"observer_input": "commanded"}},
    "resolution": {"actuator": {"resolution": 0.05}, "sensor": {"resolution": 0.002}},
    "sensor": {"sensor": {"gain": 1.02, "bias": 0.03, "filter_frequency": 15.0, "range": (-0.4, 0.9)}},
    "half_gain": {"controller": {"controller_gain_factor": 0.5, "observer_gain_factor": 0.5}},
    "no_cancellation": {"controller": {"cancel_disturbance": False}},
    "measured_start": {"controller": {"observer_start": "measured"}, "actuator": {"initial": 0.3}},
}


@pytest.mark.parametrize("form", ["output", "error"])
@pytest.mark.parametrize("name", LOOPS)
def test_second_order_plant_in_every_kind_of_loop(name: str, form: str) -> None:
    found, expected = both(
        wd.SecondOrder(gain=1.5, time_constant=0.8, damping=0.4, initial=[0.2, -0.1]),
        second_order(1.5, 0.8, 0.4),
        2,
        form=form,
        b0=2.0,
        initial=[0.2, -0.1],
        **LOOPS[name],
    )
    assert_same_signals(found, expected, TOLERANCE)


def test_limits_and_rate_limit_were_reached_in_the_loops_above() -> None:
    found, _ = both(wd.SecondOrder(1.5, 0.8, 0.4), second_order(1.5, 0.8, 0.4), 2, b0=2.0, actuator=LIMITED)
    command = found["command"]
    assert np.max(command) == 2.5
    assert np.min(command) == -0.5
    assert np.isclose(np.max(np.abs(np.diff(command))), 40.0 * PERIOD, rtol=1e-12)


UNSTABLE = np.array([[0.0, 1.0, 0.0], [2.0, -0.5, 1.0], [0.0, 0.0, -8.0]])
PLANTS: dict[str, tuple[Any, Linear, int, float, list[float] | None, float]] = {
    "first_order": (
        wd.FirstOrder(gain=2.0, time_constant=0.5, initial=0.3),
        Linear(np.array([[-2.0]]), np.array([4.0]), np.array([[4.0]]), np.array([1.0])),
        1,
        4.0,
        [0.3],
        0.0,
    ),
    "first_order_dead_time": (
        wd.FirstOrder(gain=2.0, time_constant=0.5, dead_time=0.0125),
        Linear(np.array([[-2.0]]), np.array([4.0]), np.array([[4.0]]), np.array([1.0])),
        1,
        4.0,
        None,
        0.0125,
    ),
    "second_order_dead_time": (
        wd.SecondOrder(1.5, 0.8, 0.4, dead_time=0.02),
        second_order(1.5, 0.8, 0.4),
        2,
        2.0,
        None,
        0.02,
    ),
    "transfer_function": (
        wd.TransferFunction([0.5, 3.0], [2.0, 3.0, 5.0, 1.0]),
        companion([0.5, 3.0], [2.0, 3.0, 5.0, 1.0]),
        2,
        0.25,
        None,
        0.0,
    ),
    "unstable_state_space": (
        wd.StateSpace(UNSTABLE.tolist(), [0.0, 0.0, 8.0], [1.0, 0.0, 0.0], initial=[0.1, 0.0, 0.0]),
        Linear(UNSTABLE, np.array([0.0, 0.0, 8.0]), np.zeros((3, 0)), np.array([1.0, 0.0, 0.0])),
        2,
        1.0,
        [0.1, 0.0, 0.0],
        0.0,
    ),
}


@pytest.mark.parametrize("form", ["output", "error"])
@pytest.mark.parametrize("name", PLANTS)
def test_every_linear_stock_plant(name: str, form: str) -> None:
    plant, model, order, b0, initial, dead_time = PLANTS[name]
    found, expected = both(
        plant, model, order, form=form, b0=b0, initial=initial, dead_time=dead_time,
        actuator={"delay": 0.0017}, bandwidths=(3.0, 15.0),
    )  # fmt: skip
    assert np.max(np.abs(expected["output"])) < 5.0
    assert_same_signals(found, expected, TOLERANCE)


class Driven(Linear):
    """The same with disturbances that move, by DOP853."""

    def __init__(self, a: Values, b: Values, e: Values, c: Values, w: list[Callable[[float], float]]) -> None:
        super().__init__(a, b, e, c)
        self.smooth = Smooth(lambda _, x, u, w: a @ x + b * u + e @ np.array(w), lambda _, x: c @ x, w)

    def move(self, t: float, h: float, x: Values, u: float, lag: float, held: Sequence[float]) -> Values:
        return self.smooth.move(t, h, x, u, lag, held)


def test_two_moving_disturbances_of_a_state_space_plant_with_a_smooth_reference() -> None:
    a, b, c = np.array([[0.0, 1.0], [-1.0, -0.3]]), np.array([0.0, 2.0]), np.array([1.0, 0.1])
    e = np.array([[0.0, 0.4], [1.0, -0.2]])
    omega = 2.0 * math.pi / 1.7
    turns = [math.sin, math.cos, lambda x: -math.sin(x)]
    shape = [lambda t, d=d: 0.5 * omega**d * turns[d](omega * t + 0.3) for d in range(3)]
    loads: dict[str, tuple[Any, Callable[[float], float]]] = {
        "load_1": (wd.Sine(0.3, period=0.9), lambda t: 0.3 * math.sin(2.0 * math.pi * t / 0.9)),
        "load_2": (wd.Ramp(0.5, start=0.5, stop=1.5), lambda t: 0.5 * (min(max(t, 0.5), 1.5) - 0.5)),
    }
    found, expected = both(
        wd.StateSpace(a.tolist(), b.tolist(), c.tolist(), e=e.tolist()),
        Driven(a, b, e, c, [w for _, w in loads.values()]),
        2,
        b0=2.0,
        reference=(wd.Sine(0.5, period=1.7, phase=0.3), shape),
        loads=loads,
        actuator={"delay": 0.0123, "time_constant": 0.015},
    )
    assert_same_signals(found, expected, 1e-10)

"""The transport delay against closed forms: any size, the same for all trials or drawn for each.

A command that is u_j from t_j on reaches the plant at t_j + tau. By superposition of steps the output of 1/s,
1/s^2 and K/(T s + 1) is a sum over the changes of the command (step responses of any control text); nothing
is approximated.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray

import windage as wd

Values = NDArray[np.float64]
Response = Callable[[Values], Values]
PERIOD = 0.02
AMPLITUDE, SINE_PERIOD, INITIAL = 0.7, 0.9, 0.4
TOLERANCE = 2e-14

RESPONSES: dict[str, Response] = {
    "one_integrator": lambda s: s,
    "two_integrators": lambda s: 0.5 * s**2,
    "lag": lambda s: -1.5 * np.expm1(-s / 0.3),
}


def plant(name: str, dead_time: Any = 0.0, written: str = "stock") -> Any:
    """The plant of a response above, as a stock plant or as equations."""
    if written == "text":
        states, equations = ["y"], {"y": "u" if name == "one_integrator" else "(1.5*u - y)/0.3"}
        if name == "two_integrators":
            states, equations = ["y", "v"], {"y": "v", "v": "u"}
        return wd.Plant(states=states, equations=equations, input="u", output="y")
    if name == "lag":
        return wd.FirstOrder(gain=1.5, time_constant=0.3, dead_time=dead_time)
    return wd.IntegratorChain(1 if name == "one_integrator" else 2, gain=1.0)


def study(
    name: str,
    delay: Any,
    *,
    dead_time: Any = 0.0,
    period: Any = PERIOD,
    duration: float = 2.0,
    written: str = "stock",
    seed: int = 5,
) -> wd.Study:
    """A loop whose controller sends the derivative of a sine, whatever the plant does."""
    known = wd.OutputADRC(order=1, controller_gains=[0.0], observer_gains=[0.0, 0.0], b0=1.0, cancel_disturbance=False)
    own = plant(name, dead_time, written)
    loop = wd.Loop(
        plant=own,
        controller=known,
        sample_period=period,
        duration=duration,
        reference=wd.Sine(AMPLITUDE, period=SINE_PERIOD),
        actuator=wd.Actuator(delay=delay, initial=INITIAL),
        disturbances=dict.fromkeys(own.disturbance_names, 0.0),
        integrator="cash_karp5",
        steps_per_sample=16,
    )
    return wd.Study(loop, measures=[wd.final("output"), wd.final("time")], seed=seed)


def command(t: Values) -> Values:
    omega = 2.0 * math.pi / SINE_PERIOD
    return AMPLITUDE * omega * np.cos(omega * t)


def closed_form(name: str, times: Values, period: float, delay: float) -> Values:
    """Superpose the responses to the initial command and to each change of the delayed command."""
    starts = period * np.arange(len(times))
    changes = np.diff(command(starts), prepend=INITIAL)
    since = np.maximum(times[:, None] - starts[None, :] - delay, 0.0)
    return RESPONSES[name](since) @ changes + INITIAL * RESPONSES[name](times)


DELAYS = {
    "none": 0.0,
    "a_third": PERIOD / 3.0,
    "almost_one": 0.999 * PERIOD,
    "one": PERIOD,
    "three_as_a_decimal": 0.06,
    "several": 7.77 * PERIOD,
    "tiny": 1e-6 * PERIOD,
    "longer_than_the_trial": 2.5,
}


@pytest.mark.parametrize("written", ["stock", "text"])
@pytest.mark.parametrize("name", RESPONSES)
@pytest.mark.parametrize("delay", DELAYS.values(), ids=DELAYS.keys())
def test_output_is_the_shifted_response(delay: float, name: str, written: str) -> None:
    replay = study(name, delay, written=written).replay(0)
    assert np.max(np.abs(replay["command"] - command(replay.time))) < 1e-13
    expected = closed_form(name, replay.time, PERIOD, delay)
    assert np.max(np.abs(expected)) > 0.1
    scale = max(1.0, float(np.max(np.abs(expected))))
    # As equations the lag is integrated numerically, to the error of 16 steps of order 5.
    tolerance = 1e-11 if (name, written) == ("lag", "text") else 10.0 * TOLERANCE
    assert np.max(np.abs(replay["output"] - expected)) < tolerance * scale


@pytest.mark.parametrize("delay", DELAYS.values(), ids=DELAYS.keys())
def test_input_is_what_acts_right_after_the_sample_instant(delay: float) -> None:
    replay = study("one_integrator", delay).replay(0)
    shifted = np.floor(np.arange(len(replay.time)) - delay / PERIOD + 1e-9)
    expected = np.where(shifted < 0, INITIAL, command(PERIOD * shifted))
    assert np.max(np.abs(replay["input"] - expected)) < 1e-13


@pytest.mark.parametrize("name", RESPONSES)
@pytest.mark.parametrize(
    ("delay", "whole"),
    [
        (wd.uniform(0.0, 5.3 * PERIOD), False),
        (wd.choice([0.0, PERIOD, 4 * PERIOD, 2 * PERIOD]), True),
        (wd.choice([0.0, 0.5 * PERIOD, 3 * PERIOD]), False),
    ],
    ids=["uniform", "whole_samples", "whole_and_half"],
)
def test_delay_drawn_for_each_trial(name: str, delay: Any, whole: bool) -> None:
    own = study(name, delay)
    assert own._run_description.study["loop"]["actuator"]["delay_is_whole"] is whole
    outcome = own.run(trials=70, progress=False)
    drawn = outcome.parameters["actuator.delay"]
    assert len(set(drawn)) > 2
    times = PERIOD * np.arange(101)
    expected = np.array([closed_form(name, times, PERIOD, float(d))[-1] for d in drawn])
    found = outcome.measures["final of output"]
    assert np.max(np.abs(found - expected)) < 10.0 * TOLERANCE


def test_sample_period_and_delay_drawn_together() -> None:
    """Each trial has its own number of samples, whole delay and fraction."""
    outcome = study("two_integrators", wd.uniform(0.0, 0.1), period=wd.uniform(0.015, 0.031)).run(60, progress=False)
    for trial in range(60):
        period = float(outcome.parameters["sample_period"][trial])
        delay = float(outcome.parameters["actuator.delay"][trial])
        times = period * np.arange(int(2.0 / period) + 1)
        expected = closed_form("two_integrators", times, period, delay)[-1]
        assert abs(outcome.measures["final of time"][trial] - times[-1]) < 1e-15
        assert abs(outcome.measures["final of output"][trial] - expected) < 10.0 * TOLERANCE


@pytest.mark.parametrize(
    ("delay", "dead_time"),
    [(0.013, 0.021), (PERIOD, 0.5 * PERIOD), (0.0, 0.017), (0.5 * PERIOD, 0.5 * PERIOD)],
)
def test_dead_time_of_the_plant_and_delay_of_the_actuator_add_up(delay: float, dead_time: float) -> None:
    replay = study("lag", delay, dead_time=dead_time).replay(0)
    expected = closed_form("lag", replay.time, PERIOD, delay + dead_time)
    assert np.max(np.abs(replay["output"] - expected)) < 10.0 * TOLERANCE


def test_drawn_dead_time_and_drawn_delay_add_up() -> None:
    outcome = study("lag", wd.uniform(0.0, 0.05), dead_time=wd.uniform(0.01, 0.07)).run(50, progress=False)
    times = PERIOD * np.arange(101)
    total = outcome.parameters["actuator.delay"] + outcome.parameters["dead_time"]
    expected = np.array([closed_form("lag", times, PERIOD, float(d))[-1] for d in total])
    assert np.max(np.abs(outcome.measures["final of output"] - expected)) < 10.0 * TOLERANCE

"""The delay of the sensor against closed forms: what is measured is the output at t_k - tau, at any tau.

Closed forms by hand: x' = w + u with w = a sin(omega t) and a step, and a first-order lag under a held command.
"""

from __future__ import annotations

import copy
import math
from typing import Any

import numpy as np
import pytest

import windage as wd
from windage._loader import engine

PERIOD = 0.02
OMEGA = 2.0 * math.pi / 0.7
AT = 0.2137
PLANTS = {
    "equations": wd.Plant({"x": 0.3}, {"x": "u + w"}, "u", "x", ["w"]),
    "output by formula": wd.Plant({"x": 0.6}, {"x": "2*(u + w)"}, "u", "0.5*x + 0*w", ["w"]),
    "sampled exactly": wd.IntegratorChain(1, gain=1.0, initial=0.3),
}


def study(plant: str, delay: Any, **changes: Any) -> wd.Study:
    """An integrator under a sine and a step; the controller hands on the derivative of the reference."""
    made = PLANTS[plant]
    settings: dict[str, Any] = {
        "plant": made,
        "controller": wd.OutputADRC(
            order=1, controller_gains=[0.0], observer_gains=[0.0, 0.0], b0=1.0, cancel_disturbance=False
        ),
        "sample_period": PERIOD,
        "duration": 1.0,
        "reference": 0.0,
        "sensor": wd.Sensor(delay=delay),
        "disturbances": {made.disturbance_names[0]: wd.Sine(2.0, period=0.7) + wd.Step(1.5, at=AT)},
        "steps_per_sample": 16,
    }
    measures = [wd.final("measured"), wd.peak("measured"), wd.final("output")]
    return wd.Study(wd.Loop(**(settings | changes)), measures=measures, seed=6)


def output(t: Any) -> Any:
    """The output at t; before 0 it is what it is at 0."""
    t = np.maximum(t, 0.0)
    return 0.3 + 2.0 / OMEGA * (1.0 - np.cos(OMEGA * t)) + 1.5 * np.maximum(t - AT, 0.0)


@pytest.mark.parametrize("actuator", [0.0, 0.0031])
@pytest.mark.parametrize("delay", [0.0, 1e-4, 0.0037, 0.01, 0.02, 0.0463, 0.06, 0.6137, 2.0])
@pytest.mark.parametrize("plant", PLANTS)
def test_the_output_of_another_time_is_measured(plant: str, delay: float, actuator: float) -> None:
    replay = study(plant, delay, actuator=wd.Actuator(delay=actuator)).replay(0)
    # 16 steps of RK4 a sample of a smooth sine, and a step at which they end: far below 1e-11.
    np.testing.assert_allclose(replay["measured"], output(replay.time - delay), rtol=0, atol=1e-11)
    np.testing.assert_allclose(replay["output"], output(replay.time), rtol=0, atol=1e-11)


@pytest.mark.parametrize("integrator", ["euler", "rk4", "cash_karp5", "reference"])
@pytest.mark.parametrize("delay", [0.0037, 0.01, 0.0463])
def test_every_integrator_ends_a_step_where_the_sensor_looks(integrator: str, delay: float) -> None:
    """x' = 1.5 after a step is exact for any method; the last reading is 1 - delay seconds from the start."""
    load = {"w": wd.Step(1.5, at=AT)}
    described = copy.deepcopy(study("equations", delay, disturbances=load)._run_description.study)
    described["loop"] |= {"integrator": integrator, "steps_per_sample": 3}
    measured = engine().Campaign(described).run(0, 1, 1)[1][0, 0]
    assert measured == pytest.approx(0.3 + 1.5 * (1.0 - delay - AT), abs=1e-13)


@pytest.mark.parametrize("plant", PLANTS)
def test_a_delayed_sensor_in_a_closed_loop_and_a_delayed_command_are_alike(plant: str) -> None:
    """Whether the reading or the command is late makes no difference to what the controller sees, for tau < Ts.

    Without disturbances: y(t) under a command delayed by tau is y(t - tau) under one that is not, after the same
    commands, and the controller of a loop cannot tell the two apart.
    """
    quiet = {PLANTS[plant].disturbance_names[0]: 0.0}
    adrc = wd.OutputADRC(order=1, controller_bandwidth=4.0, observer_bandwidth=16.0, b0=1.0)
    options = {"controller": adrc, "disturbances": quiet, "reference": 1.0}
    late_reading = study(plant, 0.0137, **options).replay(0)
    late_command = study(plant, 0.0, actuator=wd.Actuator(delay=0.0137), **options).replay(0)
    np.testing.assert_allclose(late_reading["measured"], late_command["measured"], rtol=0, atol=1e-12)
    np.testing.assert_allclose(late_reading["command"], late_command["command"], rtol=0, atol=1e-11)
    assert np.max(np.abs(late_reading["output"] - late_command["output"])) > 1e-3


@pytest.mark.parametrize("plant", PLANTS)
def test_delays_and_sample_periods_may_be_drawn(plant: str) -> None:
    drawn = study(
        plant,
        wd.uniform(0.0, 0.07),
        sample_period=wd.uniform(0.015, 0.03),
        actuator=wd.Actuator(delay=wd.uniform(0.0, 0.03)),
    )
    together = drawn._campaign.run(0, 70, 2, 64)
    for trial in range(0, 70, 9):
        alone = drawn._campaign.run(trial, 1, 1, 0)
        for column, whole in zip(alone[:2], together[:2], strict=True):
            np.testing.assert_array_equal(column[:, 0].view(np.uint64), whole[:, trial].view(np.uint64))
        replay = drawn.replay(trial)
        delay = replay.parameters["sensor.delay"]
        np.testing.assert_allclose(replay["measured"], output(replay.time - delay), rtol=0, atol=1e-11)


def test_dead_time_of_any_plant_is_that_of_its_input() -> None:
    """Equations, chain and state space with dead time: the motion under a command that is delayed by as much."""
    plants: tuple[tuple[type, dict[str, Any]], ...] = (
        (wd.Plant, {"states": ["x"], "equations": {"x": "3*u - x"}, "input": "u", "output": "x"}),
        (wd.StateSpace, {"a": [[-1.0]], "b": [3.0], "c": [1.0]}),
        (wd.IntegratorChain, {"order": 1, "gain": 3.0}),
    )
    adrc = wd.OutputADRC(order=1, controller_bandwidth=4.0, observer_bandwidth=16.0, b0=3.0)
    for kind, arguments in plants:
        signals = []
        for dead_time, delay in ((0.0337, 0.01), (0.0, 0.0437)):
            plant = kind(**arguments, dead_time=dead_time)
            loop = wd.Loop(
                plant=plant, controller=adrc, sample_period=PERIOD, duration=1.0, reference=1.0,
                actuator=wd.Actuator(delay=delay), disturbances=dict.fromkeys(plant.disturbance_names, 0.0),
                steps_per_sample=4,
            )  # fmt: skip
            signals.append(wd.Study(loop, measures=[wd.final("output")]).replay(0)["output"])
        assert signals[0][-1] == pytest.approx(1.0, abs=0.2)
        np.testing.assert_allclose(signals[0], signals[1], rtol=0, atol=1e-13)


@pytest.mark.parametrize(
    ("make", "message"),
    [
        (lambda: wd.Sensor(delay=-1e-3), r"sensor\.delay: found -0\.001; expected a delay of at least 0 s"),
        (lambda: wd.Sensor(delay=wd.normal(1e-3, 1e-3)), r"sensor\.delay: found normal"),
        (lambda: study("equations", 3000.0), r"sensor\.delay: found 3000\.0; expected a delay below 100000 sample"),
        (lambda: PLANTS["equations"].with_(dead_time=-1.0), r"plant\.dead_time: found -1\.0"),
    ],
)
def test_wrong_delays_are_explained(make: Any, message: str) -> None:
    with pytest.raises(wd.DescriptionError, match=message):
        make()

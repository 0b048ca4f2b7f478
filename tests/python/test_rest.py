"""Loops that come to rest: no state lingers among the subnormal numbers, where arithmetic is slow."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

import windage as wd

SMALLEST_NORMAL = np.finfo(np.float64).smallest_normal
PLANTS: dict[str, Any] = {
    "equations": wd.Plant({"x": 0.0, "v": 0.0}, {"x": "v", "v": "-9*x - 6*v + 9*u"}, "u", "x"),
    "sampled exactly": wd.SecondOrder(1.0, 1.0 / 3.0, 1.0),
    "state space": wd.StateSpace([[0.0, 1.0], [-9.0, -6.0]], [0.0, 9.0], [1.0, 0.0]),
}


@pytest.mark.parametrize("controller", [wd.OutputADRC, wd.ErrorADRC])
@pytest.mark.parametrize("plant", PLANTS)
def test_no_signal_of_a_loop_at_rest_is_subnormal(plant: str, controller: Any) -> None:
    loop = wd.Loop(
        plant=PLANTS[plant],
        controller=controller(order=2, controller_bandwidth=4.0, observer_bandwidth=12.0, b0=9.0),
        sample_period=0.02,
        duration=600.0,
        reference=wd.Pulse(0.1, start=0.0, width=1.0),
        sensor=wd.Sensor(filter_frequency=3.0),
        actuator=wd.Actuator(time_constant=0.05),
        disturbances=dict.fromkeys(PLANTS[plant].disturbance_names, 0.0),
        steps_per_sample=1,
    )
    replay = wd.Study(loop, measures=[wd.peak("output")], seed=3).replay(0)
    assert np.max(np.abs(replay["output"])) > 0.05
    for name in replay.signals:
        size = np.abs(replay[name])
        assert not np.any((size > 0.0) & (size < SMALLEST_NORMAL)), name
    for name in (*loop.plant.state_names, "input", "measured", "estimate_1", "estimate_2", "estimate_3"):
        assert np.all(replay[name][-500:] == 0.0), name


def test_what_decays_is_kept_until_it_is_nothing() -> None:
    """x' = -x from 1: the exact decay down to 2^-900, zero soon after, and never a subnormal number."""
    plant = wd.Plant({"x": 1.0}, {"x": "-x + 0*u"}, "u", "x")
    idle = wd.OutputADRC(order=1, controller_gains=[0.0], observer_gains=[0.0, 0.0], b0=1.0)
    loop = wd.Loop(plant, idle, sample_period=0.25, duration=700.0, reference=0.0, steps_per_sample=8)
    replay = wd.Study(loop, measures=[wd.final("x")]).replay(0)
    exact = np.exp(-replay.time)
    is_kept = exact > 2.0**-899
    np.testing.assert_allclose(replay["x"][is_kept], exact[is_kept], rtol=1e-3)
    assert np.all(replay["x"][exact < 2.0**-900 * np.exp(-17 * 0.25)] == 0.0)

"""Listed trials: any of them, in any order, with the digits that they have in a run of all."""

from __future__ import annotations

import numpy as np
import pytest

import windage as wd


def noisy() -> wd.Study:
    """Equations, noise, and a delay that splits each interval in its own way."""
    loop = wd.Loop(
        plant=wd.Plant({"x": 0.1}, {"x": "g*u - tanh(x/0.02)"}, "u", "x", parameters={"g": wd.lognormal(3.0, 0.2)}),
        controller=wd.ErrorADRC(1, b0=3.0, controller_bandwidth=wd.uniform(4.0, 6.0), observer_bandwidth=30.0),
        sample_period=5e-3,
        duration=0.5,
        reference=wd.Sine(0.5, period=wd.uniform(1.0, 2.0)),
        sensor=wd.Sensor(noise=1e-4),
        actuator=wd.Actuator(delay=wd.uniform(0.0, 0.012)),
        steps_per_sample=2,
    )
    return wd.Study(loop, [wd.peak("error") <= 0.05], seed=99)


def test_listed_trials_have_the_digits_of_a_full_run() -> None:
    campaign = noisy()._campaign
    parameters, measures, status, _ = campaign.run(0, 300)
    listed = np.array([299, 0, 17, 17, 128, *range(250, 40, -1)], dtype=np.uint64)
    for threads, block in ((1, 0), (2, 0), (1, 8), (2, 64)):
        chosen = campaign.run_chosen(listed, threads, block)
        assert chosen[3] == len(listed)
        assert np.array_equal(chosen[0], parameters[:, listed])
        assert np.array_equal(chosen[1], measures[:, listed])
        assert np.array_equal(chosen[2], status[listed])


def test_parameters_are_drawn_without_a_run() -> None:
    campaign = noisy()._campaign
    assert np.array_equal(campaign.draw(7, 500), campaign.run(7, 500)[0])
    assert campaign.draw(0, 0).shape == (len(noisy().parameters), 0)


def test_trials_beyond_the_rows_of_a_table_cannot_be_chosen() -> None:
    loop = wd.Loop(
        plant=wd.IntegratorChain(1, gain=wd.column("gain")),
        controller=wd.OutputADRC(1, b0=1.0, controller_bandwidth=2.0, observer_bandwidth=10.0),
        sample_period=0.01,
        duration=0.1,
        reference=1.0,
        disturbances={"load": 0.0},
    )
    table = {"gain": [1.0, 2.0, 3.0]}
    campaign = wd.Study(loop, [wd.peak("error") <= 2.0], table=table, table_rows="in_order")._campaign
    assert campaign.draw(0, 3).tolist() == [[1.0, 2.0, 3.0]]
    assert campaign.run_chosen(np.array([2, 0], dtype=np.uint64))[0].tolist() == [[3.0, 1.0]]
    for ask in (lambda: campaign.run_chosen(np.array([0, 3], dtype=np.uint64)), lambda: campaign.draw(2, 2)):
        with pytest.raises(ValueError, match="rows, 3"):
            ask()

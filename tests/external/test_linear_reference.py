"""Linear plants integrated as differential equations agree with the matrix exponential that usually moves them.

The two share nothing but the coefficients: the audit of a run rests on that.
"""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Any

import numpy as np
import pytest

import windage as wd
from windage._describe import describe
from windage._runner import make_campaign, run_columns

sys.path.insert(0, str(Path(__file__).parent))
from linear_reference import polynomial

PERIOD = 0.01


def plants() -> dict[str, Any]:
    light = [complex(-0.5, 60.0), complex(-0.5, -60.0), -20.0]
    a = [[-3.0, 1.0, 0.0], [0.0, -40.0, 2.0], [-5.0, 0.0, -1.0]]
    return {
        "chain": wd.IntegratorChain(order=2, gain=wd.uniform(80.0, 120.0)),
        "first order": wd.FirstOrder(gain=2.0, time_constant=wd.uniform(0.002, 0.3)),
        "second order": wd.SecondOrder(gain=1.0, time_constant=0.05, damping=wd.uniform(0.1, 2.0), initial=[0.2, -1.0]),
        "seven fast lags": wd.TransferFunction([1.0], polynomial([-1000.0] * 7)),
        "stiff": wd.TransferFunction([0.02, 1.0], polynomial([-1e4, -5.0, -2.0])),
        "flexible": wd.TransferFunction([wd.uniform(0.8, 1.2)], polynomial(light)),
        "integrating": wd.TransferFunction([30.0], [1.0, 25.0, 150.0, 0.0]),
        "states": wd.StateSpace(
            a, b=[0.0, 0.0, 20.0], c=[1.0, 0.0, 0.3], e=[[1.0], [0.0], [4.0]], initial=[0.1, 0.0, 0.0]
        ),
    }


def measured(plant: Any, integrator: str, **parts: Any) -> np.ndarray[Any, Any]:
    loop = wd.Loop(
        plant=plant,
        controller=wd.ErrorADRC(2, controller_bandwidth=3.0, observer_bandwidth=15.0, b0=100.0),
        sample_period=PERIOD,
        duration=2.0,
        reference=1.0,
        **{"disturbances": {"load": wd.Step(0.5, at=1.0)}, **parts},
    )
    measures = [wd.final("output"), wd.rms("output"), wd.peak("error", after=0.5), wd.rms("input")]
    described = describe(loop, [], measures, {}, 3, 1)
    described.study["loop"]["integrator"] = integrator
    columns = run_columns(make_campaign(described.study), 0, 3, 0, None)
    assert np.all(columns.status == 0)
    return np.asarray(columns.measures)


@pytest.mark.parametrize("name", plants())
@pytest.mark.parametrize(
    "parts",
    [
        {},
        {"actuator": wd.Actuator(delay=0.0037, time_constant=0.02)},
        {"disturbances": {"load": wd.Pulse(5.0, start=1.0042, width=0.0031)}},
        {"disturbances": {"load": wd.Sine(0.5, period=0.021)}, "actuator": wd.Actuator(delay=0.0037)},
    ],
    ids=["ideal actuator", "delay and lag", "short pulse", "fast sine"],
)
def test_the_integrated_plant_agrees_with_the_exactly_sampled_one(name: str, parts: dict[str, Any]) -> None:
    plant = plants()[name]
    exact, integrated = (measured(plant, integrator, **parts) for integrator in ("rk4", "reference"))
    np.testing.assert_allclose(integrated, exact, rtol=1e-8, atol=1e-9)
    assert np.any(integrated != exact)  # two computations, not one


def test_a_plant_too_fast_for_explicit_steps_is_not_audited_but_refused() -> None:
    plant = wd.FirstOrder(gain=1.0, time_constant=1e-7)
    assert np.all(np.isfinite(measured(plant, "rk4")))
    with pytest.raises(wd.EngineError, match="trial 0 is too fast for the reference integration"):
        measured(plant, "reference")

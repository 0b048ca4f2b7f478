"""Where sampled ADRC loops lose stability, windup, and what cancelling the disturbance is worth."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest

import windage as wd

# Upper limits of the gain ratio lambda = b/b0 of the plant b/s^n: bandwidth tuning, omega_o = 5 omega_c,
# current observer with a zero-order hold, d samples of delay that the observer does not know (computed by an
# independent program on a grid of about 1 %). n, d, omega_o Ts, limit.
UPPER_LIMITS = [
    (1, 0, 0.2, 72.9),
    (1, 0, 0.5, 12.8),
    (1, 0, 1.0, 4.19),
    (1, 1, 0.1, 14.7),
    (1, 1, 0.3, 4.91),
    (1, 1, 1.0, 1.49),
    (1, 2, 0.2, 3.95),
    (2, 0, 0.1, 5.06),
    (2, 0, 0.3, 4.77),
    (2, 0, 1.0, 3.14),
    (2, 1, 0.05, 4.45),
    (2, 1, 0.2, 3.14),
    (2, 1, 0.5, 1.99),
    (2, 2, 0.2, 2.33),
    (3, 0, 0.5, 2.17),
    (3, 1, 0.2, 1.91),
]


def growth(loop: wd.Loop, trials: int, table: dict[str, list[float]] | None = None) -> np.ndarray:
    """Return the peak of the last quarter of each trial over that of the third; infinite if diverged."""
    end = float(loop.duration)  # type: ignore[arg-type]
    measures = [
        wd.peak("output", after=0.75 * end),
        wd.peak("output", after=0.5 * end, before=0.75 * end),
    ]
    outcome = wd.Study(loop, measures=measures, table=table, table_rows="in_order").run(trials, progress=False)
    late, early = outcome.measures.values()
    return np.where(outcome.status == 0, late / early, np.inf)


@pytest.mark.parametrize("form", ["output", "error"])
@pytest.mark.parametrize(("order", "delay", "product", "limit"), UPPER_LIMITS)
def test_gain_ratio_three_percent_around_its_limit(
    order: int, delay: int, product: float, limit: float, form: str
) -> None:
    period = 0.01
    wo = product / period
    adrc = wd.OutputADRC if form == "output" else wd.ErrorADRC
    loop = wd.Loop(
        plant=wd.IntegratorChain(order, gain=wd.column("gain"), initial=1.0),
        controller=adrc(order=order, controller_bandwidth=wo / 5.0, observer_bandwidth=wo, b0=1.0),
        sample_period=period,
        duration=period * math.ceil(1500.0 / product),
        reference=0.0,
        actuator=wd.Actuator(delay=delay * period),
        disturbances={"load": 0.0},
    )
    below, above = growth(loop, 2, {"gain": [0.97 * limit, 1.03 * limit]})
    assert below < 0.9, "3 % below the limit the output dies out"
    assert above > 1.1, "3 % above the limit it grows"


# First-order lag tau of the actuator, n = 2, omega_o = 5 omega_c, continuous (computed): tau omega_c, upper
# limit.
@pytest.mark.parametrize(("lag", "limit"), [(0.01, 4.45), (0.05, 3.17), (0.2, 1.87)])
def test_actuator_lag_lowers_the_limit(lag: float, limit: float) -> None:
    period = 5e-4  # fine enough to stand for a continuous controller
    loop = wd.Loop(
        plant=wd.IntegratorChain(2, gain=wd.column("gain"), initial=1.0),
        controller=wd.OutputADRC(order=2, controller_bandwidth=1.0, observer_bandwidth=5.0, b0=1.0),
        sample_period=period,
        duration=80.0,
        reference=0.0,
        actuator=wd.Actuator(time_constant=lag),
        disturbances={"load": 0.0},
    )
    below, above = growth(loop, 2, {"gain": [0.97 * limit, 1.03 * limit]})
    assert below < 0.95
    assert above > 1.05


def test_delay_margin_of_the_first_order_example() -> None:
    """K = T = 1, K_P = 4, omega_o = 40: the loop bears 0.0541214 s of delay (computed)."""
    period = 1e-4
    margin = 0.0541214 - 0.5 * period  # the hold delays by half a sample by itself
    loop = wd.Loop(
        plant=wd.FirstOrder(gain=1.0, time_constant=1.0, dead_time=wd.column("delay"), initial=1.0),
        controller=wd.OutputADRC(order=1, controller_bandwidth=4.0, observer_bandwidth=40.0, b0=1.0),
        sample_period=period,
        duration=8.0,
        reference=0.0,
        disturbances={"load": 0.0},
    )
    below, above = growth(loop, 2, {"delay": [0.99 * margin, 1.01 * margin]})
    assert below < 0.95
    assert above > 1.05


def test_observer_that_is_not_told_of_the_limits_winds_up() -> None:
    """While the command is limited, the observer takes it for more than acts.

    The estimate goes too low, the command stays at its limit too long, and the output overshoots (common
    practice: feed the limited command; Herbst 2013, section on constraints, from memory).
    """
    overshoot: dict[str, float] = {}
    lowest: dict[str, float] = {}
    released: dict[str, float] = {}
    for told in ("limited", "commanded"):
        loop = wd.Loop(
            plant=wd.IntegratorChain(2, gain=1.0),
            controller=wd.OutputADRC(
                order=2, controller_bandwidth=6.0, observer_bandwidth=30.0, b0=1.0, observer_input=told
            ),
            sample_period=1e-3,
            duration=8.0,
            reference=1.0,
            actuator=wd.Actuator(limits=(-1.5, 1.5)),
            disturbances={"load": 0.0},
        )
        study = wd.Study(loop, measures=[wd.overshoot()])
        replay = study.replay(0)
        overshoot[told] = replay.measures["overshoot of output"]
        lowest[told] = float(np.min(replay["estimate_3"]))
        released[told] = float(replay.time[np.argmax(replay["command"] < 1.5)])
    assert lowest["limited"] > -1e-6
    assert lowest["commanded"] < -5.0
    assert released["commanded"] > 1.2 * released["limited"]
    assert overshoot["commanded"] > overshoot["limited"] + 0.1


def demo(*, cancel: bool) -> Any:
    """The dish antenna of the first example of the documentation."""
    dish = wd.Plant(
        states={"azimuth": 0.0, "rate": 0.0},
        equations={
            "azimuth": "rate",
            "rate": "(gear*torque - drag*rate - coulomb*tanh(rate/0.002) + wind) / inertia",
        },
        input="torque",
        output="azimuth",
        disturbances=["wind"],
        parameters={
            "inertia": wd.normal(4200.0, 250.0),
            "gear": wd.tolerance(310.0, percent=4),
            "drag": wd.uniform(150.0, 600.0),
            "coulomb": wd.triangular(20.0, 60.0, 140.0),
        },
    )
    controller = wd.ErrorADRC(
        order=2, controller_bandwidth=5.0, observer_bandwidth=30.0, b0=310 / 4200, cancel_disturbance=cancel
    )
    loop = wd.Loop(
        plant=dish,
        controller=controller,
        sample_period=2e-3,
        duration=20.0,
        reference=wd.Sine(amplitude=0.05, period=25.0),
        sensor=wd.Sensor(noise=2e-5, resolution=1e-5),
        actuator=wd.Actuator(limits=(-60.0, 60.0), delay=wd.uniform(0.5e-3, 5e-3)),
        disturbances={"wind": wd.Gust(intensity=wd.uniform(100.0, 400.0), correlation_time=1.5)},
        steps_per_sample=1,
    )
    outcome = wd.Study(loop, measures=[wd.rms("error", after=5.0)], seed=2026).run(256, progress=False)
    return outcome.measures["rms of error after 5 s"]


def test_without_cancellation_the_error_of_the_demo_grows_about_tenfold() -> None:
    """Common practice: cancelling the estimated total disturbance is worth about a factor of ten."""
    ratio = demo(cancel=False) / demo(cancel=True)
    low, middle, high = ratio.min(), np.median(ratio), ratio.max()
    print(f"rms error without cancellation over with: median {middle:.2f}, {low:.2f} to {high:.2f}")
    assert 4.0 < np.median(ratio) < 40.0
    assert np.min(ratio) > 1.0

"""How much noise a tuning sends to the actuator, and how far its estimates peak at the start.

Reference values computed by an independent program from the definitions; no printed number stands behind
them.
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest

import windage as wd

# Standard deviation of the command over that of the sensor noise, plant b/s^n with b = b0, omega_c = 1 rad/s,
# omega_o Ts = 0.2: order, omega_o/omega_c, ratio.
NOISE = [(1, 3, 1.11), (1, 5, 1.56), (1, 10, 2.68), (2, 3, 5.8), (2, 5, 11.3), (2, 10, 31.5)]


def noise_ratio(order: int, k: int, **tuning: Any) -> float:
    period = 0.2 / k
    loop = wd.Loop(
        plant=wd.IntegratorChain(order, gain=1.0),
        controller=wd.OutputADRC(order=order, controller_bandwidth=1.0, observer_bandwidth=float(k), b0=1.0, **tuning),
        sample_period=period,
        duration=3000 * period,
        reference=0.0,
        sensor=wd.Sensor(noise=0.01),
        disturbances={"load": 0.0},
    )
    outcome = wd.Study(loop, measures=[wd.rms("command", after=500 * period)], seed=1).run(64, progress=False)
    (values,) = outcome.measures.values()
    return float(np.sqrt(np.mean(values**2))) / 0.01


@pytest.mark.parametrize(("order", "k", "ratio"), NOISE)
def test_noise_of_the_command(order: int, k: int, ratio: float) -> None:
    # 64 trials of 2500 samples leave about 0.5 %; the reference is printed to 2 or 3 digits.
    assert noise_ratio(order, k) == pytest.approx(ratio, rel=0.015)


@pytest.mark.parametrize("order", [1, 2])
@pytest.mark.parametrize("k", [3, 5, 10])
def test_halved_observer_gains_send_less_noise(order: int, k: int) -> None:
    """Half-gain tuning of the observer (Herbst, Hempel, Goehrt, Streif 2020, arXiv 2003.03986)."""
    assert 0.5 < noise_ratio(order, k, observer_gain_factor=0.5) / noise_ratio(order, k) < 0.8


# Peak of the estimated total disturbance while the observer finds an output y0 that it did not expect: order,
# peak over omega_o^n y0, time of the peak times omega_o, lowest value afterwards.
PEAKING = [(1, math.exp(-1.0), 1.0, 0.0), (2, 0.231, 0.586, -0.079)]


@pytest.mark.parametrize(("order", "peak", "instant", "lowest"), PEAKING)
def test_estimate_peaks_when_the_observer_starts_at_zero(
    order: int, peak: float, instant: float, lowest: float
) -> None:
    wo, y0, period = 20.0, 0.7, 2e-5
    loop = wd.Loop(
        plant=wd.IntegratorChain(order, gain=1.0, initial=y0),
        controller=wd.OutputADRC(
            order=order,
            controller_gains=[0.0] * order,
            observer_bandwidth=wo,
            b0=1.0,
            cancel_disturbance=False,
        ),
        sample_period=period,
        duration=0.6,
        reference=0.0,
        disturbances={"load": 0.0},
    )
    replay = wd.Study(loop, measures=[wd.peak("error")]).replay(0)
    assert np.all(replay["output"] == y0)
    estimate = replay[f"estimate_{order + 1}"] / (wo**order * y0)
    assert abs(np.max(estimate) - peak) < 0.6e-3
    assert abs(replay.time[np.argmax(estimate)] * wo - instant) < 1.5e-3
    assert abs(np.min(estimate) - lowest) < 0.6e-3

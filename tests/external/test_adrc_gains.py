"""Gains of linear ADRC: tables, pole conditions, scaling, and the half-gain tuning.

Sources: Gao 2003, "Scaling and bandwidth-parameterization based controller tuning", ACC, doi
10.1109/ACC.2003.1242516 (from memory, recomputed); Miklosovic, Radke, Gao 2006, ACC, doi
10.1109/ACC.2006.1656547, and Herbst 2013, Electronics 2(3) 246-279, doi 10.3390/electronics2030246 (rows
"current" of order 1 and 2 with a zero-order hold from memory, recomputed; the other rows derived).
"""

from __future__ import annotations

import math
import sys
from pathlib import Path

import mpmath
import numpy as np
import pytest
from scipy.special import comb

import windage as wd
from windage._loader import engine

sys.path.insert(0, str(Path(__file__).parent))
import reference_loop
from reference_loop import Values

# Gao 2003: order, controller bandwidth, observer bandwidth, k, l (from memory, recomputed).
CONTINUOUS = [
    (1, 4.0, 40.0, [4.0], [80.0, 1600.0]),
    (2, 1.2, 12.0, [1.44, 2.4], [36.0, 432.0, 1728.0]),
    (3, 2.0, 10.0, [8.0, 12.0, 6.0], [40.0, 600.0, 4000.0, 10000.0]),
]


@pytest.mark.parametrize(("order", "controller", "observer", "k", "l_gains"), CONTINUOUS)
def test_continuous_gains_match_the_worked_numbers(
    order: int, controller: float, observer: float, k: list[float], l_gains: list[float]
) -> None:
    np.testing.assert_allclose(engine().controller_gains(order, controller), k, rtol=4e-16)
    np.testing.assert_allclose(engine().continuous_observer_gains(order, observer), l_gains, rtol=4e-16)


@pytest.mark.parametrize("order", range(1, 9))
def test_continuous_gains_are_binomial(order: int) -> None:
    """k_i = C(n, i-1) omega_c^(n-i+1) and l_i = C(n+1, i) omega_o^i (Gao 2003)."""
    k = [comb(order, i, exact=True) * 3.5 ** (order - i) for i in range(order)]
    l_gains = [comb(order + 1, i, exact=True) * 17.0**i for i in range(1, order + 2)]
    np.testing.assert_allclose(engine().controller_gains(order, 3.5), k, rtol=2e-15)
    np.testing.assert_allclose(engine().continuous_observer_gains(order, 17.0), l_gains, rtol=2e-15)


def closed_form(order: int, kind: str, z: float, period: float) -> list[float]:
    """Current observer, all poles at z."""
    d, t = 1.0 - z, period
    if order == 1:
        return [1.0 - z**2, d**2 / t]
    middle = 3.0 * d**2 * (1.0 + z) / (2.0 * t) if kind == "zero_order_hold" else d**2 * (2.0 + z) / t
    return [1.0 - z**3, middle, d**3 / t**2]


def predictive_form(order: int, kind: str, z: float, period: float) -> list[float]:
    """Predictive observer, all poles at z."""
    d, t = 1.0 - z, period
    if order == 1:
        return [2.0 * d, d**2 / t]
    middle = d**2 * (5.0 + z) / (2.0 * t) if kind == "zero_order_hold" else 3.0 * d**2 / t
    return [3.0 * d, middle, d**3 / t**2]


def model(order: int, kind: str, period: float) -> Values:
    """The state matrix of the sampled chain of integrators with its disturbance."""
    n, last = order + 1, order if kind == "zero_order_hold" else 1
    a = np.zeros((n, n))
    for power in range(last + 1):
        a += np.eye(n, k=power) * period**power / math.factorial(power)
    return a


@pytest.mark.parametrize("kind", ["zero_order_hold", "euler"])
@pytest.mark.parametrize("order", [1, 2])
@pytest.mark.parametrize("product", [0.02, 0.12, 0.4, 1.5])
def test_discrete_gains_match_the_closed_forms(order: int, kind: str, product: float) -> None:
    period = 0.01
    gains = engine().observer_gains(order, product / period, period, kind)
    z = math.exp(-product)
    np.testing.assert_allclose(gains, closed_form(order, kind, z, period), rtol=3e-13)
    # The gains of the predictive observer are A times those of the current one.
    np.testing.assert_allclose(model(order, kind, period) @ gains, predictive_form(order, kind, z, period), rtol=3e-13)


def test_discrete_gains_match_the_computed_numbers() -> None:
    """Current observer with a zero-order hold, Ts = 0.01 s (computed)."""
    np.testing.assert_allclose(
        engine().observer_gains(1, 40.0, 0.01), [0.5506710358827784, 10.868887204594298], rtol=1e-14
    )
    np.testing.assert_allclose(
        engine().observer_gains(2, 40.0, 0.01),
        [0.6988057880877978, 27.231780263901175, 358.3254233254476],
        rtol=1e-14,
    )
    np.testing.assert_allclose(
        engine().observer_gains(2, 12.0, 0.01),
        [0.3023236739289691, 3.6192042430980225, 14.459469771566251],
        rtol=1e-14,
    )


@pytest.mark.parametrize("kind", ["zero_order_hold", "euler"])
@pytest.mark.parametrize("order", range(1, 9))
@pytest.mark.parametrize("product", [1e-4, 0.05, 0.3, 2.0])
def test_observer_poles_lie_where_asked(order: int, kind: str, product: float) -> None:
    """det(z I - A + l c A) = (z - exp(-omega_o Ts))^(n+1), compared in the gains."""
    period = 2e-3
    gains = np.asarray(engine().observer_gains(order, product / period, period, kind))
    expected = reference_loop.observer_gains(order, product / period, period, kind)
    np.testing.assert_allclose(gains, expected, rtol=1e-13 if order <= 4 else 1e-11)
    with mpmath.workdps(60):
        n = order + 1
        a = mpmath.matrix(n, n)
        for i in range(n):
            for j in range(i, n if kind == "zero_order_hold" else min(i + 2, n)):
                a[i, j] = mpmath.mpf(period) ** (j - i) / mpmath.factorial(j - i)
        closed = a - mpmath.matrix(expected) * a[0, :]
        pole = mpmath.exp(-mpmath.mpf(product))
        for z in (mpmath.mpf(2), mpmath.mpf("0.3"), mpmath.mpf(-1)):
            wanted = (z - pole) ** n
            assert abs(mpmath.det(z * mpmath.eye(n) - closed) / wanted - 1) < 1e-9


@pytest.mark.parametrize("order", [1, 2, 3, 4])
def test_discrete_gains_tend_to_the_continuous_ones(order: int) -> None:
    """l_i / Ts tends to the continuous gain as omega_o Ts tends to 0, with an error of first order."""
    continuous = np.asarray(engine().continuous_observer_gains(order, 30.0))
    errors = []
    for period in (1e-4, 1e-5):
        gains = np.asarray(engine().observer_gains(order, 30.0, period)) / period
        errors.append(np.max(np.abs(gains / continuous - 1.0)))
    assert errors[0] < 30.0 * 1e-4 * (order + 1)
    assert abs(errors[0] / errors[1] - 10.0) < 0.2


@pytest.mark.parametrize("kind", ["zero_order_hold", "euler"])
@pytest.mark.parametrize("order", [1, 2, 3, 4])
def test_time_scaling(order: int, kind: str) -> None:
    """Gao's scaling: a plant s times as fast has k_i s^(n-i+1), and l_i s^(i-1) at the period Ts/s."""
    s = 8.0
    slow, fast = engine().controller_gains(order, 2.0), engine().controller_gains(order, 2.0 * s)
    np.testing.assert_array_equal(fast, slow * s ** np.arange(order, 0, -1))
    slow = engine().observer_gains(order, 10.0, 0.02, kind)
    fast = engine().observer_gains(order, 10.0 * s, 0.02 / s, kind)
    np.testing.assert_array_equal(fast, slow * s ** np.arange(order + 1))


@pytest.mark.parametrize("order", [0, 9, -1])
def test_orders_out_of_range_are_refused(order: int) -> None:
    with pytest.raises(ValueError, match="order"):
        engine().observer_gains(order, 10.0, 0.01)
    with pytest.raises(ValueError, match="order"):
        engine().controller_gains(order, 1.0)


@pytest.mark.parametrize("order", [1, 2, 3, 4])
def test_half_gain_puts_the_poles_on_minus_half_the_bandwidth(order: int) -> None:
    """Herbst, Hempel, Goehrt, Streif 2020, "Half-Gain Tuning for ADRC", arXiv 2003.03986.

    The loop then has s^n + (s + alpha)^n = 0, whose roots all lie on Re s = -alpha/2 (computed; order 2,
    alpha = 3: -1.5 +- 1.5j). The model is exact and starts at rest, so the observer makes no error and the
    plant's states move by the state feedback alone; its matrix is read off the replay.
    """
    alpha, period, spacing = 3.0, 1e-4, 2500
    loop = wd.Loop(
        plant=wd.IntegratorChain(order, gain=1.0),
        controller=wd.OutputADRC(
            order=order,
            controller_bandwidth=alpha,
            observer_bandwidth=15.0,
            b0=1.0,
            controller_gain_factor=0.5,
        ),
        sample_period=period,
        duration=2 * order * spacing * period,
        reference=wd.Step(1.0),
        disturbances={"load": 0.0},
    )
    replay = wd.Study(loop, measures=[wd.peak("error")]).replay(0)
    states = np.array([replay[f"state_{i + 1}"] for i in range(order)])
    states[0] -= 1.0
    points = states[:, ::spacing]
    moved = points[:, 1 : order + 1] @ np.linalg.inv(points[:, :order])
    poles = np.log(np.linalg.eigvals(moved).astype(complex)) / (spacing * period)
    assert np.max(np.abs(poles.real + alpha / 2.0)) < 2e-3
    expected = np.roots(np.polyadd(np.eye(order + 1)[0], np.poly([-alpha] * order)))
    assert np.max(np.abs(np.sort_complex(poles) - np.sort_complex(expected))) < 5e-3
    if order == 2:
        assert np.max(np.abs(np.sort(poles.imag) - [-1.5, 1.5])) < 2e-3

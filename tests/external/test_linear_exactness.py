"""Transfer functions are sampled to 1e-9 of their step response, against multiple precision (`linear_reference`).

Orders 1 to 12, time constants from a thousandth to a thousand sample periods, equal and apart; what cannot be
computed so is refused. The first two claims state the worst of the errors found here, far below that bound.
"""

from __future__ import annotations

import math
import sys
from pathlib import Path
from typing import Any

import mpmath as mp
import numpy as np
import pytest

import windage as wd

sys.path.insert(0, str(Path(__file__).parent))
from linear_reference import DIGITS, polynomial, uncontrolled, worst_error

ORDERS = range(1, 13)
BOUND = 1e-9
PERIOD = 1e-3


def pair(frequency: float, damping: float) -> list[Any]:
    with mp.workdps(DIGITS):
        p = frequency * mp.mpc(-damping, mp.sqrt(1 - mp.mpf(damping) ** 2))
        return [p, mp.conj(p)]


def spread_out(order: int) -> list[Any]:
    """Return real poles from a thousandth to a thousand sample periods."""
    return [-(mp.mpf(10) ** (-3 + 6 * mp.mpf(i) / max(1, order - 1))) / PERIOD for i in range(order)]


@pytest.mark.parametrize("ratio", [1e-3, 0.1, 1.0, 10.0, 1e3])
def test_equal_lags_of_every_order_are_exact(ratio: float) -> None:
    for order in ORDERS:
        denominator = polynomial([-1 / (mp.mpf(ratio) * PERIOD)] * order)
        assert worst_error([1.0], denominator, PERIOD, 8 * order * ratio * PERIOD) < 1e-12, f"order {order}"


@pytest.mark.parametrize("order", ORDERS)
def test_lags_from_a_thousandth_to_a_thousand_periods_are_exact(order: int) -> None:
    assert worst_error([1.0], polynomial(spread_out(order)), PERIOD, 4000 * PERIOD) < 1e-12


@pytest.mark.parametrize("order", [2, 4, 6, 9, 12])
@pytest.mark.parametrize("ratio", [1e-3, 0.3, 30.0, 1e3])
def test_lightly_damped_modes_beside_each_other_stay_within_the_bound(order: int, ratio: float) -> None:
    modes = [pair((1 + 0.3 * k) / (ratio * PERIOD), 0.02) for k in range(order // 2)]
    roots = [p for mode in modes for p in mode] + [-1 / (ratio * PERIOD)] * (order % 2)
    assert worst_error([1.0], polynomial(roots), PERIOD, 500 * ratio * PERIOD) < BOUND


@pytest.mark.parametrize(
    ("numerator", "roots", "longest"),
    [
        ([2e-3, 1.0], spread_out(5), 4.0),
        ([1e-9, -3e-4, 1.0], [-1e5, -300.0, *pair(40.0, 0.1)], 1.0),
        ([362.8, 407.4, -0.9, 1.9, 1.0], [*pair(159e3, 0.02), -942e3, *pair(4.5e3, 0.5), *pair(40.3e3, 0.02)], 0.1),
        ([1.0], [mp.mpf(0), -1e6, -1e6, -50.0], 2.0),
        ([1.0], [mp.mpf(0), mp.mpf(0), *pair(2e3, 0.01), -1e5], 2.0),
        ([1.0], [mp.mpf(0)] * 4, 2.0),
        ([1.0], [30.0, -30.0, -1e4], 0.4),
        ([1.0], [*(-p for p in pair(60.0, 0.05)), -2e3, -5e5, -5e5], 0.4),
    ],
    ids=[
        "zero",
        "zeros and a mode",
        "seven orders",
        "integrator",
        "two integrators",
        "four",
        "unstable",
        "growing mode",
    ],
)
def test_zeros_integrators_and_unstable_poles_are_exact(numerator: Any, roots: Any, longest: float) -> None:
    assert worst_error(numerator, polynomial(roots), PERIOD, longest) < 1e-11


def test_a_motion_that_dies_within_a_sample_leaves_zero_and_no_subnormal_number() -> None:
    for speed, left in ((720.0, 0.0), (600.0, math.exp(-600.0))):  # exp(-720) = 2e-313
        plant = wd.FirstOrder(1.0, PERIOD / speed, initial=1.0)
        assert uncontrolled(plant, PERIOD, 3, load=0.0)["output"][1] == pytest.approx(left, rel=1e-12, abs=0.0)


def test_a_large_gain_takes_no_digits_from_the_motion() -> None:
    small, large = (uncontrolled(wd.FirstOrder(gain, 0.3), 0.01, 100)["output"] / gain for gain in (1.0, 2.0**40))
    np.testing.assert_allclose(large, small, rtol=1e-14)


def test_a_lane_does_not_see_the_speed_of_its_neighbours() -> None:
    def study(low: float) -> wd.Study:
        plant = wd.TransferFunction([1.0], [wd.samples([low, 1e-4, 0.3, 0.3, 2e-7]), 0.11, 1.0])
        loop = wd.Loop(
            plant=plant,
            controller=wd.ErrorADRC(1, controller_bandwidth=5.0, observer_bandwidth=20.0, b0=10.0),
            sample_period=0.01,
            duration=1.0,
            reference=1.0,
            disturbances={"load": 0.3},
        )
        return wd.Study(loop, requirements=[wd.peak("error") <= 2.0], measures=[wd.final("output")], seed=4)

    slow, fast = (study(low).run(40, progress=False) for low in (0.1, 1e-9))
    same = next(iter(slow.parameters.values())) == next(iter(fast.parameters.values()))
    assert 0 < np.count_nonzero(~same) < 40
    for name, values in slow.measures.items():
        assert np.array_equal(values[same], fast.measures[name][same])


def test_a_motion_that_loses_its_digits_within_a_sample_is_refused() -> None:
    modes = [pair(1e6 * (1 + 0.07 * k), 0.01) for k in range(10)]
    plant = wd.TransferFunction([1.0], polynomial([p for mode in modes for p in mode]))
    with pytest.raises(wd.EngineError, match=r"plant: trial 0 moves .* cannot be computed accurately enough"):
        uncontrolled(plant, PERIOD, 10)


@pytest.mark.parametrize("ratio", [0.3, 10.0])
@pytest.mark.parametrize("apart", [0.3, 0.1, 0.03, 1e-3, 1e-5])
@pytest.mark.parametrize("order", [6, 8, 10, 12])
def test_modes_ever_closer_are_within_the_bound_or_refused(order: int, apart: float, ratio: float) -> None:
    modes = [pair((1 + apart * k) / (ratio * PERIOD), apart / 3) for k in range(order // 2)]
    denominator = polynomial([p for mode in modes for p in mode])
    try:
        assert worst_error([1.0], denominator, PERIOD, 10 * ratio * PERIOD / apart) < BOUND
        assert (order, apart) not in {(12, 1e-3), (12, 1e-5)}
    except wd.EngineError as error:
        assert "plant: trial 0 would lose its digits" in str(error)  # noqa: PT017
        assert (order, apart) != (6, 0.3)


def test_lags_and_modes_of_one_frequency_are_at_the_bound_or_refused() -> None:
    """The worst of two thousand random plants is the one that passes it: rounded coefficients alone make 1.02e-9."""
    period = 0.0033172861850121007
    modes = [pair(0.1 / period, damping) for damping in (1e-3, 0.05, 0.05, 0.7)]
    denominator = polynomial([p for mode in modes for p in mode] + [mp.mpf(-0.1) / period] * 4)
    try:
        assert worst_error([1.0], denominator, period, 2**12 * period) < 1.1 * BOUND
    except wd.EngineError as error:
        assert "plant: trial 0 would lose its digits" in str(error)  # noqa: PT017


def test_the_same_modes_as_a_state_space_are_no_problem() -> None:
    """Five modes in parallel: the response is the sum of theirs (any text on vibration)."""
    frequencies = [100.0 * (1 + 0.03 * k) for k in range(5)]
    a = np.zeros((10, 10))
    for k, w in enumerate(frequencies):
        a[2 * k, 2 * k + 1], a[2 * k + 1, 2 * k], a[2 * k + 1, 2 * k + 1] = w, -w, -0.02 * w
    plant = wd.StateSpace(a.tolist(), b=[0.0] * 10, c=[1.0, 0.0] * 5, e=[[0.0], [1.0]] * 5)
    replay = uncontrolled(plant, PERIOD, 2000)
    expected = np.zeros(2001)
    for w in frequencies:
        rate, angle = 0.01 * w, w * math.sqrt(1 - 1e-4) * replay.time
        swing = np.cos(angle) + 0.01 / math.sqrt(1 - 1e-4) * np.sin(angle)
        expected += (1.0 - np.exp(-rate * replay.time) * swing) / w
    assert np.max(np.abs(replay["output"] - expected)) < 1e-12 * np.max(expected)


def test_states_of_which_the_output_is_a_tiny_difference_are_refused() -> None:
    """The coordinates hide all but 1e-7 of two states from the output, and rounding is 1e7 times as large."""
    hidden, shown = np.array([[1.0, 1.0, 0.0], [1.0, 1.0 + 1e-7, 0.0], [0.0, 0.0, 1.0]]), np.diag([-3.0, -5.0, -7.0])
    inverse = np.linalg.inv(hidden)
    a, b = hidden @ shown @ inverse, hidden @ np.ones(3)
    plant = wd.StateSpace(a.tolist(), b=[0.0] * 3, c=inverse[1].tolist(), e=[[x] for x in b])
    with pytest.raises(wd.EngineError, match="would lose its digits to rounding"):
        uncontrolled(plant, 0.01, 100)

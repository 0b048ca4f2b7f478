"""Controllers: arguments, and gains given by hand against those placed by bandwidth."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest

import windage as wd
from windage._loader import engine


def replay(controller: Any, period: float = 0.01, **options: Any) -> wd.Replay:
    loop = wd.Loop(
        plant=wd.IntegratorChain(controller.order, gain=1.3),
        controller=controller,
        sample_period=period,
        duration=2.0,
        reference=wd.Quintic(1.0, start=0.1, duration=1.0),
        disturbances={"load": wd.Step(0.5, at=1.2)},
        **options,
    )
    return wd.Study(loop, [wd.peak("error") <= 10.0]).replay(0)


@pytest.mark.parametrize("order", [1, 2, 3])
@pytest.mark.parametrize("form", [wd.OutputADRC, wd.ErrorADRC])
def test_gains_by_hand_equal_those_of_the_bandwidth(form: Any, order: int) -> None:
    placed = form(order, b0=1.0, controller_bandwidth=4.0, observer_bandwidth=20.0)
    given = form(
        order,
        b0=1.0,
        controller_gains=engine().controller_gains(order, 4.0),
        observer_gains=engine().observer_gains(order, 20.0, 0.01),
    )
    assert np.array_equal(replay(placed)["output"], replay(given)["output"])


def test_gain_factor_is_a_factor_on_the_gains() -> None:
    gains = 0.5 * np.asarray(engine().observer_gains(2, 20.0, 0.01))
    half = wd.OutputADRC(2, b0=1.0, controller_bandwidth=4.0, observer_bandwidth=20.0, observer_gain_factor=0.5)
    given = wd.OutputADRC(2, b0=1.0, controller_bandwidth=4.0, observer_gains=gains)
    assert np.array_equal(replay(half)["output"], replay(given)["output"])


@pytest.mark.parametrize("order", [1, 2, 3])
def test_observer_poles_lie_where_the_bandwidth_puts_them(order: int) -> None:
    # Error of the current observer: e_{k+1} = (I - l c) A e_k; A: the sampled chain of n + 1 integrators.
    states, period, bandwidth = order + 1, 0.01, 30.0
    a = np.zeros((states, states))
    for i in range(states):
        for j in range(i, states):
            a[i, j] = period ** (j - i) / math.factorial(j - i)
    gains = np.asarray(engine().observer_gains(order, bandwidth, period))
    c = np.eye(states)[0]
    got = np.poly((np.eye(states) - np.outer(gains, c)) @ a)
    np.testing.assert_allclose(got, np.poly([math.exp(-bandwidth * period)] * states), rtol=0, atol=1e-11)


def test_reference_derivatives_make_the_output_form_track() -> None:
    with_them = wd.OutputADRC(2, b0=1.3, controller_bandwidth=4.0, observer_bandwidth=40.0)
    without = with_them.with_(reference_derivatives=0)
    late = slice(0, 110)
    assert np.abs(replay(with_them)["error"][late]).max() < 0.2 * np.abs(replay(without)["error"][late]).max()


def test_uncancelled_disturbance_leaves_an_offset() -> None:
    tuning: dict[str, Any] = {"b0": 1.3, "controller_bandwidth": 4.0, "observer_bandwidth": 40.0}
    cancelled = replay(wd.OutputADRC(1, **tuning))["error"][-1]
    left = replay(wd.OutputADRC(1, **tuning, cancel_disturbance=False))["error"][-1]
    # y' = b u + d with u = k (r - y) / b0 settles at an error of -d / k.
    assert left == pytest.approx(-0.5 / 4.0, rel=0.1)
    assert abs(cancelled) < 0.02 * abs(left)


def test_every_number_may_be_spread() -> None:
    spread = wd.uniform(0.9, 1.1)
    controller = wd.OutputADRC(
        1,
        b0=spread,
        controller_gains=[spread],
        observer_bandwidth=wd.uniform(20.0, 30.0),
        controller_gain_factor=spread,
        observer_gain_factor=spread,
    )
    names = set(replay(controller).parameters)
    assert names == {
        "controller.b0",
        "controller.controller_gains[0]",
        "controller.observer_bandwidth",
        "controller.controller_gain_factor",
        "controller.observer_gain_factor",
    }


@pytest.mark.parametrize("b0", [0.0, wd.uniform(-1.0, 1.0), wd.normal(5.0, 0.1), wd.choice([1.0, 0.0])])
def test_critical_gain_never_is_zero(b0: Any) -> None:
    with pytest.raises(wd.DescriptionError, match=r"controller\.b0"):
        wd.OutputADRC(1, b0=b0, controller_bandwidth=1.0, observer_bandwidth=5.0)


def test_error_form_takes_no_reference_derivatives() -> None:
    with pytest.raises(wd.DescriptionError, match="reference_derivatives"):
        wd.ErrorADRC(1, b0=1.0, controller_bandwidth=1.0, observer_bandwidth=5.0, reference_derivatives=True)

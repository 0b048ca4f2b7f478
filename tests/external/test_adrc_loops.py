"""Closed loops of linear ADRC: transfer functions, settling rules, equivalences, windup, cancellation.

Sampled finely and extrapolated to a sample period of zero, the loops must behave as their continuous
counterparts.
"""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from scipy.signal import TransferFunction, step

import windage as wd

sys.path.insert(0, str(Path(__file__).parent))
from reference_loop import Values


def extrapolated(coarse: Any, fine: Any) -> Any:
    """Remove the error of first order from two values at Ts and Ts/2 (Richardson 1911)."""
    return 2.0 * fine - coarse


def controller_polynomials(order: int, k: Values, gains: Values) -> tuple[Values, Values, Values]:
    """Return numerator and denominator (b0 = 1) of C_FB, and the numerator of C_PF C_FB.

    Herbst 2021, "Transfer function analysis and implementation of active disturbance rejection control",
    Control Theory Technol., doi 10.1007/s11768-021-00031-5, arXiv 2011.01044 (from memory, recomputed): u =
    C_FB (C_PF r - y).
    """
    l1, l2 = gains[:2]
    if order == 1:
        return (
            np.array([k[0] * l1 + l2, k[0] * l2]),
            np.array([1.0, l1 + k[0], 0.0]),
            k[0] * np.array([1.0, l1, l2]),
        )
    k1, k2, l3 = k[0], k[1], gains[2]
    return (
        np.array([k1 * l1 + k2 * l2 + l3, k1 * l2 + k2 * l3, k1 * l3]),
        np.array([1.0, l1 + k2, l2 + k2 * l1 + k1, 0.0]),
        k1 * np.array([1.0, l1, l2, l3]),
    )


CONTINUOUS = {
    1: (wd.FirstOrder(gain=1.3, time_constant=0.7), [1.3], [0.7, 1.0], 1.5),
    2: (wd.SecondOrder(1.3, 0.6, 0.4), [1.3], [0.36, 0.48, 1.0], 3.0),
}
WC, WO = 4.0, 24.0


def response(plant: Any, order: int, b0: float, form: str, period: float, *, load: bool = False) -> Values:
    """Return the output, every 0.01 s for 3 s, after a step of the reference or of the load."""
    adrc = wd.OutputADRC if form == "output" else wd.ErrorADRC
    loop = wd.Loop(
        plant=plant,
        controller=adrc(order=order, controller_bandwidth=WC, observer_bandwidth=WO, b0=b0),
        sample_period=period,
        duration=3.0,
        reference=0.0 if load else 1.0,
        disturbances={"load": 1.0 if load else 0.0},
    )
    return wd.Study(loop, measures=[wd.peak("error")]).replay(0)["output"][:: round(0.01 / period)]


@pytest.mark.parametrize("input_", ["reference", "reference of the error form", "load"])
@pytest.mark.parametrize("order", [1, 2])
def test_loop_equals_its_transfer_function(order: int, input_: str) -> None:
    plant, top, bottom, b0 = CONTINUOUS[order]
    k = np.array([WC] if order == 1 else [WC**2, 2.0 * WC])
    gains = np.array([2.0 * WO, WO**2] if order == 1 else [3.0 * WO, 3.0 * WO**2, WO**3])
    feedback, integral, prefilter = controller_polynomials(order, k, gains)
    closed = np.polyadd(np.polymul(b0 * integral, bottom), np.polymul(feedback, top))
    numerator = {
        "reference": np.polymul(prefilter, top),
        "reference of the error form": np.polymul(feedback, top),
        "load": np.polymul(b0 * integral, top),
    }[input_]
    times = 0.01 * np.arange(301)
    _, expected = step(TransferFunction(numerator, closed), T=times)
    form = "error" if "error" in input_ else "output"
    coarse, fine = (response(plant, order, b0, form, ts, load=input_ == "load") for ts in (5e-4, 2.5e-4))
    assert np.max(np.abs(coarse - expected)) < 2e-2
    assert np.max(np.abs(extrapolated(coarse, fine) - expected)) < 5e-5


@pytest.mark.parametrize("order", [1, 2])
def test_error_form_is_pid_with_a_measurement_filter(order: int) -> None:
    """C = (Kp + Ki/s + Kd s) / (a2 s^2 + a1 s + 1), g = omega_o/omega_c, settling time Ts.

    F. Bagge Carlson 2024, arXiv 2501.11374, appendix A (order 2 transcribed second-hand; order 1 and the
    filter derived).
    """
    plant, top, bottom, b0 = CONTINUOUS[order]
    g = WO / WC
    if order == 1:
        ts = 4.0 / WC
        d = b0 * (2.0 * g + 1.0)
        pid = [4.0 * g * (g + 2.0) / (d * ts), 16.0 * g**2 / (d * ts**2)]
        filter_ = [ts / (4.0 * (2.0 * g + 1.0)), 1.0]
    else:
        ts = 6.0 / WC
        q = 3.0 * g**2 + 6.0 * g + 1.0
        proportional = (72.0 * g**3 + 108.0 * g**2) / (b0 * q * ts**2)
        pid = [
            (6.0 * g**3 + 36.0 * g**2 + 18.0 * g) / (b0 * q * ts),
            proportional,
            216.0 * g**3 / (b0 * q * ts**3),
        ]
        filter_ = [ts**2 / (36.0 * q), ts * (3.0 * g + 2.0) / (6.0 * q), 1.0]
    denominator = np.polymul(np.polymul(filter_, [1.0, 0.0]), bottom)
    numerator = np.polymul(pid, top)
    _, expected = step(TransferFunction(numerator, np.polyadd(denominator, numerator)), T=0.01 * np.arange(301))
    coarse, fine = (response(plant, order, b0, "error", ts) for ts in (5e-4, 2.5e-4))
    assert np.max(np.abs(extrapolated(coarse, fine) - expected)) < 5e-5


@pytest.mark.parametrize("actuator", [wd.Actuator(), wd.Actuator(limits=(-0.6, 0.5), delay=2.3e-3, rate_limit=20.0)])
@pytest.mark.parametrize("order", [1, 2, 3])
def test_both_forms_have_the_same_feedback_path(order: int, actuator: wd.Actuator) -> None:
    """With r = 0 both forms give the same command and output, and estimates of opposite sign.

    Madonski, Herbst, Stankovic 2023, doi 10.1007/s11768-023-00129-y (from memory); both forms then have the
    same controller from error to command (derived).
    """
    tuning: dict[str, Any] = {"controller_bandwidth": 3.0, "observer_bandwidth": 15.0, "b0": 1.0}
    replays = []
    for adrc in (wd.OutputADRC, wd.ErrorADRC):
        loop = wd.Loop(
            plant=wd.IntegratorChain(order, gain=1.1, initial=0.1),
            controller=adrc(order=order, **tuning),
            sample_period=5e-3,
            duration=4.0,
            reference=0.0,
            sensor=wd.Sensor(noise=1e-4),
            actuator=actuator,
            disturbances={"load": wd.Gust(0.2, correlation_time=0.5)},
        )
        replays.append(wd.Study(loop, measures=[wd.peak("error")], seed=3).replay(0))
    output, error = replays
    assert np.max(np.abs(output["command"])) > 0.1
    for name in ("command", "output", "measured", "load"):
        np.testing.assert_array_equal(output[name], error[name])
    for i in range(order + 1):
        np.testing.assert_array_equal(output[f"estimate_{i + 1}"], -error[f"estimate_{i + 1}"])


# Closed-loop numbers of Herbst's first-order example (Herbst 2013, Electronics 2(3) 246-279, doi
# 10.3390/electronics2030246, shows plots only; numbers computed): b0 = 1, K_P = 4, omega_o = 40, plant K/(T s
# + 1).   K, T, 2 % settling time, overshoot in percent
FIRST_ORDER = np.array(
    [
        [1.0, 0.1, 1.1593, 0.0],
        [1.0, 0.3, 1.1343, 0.0],
        [1.0, 1.0, 1.0354, 0.0],
        [0.3, 1.0, 0.7553, 0.996],
        [3.0, 1.0, 1.0955, 0.0],
        [10.0, 1.0, 1.1139, 0.0],
    ]
)


def first_order_measures(period: float) -> tuple[Values, Values]:
    loop = wd.Loop(
        plant=wd.FirstOrder(gain=wd.column("K"), time_constant=wd.column("T")),
        controller=wd.OutputADRC(order=1, controller_bandwidth=4.0, observer_bandwidth=40.0, b0=1.0),
        sample_period=period,
        duration=4.0,
        reference=1.0,
        disturbances={"load": 0.0},
    )
    table = {"K": FIRST_ORDER[:, 0], "T": FIRST_ORDER[:, 1]}
    outcome = wd.Study(loop, measures=[wd.settling_time(), wd.overshoot()], table=table, table_rows="in_order").run(
        6, progress=False
    )
    settling, overshoot = outcome.measures.values()
    return settling, overshoot


def test_first_order_example_settles_as_computed() -> None:
    (coarse, coarse_over), (fine, fine_over) = first_order_measures(5e-4), first_order_measures(2.5e-4)
    # To the printed precision: half a unit of the last digit, and what the extrapolation leaves.
    np.testing.assert_allclose(extrapolated(coarse, fine), FIRST_ORDER[:, 2], rtol=0.0, atol=0.7e-4)
    np.testing.assert_allclose(100.0 * extrapolated(coarse_over, fine_over), FIRST_ORDER[:, 3], rtol=0.0, atol=0.6e-3)


def test_poles_of_the_first_order_example() -> None:
    """The poles of plant and observer, read off the replayed states, against the computed ones."""
    expected = {1.0: (-40.61520136, 6.94258694, -3.76959728), 0.1: (-45.37940495, 132.99076303, -3.24119011)}
    for time_constant, (real, imaginary, slow) in expected.items():
        poles = []
        for period in (2e-5, 1e-5):
            loop = wd.Loop(
                plant=wd.FirstOrder(gain=1.0, time_constant=time_constant, initial=1.0),
                controller=wd.OutputADRC(order=1, controller_bandwidth=4.0, observer_bandwidth=40.0, b0=1.0),
                sample_period=period,
                duration=0.15,
                reference=0.0,
                disturbances={"load": 0.0},
            )
            replay = wd.Study(loop, measures=[wd.peak("error")]).replay(0)
            states = np.array([replay[n] for n in ("output", "estimate_1", "estimate_2")])
            spacing = round(0.01 / period)
            points = states[:, ::spacing][:, 1:]
            moved = points[:, 1:] @ np.linalg.pinv(points[:, :-1])
            poles.append(np.sort_complex(np.log(np.linalg.eigvals(moved).astype(complex)) / 0.01))
        found = np.sort_complex(extrapolated(*poles))
        wanted = np.sort_complex([real + 1j * imaginary, real - 1j * imaginary, slow])
        np.testing.assert_allclose(found, wanted, rtol=2e-4)


@pytest.mark.parametrize(("order", "rule", "exact"), [(1, 4.0, 0.978006), (2, 6.0, 0.972320)])
def test_settling_rules(order: int, rule: float, exact: float) -> None:
    """omega_c = 4/T (order 1) and 6/T (order 2) settle to 2 % within T (Herbst 2013; from memory).

    With an exact model the response is that of the placed poles: ln 50/4 and 5.83392/6 of T (computed).
    """
    settling = []
    for period in (5e-4, 2.5e-4):
        loop = wd.Loop(
            plant=wd.IntegratorChain(order, gain=1.0),
            controller=wd.OutputADRC(order=order, controller_bandwidth=rule, observer_bandwidth=10.0 * rule, b0=1.0),
            sample_period=period,
            duration=3.0,
            reference=1.0,
            disturbances={"load": 0.0},
        )
        outcome = wd.Study(loop, measures=[wd.settling_time(band=0.02)]).run(1, progress=False)
        settling.append(outcome.measures["settling time (band 0.02) of output"][0])
    assert settling[1] < 1.0
    assert abs(extrapolated(*settling) - exact) < 2e-5

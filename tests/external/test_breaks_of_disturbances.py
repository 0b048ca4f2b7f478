"""Disturbances that jump or bend between samples: each method keeps its order, because steps end there.

The truth is DOP853 (Hairer, Norsett, Wanner 1993, Solving Ordinary Differential Equations I, section II.5, as in SciPy)
at rtol 1e-13, restarted wherever the command or the disturbance breaks.
"""

from __future__ import annotations

import itertools
import math
import sys
from collections.abc import Callable
from pathlib import Path
from typing import Any, NamedTuple

import numpy as np
import pytest
from scipy.integrate import solve_ivp

import windage as wd

sys.path.insert(0, str(Path(__file__).parent))
from reference_loop import Values
from test_integrator_order import INTERVALS, ORDERS, PERIOD, exact, finals, idle

END = INTERVALS * PERIOD


class Course(NamedTuple):
    """A disturbance, where it breaks, and its value at t with the formula that holds at `inside`."""

    load: Any
    breaks: list[float]
    value: Callable[[float, float], float]


def jerk_limited() -> Course:
    """Seven phases, with unlike lengths: position by integrating the jerk, phase after phase."""
    start, speed, acceleration, jerk, amplitude = 0.361, 0.9, 1.7, 9.0, 1.6
    ramp, rise = acceleration / jerk, speed / acceleration
    cruise = amplitude / speed - rise - ramp
    lengths = [ramp, rise - ramp, ramp, cruise, ramp, rise - ramp, ramp]
    jerks = [jerk, 0.0, -jerk, 0.0, -jerk, 0.0, jerk]
    breaks = (start + np.cumsum([0.0, *lengths])).tolist()

    def value(t: float, inside: float) -> float:
        x = v = a = 0.0
        for begin, end, j in zip(breaks[:-1], breaks[1:], jerks, strict=True):
            if inside < begin:
                return x
            h = (t if inside < end else end) - begin
            x, v, a = x + v * h + a * h * h / 2 + j * h**3 / 6, v + a * h + j * h * h / 2, a + j * h
        return x

    return Course(wd.JerkLimited(amplitude, start, speed, acceleration, jerk), breaks, value)


def quintic(t: float, inside: float) -> float:
    if inside < 0.77:
        return 0.0
    s = (t - 0.77) / 1.31
    return 1.5 if inside > 2.08 else 1.5 * (10 * s**3 - 15 * s**4 + 6 * s**5)


TIMES, VALUES = [0.31, 0.64, 0.64, 1.21, 2.83, 3.17], [0.2, 1.1, -0.6, 0.9, -0.4, 0.1]
CORNERS = [0.31, 0.64, 1.21, 2.83, 3.17]


def held(_: float, inside: float) -> float:
    return VALUES[max(int(np.searchsorted(TIMES, inside, "right")) - 1, 0)]


def straight(t: float, inside: float) -> float:
    part = slice(0, 2) if inside < 0.64 else slice(2, 6)
    return float(np.interp(t, TIMES[part], VALUES[part]))


def started(t: float, inside: float) -> float:
    return 0.1 + (0.8 * math.sin(2.0 * math.pi / 0.9 * (t - 1.377) + 0.6) if inside > 1.377 else 0.0)


def stepped(_: float, inside: float) -> float:
    return 1.3 if inside > 1.618 else 0.0


def pulsed(_: float, inside: float) -> float:
    return 2.1 if 2.213 < inside < 2.33 else 0.0


def ramped(t: float, _: float) -> float:
    return 1.1 * (min(max(t, 0.713), 2.419) - 0.713)


def added(t: float, inside: float) -> float:
    return stepped(t, inside) + pulsed(t, inside) + started(t, inside)


COURSES = {
    "step": Course(wd.Step(1.3, at=1.618), [1.618], stepped),
    "pulse within one interval": Course(wd.Pulse(2.1, start=2.213, width=0.117), [2.213, 2.33], pulsed),
    "ramp": Course(wd.Ramp(1.1, start=0.713, stop=2.419), [0.713, 2.419], ramped),
    "table": Course(wd.Table(TIMES, VALUES), CORNERS, straight),
    "table of held values": Course(wd.Table(TIMES, VALUES, "hold"), CORNERS, held),
    "sine that starts": Course(wd.Sine(0.8, period=0.9, phase=0.6, offset=0.1, start=1.377), [1.377], started),
    "quintic": Course(wd.Quintic(1.5, start=0.77, duration=1.31), [0.77, 2.08], quintic),
    "jerk limited": jerk_limited(),
    "sum": Course(
        wd.Step(1.3, at=1.618)
        + wd.Pulse(2.1, start=2.213, width=0.117)
        + wd.Sine(0.8, period=0.9, phase=0.6, offset=0.1, start=1.377),
        [1.618, 2.213, 2.33, 1.377],
        added,
    ),
}


def study(integrator: str, steps: int, delay: float, load: Any) -> wd.Study:
    """The plant of the test of the order, under the load."""
    plant = wd.Plant(
        states={"x": 0.3, "v": 0.0},
        equations={"x": "v", "v": "u + w - 4*sin(2*x) - 0.3*v*(1 + 0.5*cos(t))"},
        input="u",
        output="x",
        disturbances=["w"],
    )
    loop = wd.Loop(
        plant=plant, controller=idle(), sample_period=PERIOD, duration=END,
        reference=wd.Sine(0.8, period=3.1), actuator=wd.Actuator(delay=delay),
        disturbances={"w": load}, integrator=integrator, steps_per_sample=steps,
    )  # fmt: skip
    return wd.Study(loop, measures=[wd.final("x"), wd.final("v")])


def truth(delay: float, course: Course) -> Values:
    """The motion by DOP853, piece by piece."""
    omega = 2.0 * math.pi / 3.1
    changes = [k * PERIOD + delay for k in range(-2, INTERVALS) if 0.0 < k * PERIOD + delay < END]
    corners = sorted({0.0, END, *changes, *(b for b in course.breaks if 0.0 < b < END)})
    x = np.array([0.3, 0.0])
    for start, stop in itertools.pairwise(corners):
        inside = 0.5 * (start + stop)
        sent = math.floor((inside - delay) / PERIOD)
        u = 0.8 * omega * math.cos(omega * sent * PERIOD) if sent >= 0 else 0.0

        def rate(t: float, z: Values, u: float = u, inside: float = inside) -> list[float]:
            w = course.value(t, inside)
            return [z[1], u + w - 4.0 * math.sin(2.0 * z[0]) - 0.3 * z[1] * (1.0 + 0.5 * math.cos(t))]

        x = solve_ivp(rate, (start, stop), x, method="DOP853", rtol=1e-13, atol=1e-15).y[:, -1]
    return x


def test_the_truth_is_that_of_the_smooth_test() -> None:
    def sine(t: float, _: float) -> float:
        return 0.5 * math.sin(2.0 * math.pi * t / 0.7)

    course = Course(None, [], sine)
    assert np.max(np.abs(truth(0.5, course) - exact(0.5, 0.5))) < 1e-11


@pytest.mark.parametrize("course", COURSES)
@pytest.mark.parametrize("delay", [0.0, 0.37 * PERIOD])
@pytest.mark.parametrize("integrator", ORDERS)
def test_no_order_is_lost_at_a_break(integrator: str, delay: float, course: str) -> None:
    order, counts = ORDERS[integrator]
    expected = truth(delay, COURSES[course])
    errors = [np.max(np.abs(finals(study(integrator, n, delay, COURSES[course].load)) - expected)) for n in counts]
    lengths = PERIOD / (np.array(counts) + (1.0 if delay else 0.0))
    # Pieces are no longer than steps, but where they lie varies; a method that met a jump would fall to order 1,
    # one that met a corner to order 2, one that met a jump of the third derivative to order 4.
    slope = np.polyfit(np.log(lengths), np.log(errors), 1)[0]
    assert abs(slope - order) < 0.35 or errors[-1] < 1e-13, f"errors {errors}, slope {slope:.3f}"


@pytest.mark.parametrize("course", COURSES)
@pytest.mark.parametrize("delay", [0.0, 0.37 * PERIOD])
def test_the_reference_integration_breaks_there_too(delay: float, course: str) -> None:
    tight = finals(study("rk4", 1, delay, COURSES[course].load), integrator="reference", reference_tolerance=1e-12)
    assert np.max(np.abs(tight - truth(delay, COURSES[course]))) < 2e-11


GAP = 1e-9  # of a sample period: what makes two instants the same instant


@pytest.mark.parametrize("integrator", [*ORDERS, "reference"])
@pytest.mark.parametrize("delay", [0.0, 0.004, 0.0137])
@pytest.mark.parametrize("off", [0.0, 0.3 * GAP, 0.999 * GAP, GAP, 1.001 * GAP, 3.0 * GAP, 0.01])
def test_breaks_close_to_sample_instants_and_to_each_other(integrator: str, delay: float, off: float) -> None:
    """x' = w is exact for any method that meets no break inside a step; an instant may be taken for a close one."""
    period = 0.01
    plant = wd.Plant(
        states={"x": 0.0}, equations={"x": "u + w1 + w2"}, input="u", output="x", disturbances=["w1", "w2"]
    )
    for at, side in itertools.product((0.29, 0.58, 0.5837, 0.584), (-1.0, 1.0)):
        first, second = at + side * off * period, at - 2.0 * side * off * period
        loop = wd.Loop(
            plant=plant, controller=idle(), sample_period=period, duration=1.0, reference=0.0,
            actuator=wd.Actuator(delay=delay),
            disturbances={"w1": wd.Step(1.0, at=first), "w2": wd.Pulse(2.0, start=second, width=0.0031)},
        )  # fmt: skip
        used = {"integrator": integrator, "steps_per_sample": 3}
        found = finals(wd.Study(loop, measures=[wd.final("x")]), **used)[0]
        assert abs(found - (1.0 - first + 2.0 * 0.0031)) < 6.0 * GAP * period + 2e-14

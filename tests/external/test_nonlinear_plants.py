"""Nonlinear loops against SciPy's DOP853 at rtol 1e-12, one sample interval after another.

The engine integrates with many steps of the fifth-order method, so that what is compared is the equations,
the way inputs and disturbances reach them, and the controller around them. DOP853: Hairer, Norsett, Wanner
1993, Solving Ordinary Differential Equations I, section II.10.
"""

from __future__ import annotations

import math
import sys
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from scipy.optimize import brentq

import windage as wd

sys.path.insert(0, str(Path(__file__).parent))
from reference_loop import (
    Adrc,
    ReferenceLoop,
    Smooth,
    Values,
    assert_same_signals,
    controller_gains,
    observer_gains,
)

Rate = Callable[[float, Values, float, Sequence[float]], Sequence[float]]


@dataclass
class Case:
    """One plant twice: for the engine, and as a Python function."""

    plant: Any
    rate: Rate
    order: int
    b0: float
    bandwidths: tuple[float, float]
    period: float
    samples: int = 151
    output: Callable[[float, Values], float] = lambda t, x: float(x[0])  # noqa: ARG005
    initial: Sequence[float] = (0.0, 0.0)
    level: float = 1.0
    load: tuple[Any, Callable[[float], float]] | None = None
    actuator: dict[str, float] = field(default_factory=dict)
    steps: int = 16
    tolerance: float = 1e-10


def simulate(case: Case, form: str) -> tuple[dict[str, Values], dict[str, Values]]:
    """Return the signals of the engine and of the reference, states under their place."""
    adrc = wd.OutputADRC if form == "output" else wd.ErrorADRC
    wc, wo = case.bandwidths
    loads = {name: case.load[0] for name in case.plant.disturbance_names if case.load}
    loop = wd.Loop(
        plant=case.plant,
        controller=adrc(order=case.order, controller_bandwidth=wc, observer_bandwidth=wo, b0=case.b0),
        sample_period=case.period,
        duration=(case.samples - 1) * case.period,
        reference=wd.Step(case.level),
        actuator=wd.Actuator(**case.actuator),
        disturbances=loads,
        integrator="cash_karp5",
        steps_per_sample=case.steps,
    )
    replay = wd.Study(loop, measures=[wd.peak("error")]).replay(0)
    functions = [case.load[1]] if case.load else []
    l_gains = observer_gains(case.order, wo, case.period, "zero_order_hold")
    mirror = ReferenceLoop(
        plant=Smooth(case.rate, case.output, functions),
        controller=Adrc(form, case.order, case.b0, controller_gains(case.order, wc), l_gains),
        period=case.period,
        samples=case.samples,
        reference=[lambda _: case.level] + [lambda _: 0.0] * case.order,
        initial_state=case.initial,
        disturbances=dict(zip(loads, functions, strict=True)),
        delay=case.actuator.get("delay", 0.0),
        lag=case.actuator.get("time_constant", 0.0),
    )
    found = {name: replay[name] for name in replay.signals}
    found |= {f"state_{i + 1}": replay[name] for i, name in enumerate(case.plant.state_names)}
    return found, mirror.run()


def tanh_rate(t: float, x: Values, u: float, w: Sequence[float]) -> list[float]:  # noqa: ARG001
    return [x[1], (310.0 * u - 300.0 * x[1] - 60.0 * math.tanh(x[1] / 0.05) + w[0]) / 4200.0]


def tank_rate(t: float, x: Values, u: float, w: Sequence[float]) -> list[float]:  # noqa: ARG001
    return [(u - 0.3 * math.sqrt(2.0 * 9.81 * max(x[0], 0.0))) / 2.0]


def valve_rate(t: float, x: Values, u: float, w: Sequence[float]) -> list[float]:  # noqa: ARG001
    force = math.copysign(max(abs(u) - 0.3, 0.0), u)
    drag = 0.8 * x[1] if x[1] > 0.0 else 2.0 * x[1]
    return [x[1], force - drag - min(max(3.0 * x[0], -1.0), 1.0)]


def aging_rate(t: float, x: Values, u: float, w: Sequence[float]) -> list[float]:
    return [-x[0] * (1.0 + 0.5 * math.sin(3.0 * t)) + (1.0 + math.exp(-t)) * u + w[0] * x[0] ** 2]


def sine(amplitude: float, period: float) -> tuple[Any, Callable[[float], float]]:
    return wd.Sine(amplitude, period=period), lambda t: amplitude * math.sin(2.0 * math.pi * t / period)


CASES = {
    "tanh_friction_sine_load": Case(
        wd.Plant(
            states=["azimuth", "rate"],
            equations={
                "azimuth": "rate",
                "rate": "(gear*torque - drag*rate - coulomb*tanh(rate/smooth) + wind) / inertia",
            },
            input="torque",
            output="azimuth",
            disturbances=["wind"],
            parameters={"inertia": 4200.0, "gear": 310.0, "drag": 300.0, "coulomb": 60.0, "smooth": 0.05},
        ),
        tanh_rate, 2, 310 / 4200, (5.0, 30.0), 4e-3, level=0.1, load=sine(200.0, 0.13),
        actuator={"delay": 3.3e-3},
    ),
    "square_root_outflow": Case(
        wd.Plant(
            states={"level": 0.5},
            equations={"level": "(flow - outlet*sqrt(2*9.81*max(level, 0)))/area"},
            input="flow", output="level", parameters={"area": 2.0, "outlet": 0.3},
        ),
        tank_rate, 1, 0.5, (2.0, 10.0), 0.02, initial=(0.5,),
        actuator={"delay": 0.013, "time_constant": 0.05},
    ),
    "dead_zone_and_where": Case(
        wd.Plant(
            states=["x", "v"],
            equations={"x": "v", "v": "deadzone(u, 0.3) - where(v > 0, 0.8*v, 2*v) - clip(3*x, -1, 1)"},
            input="u", output="x",
        ),
        valve_rate, 2, 1.0, (4.0, 20.0), 0.01, samples=301, steps=64, tolerance=1e-8,  # kinks cost order
    ),
    "time_varying_auxiliary_output": Case(
        wd.Plant(
            states={"x": 0.4},
            equations={"x": "-x*(1 + 0.5*sin(3*t)) + (1 + exp(-t))*u + w*x**2"},
            input="u", output="seen", disturbances=["w"], auxiliaries={"seen": "x + 0.05*sin(2*t)"},
        ),
        aging_rate, 1, 1.5, (3.0, 15.0), 0.01, initial=(0.4,), load=sine(0.3, 0.5),
        output=lambda t, x: float(x[0] + 0.05 * math.sin(2.0 * t)),
    ),
}  # fmt: skip


@pytest.mark.parametrize("form", ["output", "error"])
@pytest.mark.parametrize("name", CASES)
def test_plant_as_equations(name: str, form: str) -> None:
    found, expected = simulate(CASES[name], form)
    assert_same_signals(found, expected, CASES[name].tolerance)


DC = {
    "resistance": 2.0,
    "inductance": 0.02,
    "torque_constant": 0.1,
    "inertia": 5e-4,
    "viscous_friction": 2e-4,
    "coulomb_friction": 0.01,
    "friction_speed": 0.5,
}
TWO_MASS = {
    "motor_inertia": 1.5e-3,
    "load_inertia": 4e-3,
    "stiffness": 25.0,
    "damping": 0.02,
    "coulomb_friction": 0.05,
    "breakaway_friction": 0.09,
    "stribeck_speed": 0.8,
    "friction_speed": 0.2,
    "viscous_friction": 0.01,
}


def dc_rate(t: float, x: Values, u: float, w: Sequence[float]) -> list[float]:  # noqa: ARG001
    friction = DC["viscous_friction"] * x[1] + DC["coulomb_friction"] * math.tanh(x[1] / DC["friction_speed"])
    electric = (u - DC["resistance"] * x[2] - DC["torque_constant"] * x[1]) / DC["inductance"]
    return [x[1], (DC["torque_constant"] * x[2] - friction - w[0]) / DC["inertia"], electric]


def two_mass_rate(t: float, x: Values, u: float, w: Sequence[float]) -> list[float]:  # noqa: ARG001
    p = TWO_MASS
    shaft = p["stiffness"] * (x[0] - x[2]) + p["damping"] * (x[1] - x[3])
    excess = (p["breakaway_friction"] - p["coulomb_friction"]) * math.exp(-((x[3] / p["stribeck_speed"]) ** 2))
    friction = (p["coulomb_friction"] + excess) * math.tanh(x[3] / p["friction_speed"])
    load = shaft - friction - p["viscous_friction"] * x[3] - w[0]
    return [x[1], (u - shaft) / p["motor_inertia"], x[3], load / p["load_inertia"]]


DC_TEXT = wd.Plant(
    states=["angle", "speed", "current"],
    equations={
        "angle": "speed",
        "speed": "(torque_constant*current - viscous_friction*speed"
        " - coulomb_friction*tanh(speed/friction_speed) - load)/inertia",
        "current": "(voltage - resistance*current - torque_constant*speed)/inductance",
    },
    input="voltage",
    output="angle",
    disturbances=["load"],
    parameters=DC,
)
TWO_MASS_TEXT = wd.Plant(
    states=["motor_angle", "motor_speed", "load_angle", "load_speed"],
    equations={
        "motor_angle": "motor_speed",
        "motor_speed": "(torque - shaft)/motor_inertia",
        "load_angle": "load_speed",
        "load_speed": "(shaft - friction - viscous_friction*load_speed - load)/load_inertia",
    },
    auxiliaries={
        "shaft": "stiffness*(motor_angle - load_angle) + damping*(motor_speed - load_speed)",
        "excess": "(breakaway_friction - coulomb_friction)*exp(-(load_speed/stribeck_speed)**2)",
        "friction": "(coulomb_friction + excess)*tanh(load_speed/friction_speed)",
    },
    input="torque",
    output="motor_angle",
    disturbances=["load"],
    parameters=TWO_MASS,
)
DRIVES: dict[str, tuple[Any, Any, Case]] = {
    "dc": (
        wd.DCDrive(**DC), DC_TEXT,
        Case(None, dc_rate, 2, 100.0, (15.0, 75.0), 2e-3, initial=(0.0,) * 3, load=sine(0.01, 0.2),
             actuator={"delay": 0.9e-3}, tolerance=2e-11),
    ),
    "two_mass": (
        wd.TwoMassDrive(**TWO_MASS), TWO_MASS_TEXT,
        Case(None, two_mass_rate, 2, 180.0, (10.0, 60.0), 2e-3, initial=(0.0,) * 4, load=sine(0.05, 0.3),
             actuator={"time_constant": 4e-3}, steps=64),
    ),
}  # fmt: skip


@pytest.mark.parametrize("form", ["output", "error"])
@pytest.mark.parametrize("written", ["stock", "text"])
@pytest.mark.parametrize("name", DRIVES)
def test_stock_drive_and_its_equations_as_text(name: str, written: str, form: str) -> None:
    stock, text, case = DRIVES[name]
    found, expected = simulate(replace(case, plant=stock if written == "stock" else text), form)
    assert np.max(np.abs(expected["command"])) > 0.1
    assert_same_signals(found, expected, case.tolerance)


# Johansson 2000, "The quadruple-tank process", IEEE TCST 8(3) 456-465, setting P- (transcribed second-hand).
# The printed levels are measured; those below are the equilibrium of the printed parameters (computed).
TANKS = {
    "A1": 28.0, "A2": 32.0,
    "a1": 0.071, "a2": 0.057, "g": 981.0, "k1": 3.33, "k2": 3.35, "g1": 0.7, "g2": 0.6,
}  # fmt: skip
LEVELS = (12.26296752, 12.78315840, 1.63394113, 1.40904470)


def test_quadruple_tank_rests_at_the_equilibrium_of_its_published_parameters() -> None:
    plant = wd.Plant(
        states={f"h{i + 1}": level for i, level in enumerate(LEVELS)},
        equations={
            "h1": "(-a1*sqrt(2*g*h1) + a1*sqrt(2*g*h3) + g1*k1*(3 + v))/A1",
            "h2": "(-a2*sqrt(2*g*h2) + a2*sqrt(2*g*h4) + g2*k2*3)/A2",
            "h3": "(-a1*sqrt(2*g*h3) + (1 - g2)*k2*3)/A1",
            "h4": "(-a2*sqrt(2*g*h4) + (1 - g1)*k1*(3 + v))/A2",
        },
        input="v",
        output="0.5*h1",
        parameters=TANKS,
    )
    idle = wd.OutputADRC(order=1, controller_gains=[0.0], observer_gains=[0.0, 0.0], b0=1.0, cancel_disturbance=False)
    loop = wd.Loop(plant=plant, controller=idle, sample_period=1.0, duration=600.0, reference=0.0, steps_per_sample=2)
    replay = wd.Study(loop, measures=[wd.peak("error")]).replay(0)
    for i, level in enumerate(LEVELS):
        assert abs(replay[f"h{i + 1}"][-1] - level) < 1e-7
    # The lower right tank by hand: its inflow is that of the tank above it and its own.
    inflow = (1 - TANKS["g1"]) * TANKS["k1"] * 3.0 + TANKS["g2"] * TANKS["k2"] * 3.0
    by_hand = brentq(lambda h: TANKS["a2"] * math.sqrt(2.0 * TANKS["g"] * h) - inflow, 1.0, 50.0)
    assert abs(replay["h2"][-1] - by_hand) < 1e-7

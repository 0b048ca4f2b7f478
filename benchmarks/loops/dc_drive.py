"""Loop (c): a DC drive once as the stock plant in C++ and once as equations; all else as in loop (b).

Only windage runs it: the question is what writing the equations as text costs. Load steps and noise are those of the
other loops; the voltage is limited.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from .problem import Problem, Values, constants_of


@dataclass(frozen=True)
class Numbers:
    """Numbers that are the same in every trial, SI units."""

    sample_period: float = 1e-3
    duration: float = 3.0
    amplitude: float = 1.0
    period: float = 2.0
    friction_speed: float = 0.1
    controller_bandwidth: float = 30.0
    observer_bandwidth: float = 120.0
    b0: float = 300.0
    noise: float = 1e-4
    resolution: float = 2e-4
    limit: float = 12.0
    correlation_time: float = 0.05


N = Numbers()

EQUATIONS = {
    "angle": "speed",
    "speed": "(torque_constant*current - viscous_friction*speed"
    f" - coulomb_friction*tanh(speed/{N.friction_speed}) - load) / inertia",
    "current": "(voltage - resistance*current - torque_constant*speed) / inductance",
}


def make_plant(stock: bool) -> Any:
    """Return the drive as the stock plant or as equations."""
    import windage as wd

    parameters: dict[str, Any] = {
        "resistance": wd.uniform(0.8, 1.2),
        "inductance": wd.tolerance(4e-3, percent=10),
        "torque_constant": wd.tolerance(0.1, percent=5),
        "inertia": wd.uniform(3e-4, 6e-4),
        "viscous_friction": wd.uniform(1e-4, 5e-4),
        "coulomb_friction": wd.triangular(0.005, 0.02, 0.05),
    }
    if stock:
        return wd.DCDrive(**parameters, friction_speed=N.friction_speed)
    return wd.Plant(
        states={"angle": 0.0, "speed": 0.0, "current": 0.0},
        equations=EQUATIONS,
        input="voltage",
        output="angle",
        disturbances=["load"],
        parameters=parameters,
    )


def make_study(noise: bool, stock: bool = False) -> Any:
    """Return windage's study of this loop."""
    import windage as wd

    loop = wd.Loop(
        plant=make_plant(stock),
        controller=wd.ErrorADRC(
            order=2,
            controller_bandwidth=N.controller_bandwidth,
            observer_bandwidth=N.observer_bandwidth,
            b0=N.b0,
        ),
        sample_period=N.sample_period,
        duration=N.duration,
        reference=wd.Sine(amplitude=N.amplitude, period=N.period),
        sensor=wd.Sensor(noise=N.noise if noise else 0.0, resolution=N.resolution),
        actuator=wd.Actuator(limits=(-N.limit, N.limit), delay=wd.uniform(0.25e-3, 2.5e-3)),
        disturbances={"load": wd.Gust(intensity=0.02 if noise else 0.0, correlation_time=N.correlation_time)},
        integrator="rk4",
        steps_per_sample=1,
    )
    measures = [
        wd.peak("error", after=1.0),
        wd.rms("voltage"),
        wd.ise(),
        wd.total_variation("command"),
        wd.time_in_saturation(),
    ]
    return wd.Study(loop, measures=measures, seed=7)


def reference() -> Values:
    """Return the reference at the sample instants, shape (1, samples)."""
    time = np.arange(PROBLEM.samples) * N.sample_period
    return np.array([N.amplitude * np.sin(2.0 * np.pi / N.period * time)])


PROBLEM = Problem(
    letter="c",
    title="DC drive: stock plant in C++ against the same plant as equations",
    constants=constants_of(N),
    parameters=(
        "resistance",
        "inductance",
        "torque_constant",
        "inertia",
        "viscous_friction",
        "coulomb_friction",
        "actuator.delay",
    ),
    samples=round(N.duration / N.sample_period) + 1,
    scales={"peak error": 1e-3, "rms voltage": 0.1, "ISE": 1e-4, "total variation": 1.0, "time in saturation": 0.1},
    study=make_study,
    reference=reference,
    has_noise=True,
)

"""Loop (b): a drive with friction, written as equations, with noise, a fractional delay, limits and five measures.

    inertia * rate' = gear * torque - drag * rate - coulomb * tanh(rate / smoothing) + load

Classical Runge-Kutta, one step a sample, which the fractional delay splits into two; sensor noise and resolution;
command limits; a Gauss-Markov load held between samples; a sine to follow; error-form ADRC of order 2.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from .problem import Problem, Values, constants_of


@dataclass(frozen=True)
class Numbers:
    """Numbers that are the same in every trial, SI units."""

    sample_period: float = 2e-3
    duration: float = 10.0
    amplitude: float = 0.05
    period: float = 15.0
    smoothing: float = 2e-3
    controller_bandwidth: float = 5.0
    observer_bandwidth: float = 30.0
    b0: float = 0.074
    noise: float = 2e-5
    resolution: float = 1e-5
    limit: float = 4.0
    correlation_time: float = 1.5
    peak_after: float = 5.0
    longest_delay: float = 5e-3


N = Numbers()


def make_study(noise: bool) -> Any:
    """Return windage's study of this loop; without noise the sensor is clean and the load is zero."""
    import windage as wd

    plant = wd.Plant(
        states={"angle": 0.0, "rate": 0.0},
        equations={
            "angle": "rate",
            "rate": f"(gear*torque - drag*rate - coulomb*tanh(rate/{N.smoothing}) + load) / inertia",
        },
        input="torque",
        output="angle",
        disturbances=["load"],
        parameters={
            "inertia": wd.normal(4200.0, 250.0),
            "gear": wd.tolerance(310.0, percent=4),
            "drag": wd.uniform(150.0, 600.0),
            "coulomb": wd.triangular(20.0, 60.0, 140.0),
        },
    )
    intensity = wd.uniform(100.0, 400.0) if noise else 0.0
    loop = wd.Loop(
        plant=plant,
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
        actuator=wd.Actuator(limits=(-N.limit, N.limit), delay=wd.uniform(0.5e-3, N.longest_delay)),
        disturbances={"load": wd.Gust(intensity=intensity, correlation_time=N.correlation_time)},
        integrator="rk4",
        steps_per_sample=1,
    )
    measures = [
        wd.peak("error", after=N.peak_after),
        wd.rms("torque"),
        wd.ise(),
        wd.total_variation("command"),
        wd.time_in_saturation(),
    ]
    return wd.Study(loop, measures=measures, seed=2026)


def reference() -> Values:
    """Return the reference at the sample instants, shape (1, samples)."""
    time = np.arange(PROBLEM.samples) * N.sample_period
    return np.array([N.amplitude * np.sin(2.0 * np.pi / N.period * time)])


# One trial and sample, with windage's elementary functions. Eight derivatives: hyperbolic tangent 42, the rest 5; two
# Runge-Kutta steps of 20; what drives them 4; two normal numbers 70 (the generator works on integers, not counted);
# load 3; error 1; sensor noise 2; rounding 8; observer 16; controller and limits 7; delay 5; measures 11.
OPERATIONS = 8 * 47 + 2 * 20 + 4 + 70 + 3 + 1 + 2 + 8 + 16 + 7 + 5 + 11

PROBLEM = Problem(
    letter="b",
    title="drive with friction as equations; noise, fractional delay, limits, five measures",
    constants=constants_of(N),
    parameters=("inertia", "gear", "drag", "coulomb", "actuator.delay", "disturbances.load.intensity"),
    samples=round(N.duration / N.sample_period) + 1,
    scales={"peak error": 1e-5, "rms torque": 0.1, "ISE": 1e-7, "total variation": 1.0, "time in saturation": 0.1},
    study=make_study,
    reference=reference,
    has_noise=True,
    operations=OPERATIONS,
)

"""Loop (d): the geared servo axis of the example studies; two masses, friction, cogging, ten steps a sample.

    motor_inertia * motor_speed' = torque_gain * torque - shaft + cogging * sin(24 * motor_angle + phase)
    load_inertia * load_speed' = shaft - friction - load
    torque' = (command - torque) / torque_lag
    shaft = stiffness * (motor_angle - load_angle) + damping * (motor_speed - load_speed)
    friction = (coulomb + (breakaway_ratio - 1) * coulomb * exp(-(load_speed / 0.5)^2)) * tanh(load_speed / 0.02)
               + viscous * load_speed

with the shaft's damping from a damping ratio of its resonance. Output-form ADRC of order 2 with a quintic reference
whose derivatives are fed forward; a delay of one or two whole samples; an encoder of 16 bits with a little noise; a
load step at a sample instant. windage reads the study file; the numbers below are those of the file, for the peers.
"""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from .problem import Problem, Values, constants_of


@dataclass(frozen=True)
class Numbers:
    """Numbers that are the same in every trial, SI units."""

    sample_period: float = 250e-6
    duration: float = 0.9
    steps: int = 10
    move_start: float = 0.02
    move_time: float = 0.25
    distance: float = 1.0
    cogging_periods: float = 24.0
    stribeck_speed: float = 0.5
    smoothing: float = 0.02
    controller_bandwidth: float = 165.0
    observer_bandwidth: float = 460.0
    b0: float = 850.0
    resolution: float = 6.283185307179586 / 65536
    noise: float = 0.3 * 6.283185307179586 / 65536
    limit: float = 6.0
    settle_tolerance: float = 1e-3
    standstill: float = 0.45
    loaded: float = 0.55


N = Numbers()

#: Names of the drawn parameters, in the order in which the peers take them.
PARAMETERS = (
    "motor_inertia",
    "load_inertia",
    "stiffness",
    "damping_ratio",
    "torque_lag",
    "torque_gain",
    "coulomb",
    "breakaway_ratio",
    "viscous",
    "cogging",
    "cogging_phase",
    "disturbances.load_torque.amplitude",
    "actuator.delay",
)
STUDY_FILE = Path(__file__).parents[2] / "notebooks-examples" / "studies" / "geared_servo.toml"


def make_study(noise: bool) -> Any:
    """Return windage's study of this loop."""
    import windage as wd

    study = wd.load(STUDY_FILE)
    return study if noise else study.with_(sensor=wd.Sensor(resolution=N.resolution))


def reference() -> Values:
    """Return reference, speed and acceleration at the sample instants, shape (3, samples)."""
    time = np.arange(PROBLEM.samples) * N.sample_period - N.move_start
    s = np.clip(time / N.move_time, 0.0, 1.0)
    moving = (time > 0.0) & (time < N.move_time)
    position = N.distance * s**3 * (s * (s * 6.0 - 15.0) + 10.0)
    speed = np.where(moving, N.distance / N.move_time * s**2 * (s * (s * 30.0 - 60.0) + 30.0), 0.0)
    acceleration = np.where(moving, N.distance / N.move_time**2 * s * (s * (s * 120.0 - 180.0) + 60.0), 0.0)
    return np.array([position, speed, acceleration])


PROBLEM = Problem(
    letter="d",
    title="geared servo axis as equations: five states, ten Runge-Kutta steps a sample",
    constants=constants_of(N),
    parameters=PARAMETERS,
    samples=round(N.duration / N.sample_period) + 1,
    scales={"following error": 1e-3, "settling time": 0.01, "load error": 1e-3, "torque ripple": 0.01},
    study=make_study,
    reference=reference,
    has_noise=True,
)

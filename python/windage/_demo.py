"""The demonstration study: the azimuth drive of a dish antenna in gusting wind.

All its numbers are invented. They are chosen so that a fast observer tracks well on the nominal unit, while a
few units in a hundred fail in one of two ways: strong wind, or a long delay on a light and strong unit.
"""

from __future__ import annotations

from ._controllers import ErrorADRC
from ._loop import Loop
from ._measure_functions import peak, rms
from ._plants import Plant
from ._sensor_actuator import Actuator, Sensor
from ._spreads import normal, tolerance, triangular, uniform
from ._study import Study
from ._time_functions import Gust, Sine

#: What `windage demo` runs and claims.
DEMO_TRIALS = 10_000  # a verdict within three seconds on two cores
DEMO_AT_LEAST = 0.95
DEMO_CONFIDENCE = 0.95


def demo_study() -> Study:
    """Return the study of the README, that of `windage demo`; numbers in SI units."""
    dish = Plant(
        states={"azimuth": 0.0, "rate": 0.0},
        equations={
            "azimuth": "rate",
            "rate": "(gear*torque - drag*rate - coulomb*tanh(rate/0.002) + wind) / inertia",
        },
        input="torque",
        output="azimuth",
        disturbances=["wind"],
        parameters={
            "inertia": normal(4200.0, 250.0),  # kg m^2
            "gear": tolerance(310.0, percent=4),
            "drag": uniform(150.0, 600.0),  # N m s
            "coulomb": triangular(20.0, 60.0, 140.0),  # N m
        },
    )
    loop = Loop(
        plant=dish,
        controller=ErrorADRC(order=2, controller_bandwidth=8.0, observer_bandwidth=80.0, b0=310 / 4200),
        sample_period=2e-3,
        duration=20.0,
        reference=Sine(amplitude=0.05, period=25.0),
        sensor=Sensor(noise=2e-5, resolution=1e-5),
        actuator=Actuator(limits=(-60.0, 60.0), delay=uniform(2e-3, 23e-3)),
        disturbances={"wind": Gust(intensity=uniform(300.0, 1200.0), correlation_time=1.5)},
    )
    return Study(loop, requirements=[peak("error", after=5.0) <= 1e-3, rms("torque") <= 12.0], seed=2026)

"""Loop (a): a linear second-order plant, sampled exactly, under output-form ADRC of order 2. No noise, no delay.

The plant is K / (T^2 s^2 + 2 D T s + 1) with D < 1 and a held input; the sampled plant is exp(A Ts) in every program.
The shape follows the running example of G. Herbst, A simulative study on active disturbance rejection control,
Electronics 2 (2013) 246-279; the numbers are ours.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from .problem import Problem, Values, constants_of


@dataclass(frozen=True)
class Numbers:
    """Numbers that are the same in every trial, SI units."""

    sample_period: float = 0.005
    duration: float = 10.0
    target: float = 1.0
    controller_bandwidth: float = 3.0
    observer_bandwidth: float = 30.0
    b0: float = 1.0
    peak_after: float = 1.0


N = Numbers()


def make_study(noise: bool) -> Any:
    """Return windage's study of this loop; it has no noise either way."""
    del noise
    import windage as wd

    disturbances: dict[str, Any] = {"load": 0.0}
    loop = wd.Loop(
        plant=wd.SecondOrder(
            gain=wd.uniform(0.8, 1.2), time_constant=wd.uniform(0.8, 1.25), damping=wd.uniform(0.3, 0.9)
        ),
        controller=wd.OutputADRC(
            order=2,
            controller_bandwidth=N.controller_bandwidth,
            observer_bandwidth=N.observer_bandwidth,
            b0=N.b0,
            reference_derivatives=0,
        ),
        sample_period=N.sample_period,
        duration=N.duration,
        reference=wd.Step(amplitude=N.target),
        disturbances=disturbances,
    )
    return wd.Study(loop, measures=[wd.peak("error", after=N.peak_after), wd.ise(), wd.maximum("output")], seed=11)


def reference() -> Values:
    """Return the reference at the sample instants, shape (1, samples)."""
    return np.full((1, PROBLEM.samples), N.target)


# One trial and sample: plant 2 (1 + 2 * 2) = 10; error 1; observer: drive 2, prediction 6, innovation 1, correction 6;
# controller: deviation 1, gains 2, sums 3 (one of them the estimated disturbance), division by b0 as a product 1;
# measures: magnitude and comparison 2, square and trapezium 4, comparison 1.
OPERATIONS = 10 + 1 + 15 + 7 + 7

PROBLEM = Problem(
    letter="a",
    title="linear second-order plant, exact sampling, no noise",
    constants=constants_of(N),
    parameters=("gain", "time_constant", "damping"),
    samples=round(N.duration / N.sample_period) + 1,
    scales={"peak error": 0.01, "ISE": 0.01, "largest output": 1.0},
    study=make_study,
    reference=reference,
    has_noise=False,
    operations=OPERATIONS,
)

"""Numbers drawn for each trial reach every place of the loop.

As in test_linear_loops.py both programs compute the same numbers (matrix exponential; Van Loan 1978, IEEE TAC
23(3) 395-404), here for loops in which nearly every number is drawn.
"""

from __future__ import annotations

import math
import sys
from pathlib import Path

import numpy as np

import windage as wd

sys.path.insert(0, str(Path(__file__).parent))
from reference_loop import Adrc, Linear, ReferenceLoop, assert_same_signals, controller_gains, observer_gains

TOLERANCE = 1e-12


def second_order(gain: float, time_constant: float, damping: float) -> Linear:
    a = np.array([[0.0, 1.0], [-1.0 / time_constant**2, -2.0 * damping / time_constant]])
    b = np.array([0.0, gain / time_constant**2])
    return Linear(a, b, b[:, None], np.array([1.0, 0.0]))


def test_drawn_numbers_reach_every_place() -> None:
    """Each trial against the reference with the numbers that were drawn for it."""
    u = wd.uniform
    loop = wd.Loop(
        plant=wd.SecondOrder(
            u(1.0, 2.0), u(0.5, 0.9), u(0.3, 0.6), dead_time=u(0.0, 0.01), initial=[u(-0.2, 0.2), 0.0]
        ),
        controller=wd.OutputADRC(
            order=2, controller_bandwidth=u(3.0, 5.0), observer_bandwidth=u(15.0, 25.0), b0=u(1.5, 2.5)
        ),
        sample_period=u(0.008, 0.012),
        duration=2.0,
        reference=wd.Step(u(0.5, 1.5), at=u(0.0, 0.5)),
        sensor=wd.Sensor(gain=u(0.98, 1.02), bias=u(-0.01, 0.01), filter_frequency=u(10.0, 30.0)),
        actuator=wd.Actuator(
            limits=(u(-2.0, -1.0), u(2.0, 3.0)),
            rate_limit=u(30.0, 60.0),
            delay=u(0.0, 0.02),
            time_constant=u(0.01, 0.03),
        ),
        disturbances={"load": wd.Step(u(-0.5, 0.5), at=u(1.0, 1.5))},
    )
    study = wd.Study(loop, measures=[wd.peak("error")], seed=3)
    for trial in (0, 5, 1000):
        replay = study.replay(trial)
        p = {name.removeprefix("plant."): value for name, value in replay.parameters.items()}
        period, wo = p["sample_period"], p["controller.observer_bandwidth"]
        start = (p["reference.at"], p["reference.amplitude"])
        load = (p["disturbances.load.at"], p["disturbances.load.amplitude"])
        mirror = ReferenceLoop(
            plant=second_order(p["gain"], p["time_constant"], p["damping"]),
            controller=Adrc(
                "output",
                2,
                p["controller.b0"],
                controller_gains(2, p["controller.controller_bandwidth"]),
                observer_gains(2, wo, period, "zero_order_hold"),
            ),
            period=period,
            samples=len(replay.time),
            reference=[lambda t, s=start: s[1] if t >= s[0] else 0.0, lambda _: 0.0, lambda _: 0.0],
            initial_state=[p["initial[0]"], 0.0],
            disturbances={"load": lambda t, s=load: s[1] if t >= s[0] else 0.0},
            breaks=(load[0],),
            gain=p["sensor.gain"],
            bias=p["sensor.bias"],
            filter_frequency=p["sensor.filter_frequency"],
            limits=(p["actuator.limits[0]"], p["actuator.limits[1]"]),
            rate_limit=p["actuator.rate_limit"],
            delay=p["actuator.delay"] + p["dead_time"],
            lag=p["actuator.time_constant"],
        )
        assert len(replay.time) == math.floor(2.0 / period) + 1
        assert_same_signals({name: replay[name] for name in replay.signals}, mirror.run(), TOLERANCE)

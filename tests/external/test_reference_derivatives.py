"""How many derivatives of the reference are fed, against difference equations that share no code with the engine.

Herbst 2013, Electronics 2(3) 246-279, doi 10.3390/electronics2030246, equation of the control law for order n with
derivatives of the reference (from memory); the sampled observer as in `reference_loop`.
"""

from __future__ import annotations

import itertools
import math
import sys
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

import windage as wd

sys.path.insert(0, str(Path(__file__).parent))
from reference_loop import Adrc, Linear, ReferenceLoop, assert_same_signals, controller_gains, observer_gains

PERIOD, SAMPLES = 0.01, 201
AMPLITUDE, REPEAT = 0.7, 0.8


def sine(derivative: int) -> Callable[[float], float]:
    omega = 2.0 * math.pi / REPEAT
    return lambda t: AMPLITUDE * omega**derivative * math.sin(omega * t + derivative * math.pi / 2.0)


def engine_loop(order: int, fed: int | None) -> wd.Replay:
    loop = wd.Loop(
        plant=wd.IntegratorChain(order, gain=1.3),
        controller=wd.OutputADRC(
            order, b0=1.1, controller_bandwidth=4.0, observer_bandwidth=20.0, reference_derivatives=fed
        ),
        sample_period=PERIOD,
        duration=(SAMPLES - 1) * PERIOD,
        reference=wd.Sine(AMPLITUDE, REPEAT),
    )
    return wd.Study(loop, [wd.peak("error") <= 1.0]).replay(0)


def difference_equations(order: int, fed: int) -> dict[str, np.ndarray]:
    b = np.eye(order)[-1]
    chain = Linear(np.eye(order, k=1), 1.3 * b, b[:, None], np.eye(order)[0])
    adrc = Adrc(
        "output",
        order,
        1.1,
        controller_gains(order, 4.0),
        observer_gains(order, 20.0, PERIOD, "zero_order_hold"),
        reference_derivatives=fed,
    )
    reference = [sine(d) for d in range(order + 1)]
    return ReferenceLoop(chain, adrc, PERIOD, SAMPLES, reference, np.zeros(order), {"load": lambda _: 0.0}).run()


@pytest.mark.parametrize(("order", "fed"), [(n, m) for n in (1, 2, 3, 4) for m in range(n + 1)])
def test_command_has_the_derivatives_that_are_fed_and_no_others(order: int, fed: int) -> None:
    assert_same_signals({n: engine_loop(order, fed)[n] for n in ("command", "output")}, _pick(order, fed), 1e-9)


def _pick(order: int, fed: int) -> dict[str, np.ndarray]:
    signals = difference_equations(order, fed)
    return {name: signals[name] for name in ("command", "output")}


@pytest.mark.parametrize("order", [1, 2, 3])
def test_all_are_fed_where_nothing_is_said_and_each_makes_a_difference(order: int) -> None:
    commands = [engine_loop(order, fed)["command"] for fed in range(order + 1)]
    np.testing.assert_array_equal(engine_loop(order, None)["command"], commands[-1])
    for fewer, more in itertools.pairwise(commands):
        assert np.max(np.abs(fewer - more)) > 0.1

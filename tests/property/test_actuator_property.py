"""The command limiter against plain Python, sample by sample, over random limits, resolutions and rates.

The controller's own command is no signal, but a first-order error form with b0 = 1 computes it from its estimates
in two products and a sum, which Python's doubles repeat to the bit.
"""

from __future__ import annotations

import math

import numpy as np
import pytest

import windage as wd

PERIOD = 0.01
BANDWIDTH = 5.0
TRIALS = 40
Values = np.ndarray


def study(actuator: wd.Actuator, reference: object) -> wd.Study:
    loop = wd.Loop(
        plant=wd.FirstOrder(gain=wd.uniform(0.5, 1.5), time_constant=wd.uniform(0.1, 1.0)),
        controller=wd.ErrorADRC(1, controller_bandwidth=BANDWIDTH, observer_bandwidth=20.0, b0=1.0),
        sample_period=PERIOD,
        duration=1.5,
        reference=reference,
        disturbances={"load": wd.Gust(0.3, 0.2)},
        actuator=actuator,
    )
    measure = wd.peak("command") if actuator.limits is None else wd.time_in_saturation()
    return wd.Study(loop, measures=[measure], seed=71)


def rounded(x: float, resolution: float) -> float:
    return math.floor(x / resolution + 0.5) * resolution if resolution > 0.0 else x


def limited(wanted: Values, low: float, high: float, change: float, resolution: float, initial: float) -> Values:
    """The limiter in words: limit, limit the rate, round between the limits, clip."""
    before = min(max(initial, low), high)
    commands = []
    for u in wanted:
        before = min(max(min(max(float(u), low), high), before - change), before + change)
        inside = low < before < high
        commands.append(min(max(rounded(before, resolution), low), high) if inside else before)
    return np.array(commands)


LOW, HIGH = wd.uniform(-2.0, -0.3), wd.uniform(0.3, 2.0)
RATES = {"any rate": None, "drawn rate": wd.uniform(2.0, 100.0)}
RESOLUTIONS = {
    "exact": 0.0,
    "fine": wd.uniform(1e-4, 1e-2),
    "coarse": wd.uniform(0.05, 1.0),
    "wider than the range": 7.0,
    "finer than the digits": 1e-320,
}


@pytest.mark.parametrize("rate", RATES)
@pytest.mark.parametrize("resolution", RESOLUTIONS)
def test_command_keeps_its_limits_and_saturation_is_seen(resolution: str, rate: str) -> None:
    actuator = wd.Actuator(
        limits=(LOW, HIGH),
        rate_limit=RATES[rate],
        resolution=RESOLUTIONS[resolution],
        initial=wd.uniform(-2.0, 2.0),
        delay=0.02,
    )
    case = study(actuator, wd.Sine(amplitude=wd.uniform(0.1, 3.0), period=wd.uniform(0.2, 1.0)))
    seen = case.run(TRIALS, progress=False).measures["time in saturation"]
    for trial in range(TRIALS):
        replay = case.replay(trial)
        drawn = replay.parameters
        low, high = drawn["actuator.limits[0]"], drawn["actuator.limits[1]"]
        step = drawn.get("actuator.resolution", RESOLUTIONS[resolution])
        step = 0.0 if step < 1e-300 else step
        change = drawn.get("actuator.rate_limit", math.inf) * PERIOD
        wanted = BANDWIDTH * replay["estimate_1"] + replay["estimate_2"]
        command = replay["command"]
        what = (trial, drawn)
        initial = drawn["actuator.initial"]
        np.testing.assert_array_equal(command, limited(wanted, low, high, change, step, initial), err_msg=str(what))
        assert replay["input"][0] == min(max(initial, low), high), what
        assert low <= command.min(), what
        assert command.max() <= high, what
        at_limit = (command == low) | (command == high)
        assert seen[trial] == pytest.approx(PERIOD * at_limit[:-1].sum(), abs=1e-12), what
        if change == math.inf:
            assert at_limit[(wanted <= low) | (wanted >= high)].all(), what
            # Only what rounds to a limit or beyond it is at the limit without having asked for more.
            nearest = np.minimum(np.abs(wanted - low), np.abs(wanted - high))
            without = at_limit & (wanted > low) & (wanted < high)
            assert np.all(nearest[without] <= 0.5 * step * (1.0 + 1e-9)), what
        for samples in (1, 2, 5, 40):
            moved = np.abs(command[samples:] - command[:-samples]).max()
            assert moved <= samples * change + step + 1e-12, what


@pytest.mark.parametrize("sign", [1.0, -1.0])
@pytest.mark.parametrize(
    ("limits", "resolution"),
    [((-10.0, 10.0), 20.0 / 65535.0), ((-1.0, 1.0), 0.3), ((-1.0, 1.0), 0.4), ((-3.0, 2.0), 9.0)],
)
def test_a_command_beyond_a_limit_is_that_limit(sign: float, limits: tuple[float, float], resolution: float) -> None:
    """A 16-bit converter of +-10 V has no code for +10 V; rounding alone gave 10.00015 V and -9.99985 V."""
    case = study(wd.Actuator(limits=limits, resolution=resolution), sign * 100.0)
    replay = case.replay(0)
    assert replay["command"][-1] == limits[sign > 0.0]
    assert replay.measures["time in saturation"] > 1.4


def test_without_limits_the_command_is_rounded_alone() -> None:
    replay = study(wd.Actuator(resolution=0.25), wd.Sine(1.0, 0.5)).replay(3)
    wanted = BANDWIDTH * replay["estimate_1"] + replay["estimate_2"]
    np.testing.assert_array_equal(replay["command"], np.floor(wanted / 0.25 + 0.5) * 0.25)
    assert len(set(replay["command"])) > 5

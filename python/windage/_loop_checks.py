"""Checks of a loop as a whole: length of a trial, length of the delay, and advice in domain words."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from ._equations import names_used
from ._errors import DescriptionError
from ._input_gain import advice_on_input
from ._numbers import Spread, high_of, low_of
from ._plants import Plant

if TYPE_CHECKING:
    from ._loop import Loop

MOST_SAMPLES = 100_000_000
LONGEST_DELAY = 100_000
#: As the engine: a delay this near to a whole number of samples is one.
WHOLE = 1e-9


def check_length(loop: Loop) -> None:
    """Refuse trials without a sample interval, and endless ones."""
    period, duration = loop.sample_period, loop.duration
    if low_of(duration) < high_of(period) * (1.0 - WHOLE):
        expected = f"at least one sample period ({high_of(period):g} s)"
        raise DescriptionError("loop.duration", duration, expected, "Check both; they are in seconds.")
    shortest, longest = low_of(period), high_of(duration)
    if shortest == 0.0 or longest / shortest > MOST_SAMPLES:
        count = math.inf if shortest == 0.0 else longest / shortest
        expected = f"at most {MOST_SAMPLES:.0e} samples in a trial"
        mend = f"duration / sample_period reaches {count:.3g}; shorten the trial, or bound the spreads."
        raise DescriptionError("loop.duration", duration, expected, mend)


def check_delay(loop: Loop) -> None:
    """Refuse delays whose history of commands or outputs would not fit into memory."""
    to_the_plant = high_of(loop.actuator.delay) + high_of(loop.plant.dead_time)
    for place, value, delay, also in (
        ("actuator.delay", loop.actuator.delay, to_the_plant, ", the plant's dead time included"),
        ("sensor.delay", loop.sensor.delay, high_of(loop.sensor.delay), ""),
    ):
        samples = delay / low_of(loop.sample_period)
        if samples >= LONGEST_DELAY:
            expected = f"a delay below {LONGEST_DELAY} sample periods{also}"
            raise DescriptionError(place, value, expected, f"It reaches {samples:.3g} sample periods.")


def delay_is_whole(loop: Loop) -> bool:
    """Tell whether every delay that can be drawn is a whole number of a constant sample period."""
    period, delay = loop.sample_period, loop.actuator.delay
    if isinstance(period, Spread) or loop.plant.dead_time != 0.0:
        return False
    values = delay._values() if isinstance(delay, Spread) else (delay,)
    if values is None:
        return False
    return all(abs(value / period - round(value / period)) <= WHOLE for value in values)


def advice(loop: Loop) -> list[str]:
    """Return what looks wrong with a loop, in words."""
    found: list[str] = []
    found += _advice_on_observer(loop)
    found += _advice_on_delay(loop)
    found += advice_on_input(loop)
    if isinstance(loop.plant, Plant):
        found += [f"plant: no equation reads {name!r}" for name in loop.plant.unused() if not _is_read(loop, name)]
    return found


def _advice_on_observer(loop: Loop) -> list[str]:
    observer, controller = loop.controller.observer_bandwidth, loop.controller.controller_bandwidth
    found = []
    if observer is not None:
        product = high_of(observer) * high_of(loop.sample_period)
        if product > 1.0:
            found.append(
                f"controller: observer_bandwidth * sample_period = {product:.3g}: the sampled observer is "
                "far from its continuous design; sample faster or lower the bandwidth (0.3 or less is common "
                "practice)"
            )
    if observer is not None and controller is not None and low_of(observer) < high_of(controller):
        found.append(
            f"controller: the observer ({low_of(observer):.3g} rad/s) may be slower than the controller "
            f"({high_of(controller):.3g} rad/s); 3 to 10 times as fast is common practice"
        )
    return found


def _advice_on_delay(loop: Loop) -> list[str]:
    observer = loop.controller.observer_bandwidth
    delay = high_of(loop.actuator.delay) + high_of(loop.plant.dead_time) + high_of(loop.sensor.delay)
    if observer is None or not high_of(observer) * delay > 1.0:
        return []
    return [
        f"controller: observer_bandwidth * delay = {high_of(observer) * delay:.3g}: the observer is not told "
        "of the delay, and above about 1 little margin is left"
    ]


def _is_read(loop: Loop, name: str) -> bool:
    return any(name in names_used(text, f"loop.signals.{key}") for key, text in loop.signals.items())

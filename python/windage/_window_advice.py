"""Advice on windows of measures that end at the very instant at which the reference jumps."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import pairwise

from ._loop import Loop
from ._measures import Measure, Requirement, shown
from ._numbers import high_of, low_of
from ._time_functions import Pulse, Step, Table, TimeFunction

#: Instants closer than this part of a sample period are the same, as for the windows of the engine.
SAME = 1e-6


def window_advice(loop: Loop, requirements: Sequence[Requirement], measures: Sequence[Measure]) -> list[str]:
    """Return which windows end with a sample that already shows a step of the reference, in words.

    Windows include both ends. The output cannot follow a step at once, so that measures of it are not concerned;
    error and command are.
    """
    unmoved = {"time", "output", "measured", *loop.plant.state_names, *loop.plant.disturbance_names}
    allowance = SAME * low_of(loop.sample_period)
    found = []
    for measure in (*(r.measure for r in requirements), *measures):
        for part in measure.parts:
            ends_there = any(abs(high_of(part.before) - jump) <= allowance for jump in jump_times(loop.reference))
            if ends_there and part.signal not in unmoved:
                sooner = high_of(part.before) - high_of(loop.sample_period)
                found.append(
                    f"measures: the window of {part.label!r} ends where the reference steps, and its last sample "
                    f"shows {part.signal} after the step; before={shown(sooner)} leaves that sample out"
                )
    return list(dict.fromkeys(found))


def jump_times(function: TimeFunction) -> list[float]:
    """Return the instants at which a function of time jumps, as far as they are not drawn, s."""
    times: list[object] = []
    if isinstance(function, Step):
        times = [function.at]
    if isinstance(function, Pulse):
        start, width = function.start, function.width
        times = [start, start + width if isinstance(start, float) and isinstance(width, float) else None]
    if isinstance(function, Table):
        steps = pairwise(function.times)
        times = list(function.times[1:]) if function.interpolation == "hold" else [a for a, b in steps if a == b]
    return [time for time in times if isinstance(time, float)]

"""Which numbers of a loop are held at one value: printed with every verdict."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any, TypedDict

from ._descriptions import Description, FrozenMapping, arguments
from ._loop import Loop
from ._numbers import Spread


class Cautions(TypedDict):
    """What a verdict has to name, in the words of `windage._verdict.judge`."""

    not_varied: tuple[str, ...]
    spreads: tuple[str, ...]
    truncated: tuple[str, ...]
    title: str


def not_varied(loop: Loop) -> tuple[str, ...]:
    """Return the paths of the numbers that are the same in every trial.

    Numbers of the plant, of timing, sensor, actuator and disturbances count, where they differ from their
    default; those of the controller and the reference are choices, not facts about units.
    """
    places: list[tuple[str, Any]] = [
        ("plant", loop.plant),
        ("sample_period", loop.sample_period),
        ("actuator", loop.actuator),
        ("sensor", loop.sensor),
        ("disturbances", loop.disturbances),
    ]
    return tuple(path for place, part in places for path in _constants(part, place))


def _constants(value: Any, path: str) -> Iterator[str]:
    if isinstance(value, Spread):
        return
    if isinstance(value, Description):
        for name, part in arguments(value).items():
            # Parameters of a plant go by their own names.
            inner = path if name == "parameters" else f"{path}.{name}"
            yield from _constants(part, inner)
    elif isinstance(value, FrozenMapping):
        for name, part in value.items():
            yield from _constants(part, f"{path}.{name}")
    elif isinstance(value, tuple):
        for i, part in enumerate(value):
            yield from _constants(part, f"{path}[{i}]")
    elif isinstance(value, float):
        yield path

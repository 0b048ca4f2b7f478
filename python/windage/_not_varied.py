"""What a verdict has to name of a study: what was drawn, what was held at one value, and what the trials are."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from typing import Any, TypedDict

from ._basis import SAMPLE, Basis
from ._describe import DrawnColumn
from ._descriptions import Description, FrozenMapping, arguments, parts
from ._distributions import Samples
from ._loop import Loop
from ._numbers import Spread, high_of, low_of
from ._shared_numbers import Column, Shared
from ._time_functions import Noise


class Cautions(TypedDict):
    """What a verdict has to name, in the words of `windage._verdict.judge`."""

    not_varied: tuple[str, ...]
    spreads: tuple[str, ...]
    truncated: tuple[str, ...]
    title: str
    listed_values: Mapping[str, int]
    advice: tuple[str, ...]
    basis: Basis


def basis_of(loop: Loop, columns: Sequence[DrawnColumn]) -> Basis:
    """Return what the trials are: a sample, the list of a table's rows, or one trial that nothing changes.

    Parameters
    ----------
    loop : Loop
        With the columns of the study's table bound.
    columns : sequence of DrawnColumn
        The drawn parameters.
    """
    spreads = [column.spread for column in columns]
    rows = [len(spread.rows) for spread in spreads if isinstance(spread, Column) and spread.in_order and spread.rows]
    if rows:
        return Basis(kind="list", planned=rows[0])
    is_drawn = any(spread._varies() for spread in spreads)
    return SAMPLE if is_drawn or _has_noise(loop) else Basis(kind="one trial")


def listed_values(columns: Sequence[DrawnColumn]) -> dict[str, int]:
    """Return the drawn parameters that take observed values, and how many different ones each has."""
    observed = [(column.name, column.spread) for column in columns if _is_observed(column.spread)]
    return {name: len(set(spread._values() or ())) for name, spread in observed}


def _is_observed(spread: Spread) -> bool:
    inner = spread.spread if isinstance(spread, Shared) else spread
    return isinstance(inner, Samples | Column)


def _has_noise(loop: Loop) -> bool:
    noises = [part for disturbance in loop.disturbances.values() for part in _noises(disturbance)]
    sizes = [loop.sensor.noise, *(getattr(noise, noise.engine_order[0]) for noise in noises)]
    return any(low_of(size) != 0.0 or high_of(size) != 0.0 for size in sizes)


def _noises(value: Any) -> Iterator[Noise]:
    """Walk over the noises that a disturbance is, or is made of."""
    if isinstance(value, Noise):
        yield value
    elif isinstance(value, Description):
        for _, part in parts(value):
            yield from _noises(part)
    elif isinstance(value, tuple):
        for part in value:
            yield from _noises(part)


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

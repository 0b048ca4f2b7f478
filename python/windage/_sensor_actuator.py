"""The sensor between plant and controller, and the actuator between controller and plant."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

from ._descriptions import Description, parts
from ._errors import DescriptionError
from ._numbers import (
    ANY,
    NON_NEGATIVE,
    NONZERO,
    ZERO_OR_POSITIVE,
    Number,
    Rule,
    check_order,
    checked_number,
    checked_numbers,
    high_of,
    low_of,
    takes,
)

if TYPE_CHECKING:
    from ._describe import Numbers

_DELAY = Rule("a delay of at least 0 s or a spread of such delays", low=0.0, bounded=True)


@dataclass(frozen=True, repr=False)
class Sensor(Description):
    """What the controller gets to see: clip(round(filter(gain * output(t - delay) + bias + noise))).

    Parameters
    ----------
    gain : float or spread
        Scale; 1 is ideal.
    bias : float or spread
        Offset, in the unit of the output.
    noise : float or spread
        Standard deviation of white noise, drawn anew at each sample.
    filter_frequency : float or spread, Hz
        Corner of a first-order low pass; 0 for none.
    resolution : float or spread
        Step to whose multiples the value is rounded; 0 for none.
    range : pair of float or spread, optional
        Lowest and highest reading.
    delay : float or spread, s
        Dead time between the output and its reading; any number, not only multiples of the sample period.

    Notes
    -----
    With a delay that is no multiple of the sample period the plant's own output between two samples is read: linear
    stock plants are evaluated exactly there, and an integration step of any other plant ends there. Nothing is
    interpolated. Before time 0 the output is taken for what it is at time 0. The signal `output` is not delayed,
    `measured` is.
    """

    gain: Number = field(default=1.0, metadata=takes(NONZERO))
    bias: Number = field(default=0.0, metadata=takes(ANY))
    noise: Number = field(default=0.0, metadata=takes(NON_NEGATIVE))
    filter_frequency: Number = field(default=0.0, metadata=takes(NON_NEGATIVE))
    resolution: Number = field(default=0.0, metadata=takes(NON_NEGATIVE))
    range: Sequence[Number] | None = None
    delay: Number = field(default=0.0, metadata=takes(_DELAY))

    def __post_init__(self) -> None:
        _check_fields(self, "sensor")
        object.__setattr__(self, "range", _pair(self.range, "sensor.range"))

    def _describe(self, numbers: Numbers) -> dict[str, Any]:
        names = ("gain", "bias", "noise", "filter_frequency", "resolution", "delay")
        described = {name: numbers.take(getattr(self, name), f"sensor.{name}") for name in names}
        if self.range is not None:
            low, high = numbers.take_all(self.range, "sensor.range")
            described |= {"has_range": True, "low": low, "high": high}
        return {**described, "stream": numbers.stream("noise:sensor")}


@dataclass(frozen=True, repr=False)
class Actuator(Description):
    """What becomes of a command: limits, rate limit, resolution, then a transport delay, then a lag.

    Parameters
    ----------
    limits : pair of float or spread, optional
        Lowest and highest command. A command that reaches a limit is exactly that limit, whatever the
        resolution, and none is ever beyond it.
    rate_limit : float or spread, optional
        Largest change of the command in a second, before it is rounded; 0 or None for none. Rounding adds at
        most one resolution: over n samples the command changes by no more than n * rate_limit * sample_period
        + resolution, and slow changes add up until the next step.
    resolution : float or spread
        Step to whose multiples the command is rounded between its limits; 0 for none.
    delay : float or spread, s
        Time from the sample instant until the command acts, computation included; any number, not only
        multiples of the sample period.
    time_constant : float or spread, s
        Of a first-order lag after the delay; 0 for none.
    initial : float or spread
        Command before the first sample; in a trial whose drawn limits do not hold it, the nearest limit.
    """

    limits: Sequence[Number] | None = None
    rate_limit: Number | None = field(default=None, metadata=takes(ZERO_OR_POSITIVE))
    resolution: Number = field(default=0.0, metadata=takes(NON_NEGATIVE))
    delay: Number = field(default=0.0, metadata=takes(_DELAY))
    time_constant: Number = field(default=0.0, metadata=takes(ZERO_OR_POSITIVE))
    initial: Number = field(default=0.0, metadata=takes(ANY))

    def __post_init__(self) -> None:
        if isinstance(self.rate_limit, int | float) and not isinstance(self.rate_limit, bool) and self.rate_limit == 0:
            object.__setattr__(self, "rate_limit", None)
        _check_fields(self, "actuator")
        limits = _pair(self.limits, "actuator.limits")
        object.__setattr__(self, "limits", limits)
        if limits is not None:
            self._check_initial(limits)

    def _check_initial(self, limits: tuple[Number, ...]) -> None:
        if low_of(self.initial) < low_of(limits[0]) or high_of(self.initial) > high_of(limits[1]):
            expected = f"a command within the limits ({low_of(limits[0]):g}, {high_of(limits[1]):g})"
            mend = "Set actuator.initial." if self.initial == 0.0 else ""
            raise DescriptionError("actuator.initial", self.initial, expected, mend)

    def _describe(self, numbers: Numbers) -> dict[str, Any]:
        names = ("resolution", "delay", "time_constant", "initial")
        described = {name: numbers.take(getattr(self, name), f"actuator.{name}") for name in names}
        if self.rate_limit is not None:
            described["rate_limit"] = numbers.take(self.rate_limit, "actuator.rate_limit")
        if self.limits is not None:
            low, high = numbers.take_all(self.limits, "actuator.limits")
            described |= {"has_limits": True, "low": low, "high": high}
        return described


def _check_fields(description: Any, place: str) -> None:
    for f, value in parts(description):
        if "rule" in f.metadata and value is not None:
            checked = checked_number(value, f"{place}.{f.name}", f.metadata["rule"])
            object.__setattr__(description, f.name, checked)


def _pair(value: object, place: str) -> tuple[Number, ...] | None:
    if value is None:
        return None
    pair = checked_numbers(value, place, ANY, 2)
    check_order(pair[0], pair[1], place)
    return pair

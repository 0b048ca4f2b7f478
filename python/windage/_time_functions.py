"""Functions of time, used as references and disturbances, and noises that act as disturbances.

Times are in seconds, angles in radians, values in the unit of what they drive.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any, ClassVar

from ._descriptions import Description, parts
from ._errors import DescriptionError
from ._numbers import (
    ANY,
    NON_NEGATIVE,
    POSITIVE,
    Number,
    Rule,
    Spread,
    check_order,
    checked_choice,
    checked_number,
    checked_numbers,
    checked_sequence,
    is_plain_number,
    takes,
)

if TYPE_CHECKING:
    from ._describe import Numbers

#: What the engine takes for "never".
NEVER = 1e300
MOST_ROWS = 100_000
MOST_TERMS = 100
_STOP = Rule("a time in s, or infinity for none", infinite=True)


class _Course(Description):
    """Root of what a disturbance can be: courses add up with `+`."""

    __slots__ = ()

    def __add__(self, other: Any) -> Sum:
        return Sum((self, other)) if is_course(other) else NotImplemented

    def __radd__(self, other: Any) -> _Course:
        if isinstance(other, int) and other == 0:  # where Python's own `sum` begins
            return self
        return Sum((other, self)) if is_course(other) else NotImplemented


class TimeFunction(_Course):
    """Root of the functions of time; they add up: `Step(1.0) + Sine(0.1, period=2.0)`."""

    #: The engine's name, and the arguments in the engine's order.
    engine_kind: ClassVar[str]
    engine_order: ClassVar[tuple[str, ...]]

    def __post_init__(self) -> None:
        place = type(self).__name__
        for f, value in parts(self):
            if "rule" in f.metadata:
                object.__setattr__(self, f.name, checked_number(value, f"{place}.{f.name}", f.metadata["rule"]))

    def _describe(self, numbers: Numbers, path: str) -> dict[str, Any]:
        taken = [numbers.take(getattr(self, name), f"{path}.{name}") for name in self.engine_order]
        plain = [min(x, NEVER) if isinstance(x, float) else x for x in taken]
        return {"kind": self.engine_kind, "numbers": plain}


@dataclass(frozen=True, repr=False)
class Constant(TimeFunction):
    """The same value at all times."""

    engine_kind: ClassVar[str] = "constant"
    engine_order: ClassVar[tuple[str, ...]] = ("value",)

    value: Number = field(metadata=takes(ANY))


@dataclass(frozen=True, repr=False)
class Step(TimeFunction):
    """`initial` before the time `at`, `initial + amplitude` from then on."""

    engine_kind: ClassVar[str] = "step"
    engine_order: ClassVar[tuple[str, ...]] = ("amplitude", "at", "initial")

    amplitude: Number = field(metadata=takes(ANY))
    at: Number = field(default=0.0, metadata=takes(ANY))
    initial: Number = field(default=0.0, metadata=takes(ANY))


@dataclass(frozen=True, repr=False)
class Ramp(TimeFunction):
    """`initial` until `start`, then rising by `slope` a second until `stop`, then held."""

    engine_kind: ClassVar[str] = "ramp"
    engine_order: ClassVar[tuple[str, ...]] = ("slope", "start", "stop", "initial")

    slope: Number = field(metadata=takes(ANY))
    start: Number = field(default=0.0, metadata=takes(ANY))
    stop: Number = field(default=math.inf, metadata=takes(_STOP))
    initial: Number = field(default=0.0, metadata=takes(ANY))

    def __post_init__(self) -> None:
        super().__post_init__()
        check_order(self.start, self.stop, "Ramp.stop", strict=False)


@dataclass(frozen=True, repr=False)
class Sine(TimeFunction):
    """`offset` before `start`, then offset + amplitude * sin(2 pi (t - start) / period + phase)."""

    engine_kind: ClassVar[str] = "sine"
    engine_order: ClassVar[tuple[str, ...]] = ("amplitude", "period", "phase", "offset", "start")

    amplitude: Number = field(metadata=takes(ANY))
    period: Number = field(metadata=takes(POSITIVE))
    phase: Number = field(default=0.0, metadata=takes(ANY))
    offset: Number = field(default=0.0, metadata=takes(ANY))
    start: Number = field(default=0.0, metadata=takes(ANY))


@dataclass(frozen=True, repr=False)
class Pulse(TimeFunction):
    """`amplitude` from `start` on for the time `width`, zero before and after."""

    engine_kind: ClassVar[str] = "pulse"
    engine_order: ClassVar[tuple[str, ...]] = ("amplitude", "start", "width")

    amplitude: Number = field(metadata=takes(ANY))
    start: Number = field(metadata=takes(ANY))
    width: Number = field(metadata=takes(NON_NEGATIVE))


@dataclass(frozen=True, repr=False)
class Quintic(TimeFunction):
    """A move by `amplitude` in the time `duration` along 10 s^3 - 15 s^4 + 6 s^5: rest to rest, smooth."""

    engine_kind: ClassVar[str] = "quintic"
    engine_order: ClassVar[tuple[str, ...]] = ("amplitude", "start", "duration", "initial")

    amplitude: Number = field(metadata=takes(ANY))
    start: Number = field(metadata=takes(ANY))
    duration: Number = field(metadata=takes(POSITIVE))
    initial: Number = field(default=0.0, metadata=takes(ANY))


@dataclass(frozen=True, repr=False)
class JerkLimited(TimeFunction):
    """The fastest move from rest to rest by `amplitude` within limits of speed, acceleration and jerk."""

    engine_kind: ClassVar[str] = "jerk_limited"
    engine_order: ClassVar[tuple[str, ...]] = (
        "amplitude",
        "start",
        "speed",
        "acceleration",
        "jerk",
        "initial",
    )

    amplitude: Number = field(metadata=takes(ANY))
    start: Number = field(metadata=takes(ANY))
    speed: Number = field(metadata=takes(POSITIVE))
    acceleration: Number = field(metadata=takes(POSITIVE))
    jerk: Number = field(metadata=takes(POSITIVE))
    initial: Number = field(default=0.0, metadata=takes(ANY))


@dataclass(frozen=True, repr=False)
class Table(TimeFunction):
    """A recorded or drawn course, held before the first and after the last time.

    Parameters
    ----------
    times : sequence of float or spread
        Times in rising order; two equal ones make a jump.
    values : sequence of float or spread
        As many values.
    interpolation : {"linear", "hold"}
        Straight lines between the points, or each value held until the next time.
    """

    times: Sequence[Number] = ()
    values: Sequence[Number] = ()
    interpolation: str = "linear"

    def __post_init__(self) -> None:
        times = checked_numbers(self.times, "Table.times")
        if len(times) > MOST_ROWS:
            raise DescriptionError("Table.times", f"{len(times)} times", f"at most {MOST_ROWS} times")
        values = checked_numbers(self.values, "Table.values", ANY, len(times))
        _check_rising(times)
        checked_choice(self.interpolation, "Table.interpolation", ("linear", "hold"))
        object.__setattr__(self, "times", times)
        object.__setattr__(self, "values", values)

    def _describe(self, numbers: Numbers, path: str) -> dict[str, Any]:
        taken = numbers.take_all(self.times, f"{path}.times") + numbers.take_all(self.values, f"{path}.values")
        return {"kind": f"table_{self.interpolation}", "numbers": taken}


def _check_rising(times: Sequence[Number]) -> None:
    """Refuse times that fall, or that may fall where they are drawn."""
    for i in range(len(times) - 1):
        first, second = times[i], times[i + 1]
        if isinstance(first, float) and isinstance(second, float) and second < first:
            mend = "Times rise from each to the next; two equal ones make a jump."
            raise DescriptionError(f"Table.times[{i + 1}]", second, f"at least {first:g}, that of times[{i}]", mend)
        check_order(first, second, f"Table.times[{i + 1}]", strict=False)


class Noise(_Course):
    """Root of the noises: drawn at each sample and held in between."""

    engine_kind: ClassVar[str]
    engine_order: ClassVar[tuple[str, ...]]

    __post_init__ = TimeFunction.__post_init__

    def _describe(self, numbers: Numbers, path: str) -> dict[str, Any]:
        taken = [numbers.take(getattr(self, name), f"{path}.{name}") for name in self.engine_order]
        return {"kind": self.engine_kind, "numbers": taken, "stream": numbers.stream(f"noise:{path}")}


@dataclass(frozen=True, repr=False)
class Gust(Noise):
    """First-order Gauss-Markov noise: wind, sea, drifting load.

    Parameters
    ----------
    intensity : float or spread
        Standard deviation, at least 0.
    correlation_time : float or spread, s
        Time after which the correlation has fallen to 1/e, above 0.

    Notes
    -----
    Sampled exactly from its stationary distribution on (Gelb 1974, Applied Optimal Estimation, section 3.8,
    from memory).
    """

    engine_kind: ClassVar[str] = "gauss_markov"
    engine_order: ClassVar[tuple[str, ...]] = ("intensity", "correlation_time")

    intensity: Number = field(metadata=takes(NON_NEGATIVE))
    correlation_time: Number = field(metadata=takes(POSITIVE))


@dataclass(frozen=True, repr=False)
class WhiteNoise(Noise):
    """White noise of a two-sided spectral density (unit^2/Hz); its variance is density / sample period."""

    engine_kind: ClassVar[str] = "white"
    engine_order: ClassVar[tuple[str, ...]] = ("density",)

    density: Number = field(metadata=takes(NON_NEGATIVE))


@dataclass(frozen=True, repr=False)
class Sum(TimeFunction):
    """The sum of its terms, and of their derivatives; usually written `first + second`.

    Parameters
    ----------
    terms : sequence of time function, noise or float
        What is added, from the first to the last. With a noise among them it can be a disturbance, not a
        reference. Sums among them are taken apart, and a number is a `Constant`.
    """

    terms: Sequence[_Course | Number]

    def __post_init__(self) -> None:
        given = checked_sequence(self.terms, "Sum.terms", "a list of functions of time and noises")
        terms: list[_Course | Number] = []
        for i, term in enumerate(given):
            terms += term.terms if isinstance(term, Sum) else [_checked_term(term, f"Sum.terms[{i}]")]
        if not 1 <= len(terms) <= MOST_TERMS:
            raise DescriptionError("Sum.terms", f"{len(terms)} terms", f"1 to {MOST_TERMS} terms")
        object.__setattr__(self, "terms", tuple(terms))

    def __repr__(self) -> str:
        return " + ".join(map(repr, self.terms)) if len(self.terms) > 1 else super().__repr__()

    @property
    def noises(self) -> list[tuple[int, Noise]]:
        """The noises among the terms, each with its place."""
        return [(i, term) for i, term in enumerate(self.terms) if isinstance(term, Noise)]

    def _describe(self, numbers: Numbers, path: str) -> dict[str, Any]:
        terms = [
            term._describe(numbers, f"{path}.terms[{i}]")
            for i, term in enumerate(self.terms)
            if isinstance(term, TimeFunction)
        ]
        return {"kind": "sum", "numbers": [], "terms": terms}


def is_course(value: object) -> bool:
    """Tell whether a value can be a term of a sum."""
    return isinstance(value, _Course | Spread) or is_plain_number(value)


def _checked_term(value: object, place: str) -> TimeFunction | Noise:
    if isinstance(value, TimeFunction | Noise):
        return value
    expected = "a function of time such as Step(...), a noise such as Gust(...), or a number"
    return Constant(checked_number(value, place, Rule(expected)))


def describe_disturbance(value: TimeFunction | Noise, numbers: Numbers, path: str) -> dict[str, Any]:
    """Return a disturbance as the engine wants it: a function of time, and noises."""
    if isinstance(value, Noise):
        return {"noises": [value._describe(numbers, path)]}
    if not isinstance(value, Sum) or not value.noises:
        return {"function": value._describe(numbers, path)}
    noises = [noise._describe(numbers, f"{path}.terms[{i}]") for i, noise in value.noises]
    described = value._describe(numbers, path)
    return {"noises": noises} | ({"function": described} if described["terms"] else {})


Disturbance = TimeFunction | Noise

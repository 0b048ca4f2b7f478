"""Measures and requirements.

A measure is one number computed from a trial: a reducer over a signal in a window. Compared with a limit
(`measure <= limit`, `measure >= limit`) it becomes a requirement. Windows are in seconds and include both
ends: a sample at the very instant of a step shows the error after the step, and is the first of a window that
starts there as well as the last of one that ends there.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any, NoReturn

from ._arguments import explained
from ._descriptions import Description
from ._errors import DescriptionError
from ._numbers import (
    ANY,
    NON_NEGATIVE,
    POSITIVE,
    Number,
    Rule,
    Spread,
    check_order,
    checked_label,
    checked_number,
    checked_title,
    is_plain_number,
    takes,
)

if TYPE_CHECKING:
    from ._describe import Numbers

_BEFORE = Rule("a time in s, or infinity for the end of the trial", low=0.0, infinite=True)
_FRACTION = Rule("a fraction of the change from 0 to 1", low=0.0, high=1.0)

#: Engine kinds that differ from the public name.
_ENGINE_KINDS = {"final": "final_value", "time_in_saturation": "time_at_limits"}
_WORDS = {
    "rms": "rms",
    "rms_change": "rms change",
    "ise": "ISE",
    "iae": "IAE",
    "itae": "ITAE",
    "integral_absolute": "integral of the magnitude",
    "integral_square": "integral of the square",
    "integral_time_absolute": "integral of time times magnitude",
}
_CLASSICAL = {"ise": "integral_square", "iae": "integral_absolute", "itae": "integral_time_absolute"}


@dataclass(frozen=True, repr=False, eq=False)
class Measure(Description):
    """One number computed from a trial. Made by `peak`, `rms`, `overshoot` and the other functions here.

    `measure <= limit` and `measure >= limit` make a `Requirement`; the limit is a number or a spread.

    Attributes
    ----------
    kind : str
        Name of the function that makes it.
    signal : str
        Name of the signal.
    after, before : float or spread, s
        Window.
    low, high, band, tolerance : float or spread, optional
        Further arguments, where the kind has them.
    """

    kind: str = field(metadata={"is_kind": True})
    signal: str
    after: Number = field(default=0.0, metadata=takes(NON_NEGATIVE))
    before: Number = field(default=math.inf, metadata=takes(_BEFORE))
    low: Number | None = None
    high: Number | None = None
    band: Number | None = None
    tolerance: Number | None = None

    def __post_init__(self) -> None:
        if checked_label(self.kind, "measure.kind") is None:
            raise DescriptionError("measure.kind", self.kind, "the name of a function that makes a measure")
        object.__setattr__(self, "signal", checked_title(self.signal, f"{self.kind}.signal"))
        for name, rule in (("after", NON_NEGATIVE), ("before", _BEFORE)):
            object.__setattr__(self, name, checked_number(getattr(self, name), f"{self.kind}.{name}", rule))
        for name in ("low", "high", "band", "tolerance"):
            if getattr(self, name) is not None:
                object.__setattr__(self, name, checked_number(getattr(self, name), f"{self.kind}.{name}", ANY))
        check_order(self.after, self.before, f"{self.kind}.before")

    @property
    def _kind(self) -> str:
        return self.kind

    @property
    def label(self) -> str:
        """The measure in words, as in tables."""
        words = _WORDS.get(self.kind, self.kind.replace("_", " "))
        details = [
            f"{name} {shown(value)}"
            for name in ("low", "high", "band", "tolerance")
            if (value := getattr(self, name)) is not None
        ]
        text = words + (f" ({', '.join(details)})" if details else "")
        if self.kind != "time_in_saturation":
            text += f" of {self.signal}"
        if self.after != 0.0:
            text += f" after {shown(self.after)} s"
        if self.before != math.inf:
            text += f" before {shown(self.before)} s"
        return text

    def _key(self) -> tuple[Any, ...]:
        limits = (self.low, self.high, self.band, self.tolerance)
        return (self.kind, self.signal, self.after, self.before, *limits)

    def __eq__(self, other: object) -> bool:
        if isinstance(other, Measure):
            return self._key() == other._key()
        if is_plain_number(other) or isinstance(other, Spread):
            self._refuse_comparison("==", other)
        return NotImplemented

    def __hash__(self) -> int:
        return hash(self._key())

    def __le__(self, limit: Any) -> Requirement:
        return Requirement(self, at_most=limit)

    def __ge__(self, limit: Any) -> Requirement:
        return Requirement(self, at_least=limit)

    def __lt__(self, limit: Any) -> NoReturn:
        self._refuse_comparison("<", limit)

    def __gt__(self, limit: Any) -> NoReturn:
        self._refuse_comparison(">", limit)

    def __bool__(self) -> NoReturn:
        raise DescriptionError(
            "requirement", self, "a comparison with a limit", "Write measure <= limit or measure >= limit."
        )

    def _refuse_comparison(self, sign: str, limit: object) -> NoReturn:
        mend = "Write measure <= limit or measure >= limit: a limit itself always counts as met."
        raise DescriptionError("requirement", f"{self.label} {sign} {limit}", "<= or >=", mend)

    def _describe(self, numbers: Numbers, path: str, limits: Any) -> dict[str, Any]:
        """Return the measure as the engine wants it; `limits` are those of the actuator."""
        kind = _CLASSICAL.get(self.kind, _ENGINE_KINDS.get(self.kind, self.kind))
        described: dict[str, Any] = {"signal": self.signal}
        described["after"] = numbers.take(self.after, f"{path}.after")
        if self.before != math.inf:
            described["before"] = numbers.take(self.before, f"{path}.before")
        if self.kind == "time_in_saturation":
            described["a"], described["b"] = numbers.take_all(limits, "actuator.limits")
        elif self.tolerance is not None:
            kind = "settling_time_absolute"
            described["a"] = numbers.take(self.tolerance, f"{path}.tolerance")
        elif self.band is not None:
            described["a"] = numbers.take(self.band, f"{path}.band")
        elif self.low is not None and self.high is not None:
            described["a"] = numbers.take(self.low, f"{path}.low")
            described["b"] = numbers.take(self.high, f"{path}.high")
        return {"kind": kind, **described}


@dataclass(frozen=True, repr=False)
class Requirement(Description):
    """A measure with a limit. Its slack is the distance to the limit, at least 0 where the limit is met.

    Parameters
    ----------
    measure : Measure
        What is limited.
    at_most, at_least : float or spread
        The limit; exactly one of the two. A spread is drawn for each trial.
    name : str, optional
        Short name for tables; by default the requirement in words.
    """

    measure: Measure
    at_most: Number | None = field(default=None, metadata=takes(ANY))
    at_least: Number | None = field(default=None, metadata=takes(ANY))
    name: str | None = None

    def __post_init__(self) -> None:
        if not isinstance(self.measure, Measure):
            raise DescriptionError("requirement.measure", self.measure, "a measure such as peak('error')")
        if (self.at_most is None) == (self.at_least is None):
            found = "neither" if self.at_most is None else "both"
            raise DescriptionError("requirement", found, "either at_most or at_least")
        for side in ("at_most", "at_least"):
            if getattr(self, side) is not None:
                checked = checked_number(getattr(self, side), f"requirement.{side}", ANY)
                object.__setattr__(self, side, checked)
        if self.name is not None:
            object.__setattr__(self, "name", checked_title(self.name, "requirement.name"))

    @property
    def limit(self) -> Number:
        """The limit."""
        limit = self.at_most if self.at_most is not None else self.at_least
        assert limit is not None
        return limit

    @property
    def label(self) -> str:
        """The name, or the requirement in words."""
        return self.name if self.name is not None else self.words

    @property
    def words(self) -> str:
        """The requirement in words."""
        sign = "<=" if self.at_most is not None else ">="
        return f"{self.measure.label} {sign} {shown(self.limit)}"

    @property
    def in_full(self) -> str:
        """The requirement in words, after its name if it has one."""
        return self.words if self.name is None else f"{self.name}: {self.words}"

    def named(self, name: str) -> Requirement:
        """Return a copy under a name."""
        return Requirement(self.measure, at_most=self.at_most, at_least=self.at_least, name=name)

    def __bool__(self) -> NoReturn:
        mend = "A chain a <= measure <= b is two requirements: write measure >= a and measure <= b apart."
        raise DescriptionError("requirement", self.words, "a requirement used as such, not as true or false", mend)


@explained
def peak(signal: str, after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the largest magnitude of a signal in a window."""
    return Measure("peak", signal, after, before)


@explained
def minimum(signal: str, after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the smallest value of a signal in a window."""
    return Measure("minimum", signal, after, before)


@explained
def maximum(signal: str, after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the largest value of a signal in a window."""
    return Measure("maximum", signal, after, before)


@explained
def mean(signal: str, after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the mean of a signal over the samples in a window."""
    return Measure("mean", signal, after, before)


@explained
def rms(signal: str, after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the root mean square of a signal over the samples in a window."""
    return Measure("rms", signal, after, before)


@explained
def standard_deviation(signal: str, after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the root mean square of a signal about its mean in a window."""
    return Measure("standard_deviation", signal, after, before)


@explained
def final(signal: str, after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the last value of a signal in a window."""
    return Measure("final", signal, after, before)


@explained
def integral_absolute(signal: str, after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the integral of the magnitude of a signal (trapezium rule over the samples)."""
    return Measure("integral_absolute", signal, after, before)


@explained
def integral_square(signal: str, after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the integral of the square of a signal (trapezium rule over the samples)."""
    return Measure("integral_square", signal, after, before)


@explained
def integral_time_absolute(signal: str, after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the integral of magnitude times the time since the window's start."""
    return Measure("integral_time_absolute", signal, after, before)


@explained
def total_variation(signal: str, after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the sum of the magnitudes of all changes of a signal from sample to sample."""
    return Measure("total_variation", signal, after, before)


@explained
def rms_change(signal: str, after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the root mean square of the change of a signal from sample to sample."""
    return Measure("rms_change", signal, after, before)


@explained
def time_outside(signal: str, low: Any, high: Any, after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the time that a signal spends outside [low, high], in steps of the sample period."""
    low = checked_number(low, "time_outside.low", ANY)
    high = checked_number(high, "time_outside.high", ANY)
    check_order(low, high, "time_outside.low", strict=False)
    return Measure("time_outside", signal, after, before, low=low, high=high)


@explained
def overshoot(signal: str = "output", after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the largest excess over the final reference, as a fraction of the change.

    The change goes from the signal at the window's first sample to the reference at its last one (IEC
    60050-351:2013, 351-45-38). Where the window ends at the instant at which the reference jumps, it is the
    reference before the jump. Without a change the overshoot is infinite.
    """
    return Measure("overshoot", signal, after, before)


@explained
def undershoot(signal: str = "output", after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the largest move to the wrong side of the initial value, as a fraction of the change."""
    return Measure("undershoot", signal, after, before)


@explained
def rise_time(
    low: Any = 0.1, high: Any = 0.9, signal: str = "output", after: Any = 0.0, before: Any = math.inf
) -> Measure:
    """Measure the time from fraction `low` to `high` of the change (IEC 60050-351:2013, 351-45-36)."""
    low = checked_number(low, "rise_time.low", _FRACTION)
    high = checked_number(high, "rise_time.high", _FRACTION)
    check_order(low, high, "rise_time.low")
    return Measure("rise_time", signal, after, before, low=low, high=high)


@explained
def settling_time(
    band: Any = None,
    tolerance: Any = None,
    signal: str | None = None,
    after: Any = 0.0,
    before: Any = math.inf,
) -> Measure:
    """Measure the time from the window's start until a signal stays within a band.

    Parameters
    ----------
    band : float or spread, optional
        Half width of the band around the final reference as a fraction of the change; 0.02 by default
        (IEC 60050-351:2013, 351-45-37). The signal is "output" by default.
    tolerance : float or spread, optional
        Instead of `band`: half width of the band about zero, in the unit of the signal, "error" by default.
    signal : str, optional
        Name of the signal.
    after, before : float or spread, s
        Window. A signal outside the band at its end gives infinity.
    """
    if band is not None and tolerance is not None:
        raise DescriptionError("settling_time.tolerance", tolerance, "either band or tolerance")
    if tolerance is not None:
        tolerance = checked_number(tolerance, "settling_time.tolerance", POSITIVE)
        return Measure("settling_time", signal or "error", after, before, tolerance=tolerance)
    band = checked_number(0.02 if band is None else band, "settling_time.band", POSITIVE)
    return Measure("settling_time", signal or "output", after, before, band=band)


@explained
def time_in_saturation(after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the time that the command spends at a limit of the actuator."""
    return Measure("time_in_saturation", "command", after, before)


@explained
def ise(after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the integral of the squared error."""
    return Measure("ise", "error", after, before)


@explained
def iae(after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the integral of the magnitude of the error."""
    return Measure("iae", "error", after, before)


@explained
def itae(after: Any = 0.0, before: Any = math.inf) -> Measure:
    """Measure the integral of time since the window's start times the magnitude of the error."""
    return Measure("itae", "error", after, before)


def shown(value: Number | None) -> str:
    """Write a number briefly, a spread as the call that makes it."""
    return repr(value) if isinstance(value, Spread) or value is None else f"{value:.10g}"

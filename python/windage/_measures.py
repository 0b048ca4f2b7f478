"""Measures and requirements: what they are. The functions that make measures are in `_measure_functions`.

A measure is one number computed from a trial: a reducer over a signal in a window. Compared with a limit
(`measure <= limit`, `measure >= limit`) it becomes a requirement. Windows are in seconds and include both
ends: a sample at the very instant of a step shows the error after the step, and is the first of a window that
starts there as well as the last of one that ends there.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any, NoReturn

from ._descriptions import Description
from ._errors import DescriptionError
from ._numbers import (
    ANY,
    NON_NEGATIVE,
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
#: Arguments that some kinds have, beside signal and window.
_EXTRAS = ("low", "high", "band", "tolerance", "dead_band")
#: Kinds that are made of two measures, with the sign between them.
COMBINATIONS = {"difference": "-", "ratio": "/"}
DEEPEST_COMBINATION = 8
#: Stands for all requirements together where drivers are named after one.
FAILING = "failing"
_CLASSICAL = {"ise": "integral_square", "iae": "integral_absolute", "itae": "integral_time_absolute"}


@dataclass(frozen=True, repr=False, eq=False)
class Measure(Description):
    """One number computed from a trial. Made by `peak`, `rms`, `overshoot` and the other functions.

    `measure <= limit` and `measure >= limit` make a `Requirement`; the limit is a number or a spread. `a - b` and
    `a / b` of two measures are measures too. The ratio of two zeros is undefined, as is what comes from an
    undefined measure, and meets no requirement; anything else over zero is infinite, of either sign.

    Attributes
    ----------
    kind : str
        Name of the function that makes it.
    signal : str
        Name of the signal; empty for a difference or ratio.
    after, before : float or spread, s
        Window.
    low, high, band, tolerance, dead_band : float or spread, optional
        Further arguments, where the kind has them.
    first, second : Measure, optional
        What a difference or ratio is made of.
    """

    kind: str = field(metadata={"is_kind": True})
    signal: str
    after: Number = field(default=0.0, metadata=takes(NON_NEGATIVE))
    before: Number = field(default=math.inf, metadata=takes(_BEFORE))
    low: Number | None = None
    high: Number | None = None
    band: Number | None = None
    tolerance: Number | None = None
    dead_band: Number | None = None
    first: Measure | None = None
    second: Measure | None = None

    def __post_init__(self) -> None:
        if not isinstance(self.kind, str) or checked_label(self.kind, "measure.kind") is None:
            raise DescriptionError("measure.kind", self.kind, "the name of a function that makes a measure")
        if self.kind in COMBINATIONS:
            self._check_operands()
            return
        if self.first is not None or self.second is not None:
            expected = f"one of {', '.join(COMBINATIONS)} for a measure made of two"
            raise DescriptionError("measure.kind", self.kind, expected)
        object.__setattr__(self, "signal", checked_title(self.signal, f"{self.kind}.signal"))
        for name, rule in (("after", NON_NEGATIVE), ("before", _BEFORE)):
            object.__setattr__(self, name, checked_number(getattr(self, name), f"{self.kind}.{name}", rule))
        for name in _EXTRAS:
            if getattr(self, name) is not None:
                object.__setattr__(self, name, checked_number(getattr(self, name), f"{self.kind}.{name}", ANY))
        check_order(self.after, self.before, f"{self.kind}.before")

    def _check_operands(self) -> None:
        for name in ("first", "second"):
            operand = getattr(self, name)
            if not isinstance(operand, Measure):
                mend = "A number belongs to the limit: measure <= limit." if is_plain_number(operand) else ""
                raise DescriptionError(f"{self.kind}.{name}", operand, "a measure such as peak('error')", mend)
        if self._depth() > DEEPEST_COMBINATION:
            expected = f"at most {DEEPEST_COMBINATION} differences and ratios within each other"
            raise DescriptionError(self.kind, f"{self._depth()} of them", expected)

    def _depth(self) -> int:
        if self.first is None or self.second is None:
            return 0
        return 1 + max(self.first._depth(), self.second._depth())

    @property
    def parts(self) -> tuple[Measure, ...]:
        """The measures of one signal that this one is made of: itself, or those of a difference or ratio."""
        return tuple(part for _, part in self._placed_parts())

    def _placed_parts(self, place: str = "") -> list[tuple[str, Measure]]:
        if self.first is None or self.second is None:
            return [(place, self)]
        return [*self.first._placed_parts(f"{place}.first"), *self.second._placed_parts(f"{place}.second")]

    def __repr__(self) -> str:
        if self.first is None or self.second is None:
            return super().__repr__()
        return f"({self.first!r} {COMBINATIONS[self.kind]} {self.second!r})"

    @property
    def _kind(self) -> str:
        return self.kind

    @property
    def label(self) -> str:
        """The measure in words, as in tables."""
        if self.first is not None and self.second is not None:
            sides = [f"({m.label})" if m.kind in COMBINATIONS else m.label for m in (self.first, self.second)]
            return f" {COMBINATIONS[self.kind]} ".join(sides)
        words = _WORDS.get(self.kind, self.kind.replace("_", " "))
        extras = {name.replace("_", " "): getattr(self, name) for name in _EXTRAS}
        told = [(n, v) for n, v in extras.items() if v is not None and (n, v) != ("dead band", 0.0)]
        details = [f"{name} {shown(value)}" for name, value in told]
        text = words + (f" ({', '.join(details)})" if details else "")
        if self.kind != "time_in_saturation":
            text += f" of {self.signal}"
        if self.after != 0.0:
            text += f" after {shown(self.after)} s"
        if self.before != math.inf:
            text += f" before {shown(self.before)} s"
        return text

    def _key(self) -> tuple[Any, ...]:
        extras = (getattr(self, name) for name in _EXTRAS)
        return (self.kind, self.signal, self.after, self.before, *extras, self.first, self.second)

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

    def __sub__(self, other: Any) -> Measure:
        return Measure("difference", "", first=self, second=other)

    def __truediv__(self, other: Any) -> Measure:
        return Measure("ratio", "", first=self, second=other)

    def __rsub__(self, other: Any) -> Measure:
        return Measure("difference", "", first=other, second=self)

    def __rtruediv__(self, other: Any) -> Measure:
        return Measure("ratio", "", first=other, second=self)

    def __bool__(self) -> NoReturn:
        raise DescriptionError(
            "requirement", self, "a comparison with a limit", "Write measure <= limit or measure >= limit."
        )

    def _refuse_comparison(self, sign: str, limit: object) -> NoReturn:
        mend = "Write measure <= limit or measure >= limit: a limit itself always counts as met."
        raise DescriptionError("requirement", f"{self.label} {sign} {limit}", "<= or >=", mend)

    def _describe(self, numbers: Numbers, path: str, limits: Any) -> dict[str, Any]:
        """Return the measure as the engine wants it; `limits` are those of the actuator."""
        if self.first is not None and self.second is not None:
            operands = [(self.first, f"{path}.first"), (self.second, f"{path}.second")]
            return {"kind": self.kind, "operands": [m._describe(numbers, place, limits) for m, place in operands]}
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
        elif self.dead_band is not None:
            described["a"] = numbers.take(self.dead_band, f"{path}.dead_band")
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
        if self.name == FAILING:
            expected = f"a name other than {FAILING!r}, which stands for all requirements together"
            raise DescriptionError("requirement.name", self.name, expected)

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


def shown(value: Number | None) -> str:
    """Write a number briefly, a spread as the call that makes it."""
    return repr(value) if isinstance(value, Spread) or value is None else f"{value:.10g}"

"""Numbers of a description: what may stand where a number is expected, and how it is checked.

Wherever windage takes a number it takes a spread as well. A rule says what is allowed at a place (positive,
not zero, ...). It is applied to a plain number, or to the whole support of a spread, so that no trial can
ever draw a forbidden value.
"""

from __future__ import annotations

import math
import numbers
import operator
from abc import ABC, abstractmethod
from collections.abc import Iterable, Sequence, Sized
from dataclasses import dataclass
from typing import Any

from ._descriptions import Description
from ._errors import DescriptionError, suggestion
from ._shown_text import LONGEST_NAME, hidden_character, shorten

#: Longest sequence of numbers that is taken anywhere.
MOST_ITEMS = 10_000_000
#: Names of drawn parameters, and of anything else that becomes part of a path.
NAME_EXPECTED = "a name of letters (a to z, A to Z), digits and underscores that does not start with a digit"


class Spread(Description, ABC):
    """What is known about an uncertain number.

    Attributes
    ----------
    low, high : float
        Bounds of the support; infinite where there is none.
    nominal : float
        The value that the nominal unit has.
    name : str or None
        Name of the drawn parameter; by default the name of the place it stands at.
    """

    low: Any
    high: Any
    nominal: Any
    name: str | None

    @abstractmethod
    def _engine_form(self) -> tuple[str, list[float]]:
        """Return the kind and the numbers that the engine wants."""

    def _excludes_low(self) -> bool:
        """Tell whether the lower bound itself is never drawn."""
        return False

    def _varies(self) -> bool:
        """Tell whether more than one number can be drawn."""
        return bool(self.low < self.high)

    def _is_truncated(self) -> bool:
        """Tell whether tails were cut off."""
        return False

    def _values(self) -> tuple[float, ...] | None:
        """Return all values that can be drawn, or None where they form an interval."""
        return None


Number = float | Spread


@dataclass(frozen=True, slots=True)
class Rule:
    """What is allowed at a place that takes a number.

    Attributes
    ----------
    expected : str
        In words, for messages.
    low, high : float
        Bounds.
    open_low : bool
        The lower bound itself is not allowed.
    nonzero : bool
        Zero is not allowed, nor a spread that reaches across it.
    or_zero : bool
        The plain number 0 (meaning: none) is allowed beside what the other bounds allow.
    bounded : bool
        A spread must have finite bounds.
    infinite : bool
        An infinite plain number is allowed.
    """

    expected: str
    low: float = -math.inf
    high: float = math.inf
    open_low: bool = False
    nonzero: bool = False
    or_zero: bool = False
    bounded: bool = False
    infinite: bool = False


ANY = Rule("a finite number or a spread")
POSITIVE = Rule("a number above 0 or a spread with such a support", low=0.0, open_low=True)
NON_NEGATIVE = Rule("a number of at least 0 or a spread with such a support", low=0.0)
NONZERO = Rule("a number other than 0 or a spread whose support does not hold 0", nonzero=True)
ZERO_OR_POSITIVE = Rule(
    "0 (for none), a number above 0 or a spread with a support above 0", low=0.0, open_low=True, or_zero=True
)


def takes(rule: Rule) -> dict[str, Rule]:
    """Return the metadata of a dataclass field that holds a number under a rule."""
    return {"rule": rule}


def is_plain_number(value: object) -> bool:
    """Tell whether something is a real number and no truth value."""
    return isinstance(value, numbers.Real) and not isinstance(value, bool)


def is_text(value: object) -> bool:
    """Tell whether something is a text with more than blanks."""
    return isinstance(value, str) and bool(value.strip())


def plain_number(value: object, place: str, expected: str = "a finite number") -> float:
    """Return a finite float, or raise naming the place."""
    if not is_plain_number(value):
        raise DescriptionError(place, value, expected)
    try:
        result = float(value)  # type: ignore[arg-type]
    except OverflowError:
        result = math.inf
    except Exception:  # whatever a foreign number raises
        raise DescriptionError(place, value, expected) from None
    if not math.isfinite(result):
        raise DescriptionError(place, value, expected, "It must not be infinite or NaN.")
    return result


def checked_number(value: object, place: str, rule: Rule = ANY) -> Number:
    """Return a number or spread that keeps to a rule.

    Raises
    ------
    DescriptionError
        If it is neither, or if its value or any part of its support breaks the rule.
    """
    if isinstance(value, Spread):
        check_support(value, value.low, value.high, place, rule)
        return value
    if rule.infinite and isinstance(value, float) and math.isinf(value) and value > 0:
        return value
    if isinstance(value, str):
        mend = "Write the number without quotes; a spread is made by normal(...), uniform(...), ..."
        raise DescriptionError(place, value, rule.expected, mend)
    plain = plain_number(value, place, rule.expected)
    if rule.or_zero and plain == 0.0:
        return 0.0
    is_low = plain < rule.low or (plain == rule.low and rule.open_low)
    if is_low or plain > rule.high or (rule.nonzero and plain == 0.0):
        raise DescriptionError(place, value, rule.expected)
    return plain


def check_support(spread: Spread, low: float, high: float, place: str, rule: Rule) -> None:
    """Apply a rule to every value that a spread can take; low and high are NaN where not known yet."""
    if math.isnan(low):
        return
    touches = low == rule.low and rule.open_low and not spread._excludes_low()
    if low < rule.low or touches:
        mend = f"Its lower bound is {low:g}; truncate it, for example normal(..., low=...)."
        raise DescriptionError(place, spread, rule.expected, mend)
    if high > rule.high:
        mend = f"Its upper bound is {high:g}; truncate it, for example normal(..., high=...)."
        raise DescriptionError(place, spread, rule.expected, mend)
    if rule.nonzero and low <= 0.0 <= high and _can_be_zero(spread, low):
        mend = f"Its support goes from {low:g} to {high:g}; truncate it on one side of 0, for example low=..."
        raise DescriptionError(place, spread, rule.expected, mend)
    if rule.bounded and not (math.isfinite(low) and math.isfinite(high)):
        mend = f"Its support goes from {low:g} to {high:g}; truncate it, for example normal(..., sigmas=3)."
        raise DescriptionError(place, spread, f"{rule.expected}, with finite bounds", mend)


def _can_be_zero(spread: Spread, low: float) -> bool:
    return not (low == 0.0 and spread._excludes_low())


def checked_numbers(value: object, place: str, rule: Rule = ANY, count: int | None = None) -> tuple[Number, ...]:
    """Return a sequence of numbers or spreads as a tuple.

    Raises
    ------
    DescriptionError
        If it is no sequence, is empty, has another length than `count`, or an element breaks the rule.
    """
    many = "a list of numbers" if count is None else f"a list of {count} numbers"
    items = checked_sequence(value, place, many)
    if not items or (count is not None and len(items) != count):
        found = value if items else "an empty list"
        mend = "" if count is None or not items else f"It has {len(items)}."
        raise DescriptionError(place, found, many, mend)
    return tuple(checked_number(item, f"{place}[{i}]", rule) for i, item in enumerate(items))


def checked_sequence(value: object, place: str, expected: str) -> list[Any]:
    """Return the items of a list, tuple or array (not of a text or a mapping)."""
    if isinstance(value, str | bytes) or not (isinstance(value, Sequence) or hasattr(value, "__array__")):
        raise DescriptionError(place, value, expected)
    try:
        count = len(value)  # type: ignore[arg-type]
        items = list(value) if count <= MOST_ITEMS else []  # type: ignore[call-overload]
    except Exception:  # an array without axes, a length that no memory has, whatever a foreign object raises
        raise DescriptionError(place, value, expected) from None
    if count > MOST_ITEMS:
        raise DescriptionError(place, value, f"{expected}, at most {MOST_ITEMS}")
    return items


def check_count(items: Sized, place: str, most: int) -> None:
    """Refuse more items than a description may have, before anything is built from them."""
    if len(items) > most:
        raise DescriptionError(place, f"{len(items)} items", f"at most {most} items")


def checked_integer(value: object, place: str, low: int, high: int) -> int:
    """Return a whole number between two bounds, both included."""
    expected = f"a whole number from {low} to {high}"
    if isinstance(value, bool):
        raise DescriptionError(place, value, expected)
    try:
        whole = operator.index(value)  # type: ignore[arg-type]
    except Exception:  # TypeError, or whatever a foreign object raises
        mend = ""
        if isinstance(value, float) and low <= value <= high and value.is_integer():
            mend = f"Write {int(value)}, without point and exponent."
        raise DescriptionError(place, value, expected, mend) from None
    if not low <= whole <= high:
        raise DescriptionError(place, value, expected)
    return whole


def checked_flag(value: object, place: str) -> bool:
    """Return a truth value; numbers that merely look like one are refused."""
    if not isinstance(value, bool):
        raise DescriptionError(place, value, "True or False")
    return value


def checked_choice(value: object, place: str, known: Iterable[str]) -> str:
    """Return a word out of a list of words."""
    words = list(known)
    if not isinstance(value, str) or value not in words:
        mend = suggestion(value, words) if isinstance(value, str) else ""
        raise DescriptionError(place, value, "one of " + ", ".join(repr(word) for word in words), mend)
    return value


def checked_label(value: object, place: str) -> str | None:
    """Return a name for a drawn parameter, or None."""
    if value is None:
        return None
    if not isinstance(value, str) or not value.isascii() or not value.isidentifier():
        raise DescriptionError(place, value, NAME_EXPECTED)
    return checked_length(value, place)


def checked_length(name: str, place: str) -> str:
    """Return a name that is not too long."""
    if len(name) > LONGEST_NAME:
        raise DescriptionError(place, name, f"a name of at most {LONGEST_NAME} characters")
    return name


def checked_title(value: object, place: str) -> str:
    """Return a name in free words: one line whose every character shows as itself.

    No character of it may move the cursor of a terminal or change the direction of writing, and blanks come
    singly and inside, so that no name can pass for a line of a report.
    """
    if not isinstance(value, str) or not value.strip():
        raise DescriptionError(place, value, "a name written as text")
    value = str(checked_length(value, place))
    hidden = hidden_character(value)
    if hidden is not None:
        mend = f"Leave {hidden!a} out."
        raise DescriptionError(place, value, "a name in one line of characters that can be seen", mend)
    if " ".join(value.split(" ")) != " ".join(value.split()):
        raise DescriptionError(place, value, "single blanks between the words of a name, and none at its ends")
    return value


def check_order(low: Number, high: Number, place: str, *, strict: bool = True) -> None:
    """Refuse a pair of limits that is, or in some trial may be, reversed."""
    top = low.high if isinstance(low, Spread) else low
    bottom = high.low if isinstance(high, Spread) else high
    if top > bottom or (strict and top == bottom):
        pair = f"({_shown(low)}, {_shown(high)})"
        mend = (
            "Swap them."
            if not isinstance(low, Spread) and not isinstance(high, Spread)
            else (f"The lower one reaches {top:g}, the upper one {bottom:g}; truncate the spreads.")
        )
        raise DescriptionError(place, pair, "a lower limit below the upper one in every trial", mend)


def low_of(value: Number) -> float:
    """Return the smallest value that a number can take."""
    return float(value.low) if isinstance(value, Spread) else value


def high_of(value: Number) -> float:
    """Return the largest value that a number can take."""
    return float(value.high) if isinstance(value, Spread) else value


def nominal_of(value: Number) -> float:
    """Return the value of a number on the nominal unit."""
    return float(value.nominal) if isinstance(value, Spread) else value


def _shown(value: Number) -> str:
    return shorten(value, 40) if isinstance(value, Spread) else f"{value:.10g}"

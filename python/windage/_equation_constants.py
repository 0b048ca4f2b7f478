"""What constants alone give: folded where that is exact, and refused where it is no finite number."""

from __future__ import annotations

import math
import operator
from collections.abc import Callable, Sequence

import numpy as np

from ._loader import engine


class ConstantError(ValueError):
    """Constants alone give no finite number, or a constant cannot stand where it does."""

    def __init__(self, expected: str, mend: str = "") -> None:
        self.expected = expected
        self.mend = mend
        super().__init__(expected)


def _truth(compare: Callable[..., bool]) -> Callable[..., float]:
    return lambda *values: float(compare(*values))


def _whole(rounded: Callable[[float], int]) -> Callable[[float], float]:
    """Return a rounding that keeps the sign of a zero."""
    return lambda x: math.copysign(float(rounded(x)), x) if rounded(x) == 0 else float(rounded(x))


#: Exact operations, and those that IEEE 754 rounds correctly: the same digits here as in the engine.
FOLDED: dict[str, Callable[..., float]] = {
    "add": operator.add,
    "sub": operator.sub,
    "mul": operator.mul,
    "div": operator.truediv,
    "neg": operator.neg,
    "sqrt": math.sqrt,
    "floor": _whole(math.floor),
    "round": _whole(round),
    "mod": operator.mod,
    "less": _truth(operator.lt),
    "less_equal": _truth(operator.le),
    "equal": _truth(operator.eq),
    "not_equal": _truth(operator.ne),
}
#: Exact too, but left as they are written.
_UNFOLDED: dict[str, Callable[..., float]] = {
    "abs": abs,
    "sign": lambda x: math.copysign(1.0, x) if x else x,
    "min": lambda a, b: b if b < a else a,
    "max": lambda a, b: b if b > a else a,
    "logical_and": _truth(lambda a, b: a != 0.0 and b != 0.0),
    "logical_or": _truth(lambda a, b: a != 0.0 or b != 0.0),
    "logical_not": _truth(lambda a: a == 0.0),
    "select": lambda condition, a, b: a if condition != 0.0 else b,
}
#: Functions of the engine. They are not folded, so that a program is the same whatever engine is loaded.
_OF_THE_ENGINE = {
    "sin": "sine",
    "cos": "cosine",
    "tan": "tangent",
    "asin": "arc_sine",
    "acos": "arc_cosine",
    "atan": "arc_tangent",
    "atan2": "arc_tangent2",
    "exp": "exponential",
    "log": "logarithm",
    "pow": "power",
    "tanh": "hyperbolic_tangent",
    "sinh": "hyperbolic_sine",
    "cosh": "hyperbolic_cosine",
}
_ANGLE = "an angle of at most 2^30 in magnitude"
_SINE = "an argument from -1 to 1"
#: Where an operation is defined, in words.
_DOMAINS = {
    "sqrt": "the square root of a number that is not negative",
    "log": "the logarithm of a number above 0",
    "sin": _ANGLE,
    "cos": _ANGLE,
    "tan": _ANGLE,
    "asin": _SINE,
    "acos": _SINE,
    "mod": "a quotient below 2^51 in magnitude, mod(x, divisor)",
}
#: Quotient from which on the engine knows no digit of a remainder.
_LARGEST_QUOTIENT = 2.0**51


def value_of(op: str, operands: Sequence[float]) -> float:
    """Return what an operation of finite constants gives in the engine.

    Raises
    ------
    ConstantError
        If that is no finite number.
    """
    value = _evaluated(op, operands)
    if math.isfinite(value):
        return value
    if op == "pow":
        raise ConstantError(_bad_power(*operands))
    overflow = "constants whose result double precision can hold (at most 1.8e308)"
    raise ConstantError(overflow if math.isinf(value) and op != "log" else _DOMAINS.get(op, overflow))


def _evaluated(op: str, operands: Sequence[float]) -> float:
    if op in _OF_THE_ENGINE:
        columns = [np.array([x]) for x in operands]
        return float(engine().lane_function(_OF_THE_ENGINE[op], *columns)[0])
    if op == "sqrt" and operands[0] < 0.0:
        return math.nan
    if op == "mod" and not abs(operands[0] / operands[1]) < _LARGEST_QUOTIENT:
        return math.nan
    return (FOLDED.get(op) or _UNFOLDED[op])(*operands)


def _bad_power(base: float, exponent: float) -> str:
    if base == 0.0:
        return "a base other than 0 under a negative exponent"
    if base < 0.0 and exponent != int(exponent):
        return "a base that is not negative under an exponent that is not whole"
    return "constants whose power double precision can hold (at most 1.8e308)"

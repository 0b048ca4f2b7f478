"""A plain interpreter of equation programs, the yardstick for the engine.

Double precision with NumPy's functions: `+ - * /`, comparisons and square roots agree with the engine bit for
bit, the elementary functions to within rounding. It is slow and takes no part in a study.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping

import numpy as np
from numpy.typing import ArrayLike, NDArray

from ._equation_program import Instruction, Program
from ._errors import EquationError, suggestion

Values = NDArray[np.float64]


def _number(condition: object) -> Values:
    return np.asarray(condition, dtype=np.float64)


def _remainder(x: Values, divisor: Values) -> Values:
    """Return the remainder with the sign of the divisor; undefined where its quotient has no digit behind the point."""
    return np.where(np.abs(np.floor(x / divisor)) < 2.0**51, np.mod(x, divisor), np.nan)


#: Operations by name, on NumPy numbers.
FUNCTIONS: dict[str, Callable[..., object]] = {
    "add": np.add,
    "sub": np.subtract,
    "mul": np.multiply,
    "div": np.divide,
    "neg": np.negative,
    "sqrt": np.sqrt,
    "sin": np.sin,
    "cos": np.cos,
    "tan": np.tan,
    "asin": np.arcsin,
    "acos": np.arccos,
    "atan": np.arctan,
    "atan2": np.arctan2,
    "exp": np.exp,
    "log": np.log,
    # Not `power`: it takes a square root for a single exponent of 0.5, which is wrong at -0 and -infinity.
    "pow": np.float_power,
    "tanh": np.tanh,
    "sinh": np.sinh,
    "cosh": np.cosh,
    "abs": np.abs,
    "floor": np.floor,
    "round": np.rint,  # ties to even
    "mod": _remainder,
    # An undefined number passes through, and so does the sign of a zero.
    "sign": lambda x: np.where(x > 0.0, 1.0, np.where(x < 0.0, -1.0, x)),
    # An undefined first argument passes through, an undefined second one is dropped.
    "min": lambda a, b: np.where(b < a, b, a),
    "max": lambda a, b: np.where(b > a, b, a),
    "less": np.less,
    "less_equal": np.less_equal,
    "equal": np.equal,
    "not_equal": np.not_equal,
    "logical_and": lambda a, b: (a != 0.0) & (b != 0.0),
    "logical_or": lambda a, b: (a != 0.0) | (b != 0.0),
    "logical_not": lambda a: a == 0.0,
    "select": lambda condition, a, b: np.where(condition != 0.0, a, b),
}


def evaluate_reference(program: Program, values: Mapping[str, ArrayLike]) -> list[Values]:
    """Evaluate a program with NumPy.

    Parameters
    ----------
    program : Program
        From `compile_equations`.
    values : mapping of str to float or array_like
        A number or an array for each input that the program loads; shapes must broadcast.

    Returns
    -------
    list of ndarray
        One float64 array for each output of the program, of the broadcast shape of the inputs it depends on.
        Division by zero, overflow and undefined results are infinities and NaN, without warnings.

    Raises
    ------
    EquationError
        If an input that the program loads has no value.
    """
    results: list[Values] = []
    with np.errstate(all="ignore"):
        for instruction in program.code:
            results.append(_step(instruction, program, values, results))
    return [results[output] for output in program.outputs]


def _step(instruction: Instruction, program: Program, values: Mapping[str, ArrayLike], results: list[Values]) -> Values:
    if instruction.op == "constant":
        return _number(instruction.constant)
    if instruction.op == "load":
        name = program.inputs[instruction.a]
        if name not in values:
            raise EquationError("values", sorted(values), f"a value for {name!r}", suggestion(name, values))
        return _number(values[name])
    operands = [results[value] for value in (instruction.a, instruction.b, instruction.c) if value >= 0]
    return _number(FUNCTIONS[instruction.op](*operands))

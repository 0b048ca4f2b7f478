"""From a checked formula to instructions: what each operator and function of the language means."""

from __future__ import annotations

import ast
from collections.abc import Callable, Mapping, Sequence

from ._equation_constants import ConstantError
from ._equation_language import CONSTANTS, TIME
from ._equation_program import Tape
from ._equation_text import Formula, operands
from ._errors import EquationError, suggestion

_HINTS = {"e": "Write exp(1).", "inf": "Infinity is not a number here.", "nan": "NaN is not a number here."}


def lower(tape: Tape, formula: Formula, values: Mapping[str, int]) -> int:
    """Put one formula on the tape; return its value."""
    stack: list[int] = []
    for node in formula.nodes:
        count = len(operands(node))
        arguments = stack[len(stack) - count :]
        del stack[len(stack) - count :]
        if isinstance(node, ast.Name) and node.id not in values:
            raise _unknown(formula, node, values)
        try:
            stack.append(_value(tape, node, arguments, values))
        except ConstantError as error:
            raise formula.error(node, error.expected, error.mend) from None
    return stack[0]


def _unknown(formula: Formula, node: ast.Name, values: Mapping[str, int]) -> EquationError:
    if node.id == TIME:
        expected = "an expression that does not depend on time"
        return formula.error(node, expected, "Time is not available here.")
    known = [name for name in values if name not in CONSTANTS]
    mend = _HINTS.get(node.id) or suggestion(node.id, known)
    return formula.error(node, "the name of a state, input, disturbance, parameter or named expression", mend)


_ARITHMETIC: dict[type[ast.AST], str] = {ast.Add: "add", ast.Sub: "sub", ast.Mult: "mul", ast.Div: "div"}
#: Operation and whether its operands are swapped.
_COMPARISON: dict[type[ast.AST], tuple[str, bool]] = {
    ast.Lt: ("less", False),
    ast.LtE: ("less_equal", False),
    ast.Gt: ("less", True),
    ast.GtE: ("less_equal", True),
    ast.Eq: ("equal", False),
    ast.NotEq: ("not_equal", False),
}


def _value(tape: Tape, node: ast.expr, arguments: list[int], values: Mapping[str, int]) -> int:
    match node:
        case ast.Constant(value=int() | float() as number):
            return tape.constant(float(number))
        case ast.Name(id=name):
            return values[name]
        case ast.UnaryOp(op=ast.UAdd()):
            return arguments[0]
        case ast.UnaryOp(op=op):
            return tape.apply("neg" if isinstance(op, ast.USub) else "logical_not", *arguments)
        case ast.BinOp(op=ast.Pow()):
            return tape.power(*arguments)
        case ast.BinOp(op=op):
            return tape.apply(_ARITHMETIC[type(op)], *arguments)
        case ast.BoolOp(op=op):
            return _chain(tape, "logical_and" if isinstance(op, ast.And) else "logical_or", arguments)
        case ast.Compare(ops=ops):
            pairs = zip(ops, arguments[:-1], arguments[1:], strict=True)
            return _chain(tape, "logical_and", [_compare(tape, op, a, b) for op, a, b in pairs])
        case ast.IfExp():
            a, condition, b = arguments
            return tape.apply("select", condition, a, b)
        case ast.Call(func=ast.Name(id=name)):
            return _call(tape, name, arguments)
    # The white list of the parser admits no other node.
    raise TypeError(type(node).__name__)


def _compare(tape: Tape, op: ast.cmpop, a: int, b: int) -> int:
    name, is_swapped = _COMPARISON[type(op)]
    return tape.apply(name, b, a) if is_swapped else tape.apply(name, a, b)


def _chain(tape: Tape, op: str, values: Sequence[int]) -> int:
    result = values[0]
    for value in values[1:]:
        result = tape.apply(op, result, value)
    return result


def _clip(tape: Tape, x: int, low: int, high: int) -> int:
    lowest, highest = tape.constant_of(low), tape.constant_of(high)
    if lowest is not None and highest is not None and lowest > highest:
        raise ConstantError("a lower limit that is not above the upper one, clip(x, low, high)", "Swap them.")
    return tape.apply("min", tape.apply("max", x, low), high)


def _deadzone(tape: Tape, x: int, width: int) -> int:
    number = tape.constant_of(width)
    if number is not None and number < 0.0:
        raise ConstantError("a width that is not negative, deadzone(x, width)")
    return tape.apply("sub", x, _clip(tape, x, tape.apply("neg", width), width))


#: Functions that are not one operation of the same name.
_CALLS: dict[str, Callable[..., int]] = {
    "pow": Tape.power,
    "clip": _clip,
    "deadzone": _deadzone,
    "step": lambda tape, x: tape.apply("less_equal", tape.constant(0.0), x),
    "where": lambda tape, condition, a, b: tape.apply("select", condition, a, b),
}


def _call(tape: Tape, name: str, arguments: list[int]) -> int:
    if name in _CALLS:
        return _CALLS[name](tape, *arguments)
    if name in ("min", "max"):
        return _chain(tape, name, arguments)
    return tape.apply(name, *arguments)

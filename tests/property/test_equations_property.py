"""Random equations against an independent evaluation of their trees; random text against clear errors.

A tree is a tuple whose first entry is its kind. It is printed with as few brackets as Python's precedence
allows, so a wrong precedence or associativity shows as a wrong value. Values are compared bit for bit
(undefined equals undefined).
"""

from __future__ import annotations

import math
import warnings
from collections.abc import Sequence
from typing import Any

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from windage._equations import Program, compile_equations, evaluate_reference, names_used
from windage._errors import EquationError

NAMES = ("x", "y", "z")
Tree = tuple[Any, ...]

# --- trees and their text --------------------------------------------------------------------------

NUMBERS = st.one_of(
    st.sampled_from([0.0, 1.0, 2.0, 3.0, 0.5, 4.0, 7.0, 1e308, 5e-324]),
    st.integers(0, 20).map(float),
    st.floats(0.0, 1e308, allow_nan=False),
)
LEAVES = st.one_of(
    NUMBERS.map(lambda number: ("number", number)),
    st.sampled_from(NAMES).map(lambda name: ("name", name)),
    st.just(("name", "pi")),
)
# fmt: off
ONE = [
    "sin", "cos", "tan", "asin", "acos", "atan", "exp", "log", "tanh", "sinh", "cosh", "sqrt", "abs", "sign",
    "step", "floor", "round",
]
# fmt: on
TWO = ["atan2", "pow", "mod", "deadzone", "min", "max"]
THREE = ["clip", "where", "min", "max"]


def _grow(inner: st.SearchStrategy[Tree]) -> st.SearchStrategy[Tree]:
    several = st.lists(inner, min_size=2, max_size=3)
    comparison = st.sampled_from(["<", "<=", ">", ">=", "==", "!="])
    return st.one_of(
        st.tuples(st.sampled_from("+-*/"), inner, inner),
        st.tuples(st.sampled_from("+-*/"), inner, inner),
        st.tuples(st.just("**"), inner, inner),
        st.tuples(st.just("**"), inner, st.integers(0, 18).map(lambda n: ("number", float(n)))),
        st.tuples(st.sampled_from(["negative", "positive", "not"]), inner),
        st.tuples(st.sampled_from(["and", "or"]), several),
        st.tuples(st.just("compare"), inner, st.lists(st.tuples(comparison, inner), min_size=1, max_size=2)),
        st.tuples(st.just("if"), inner, inner, inner),
        st.tuples(st.just("call"), st.sampled_from(ONE), st.tuples(inner)),
        st.tuples(st.just("call"), st.sampled_from(TWO), st.tuples(inner, inner)),
        st.tuples(st.just("call"), st.sampled_from(THREE), st.tuples(inner, inner, inner)),
    )


TREES = st.recursive(LEAVES, _grow, max_leaves=12)

#: Precedence of each kind, as in the table of operators of the Python language reference, section 6.17.
LEVEL = {
    "if": 0, "or": 1, "and": 2, "not": 3, "compare": 4, "+": 5, "-": 5, "*": 6, "/": 6, "negative": 7,
    "positive": 7, "**": 8, "number": 9, "name": 9, "call": 9,
}  # fmt: skip


def text_of(tree: Tree, least: int = 0) -> str:
    kind = tree[0]
    if kind == "number":
        text = repr(tree[1])
    elif kind == "name":
        text = tree[1]
    elif kind == "call":
        text = f"{tree[1]}({', '.join(text_of(argument) for argument in tree[2])})"
    elif kind in ("+", "-", "*", "/"):
        text = f"{text_of(tree[1], LEVEL[kind])} {kind} {text_of(tree[2], LEVEL[kind] + 1)}"
    elif kind == "**":
        text = f"{text_of(tree[1], 9)}**{text_of(tree[2], 7)}"
    elif kind in ("negative", "positive"):
        text = f"{'-' if kind == 'negative' else '+'}{text_of(tree[1], 7)}"
    elif kind == "not":
        text = f"not {text_of(tree[1], 3)}"
    elif kind in ("and", "or"):
        text = f" {kind} ".join(text_of(operand, LEVEL[kind] + 1) for operand in tree[1])
    elif kind == "compare":
        text = text_of(tree[1], 5) + "".join(f" {op} {text_of(operand, 5)}" for op, operand in tree[2])
    else:
        text = f"{text_of(tree[1], 1)} if {text_of(tree[2], 1)} else {text_of(tree[3], 0)}"
    return f"({text})" if LEVEL[kind] < least else text


# --- independent evaluation ------------------------------------------------------------------------


class Refused(Exception):
    """The tree holds constants that must be refused."""


class Number:
    """The value of a tree; whether constants alone decide it, and through operations that are all folded."""

    def __init__(self, value: Any, is_constant: bool, *operands: Number) -> None:
        self.value = np.asarray(value, dtype=np.float64)
        self.is_constant = is_constant
        self.is_known = is_constant or (bool(operands) and all(operand.is_known for operand in operands))
        if self.is_known and not np.isfinite(self.value):
            raise Refused

    @property
    def constant(self) -> float | None:
        return float(self.value) if self.is_constant else None


def _power(base: Number, exponent: Number) -> Number:
    e = exponent.constant
    if e is not None and e == int(e) and abs(e) <= 16:
        if e == 0:
            return Number(1.0, True)
        product = Number(_product(base.value, abs(int(e))), base.is_constant, base)
        return product if e > 0 else _divide(Number(1.0, True), product)
    return Number(np.float_power(base.value, exponent.value), False, base, exponent)


def _product(base: Any, exponent: int) -> Any:
    if exponent == 1:
        return base
    half = _product(base, exponent // 2)
    return half * half * base if exponent % 2 else half * half


def _divide(a: Number, b: Number) -> Number:
    if b.is_known and b.value == 0.0:
        raise Refused
    return Number(a.value / b.value, a.is_constant and b.is_constant, a, b)


def _remainder(a: Number, b: Number) -> Number:
    if b.is_known and b.value == 0.0:
        raise Refused
    rest = np.where(np.abs(np.floor(a.value / b.value)) < 2.0**51, np.mod(a.value, b.value), np.nan)
    return Number(rest, a.is_constant and b.is_constant, a, b)


COMPARE = {
    "<": lambda a, b: a < b,
    "<=": lambda a, b: a <= b,
    ">": lambda a, b: a > b,
    ">=": lambda a, b: a >= b,
    "==": lambda a, b: a == b,
    "!=": lambda a, b: a != b,
}
LIBRARY = {
    "sin": np.sin, "cos": np.cos, "tan": np.tan, "asin": np.arcsin, "acos": np.arccos, "atan": np.arctan,
    "exp": np.exp, "log": np.log, "tanh": np.tanh, "sinh": np.sinh, "cosh": np.cosh, "abs": np.fabs,
    "atan2": np.arctan2,
}  # fmt: skip


def _clip(x: Any, low: Any, high: Any) -> Any:
    raised = np.where(low > x, low, x)
    return np.where(high < raised, high, raised)


def _call(name: str, arguments: list[Number]) -> Number:
    values = [argument.value for argument in arguments]
    x = values[0]
    if name == "pow":
        return _power(*arguments)
    if name == "sqrt":
        if arguments[0].is_constant and x < 0:
            raise Refused
        return Number(np.sqrt(x), arguments[0].is_constant, *arguments)
    if name in ("floor", "round"):
        return Number(np.floor(x) if name == "floor" else np.rint(x), arguments[0].is_constant, *arguments)
    if name == "mod":
        return _remainder(*arguments)
    if name == "step":
        return Number(np.where(x >= 0, 1.0, 0.0), arguments[0].is_constant, *arguments)
    if name == "sign":
        return Number(np.where(x == 0, x, np.copysign(np.where(np.isnan(x), np.nan, 1.0), x)), False, *arguments)
    if name in ("min", "max"):
        for other in values[1:]:
            x = np.where(other < x, other, x) if name == "min" else np.where(x < other, other, x)
        return Number(x, False, *arguments)
    if name == "clip":
        low, high = arguments[1].constant, arguments[2].constant
        if low is not None and high is not None and low > high:
            raise Refused
        return Number(_clip(*values), False, *arguments)
    if name == "deadzone":
        width = arguments[1].constant
        if width is not None and width < 0:
            raise Refused
        return Number(x - _clip(x, -values[1], values[1]), False, *arguments)
    if name == "where":
        return Number(np.where(x == 0, values[2], values[1]), False, *arguments)
    if name in ("sin", "cos", "tan") and arguments[0].is_known and abs(x) > 2.0**30:
        raise Refused
    return Number(LIBRARY[name](*values), False, *arguments)


def _compare(tree: Tree, values: dict[str, Any]) -> Number:
    operands = [evaluate(tree[1], values)] + [evaluate(operand, values) for _, operand in tree[2]]
    holds = np.asarray(True)
    for (op, _), a, b in zip(tree[2], operands[:-1], operands[1:], strict=True):
        holds = holds & COMPARE[op](a.value, b.value)
    return Number(holds, len(operands) == 2 and all(operand.is_constant for operand in operands), *operands)


def evaluate(tree: Tree, values: dict[str, Any]) -> Number:
    kind = tree[0]
    if kind == "number":
        return Number(tree[1], True)
    if kind == "name":
        return Number(math.pi, True) if tree[1] == "pi" else Number(values[tree[1]], False)
    if kind == "call":
        return _call(tree[1], [evaluate(argument, values) for argument in tree[2]])
    if kind == "compare":
        return _compare(tree, values)
    operands = [evaluate(operand, values) for operand in (tree[1] if kind in ("and", "or") else tree[1:])]
    a, b = operands[0], operands[-1]
    if kind == "**":
        return _power(a, b)
    if kind == "/":
        return _divide(a, b)
    if kind in ("+", "-", "*"):
        result = {"+": np.add, "-": np.subtract, "*": np.multiply}[kind](a.value, b.value)
        return Number(result, a.is_constant and b.is_constant, a, b)
    if kind == "positive":
        return a
    if kind == "negative":
        return Number(-a.value, a.is_constant, a)
    if kind == "not":
        return Number(a.value == 0, False, a)
    if kind == "if":
        return Number(np.where(operands[1].value == 0, b.value, a.value), False, *operands)
    truths = [operand.value != 0 for operand in operands]
    result = truths[0]
    for truth in truths[1:]:
        result = result & truth if kind == "and" else result | truth
    return Number(result, False, *operands)


def _compiled(text: str, inputs: Sequence[str]) -> Program | EquationError:
    try:
        return compile_equations({"rate": text}, inputs, field="plant.equations")
    except EquationError as error:
        return error


SAMPLES = st.lists(
    st.one_of(
        st.sampled_from([0.0, -0.0, 1.0, -1.0, math.inf, -math.inf, math.nan, 1e-310, -1e308]),
        st.floats(-50.0, 50.0),
        st.floats(),
    ),
    min_size=6,
    max_size=6,
)


@settings(max_examples=600, deadline=None)
@given(tree=TREES, x=SAMPLES, y=SAMPLES, z=SAMPLES)
def test_text_means_what_its_tree_means(tree: Tree, x: list[float], y: list[float], z: list[float]) -> None:
    values = {name: np.array(samples) for name, samples in zip(NAMES, (x, y, z), strict=True)}
    text = text_of(tree)
    try:
        with np.errstate(all="ignore"):
            expected = evaluate(tree, values).value
    except Refused:
        expected = None
    answer = _compiled(text, NAMES)
    if expected is None or isinstance(answer, EquationError):
        # Refused by both or by neither.
        assert expected is None, f"{text}: {answer}"
        assert isinstance(answer, EquationError), f"{text} should have been refused"
        return
    (found,) = evaluate_reference(answer, values)
    found, expected = np.broadcast_arrays(found, expected)
    np.testing.assert_array_equal(found, expected, err_msg=text)
    defined = ~np.isnan(expected)
    np.testing.assert_array_equal(np.signbit(found[defined]), np.signbit(expected[defined]), err_msg=text)


@settings(max_examples=200, deadline=None)
@given(trees=st.lists(TREES, min_size=1, max_size=3))
def test_programs_are_minimal(trees: list[Tree]) -> None:
    equations = {f"e{i}": text_of(tree) for i, tree in enumerate(trees)}
    try:
        program = compile_equations(equations, NAMES, field="plant.equations")
    except EquationError:
        return
    needed = set(program.outputs)
    for index, instruction in enumerate(program.code):
        operands = () if instruction.op == "load" else (instruction.a, instruction.b, instruction.c)
        assert all(operand < index for operand in operands)
        needed.update(operands)
    assert needed >= set(range(len(program.code)))
    assert len({(i.op, i.a, i.b, i.c, i.constant.hex()) for i in program.code}) == len(program.code)


# --- random text -----------------------------------------------------------------------------------

# fmt: off
PIECES = st.sampled_from([
    "x", "y", "pi", "t", "sin", "max", "clip", "where", "(", ")", "(", ")", ",", "+", "-", "*", "/", "**",
    "<", "<=", "==", " ", " if ", " else ", " and ", " or ", " not ", "lambda ", "for ", " in ", "1", "2.5",
    "1e9", "0", ".", "e", "j", "_", "^", "=", ":=", "'", '"', "[", "]", "{", "}", "\\", "\n", "\t", "#", ";",
    "\x00", "\u00b2", "\ud800", "0x", "9" * 400,
])
# fmt: on


def _answer(text: str) -> None:
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        answer = _compiled(text, ["x", "y"])
        if isinstance(answer, EquationError):
            assert answer.field == "plant.equations['rate']"
            assert str(answer).startswith("plant.equations['rate']: found ")
            assert "; expected " in str(answer)
            return
        (result,) = evaluate_reference(answer, {"x": 0.5, "y": -2.0})
    assert result.dtype == np.float64
    assert names_used(text, "f") <= {"x", "y"}


@settings(max_examples=1000, deadline=1000)
@given(st.lists(PIECES, max_size=30).map("".join))
def test_pieces_of_equations_give_a_program_or_a_clear_error(text: str) -> None:
    _answer(text)


@settings(max_examples=500, deadline=1000)
@given(st.text(max_size=60))
def test_any_text_gives_a_program_or_a_clear_error(text: str) -> None:
    _answer(text)


@settings(max_examples=300, deadline=1000)
@given(tree=TREES, position=st.integers(0, 10_000), piece=PIECES)
def test_a_damaged_equation_gives_a_program_or_a_clear_error(tree: Tree, position: int, piece: str) -> None:
    text = text_of(tree).replace("z", "y")
    position %= len(text) + 1
    _answer(text[:position] + piece + text[position + 1 :])

"""The flat program that the engine runs for a set of equations, and the tape on which it is built.

A program is in static single assignment form: value i is the result of instruction i, and operands are
earlier values. While it is built, equal instructions are shared and a few rewritings are applied. Each of
them gives the bits that the plain evaluation would give, for every double including zeros of either sign,
infinities and undefined numbers (whose payload alone may differ). Constants are folded only through exact
operations and those that IEEE 754 rounds correctly; what constants give through the others, the engine's own
functions tell, and only to refuse what is no finite number. Hoisting is left to the engine.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from ._equation_constants import FOLDED, ConstantError, value_of

# fmt: off
#: Operations by the number of operands. An operand is true where it differs from 0; a truth value is 1 or 0.
UNARY = frozenset((
    "neg", "sqrt", "sin", "cos", "tan", "asin", "acos", "atan", "exp", "log", "tanh", "sinh", "cosh", "abs",
    "sign", "floor", "round", "logical_not",
))
BINARY = frozenset((
    "add", "sub", "mul", "div", "atan2", "pow", "mod", "min", "max", "less", "less_equal", "equal", "not_equal",
    "logical_and", "logical_or",
))
# fmt: on
COMMUTATIVE = frozenset(("add", "mul", "equal", "not_equal", "logical_and", "logical_or"))
OPERATIONS = UNARY | BINARY | {"constant", "load", "select"}

#: Largest integer exponent written out as products.
LARGEST_CHAIN = 16


@dataclass(frozen=True, slots=True)
class Instruction:
    """One step of a program.

    Attributes
    ----------
    op : str
        Name of the operation, one of `OPERATIONS`.
    a, b, c : int
        Operands: indices of earlier values, -1 where there is none. For "load", `a` is the index of the
        input; for "select", `a` is the condition, `b` the value where it is true and `c` the value where it
        is not.
    constant : float
        The value of a "constant".
    """

    op: str
    a: int = -1
    b: int = -1
    c: int = -1
    constant: float = 0.0


@dataclass(frozen=True, slots=True)
class Program:
    """Equations in executable form.

    Attributes
    ----------
    inputs : tuple of str
        Names of the inputs, in the order that "load" counts them; some may never be loaded.
    code : tuple of Instruction
        Value i is the result of instruction i.
    outputs : tuple of int
        The values that are the results, in the order asked for.
    """

    inputs: tuple[str, ...]
    code: tuple[Instruction, ...]
    outputs: tuple[int, ...]


class Tape:
    """A program in the making."""

    def __init__(self) -> None:
        self._code: list[Instruction] = []
        # What depends on constants alone, folded or not.
        self._values: dict[int, float] = {}
        # Constants are told apart by their hexadecimal form, since 0.0 == -0.0.
        self._known: dict[tuple[str, int, int, int, str], int] = {}

    def constant(self, value: float) -> int:
        """Return the value that is always `value`."""
        index = self._emit(Instruction("constant", constant=value))
        self._values[index] = value
        return index

    def load(self, index: int) -> int:
        """Return the value of an input."""
        return self._emit(Instruction("load", index))

    def constant_of(self, value: int) -> float | None:
        """Return the number that a value always has, or None if it is not a constant."""
        instruction = self._code[value]
        return instruction.constant if instruction.op == "constant" else None

    def apply(self, op: str, a: int, b: int = -1, c: int = -1) -> int:
        """Return the value of an operation on earlier values, simplified where that is exact.

        Raises
        ------
        ConstantError
            If constants alone give no finite number.
        """
        if op in ("div", "mod") and self._values.get(b) == 0.0:
            raise ConstantError("a divisor other than 0")
        operands = [operand for operand in (a, b, c) if operand >= 0]
        known = [self._values[operand] for operand in operands if operand in self._values]
        value = value_of(op, known) if len(known) == len(operands) else None
        if value is not None and op in FOLDED and all(self.constant_of(x) is not None for x in operands):
            return self.constant(value)
        index = self._simplify(op, a, b)
        if index is None:
            index = self._emit(Instruction(op, a, b, c))
        if value is not None:
            self._values[index] = value
        return index

    def power(self, base: int, exponent: int) -> int:
        """Return base ** exponent.

        Integer exponents up to `LARGEST_CHAIN` become products in a fixed order: square, then multiply by the
        base where the next binary digit of the exponent is 1, from the second digit on. A negative one is the
        reciprocal of that. An exponent of 0 gives 1 for every base, as IEEE 754-2019 (9.2.1) has it for pow.
        """
        number = self.constant_of(exponent)
        if number == 0.0:
            return self.constant(1.0)
        if number is None or number != int(number) or abs(number) > LARGEST_CHAIN:
            return self.apply("pow", base, exponent)
        product = base
        for digit in f"{abs(int(number)):b}"[1:]:
            product = self.apply("mul", product, product)
            if digit == "1":
                product = self.apply("mul", product, base)
        return product if number > 0 else self.apply("div", self.constant(1.0), product)

    def finish(self, inputs: Sequence[str], outputs: Sequence[int]) -> Program:
        """Return the program of the given outputs, without instructions that none of them needs."""
        # Only what is needed is visited: a tape may hold many programs.
        needed: set[int] = set()
        pending = list(outputs)
        while pending:
            index = pending.pop()
            if index not in needed:
                needed.add(index)
                pending.extend(_operands(self._code[index]))
        moved: dict[int, int] = {-1: -1}
        code: list[Instruction] = []
        for index in sorted(needed):
            instruction = self._code[index]
            moved[index] = len(code)
            if instruction.op != "load":
                a, b, c = moved[instruction.a], moved[instruction.b], moved[instruction.c]
                instruction = Instruction(instruction.op, a, b, c, instruction.constant)
            code.append(instruction)
        return Program(tuple(inputs), tuple(code), tuple(moved[output] for output in outputs))

    def _emit(self, instruction: Instruction) -> int:
        op, a, b, c = instruction.op, instruction.a, instruction.b, instruction.c
        if op in COMMUTATIVE:
            a, b = min(a, b), max(a, b)
        key = (op, a, b, c, instruction.constant.hex())
        if key not in self._known:
            self._known[key] = len(self._code)
            self._code.append(instruction)
        return self._known[key]

    def _simplify(self, op: str, a: int, b: int) -> int | None:
        """Apply an identity that holds bit for bit.

        x + 0 is not one (it turns -0 into 0), nor is x * 0 (infinity, sign), nor the square root for x **
        0.5.
        """
        first = self.constant_of(a)
        second = self.constant_of(b) if b >= 0 else None
        if op == "mul" and second == 1.0:
            return a
        if op == "mul" and first == 1.0:
            return b
        if op == "div" and second == 1.0:
            return a
        if op == "div" and second is not None and _has_exact_reciprocal(second):
            return self.apply("mul", a, self.constant(1.0 / second))
        if op == "sub" and second == 0.0 and math.copysign(1.0, second) > 0:
            return a
        if op == "neg" and self._code[a].op == "neg":
            return self._code[a].a
        return None


def _has_exact_reciprocal(number: float) -> bool:
    """Tell whether x / number == x * (1 / number) for all x: a power of two with a normal reciprocal."""
    mantissa, exponent = math.frexp(number)
    return abs(mantissa) == 0.5 and -1021 <= exponent <= 1023


def _operands(instruction: Instruction) -> tuple[int, ...]:
    if instruction.op in ("constant", "load"):
        return ()
    return tuple(value for value in (instruction.a, instruction.b, instruction.c) if value >= 0)

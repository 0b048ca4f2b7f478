"""The equation language: its functions, its limits, and the place of a mistake in a text."""

from __future__ import annotations

from dataclasses import dataclass

from ._errors import EquationError

#: Limits of one expression. Two thousand tokens keep the tree of the longest sum within what every supported
#: Python version can build; a hundred levels stay clear of the parser's own limits (200 parentheses, 4000
#: nested rules) and take less than 256 kB of stack, so that they are safe in a thread too (measured).
LONGEST_TEXT = 20_000
MOST_TOKENS = 2_000
DEEPEST_NESTING = 100

CONSTANTS = ("pi",)
TIME = "t"

# fmt: off
_OF_ONE = (
    "sin", "cos", "tan", "asin", "acos", "atan", "exp", "log", "tanh", "sinh", "cosh", "sqrt", "abs", "sign",
    "step", "floor", "round",
)
# fmt: on
#: Functions of the language: how each is written and the number of arguments it takes (fewest, most).
FUNCTIONS: dict[str, tuple[str, int, int]] = {
    **{name: (f"{name}(x)", 1, 1) for name in _OF_ONE},
    "atan2": ("atan2(y, x)", 2, 2),
    "pow": ("pow(x, exponent)", 2, 2),
    "mod": ("mod(x, divisor)", 2, 2),
    "min": ("min(a, b, ...)", 2, MOST_TOKENS),
    "max": ("max(a, b, ...)", 2, MOST_TOKENS),
    "clip": ("clip(x, low, high)", 3, 3),
    "deadzone": ("deadzone(x, width)", 2, 2),
    "where": ("where(condition, a, b)", 3, 3),
}


@dataclass(frozen=True, slots=True)
class Part:
    """A piece of an equation and where it starts; line and column count from 1."""

    text: str
    column: int
    line: int | None = None

    def __repr__(self) -> str:
        quoted = repr(self.text)
        if len(quoted) > 44:
            quoted = f"{quoted[:40]}...{quoted[0]}"
        place = f"column {self.column}" if self.line is None else f"line {self.line}, column {self.column}"
        return f"{quoted} at {place}"


@dataclass(frozen=True, slots=True)
class Source:
    """The text of an equation with the name of the field it came from."""

    text: str
    field: str

    def error(self, start: int, end: int, expected: str, mend: str = "") -> EquationError:
        """Describe what is wrong with the characters from `start` up to `end` (zero-based)."""
        line_start = self.text.rfind("\n", 0, start) + 1
        line = self.text.count("\n", 0, start) + 1 if "\n" in self.text else None
        part = Part(self.text[start:end], start - line_start + 1, line)
        return EquationError(self.field, part, expected, mend)

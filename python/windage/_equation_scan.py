"""A scan over the tokens of an equation, before Python's own parser sees it.

It bounds length, token count and nesting, so that no text can exhaust time, memory or stack, and it explains
the usual slips (`2x`, `^`, `rate = 3`, a decimal comma) better than a parser can. What it lets through, the
tokenizer of every supported Python version reads without a warning. It does not check conditionals (`if`
without `else`), functions or names.
"""

from __future__ import annotations

import keyword
import math
import re
import unicodedata
from dataclasses import dataclass, field

from ._equation_language import DEEPEST_NESTING, FUNCTIONS, LONGEST_TEXT, MOST_TOKENS, Source
from ._errors import EquationError

_WORDS = ("and", "or", "not", "if", "else")

#: Every character belongs to exactly one match, so a text is the chain of its matches.
_TOKEN = re.compile(
    r"(?P<blank>[ \t\r\n]+)"
    r"|(?P<number>(?:\d+(?:_\d+)*(?:\.(?:\d+(?:_\d+)*)?)?|\.\d+(?:_\d+)*)(?:[eE][+-]?\d+)?)"
    r"|(?P<name>[A-Za-z_][A-Za-z0-9_]*)"
    r"|(?P<operator>\*\*|//|<=|>=|==|!=|=<|=>|:=|&&|\|\||<<|>>|->|[-+*/()<>,])"
    r"|(?P<other>[\s\S])",
    re.ASCII,
)
_GLUED = re.compile(r"[A-Za-z0-9_.]*", re.ASCII)

#: What is not part of the language, and what to write instead.
_HINTS = {
    "^": "Write ** for a power.",
    "%": "Write mod(x, divisor) for a remainder; for a percentage divide by 100.",
    "//": "Write / for a division, floor(a / b) to round it down.",
    "@": "There are no matrices; write the sum of products.",
    "=": "Write the right-hand side only; == compares two values.",
    ":=": "Write the right-hand side only; give a part its own name as a named expression.",
    "=<": "Write <=.",
    "=>": "Write >=.",
    "->": "There are no arrows; write an expression.",
    "&": "Write 'and'.",
    "&&": "Write 'and'.",
    "|": "Write 'or'.",
    "||": "Write 'or'.",
    "~": "Write 'not'.",
    "!": "Write 'not'.",
    "<<": "There are no bit operations; multiply by a power of two.",
    ">>": "There are no bit operations; divide by a power of two.",
    "?": "Write a choice as: a if condition else b.",
    ":": "Write a choice as: a if condition else b.",
    ".": "A dot stands only inside a number; give each quantity a plain name.",
    "[": "There is no indexing; give each element a name of its own.",
    "]": "There is no indexing; give each element a name of its own.",
    "{": "Group with round brackets.",
    "}": "Group with round brackets.",
    "'": "There is no text inside an equation; write names without quotes.",
    '"': "There is no text inside an equation; write names without quotes.",
    "#": "There are no comments inside an equation.",
    ";": "Write one expression.",
    "\u2212": "Write - for minus.",
    "\u2013": "Write - for minus.",
    "\u00d7": "Write * for a product.",
    "\u00b7": "Write * for a product.",
    "\u00f7": "Write / for a division.",
    "\u00b2": "Write **2 for a square.",
    "\u00b3": "Write **3 for a cube.",
    "\u2264": "Write <=.",
    "\u2265": "Write >=.",
    "\u2260": "Write !=.",
    "\u221a": "Write sqrt(x).",
}

_KEYWORD_HINTS = {
    "is": "Write == to compare.",
    "in": "Compare with < and <= instead.",
    "True": "Write 1.",
    "False": "Write 0.",
    "lambda": "Write the expression itself, without lambda.",
}

#: Operators after which tightly bound prefixes and powers to their left are complete.
_LOOSE = frozenset(("+", "-", "*", "/", "<", "<=", ">", ">=", "==", "!=", "and", "or", "if", "else"))


def scan(source: Source) -> None:
    """Check the tokens of an expression and their order.

    Raises
    ------
    EquationError
        At the first token that cannot stand where it stands, or that passes a limit of the language.
    """
    text = source.text
    if len(text) > LONGEST_TEXT:
        mend = "Move parts of it to named expressions."
        raise EquationError(source.field, text, f"at most {LONGEST_TEXT} characters", mend)
    if not text.strip(" \t\r\n"):
        raise EquationError(source.field, text, "an expression", "Write 0 if nothing acts here.")
    _Scan(source).run()


@dataclass(slots=True)
class _Level:
    """An open bracket (or the whole text) and what is still unfinished directly inside it."""

    start: int
    is_call: bool
    prefixes: int = 0  # signs, `not` and ** that wait for their right-hand side
    choices: int = 0  # `if` met since the last comma


@dataclass(slots=True)
class _Scan:
    """One pass over the tokens, in which a value and an operator are expected in turn."""

    source: Source
    levels: list[_Level] = field(default_factory=lambda: [_Level(0, is_call=False)])
    nesting: int = 0
    wants_value: bool = True
    previous: str = ""
    previous_start: int = 0

    def run(self) -> None:
        tokens = (match for match in _TOKEN.finditer(self.source.text) if match.lastgroup != "blank")
        for count, match in enumerate(tokens, start=1):
            token, start = match.group(), match.start()
            if count > MOST_TOKENS:
                expected = f"at most {MOST_TOKENS} numbers, names and operators"
                raise self._error(token, start, expected, "Move parts of it to named expressions.")
            self._take(match.lastgroup or "", token, start)
            self.previous, self.previous_start = token, start
        self._finish()

    def _take(self, kind: str, token: str, start: int) -> None:
        if kind == "number":
            self._number(token, start)
        elif kind == "name" and token not in _WORDS:
            self._name(token, start)
        elif kind == "other" or token in _HINTS:
            raise self._error(token, start, "an expression of the equation language", _foreign_hint(token))
        elif token == "(":
            self._open(start)
        elif token == ")":
            self._close(start)
        else:
            self._operator(token, start)

    def _number(self, token: str, start: int) -> None:
        # "2x", "0x1F", "3j", "1.2.3": Python's tokenizer warns about some and reads others as something else.
        glued = _GLUED.match(self.source.text, start + len(token))
        tail = glued.group() if glued else ""
        if tail:
            raise self._error(token + tail, start, "a decimal number or a product", _glued_hint(token, tail))
        self._value(token, start)
        has_digits = bool(re.search("[1-9]", re.split("[eE]", token)[0]))
        if math.isinf(float(token)) or (has_digits and float(token) == 0.0):
            expected = "a number that double precision can hold (magnitude 5e-324 to 1.8e308, or 0)"
            raise self._error(token, start, expected)
        # Python refuses 007 because other languages read it in octal digits.
        if has_digits and re.fullmatch(r"0[\d_]+", token):
            raise self._error(token, start, "a number without leading zeros")

    def _name(self, token: str, start: int) -> None:
        if keyword.iskeyword(token):
            expected = "an expression without Python keywords other than and, or, not, if, else"
            raise self._error(token, start, expected, _KEYWORD_HINTS.get(token, ""))
        self._value(token, start)

    def _value(self, token: str, start: int) -> None:
        if not self.wants_value:
            raise self._missing_operator(token, start)
        self.wants_value = False

    def _open(self, start: int) -> None:
        follows_name = bool(re.match(r"[A-Za-z_]", self.previous)) and self.previous not in _WORDS
        if not self.wants_value and not follows_name:
            raise self._missing_operator("(", start)
        self.levels.append(_Level(start, is_call=follows_name))
        self._deepen("(", start)
        self.wants_value = True

    def _close(self, start: int) -> None:
        if len(self.levels) == 1:
            raise self._error(")", start, "a bracket that was opened before", "Remove it.")
        level = self.levels.pop()
        # sin() is left to the count of arguments, and sin(x,) is harmless.
        if self.wants_value and not (level.is_call and self.previous in ("(", ",")):
            raise self._error(")", start, "a value before the closing bracket")
        self.nesting -= 1 + level.prefixes + level.choices
        self.wants_value = False

    def _operator(self, token: str, start: int) -> None:
        level = self.levels[-1]
        if self.wants_value:
            if token not in ("+", "-", "not"):
                raise self._error(token, start, "a value (a number, a name or a bracket) here")
            level.prefixes += 1
            self._deepen(token, start)
            return
        if token == "not":
            raise self._missing_operator(token, start)
        if token == "**":
            level.prefixes += 1
            self._deepen(token, start)
        elif token in _LOOSE:
            self.nesting -= level.prefixes
            level.prefixes = 0
        if token == "if":
            level.choices += 1
            self._deepen(token, start)
        elif token == ",":
            self._comma(level, start)
        self.wants_value = True

    def _comma(self, level: _Level, start: int) -> None:
        if not level.is_call:
            mend = "Write decimals with a point, and one expression an equation."
            raise self._error(",", start, "a comma only between arguments of a function", mend)
        self.nesting -= level.prefixes + level.choices
        level.prefixes = level.choices = 0

    def _deepen(self, token: str, start: int) -> None:
        self.nesting += 1
        if self.nesting > DEEPEST_NESTING:
            mend = "Move parts of it to named expressions."
            raise self._error(token, start, f"at most {DEEPEST_NESTING} levels of nesting", mend)

    def _finish(self) -> None:
        if self.wants_value:
            raise self._error(self.previous, self.previous_start, "a value after it; the text ends here")
        if len(self.levels) > 1:
            raise self._error("(", self.levels[-1].start, "a closing bracket for it", "Add ).")

    def _missing_operator(self, token: str, start: int) -> EquationError:
        end = start + len(token)
        if self.previous in FUNCTIONS:
            return self.source.error(self.previous_start, end, f"{FUNCTIONS[self.previous][0]}, with brackets")
        mend = "Join two conditions with 'and' or 'or'." if token == "not" else "Write * for a product."
        return self.source.error(self.previous_start, end, "an operator between the two", mend)

    def _error(self, token: str, start: int, expected: str, mend: str = "") -> EquationError:
        return self.source.error(start, start + len(token), expected, mend)


def _glued_hint(token: str, tail: str) -> str:
    if re.fullmatch(r"[jJ]", tail):
        return "There are no complex numbers."
    if token == "0" and re.fullmatch(r"[xXoObB][0-9A-Fa-f_]+", tail):
        return "Write the number in decimal digits."
    if re.fullmatch(r"[A-Za-z_][A-Za-z0-9_]*", tail) and tail not in _WORDS:
        return f"Write {token}*{tail}." if len(token) + len(tail) < 60 else "Write * for a product."
    return "Write a number such as 1.5e-3, with blanks around words."


def _foreign_hint(token: str) -> str:
    if token in _HINTS:
        return _HINTS[token]
    name = unicodedata.name(token, "")
    if name.startswith(("GREEK SMALL LETTER ", "GREEK CAPITAL LETTER ")) and name.count(" ") == 3:
        return f"Names have the letters a to z only: write {name.split()[-1].lower()}."
    return "" if token.isascii() else "Write with plain ASCII letters, digits and operators."

"""How deep a TOML text nests, found in one pass before anything is built from it.

The reader of Python's library takes time with the square of a dotted key's length, and recursion with the depth
of brackets. What a study file needs is far below the limit.
"""

from __future__ import annotations

import re

from ._errors import StudyFileError

DEEPEST_NESTING = 32

#: A piece of text that ends where it begins to matter again; "open" is a text without an end, where reading stops.
_TOKEN = re.compile(
    r'"""(?:[^"\\]|\\.|"(?!""))*"{3,5}'
    r"|'''(?:[^']|'(?!''))*'{3,5}"
    r"|(?P<open>\"\"\"|''')"
    r'|(?P<part>"(?:[^"\\\n]|\\.)*"'
    r"|'[^'\n]*'"
    r"|[A-Za-z0-9_+-]+)"
    r"|(?P<dot>\.)"
    r"|(?P<blank>[ \t]+)"
    r"|#[^\n]*"
    r"|[\s\S]",
    re.DOTALL,
)
_STEPS = {"[": 1, "{": 1, "]": -1, "}": -1}


def check_depth(text: str) -> None:
    """Refuse a TOML text whose keys or brackets nest too deeply to be read.

    Raises
    ------
    StudyFileError
        With the depth at which reading stopped.
    """
    parts = depth = 0
    for token in _TOKEN.finditer(text):
        kind = token.lastgroup
        if kind == "open":
            return  # the reader says where
        if kind == "dot":
            parts += 1
        elif kind not in ("part", "blank"):
            parts = 0
            depth = max(depth + _STEPS.get(token.group(), 0), 0)
        if parts >= DEEPEST_NESTING or depth > DEEPEST_NESTING:
            line = text.count("\n", 0, token.start()) + 1
            found = f"more than {DEEPEST_NESTING} tables or lists inside each other in line {line}"
            raise StudyFileError("study file", found, f"TOML with at most {DEEPEST_NESTING}")

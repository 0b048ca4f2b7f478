"""Nested data as TOML text, laid out for reading: small tables on one line, one requirement a table.

The library for reading (`tomllib`) is part of Python; what the writing libraries lack is the choice of a
layout, and a spread such as `{ spread = "uniform", low = 1.0, high = 2.0 }` should be one line in a
comparison of two files.
"""

from __future__ import annotations

import math
import re
from collections.abc import Iterator, Mapping
from typing import Any

LONGEST_LINE = 100
_BARE = re.compile(r"[A-Za-z0-9_-]+")
_ESCAPES = {'"': '\\"', "\\": "\\\\", "\b": "\\b", "\t": "\\t", "\n": "\\n", "\f": "\\f", "\r": "\\r"}


def toml_text(data: Mapping[str, Any]) -> str:
    """Return TOML text that reads back as the same data.

    Parameters
    ----------
    data : mapping
        Of texts, truth values, whole numbers, finite floats, lists and mappings with text keys.
    """
    return "\n".join(_table(data, "")).strip("\n") + "\n"


def _table(data: Mapping[str, Any], path: str) -> Iterator[str]:
    """Lines of a table: first what fits beside its key, then its sections."""
    sections = {key: value for key, value in data.items() if _is_section(value)}
    for key, value in data.items():
        if key not in sections:
            yield from _entry(_key(key), value)
    for key, value in sections.items():
        inner = f"{path}{_key(key)}"
        is_list = isinstance(value, list)
        head = f"[[{inner}]]" if is_list else f"[{inner}]"
        for part in value if is_list else [value]:
            # A heading that only leads to further ones says nothing, except that it counts in a list.
            if is_list or not part or not all(_is_section(item) for item in part.values()):
                yield ""
                yield head
            yield from _table(part, f"{inner}.")


def _is_section(value: Any) -> bool:
    """Tell whether a value needs a heading: a table of tables or with a kind, or a list of tables."""
    if isinstance(value, list):
        return bool(value) and all(isinstance(item, Mapping) for item in value)
    if not isinstance(value, Mapping):
        return False
    return not isinstance(value.get("spread"), str) and not isinstance(value.get("column"), str)


def _entry(key: str, value: Any) -> Iterator[str]:
    line = f"{key} = {_inline(value)}"
    if len(line) <= LONGEST_LINE or not isinstance(value, list):
        yield line
        return
    yield f"{key} = ["
    row = "   "
    for item in value:
        text = f" {_inline(item)},"
        if len(row) + len(text) > LONGEST_LINE and row.strip():
            yield row
            row = "   "
        row += text
    yield row
    yield "]"


def _inline(value: Any) -> str:
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, int):
        return str(value)
    if isinstance(value, float):
        if not math.isfinite(value):
            raise ValueError(f"{value} has no place in a study file")
        return repr(value)
    if isinstance(value, str):
        return _quoted(value)
    if isinstance(value, Mapping):
        inside = ", ".join(f"{_key(key)} = {_inline(item)}" for key, item in value.items())
        return f"{{ {inside} }}" if inside else "{}"
    if isinstance(value, list):
        return f"[{', '.join(_inline(item) for item in value)}]"
    raise TypeError(f"{type(value).__name__} has no place in a study file")


def _key(key: str) -> str:
    return key if _BARE.fullmatch(key) else _quoted(key)


def _quoted(text: str) -> str:
    # Control characters must be written as escapes in TOML.
    escaped = "".join(_ESCAPES.get(c) or (f"\\u{ord(c):04x}" if ord(c) < 0x20 or ord(c) == 0x7F else c) for c in text)
    return f'"{escaped}"'

"""What is wrong with a command as it was written: the option, what stands behind it, and how to mend it."""

from __future__ import annotations

import re
from collections.abc import Sequence
from typing import Any

from ._errors import DescriptionError, WindageError
from ._shown_text import one_line

#: What the parser of the command line says of a text that is no number, which it does not show.
_NO_NUMBER = re.compile(r"Invalid value for '(--[\w-]+)'.*\b(integer|number|float|int)\b")


def explained_usage(error: Any, arguments: Sequence[str], called_as: str) -> WindageError:
    """Return the error that says what the parser refused, in the form of all others where it is about a number."""
    message = one_line(error.format_message())
    match = _NO_NUMBER.search(message)
    found = None if match is None else _value_of(match[1], arguments)
    if match is not None and found is not None:
        is_whole = match[2].startswith("int")
        return DescriptionError(match[1], found, "a whole number" if is_whole else "a number", _mend(found, is_whole))
    context = getattr(error, "ctx", None)
    command = context.command_path if context else called_as
    return WindageError(f"{message}\n  mend      see {command} --help")


def _value_of(option: str, arguments: Sequence[str]) -> str | None:
    """Return what stands behind an option the last time that it is given."""
    found = None
    for place, argument in enumerate(arguments):
        if argument == option and place + 1 < len(arguments):
            found = arguments[place + 1]
        elif argument.startswith(f"{option}="):
            found = argument[len(option) + 1 :]
    return found


def _mend(found: str, is_whole: bool) -> str:
    try:
        value = float(found.removesuffix("%").replace(",", "."))
    except ValueError:
        return ""
    if found.endswith("%"):
        return f"Percent are written as a fraction: {0.01 * value:g}."
    if is_whole:
        return f"Write {int(value)}, without point and exponent." if value.is_integer() else ""
    return "Write decimals with a point." if "," in found else ""

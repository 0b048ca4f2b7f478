"""Errors of windage: one root, so that `except windage.WindageError` catches them all."""

from __future__ import annotations

from collections.abc import Iterable


class WindageError(Exception):
    """Root of every error that windage raises on purpose."""


class DescriptionError(WindageError, ValueError):
    """A plant, loop, spread, measure or study was described wrongly.

    The message states which field, the value found, what was expected and how to mend it.
    """

    def __init__(self, field: str, found: object, expected: str, mend: str = "") -> None:
        self.field = field
        self.found = found
        self.expected = expected
        self.mend = mend
        text = f"{field}: found {shorten(found)}; expected {expected}."
        super().__init__(f"{text} {mend}".rstrip())


class EquationError(DescriptionError):
    """An equation or a named expression cannot be understood or is not allowed."""


class StudyFileError(DescriptionError):
    """A study file cannot be read."""


class EngineError(WindageError, RuntimeError):
    """The engine cannot do what was asked (for example an instruction set that this machine lacks)."""


def shorten(value: object, limit: int = 80) -> str:
    """Show a value in at most `limit` characters, however large it is.

    Parameters
    ----------
    value : object
        Anything; text longer than `limit` is cut before it is quoted.
    limit : int
        Largest number of characters shown.
    """
    if isinstance(value, str) and len(value) > limit:
        return f"{value[: limit - 20]!r}... ({len(value)} characters)"
    text = repr(value)
    return text if len(text) <= limit else f"{text[: limit - 3]}..."


def suggestion(name: str, known: Iterable[str]) -> str:
    """Return `Did you mean 'x'?` for the closest known name, or a list of the known names."""
    known = sorted(known)
    import difflib  # costs import time and is seldom needed

    close = difflib.get_close_matches(name, known, n=1)
    if close:
        return f"Did you mean {close[0]!r}?"
    shown = ", ".join(known[:12]) + (", ..." if len(known) > 12 else "")
    return f"Known: {shown}." if known else ""

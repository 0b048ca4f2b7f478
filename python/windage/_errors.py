"""Errors of windage: one root, so that `except windage.WindageError` catches them all."""

from __future__ import annotations

from collections.abc import Iterable

from ._shown_text import one_line, shorten

#: Longest piece of a message, and what is looked at to find a name that was meant.
LONGEST_PIECE = 500
LONGEST_GUESSED, MOST_GUESSES = 100, 1000


class WindageError(Exception):
    """Root of every error that windage raises on purpose."""


class DescriptionError(WindageError, ValueError):
    """A plant, loop, spread, measure or study was described wrongly.

    The message states which field, the value found, what was expected and how to mend it.
    """

    def __init__(self, field: str, found: object, expected: str, mend: str = "") -> None:
        # Paths and hints quote names and keys as they were found.
        self.field = one_line(field, LONGEST_PIECE)
        self.found = found
        self.expected = one_line(expected, LONGEST_PIECE)
        self.mend = one_line(mend, LONGEST_PIECE)
        text = f"{self.field}: found {shorten(found)}; expected {self.expected}."
        super().__init__(f"{text} {self.mend}".rstrip())


class EquationError(DescriptionError):
    """An equation or a named expression cannot be understood or is not allowed."""


class StudyFileError(DescriptionError):
    """A study file cannot be read."""


class EngineError(WindageError, RuntimeError):
    """The engine cannot do what was asked (for example an instruction set that this machine lacks)."""


def suggestion(name: str, known: Iterable[str]) -> str:
    """Return `Did you mean 'x'?` for the closest known name, or a list of the known names."""
    known = sorted(known)
    import difflib  # costs import time and is seldom needed

    is_short = len(name) <= LONGEST_GUESSED
    close = difflib.get_close_matches(name, known[:MOST_GUESSES], n=1) if is_short else []
    if close:
        return f"Did you mean {close[0]!r}?"
    shown = ", ".join(word[:40] for word in known[:12]) + (", ..." if len(known) > 12 else "")
    return f"Known: {shown}." if known else ""

"""Errors of windage: one root, so that `except windage.WindageError` catches them all."""

from __future__ import annotations

from collections.abc import Iterable
from typing import Any

from ._shown_text import one_line, shorten

#: Longest piece of a message, and what is looked at to find a name that was meant.
LONGEST_PIECE = 500
LONGEST_GUESSED, MOST_GUESSES = 100, 1000


class WindageError(Exception):
    """Root of every error that windage raises on purpose.

    Errors can be copied and sent between processes, whatever their constructors take: what does not travel by
    itself is replaced by an object that is shown the same way.
    """

    def __reduce__(self) -> tuple[Any, ...]:
        # As it is, not through the constructor: that would fail in the receiving process, which hangs a pool.
        return _restored, (type(self), self.args, {name: _portable(part) for name, part in vars(self).items()})


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


class OutcomeFileError(DescriptionError):
    """A file with an outcome cannot be read, or is not what was written."""


class OutputError(WindageError, OSError):
    """A file cannot be written.

    The message names the file, the reason and, where there is one, what to do.
    """

    def __init__(self, file: str, reason: str, mend: str = "") -> None:
        self.file = one_line(file, LONGEST_PIECE)
        self.reason = one_line(reason, LONGEST_PIECE)
        self.mend = one_line(mend, LONGEST_PIECE)
        super().__init__(f"{self.file}: cannot be written: {self.reason}. {self.mend}".rstrip())

    def __str__(self) -> str:
        return str(self.args[0])


class EngineError(WindageError, RuntimeError):
    """The engine cannot do what was asked: an instruction set that this machine lacks, a trial it cannot compute."""


class Shown:
    """Stands for a value that could not be sent to another process, and is shown as it was."""

    def __init__(self, text: str) -> None:
        self._text = text

    def __repr__(self) -> str:
        return self._text


def _portable(value: object) -> object:
    import pickle  # costs import time and is seldom needed

    try:
        pickle.dumps(value)
    except Exception:
        return Shown(shorten(value))
    return value


def _restored(kind: type[WindageError], arguments: tuple[object, ...], state: dict[str, object]) -> WindageError:
    error = kind.__new__(kind, *arguments)
    error.args = arguments
    vars(error).update(state)
    return error


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

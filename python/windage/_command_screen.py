"""The standard streams of the command line: every character shows as itself, and a failure changes no answer.

A stream may be full, closed, a pipe whose reader has gone, or unable to write a letter. What it can take is
written, the failure is said once on the error stream, and the command goes on: its exit code is that of its
answer.
"""

from __future__ import annotations

import os
import sys
from contextlib import suppress
from dataclasses import dataclass, field
from typing import Any, TextIO

from rich.console import Console
from rich.text import Text

from ._shown_text import lines

#: A narrower terminal is taken for none at all (COLUMNS=0).
NARROWEST, USUAL_WIDTH = 20, 80


class PlainConsole(Console):
    """A console that has a width, and that leaves it to its user what a closed pipe means: rich ends the program."""

    def __init__(self, **options: Any) -> None:
        super().__init__(highlight=False, markup=False, emoji=False, **options)
        if self.width < NARROWEST:
            self.width = USUAL_WIDTH

    def on_broken_pipe(self) -> None:
        """Raise what was met."""
        raise BrokenPipeError


def console(*, is_error: bool = False) -> Console:
    """Return the console of a standard stream: nothing is marked up, coloured or wrapped by itself."""
    return PlainConsole(stderr=is_error, soft_wrap=True)


@dataclass
class Screen:
    """The standard streams during one command."""

    #: What went wrong with each stream that is of no use any more.
    lost: dict[bool, str] = field(default_factory=dict)

    def show(self, text: str, style: str = "", *, is_error: bool = False, folds: bool = True) -> None:
        """Print a text, line by line.

        Parameters
        ----------
        text : str
            Its line breaks are kept; whatever else does not show as itself is escaped.
        style : str
            Of rich.
        is_error : bool
            Print on the error stream.
        folds : bool
            Break what is longer than a line of the terminal, and indent the rest: no name, however long, begins
            a line. A command to copy must not be broken.
        """
        try:
            to = console(is_error=is_error)
            for line in lines(text).split("\n"):
                for piece in _folded(line, to) if folds and to.is_terminal else [line]:
                    to.print(Text(_writable(piece, to.encoding), style=style))
            if _stream(is_error) is None:
                raise OSError("it is closed")
        except (OSError, ValueError) as error:  # closed files raise ValueError
            self._lose(is_error, error)

    def _lose(self, is_error: bool, error: Exception) -> None:
        is_first = is_error not in self.lost
        self.lost[is_error] = getattr(error, "strerror", None) or str(error)
        # What is buffered goes nowhere, or the interpreter would complain at its end, with an exit code of its own.
        with suppress(OSError, ValueError, AttributeError):
            os.dup2(os.open(os.devnull, os.O_WRONLY), _stream(is_error).fileno())  # type: ignore[union-attr]
        # Who closes a pipe has seen enough.
        if is_first and not is_error and not isinstance(error, BrokenPipeError):
            self.show(f"Error: the standard output cannot be written: {self.lost[is_error]}", is_error=True)


def _stream(is_error: bool) -> TextIO | None:
    return sys.stderr if is_error else sys.stdout


def _folded(line: str, to: Console) -> list[str]:
    """Break a line that is too long for the terminal, the rest indented by four more than it begins with."""
    text = Text(line)
    if text.cell_len <= to.width:
        return [line]
    indent = " " * min(len(line) - len(line.lstrip()) + 4, to.width // 2)
    first, *_ = text.wrap(to, to.width, overflow="fold")
    rest = Text(line[len(first.plain) :].lstrip()).wrap(to, to.width - len(indent), overflow="fold")
    return [first.plain, *(indent + piece.plain for piece in rest)]


def _writable(text: str, encoding: str) -> str:
    return text.encode(encoding, "backslashreplace").decode(encoding)

"""Ctrl-C while trials run: a request to stop, noted instead of raised, so that nothing done is lost.

An exception can arrive between any two instructions, and what was worked out but not yet kept goes with it.
While a call that runs trials is open, Ctrl-C is therefore noted, and the call looks for the note wherever it
can stop. Only the main thread gets signals, and only the handler that Python itself installs is replaced: a
program with a handler of its own keeps it.
"""

from __future__ import annotations

import signal
import threading
import time
from collections.abc import Iterator
from contextlib import contextmanager
from types import TracebackType
from typing import Self

#: Asked once more after this time, s, an open call is given up with what it has: it may hang elsewhere.
PATIENCE = 5.0


class StopRequests:
    """Notes Ctrl-C while it is entered (`with`), which it may be again and again.

    Attributes
    ----------
    noted : bool
        Whether a stop was asked for.
    """

    def __init__(self) -> None:
        self.noted = False
        self._since = 0.0
        self._replaces = False

    def note(self) -> None:
        """Ask for a stop.

        Raises
        ------
        KeyboardInterrupt
            If that was asked for a while ago and not heard.
        """
        now = time.monotonic()
        if self.noted and now - self._since > PATIENCE:
            raise KeyboardInterrupt
        if not self.noted:
            self.noted, self._since = True, now

    def __enter__(self) -> Self:
        if threading.current_thread() is threading.main_thread():
            self._replaces = signal.getsignal(signal.SIGINT) is signal.default_int_handler
            if self._replaces:
                signal.signal(signal.SIGINT, interrupt)
            _open.append(self)
        return self

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None, at: TracebackType | None) -> None:
        try:
            if self._replaces:
                # Signals that came before are noted: Python handles them before it exchanges the handler.
                self._replaces = False
                signal.signal(signal.SIGINT, signal.default_int_handler)
        finally:
            # One that comes right after is raised here. What stayed open would raise in later calls.
            if self in _open:
                _open.remove(self)


_open: list[StopRequests] = []


def interrupt(*_: object) -> None:
    """Ask every open call to stop; where none is open, raise KeyboardInterrupt."""
    if not _open:
        raise KeyboardInterrupt
    for requests in _open:
        requests.note()


@contextmanager
def heard_like_ctrl_c() -> Iterator[None]:
    """Hear the request to terminate (SIGTERM) like Ctrl-C, for a whole program."""
    if threading.current_thread() is not threading.main_thread():
        yield
        return
    before = signal.signal(signal.SIGTERM, interrupt)
    try:
        yield
    finally:
        signal.signal(signal.SIGTERM, before)

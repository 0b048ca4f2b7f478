"""Tells of progress and hears whether to stop, for one call that runs trials, however many runs it is made of."""

from __future__ import annotations

import sys
import time
from collections.abc import Callable
from types import TracebackType
from typing import Self

import numpy as np

from ._errors import DescriptionError
from ._progress import ProgressBar
from ._stopping import StopRequests

#: Called with the trials done and the trials asked for; returning False stops the run and keeps what is done.
Report = Callable[[int, int], object]
#: Asked by the engine with the trials that are done of a run: whether to go on.
GoOn = Callable[[int], bool]
#: Seconds between two reports.
INTERVAL = 0.1
#: Seconds of work after a run that a bar does not show.
UNSHOWN = 1.0


class Reporter:
    """What a call that runs trials has in common: whom it tells how far it is, and whether it was asked to stop.

    While it is entered (`with`), Ctrl-C is noted instead of raised. The first report comes at once, further ones
    ten times a second, and the last one when all trials are done.

    Parameters
    ----------
    progress : bool or callable or None
        True: a bar on the terminal; None: the same if there is one; False: nothing; or a function of the
        trials done and asked for, which stops by returning False.
    total : int
        Trials asked for.
    afterwards : bool
        All of them are done already, and work beside them follows, of which a bar shows nothing in its first second.

    Attributes
    ----------
    stopped : bool
        Whether a stop was asked for, by Ctrl-C or by the function.
    """

    def __init__(self, progress: bool | Report | None, total: int, *, afterwards: bool = False) -> None:
        self._tell = _receiver(progress, total)
        self._requests = StopRequests()
        self._total = total
        self._done = total if afterwards else 0
        self._said_no = False
        self._last = -np.inf
        self._is_hidden = afterwards and isinstance(self._tell, ProgressBar)
        if self._is_hidden:
            self._last = time.perf_counter() + UNSHOWN - INTERVAL
        self._told_end = False

    @property
    def stopped(self) -> bool:
        """Whether a stop was asked for."""
        return self._said_no or self._requests.noted

    def go_on(self, done: int) -> bool:
        """Tell that so many of all trials are done, where it is time to; return whether to go on."""
        self._done = done
        is_end = done == self._total and not self._told_end
        if self._tell is not None and (self._is_time() or is_end):
            self._told_end = done == self._total
            self._hear(self._tell(done, self._total))
        return not self.stopped

    def after(self, earlier: int) -> GoOn:
        """Return `go_on` for a batch that follows so many earlier trials."""
        return lambda done: self.go_on(earlier + done)

    def beside(self, work: str, total: int) -> GoOn:
        """Return `go_on` for trials that are run beside those asked for, such as pilots.

        A bar shows this work by its name; a function is told what is done of the trials asked for, so that it
        can stop this work too.
        """

        def go_on(done: int) -> bool:
            if self._tell is not None and self._is_time():
                if isinstance(self._tell, ProgressBar):
                    self._tell.show(work, done, total)
                    self._is_hidden = False
                else:
                    self._hear(self._tell(self._done, self._total))
            return not self.stopped

        return go_on

    def close(self) -> None:
        """End the line of a bar; a second call does nothing."""
        if isinstance(self._tell, ProgressBar) and not self._is_hidden:
            self._tell.close(self._done, self._total)

    def listening(self) -> StopRequests:
        """Return what notes Ctrl-C while it is entered, without the end of the whole call."""
        return self._requests

    def __enter__(self) -> Self:
        self._requests.__enter__()
        return self

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None, at: TracebackType | None) -> None:
        try:
            self.close()
        finally:
            self._requests.__exit__(kind, error, at)

    def _is_time(self) -> bool:
        now = time.perf_counter()
        if now - self._last < INTERVAL:
            return False
        self._last = now
        return True

    def _hear(self, answer: object) -> None:
        # Comparisons of arrays give NumPy's truth values; None and other values mean nothing.
        self._said_no |= isinstance(answer, bool | np.bool_) and not answer


def _receiver(progress: object, total: int) -> ProgressBar | Report | None:
    if progress is True or (progress is None and sys.stderr is not None and sys.stderr.isatty()):
        return ProgressBar(room_for=total)
    if progress is None or progress is False:
        return None
    if not callable(progress):
        raise DescriptionError("progress", progress, "True, False, None or a function of trials done and asked for")
    return progress

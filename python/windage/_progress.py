"""A progress bar on the standard error stream, drawn by rich."""

from __future__ import annotations

from typing import TYPE_CHECKING

from ._text_table import WIDTH, plainly_grouped

if TYPE_CHECKING:
    from rich.console import Console
    from rich.progress import Progress, TaskID

DESCRIPTION = "trials"
#: Characters that bar and counts leave to percentage, rate (", 123 456 789/s"), time and the gaps between them.
BESIDE = 4 + 15 + 7 + 3
FASTEST = 999_999_999
NARROWEST_BAR, WIDEST_BAR = 4, 30


class ProgressBar:
    """A bar of trials done: a function of the trials done and asked for, as `Study.run(progress=...)` takes.

    It has no influence on any result and never stops a run. Nothing is drawn before the first call, and each
    call draws at once: there is no thread behind it.

    Parameters
    ----------
    console : rich.console.Console, optional
        Where to draw; by default the standard error stream.
    room_for : int
        Largest number of trials that is to come, so that the bar leaves room for it from the beginning.
    """

    def __init__(self, console: Console | None = None, room_for: int = 0) -> None:
        self._console = console
        self._room_for = room_for
        self._work = DESCRIPTION
        self._progress: Progress | None = None
        self._task: TaskID | None = None
        self._is_closed = self._is_lost = False

    def __call__(self, done: int, total: int) -> bool:
        """Draw `done` of `total` trials. Always returns True: go on."""
        self.show(DESCRIPTION, done, total)
        return True

    def show(self, work: str, done: int, total: int) -> None:
        """Draw `done` of `total` trials of some work."""
        self._is_closed = False
        self._draw(work, done, total)

    def close(self, done: int, total: int) -> None:
        """Draw the last state and end the line; a second call does nothing."""
        if self._is_closed:
            return
        work = DESCRIPTION if done == total else f"{DESCRIPTION}, stopped"
        self._draw(work, done, total, ends=True)
        self._progress, self._is_closed = None, True

    def _draw(self, work: str, done: int, total: int, *, ends: bool = False) -> None:
        # A terminal that goes away, or cannot show a letter, ends the drawing and not the run.
        if self._is_lost:
            return
        try:
            progress, task = self._begun(total)
            if work != self._work and not ends:
                # Other work has another pace.
                progress.reset(task)
                self._work = work
            progress.update(task, completed=done, total=total, description=work, refresh=not ends)
            if ends:
                progress.stop()
        except (OSError, ValueError):
            self._is_lost = True

    def _begun(self, total: int) -> tuple[Progress, TaskID]:
        if self._progress is None or self._task is None:
            self._progress = _new_progress(self._console, max(total, self._room_for))
            self._task = self._progress.add_task(DESCRIPTION, total=total)
            self._progress.start()
        return self._progress, self._task


def _new_progress(console: Console | None, total: int) -> Progress:
    from rich.progress import (
        BarColumn,
        Progress,
        ProgressColumn,
        Task,
        TaskProgressColumn,
        TimeRemainingColumn,
    )
    from rich.text import Text

    from ._command_screen import PlainConsole

    class Counts(ProgressColumn):
        """Trials done and asked for, and how many a second."""

        def render(self, task: Task) -> Text:
            speed = task.finished_speed or task.speed
            is_stopped = task.description != DESCRIPTION
            is_known = speed is not None and 0.0 < speed < FASTEST and not is_stopped
            rate = f", {plainly_grouped(round(speed))}/s" if speed and is_known else ""
            counts = f"{plainly_grouped(int(task.completed))} of {plainly_grouped(int(task.total or 0))}"
            return Text(f"{counts} {task.description}{rate}", no_wrap=True)

    drawn_on = console or PlainConsole(stderr=True)
    counts = 2 * len(plainly_grouped(total)) + len(f" of  {DESCRIPTION}")
    room = min(WIDTH, drawn_on.width) - counts - BESIDE
    return Progress(
        BarColumn(bar_width=min(max(room, NARROWEST_BAR), WIDEST_BAR)),
        TaskProgressColumn(),
        Counts(),
        TimeRemainingColumn(),
        console=drawn_on,
        auto_refresh=False,
    )

"""Runs ranges of trials on the engine, with progress and a way to stop early."""

from __future__ import annotations

import sys
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from ._errors import DescriptionError, EngineError
from ._loader import default_threads, engine
from ._numbers import checked_integer
from ._progress import ProgressBar

MOST_THREADS = 1024
#: Called with the trials done and the trials asked for; returning False stops the run and keeps what is done.
Report = Callable[[int, int], object]


@dataclass(frozen=True)
class Columns:
    """What the engine returned for a contiguous range of trials.

    Attributes
    ----------
    parameters, measures : ndarray of float64, shape (parameters, trials) and (measures, trials)
    status : ndarray of uint8, shape (trials,)
        0: finished; 1: diverged.
    requested : int
        Trials asked for; more than there are if the run was stopped early.
    """

    parameters: NDArray[np.float64]
    measures: NDArray[np.float64]
    status: NDArray[np.uint8]
    requested: int

    @property
    def trials(self) -> int:
        """Trials that were run."""
        return len(self.status)


def make_campaign(study: dict[str, Any]) -> Any:
    """Return the engine's campaign of a described study.

    Raises
    ------
    EngineError
        If the engine refuses the study although every check here passed.
    """
    try:
        return engine().Campaign(study)
    except (ValueError, KeyError) as error:
        raise EngineError(f"The engine refused the study: {error}") from error


def run_columns(
    campaign: Any, first: int, count: int, threads: int = 0, progress: bool | Report | None = False
) -> Columns:
    """Run the trials first, ..., first + count - 1.

    Parameters
    ----------
    campaign : Campaign
        From `make_campaign`.
    first, count : int
        Range of trials.
    threads : int
        0: `WINDAGE_THREADS` if that is set, otherwise every core this process may use.
    progress : bool or callable or None
        True: a bar on the terminal; None: the same if there is one; False: none; a callable gets the trials
        done and asked for, about ten times a second, and stops the run by returning False.

    Returns
    -------
    Columns
        All trials, or after Ctrl-C or a stop those that were finished, from the first one on without a gap.
    """
    threads = checked_integer(threads, "threads", 0, MOST_THREADS) or default_threads()
    available = int(campaign.trials_available)
    if first + count > available:
        mend = "Ask for fewer trials, or give a table with more rows."
        raise DescriptionError("trials", first + count, f"at most {available}, the rows of the study's table", mend)
    report = reporter(progress)

    def step(done: int) -> bool:
        return report is None or report(done, count) is not False

    parameters, measures, status, completed = campaign.run(first, count, threads, 0, step)
    if isinstance(report, ProgressBar):
        report.close(completed, count)
    if completed < count:
        # Copies, so that the memory of trials that never ran is given back.
        parameters, measures = parameters[:, :completed].copy(), measures[:, :completed].copy()
        status = status[:completed].copy()
    return Columns(parameters, measures, status, count)


def run_chosen(campaign: Any, trials: NDArray[np.uint64], report: Report | None = None, threads: int = 0) -> Columns:
    """Run listed trials, in the order of the list; see `run_columns`.

    Parameters
    ----------
    campaign : Campaign
        From `make_campaign`.
    trials : ndarray of uint64
        Indices of trials that the study has.
    report : callable, optional
        As `progress` of `run_columns`.
    threads : int
        As for `run_columns`.
    """
    threads = threads or default_threads()
    count = len(trials)

    def step(done: int) -> bool:
        return report is None or bool(report(done, count))

    parameters, measures, status, done = campaign.run_chosen(trials, threads, 0, step)
    return Columns(parameters[:, :done], measures[:, :done], status[:done], count)


def reporter(progress: object) -> Report | None:
    """Return what is to be told of progress: a bar, the caller's function, or nothing."""
    if progress is True or (progress is None and sys.stderr is not None and sys.stderr.isatty()):
        return ProgressBar()
    if progress is None or progress is False:
        return None
    if not callable(progress):
        raise DescriptionError("progress", progress, "True, False, None or a function of trials done and asked for")
    return progress

"""Runs ranges of trials on the engine."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from ._describe import Described
from ._errors import DescriptionError, EngineError
from ._loader import default_threads, engine
from ._numbers import checked_integer
from ._portable import Portable
from ._reporter import GoOn

MOST_THREADS = 1024


@dataclass(frozen=True)
class Columns(Portable):
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


def no_columns(described: Described, requested: int) -> Columns:
    """Return the columns of a run that was stopped before its first trial."""
    parameters, measures = np.empty((len(described.columns), 0)), np.empty((len(described.measures), 0))
    return Columns(parameters, measures, np.empty(0, dtype=np.uint8), requested)


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


def run_columns(campaign: Any, first: int, count: int, threads: int = 0, go_on: GoOn | None = None) -> Columns:
    """Run the trials first, ..., first + count - 1.

    Parameters
    ----------
    campaign : Campaign
        From `make_campaign`.
    first, count : int
        Range of trials.
    threads : int
        0: `WINDAGE_THREADS` if that is set, otherwise every core this process may use.
    go_on : callable, optional
        Gets the trials done, at once, about twenty times a second and at the end, on this thread; the run stops
        when it returns False. See `windage._reporter`.

    Returns
    -------
    Columns
        All trials, or after a stop those that were finished, from the first one on without a gap.
    """
    threads = checked_integer(threads, "threads", 0, MOST_THREADS) or default_threads()
    available = int(campaign.trials_available)
    if first + count > available:
        mend = "Ask for fewer trials, or let rows be drawn (table_rows = 'drawn')."
        raise DescriptionError("trials", first + count, f"at most {available}, the rows of the study's table", mend)
    parameters, measures, status, completed = campaign.run(first, count, threads, 0, go_on)
    if completed < count:
        # Copies, so that the memory of trials that never ran is given back.
        parameters, measures = parameters[:, :completed].copy(), measures[:, :completed].copy()
        status = status[:completed].copy()
    return Columns(parameters, measures, status, count)


def run_chosen(campaign: Any, trials: NDArray[np.uint64], go_on: GoOn | None = None, threads: int = 0) -> Columns:
    """Run listed trials, in the order of the list; see `run_columns`.

    Parameters
    ----------
    campaign : Campaign
        From `make_campaign`.
    trials : ndarray of uint64
        Indices of trials that the study has.
    go_on : callable, optional
    threads : int
        As for `run_columns`.
    """
    threads = checked_integer(threads, "threads", 0, MOST_THREADS) or default_threads()
    parameters, measures, status, done = campaign.run_chosen(trials, threads, 0, go_on)
    return Columns(parameters[:, :done], measures[:, :done], status[:done], len(trials))

"""Trials shared out over processes, for libraries that keep one core busy at most."""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import ProcessPoolExecutor
from multiprocessing import get_context
from typing import Any

import numpy as np

from loops import PROBLEMS
from loops.problem import Values

Chunk = Callable[..., Values]


class Shares:
    """Runs chunks of trials, here or in processes that live as long as this object.

    Parameters
    ----------
    simulate_chunk : callable
        Gets the problem, the parameters of a chunk, whether there is noise, a seed, and what else `simulate` is given.
    letter : str
        Of the problem.
    threads : int
        Number of processes; 1 runs in this one.
    chunk : int
        Most trials of a chunk.
    """

    def __init__(self, simulate_chunk: Chunk, letter: str, threads: int, chunk: int) -> None:
        self._simulate_chunk, self._letter, self._threads, self._chunk = simulate_chunk, letter, threads, chunk
        self._pool = ProcessPoolExecutor(threads, get_context("spawn")) if threads > 1 else None

    def simulate(self, parameters: Values, noise: bool, seed: int, *rest: Any) -> Values:
        """Return the measures, shape (measures, trials)."""
        trials = parameters.shape[1]
        chunk = min(self._chunk, -(-trials // self._threads))
        parts = [parameters[:, i : i + chunk] for i in range(0, trials, chunk)]
        tasks = [(self._simulate_chunk, self._letter, part, noise, seed + i, *rest) for i, part in enumerate(parts)]
        done = self._pool.map(run_chunk, tasks) if self._pool else map(run_chunk, tasks)
        return np.concatenate(list(done), axis=1)

    def close(self) -> None:
        """End the processes."""
        if self._pool:
            self._pool.shutdown()


def run_chunk(task: tuple[Any, ...]) -> Values:
    """Run one chunk; in a process of the pool or here."""
    simulate_chunk, letter, parameters, noise, seed, *rest = task
    measures: Values = simulate_chunk(PROBLEMS[letter], parameters, noise, seed, *rest)
    return measures

"""Each program runs in a process of its own, on the cores given to the comparison, and waits while others are timed."""

from __future__ import annotations

import os
import time
import traceback
from multiprocessing import get_context
from multiprocessing.connection import Connection
from typing import Any

import numpy as np

from loops import PROBLEMS
from loops.problem import Values
from peers import PEERS, WINDAGE, Program


class ProgramError(RuntimeError):
    """A program failed in its process."""


class Worker:
    """A program in its process.

    Parameters
    ----------
    program : Program
    letter : str
        Of the loop.
    cores : list of int
        Processor cores it may use; as many threads are asked of it.
    """

    def __init__(self, program: Program, letter: str, cores: list[int]) -> None:
        self.program = program
        context = get_context("spawn")
        self._connection, other = context.Pipe()
        self._process = context.Process(target=serve, args=(other, program.name, letter, cores))
        self._process.start()
        other.close()
        self._receive()

    def measures(self, parameters: Values, noise: bool, seed: int) -> Values:
        """Run trials and return their measures."""
        return np.asarray(self._ask("measures", parameters, noise, seed))

    def drawn(self, trials: int, noise: bool) -> dict[str, Values]:
        """Return windage's drawn parameters."""
        answer: dict[str, Values] = self._ask("drawn", trials, noise)
        return answer

    def calibrate(self, parameters: Values, seconds: float, most_trials: int) -> tuple[int, int]:
        """Warm up, choose the trials of a timed run; return trials and samples of each."""
        answer: tuple[int, int] = self._ask("calibrate", parameters, seconds, most_trials)
        return answer

    def nanoseconds(self) -> float:
        """Run once and return the time of a trial and sample."""
        return float(self._ask("nanoseconds"))

    def close(self) -> None:
        """End the process."""
        try:
            self._connection.send(None)
            self._process.join(10)
        except OSError:
            pass
        if self._process.is_alive():
            self._process.terminate()
        self._connection.close()

    def _ask(self, *question: Any) -> Any:
        self._connection.send(question)
        return self._receive()

    def _receive(self) -> Any:
        try:
            done, answer = self._connection.recv()
        except EOFError:
            self._process.join(10)
            raise ProgramError(f"its process ended with exit code {self._process.exitcode}") from None
        if not done:
            raise ProgramError(answer)
        return answer


class Server:
    """The other end of a worker: the program itself."""

    def __init__(self, name: str, letter: str, threads: int) -> None:
        program = next(p for p in (WINDAGE, *PEERS) if p.name == name)
        self._problem = PROBLEMS[letter]
        self._program = program.make(self._problem, threads)
        self._rest: tuple[int, ...] = ()
        self._samples = self._problem.samples
        if hasattr(self._program, "timed_samples"):
            self._samples = min(self._samples, self._program.timed_samples)
            self._rest = (self._samples,)
        self._timed = np.empty((0, 0))

    def measures(self, parameters: Values, noise: bool, seed: int) -> Values:
        """Run trials and return their measures."""
        return np.asarray(self._program.simulate(parameters, noise, seed))

    def drawn(self, trials: int, noise: bool) -> dict[str, Values]:
        """Return windage's drawn parameters."""
        drawn: dict[str, Values] = self._program.drawn(trials, noise)
        return drawn

    def calibrate(self, parameters: Values, seconds: float, most_trials: int) -> tuple[int, int]:
        """Warm up and choose the trials of a timed run, as many as take `seconds`."""
        grain = self._program.grain
        self._timed = self._repeated(parameters, grain)
        self.nanoseconds()  # compiles what is compiled at the first call
        needed = self.nanoseconds() * 1e-9 * grain * self._samples
        grains = max(1, min(round(seconds / needed), most_trials // grain))
        if grains > 1:
            self._timed = self._repeated(parameters, grains * grain)
            self.nanoseconds()
        return self._timed.shape[1], self._samples

    def nanoseconds(self) -> float:
        """Run once and return the time of a trial and sample."""
        start = time.perf_counter()
        self._program.simulate(self._timed, self._problem.has_noise, 1, *self._rest)
        taken = time.perf_counter() - start
        return taken / (self._timed.shape[1] * self._samples) * 1e9

    def close(self) -> None:
        """End what the program keeps running."""
        if hasattr(self._program, "close"):
            self._program.close()

    @staticmethod
    def _repeated(parameters: Values, trials: int) -> Values:
        return np.ascontiguousarray(np.take(parameters, range(trials), axis=1, mode="wrap"))


def serve(connection: Connection, name: str, letter: str, cores: list[int]) -> None:
    """Answer questions until there are no more; runs in the process of the program."""
    threads = len(cores)
    if hasattr(os, "sched_setaffinity"):
        os.sched_setaffinity(0, cores)
    os.environ |= {"NUMBA_NUM_THREADS": str(threads), "OMP_NUM_THREADS": str(threads)}
    server: Server | None = None
    try:
        server = Server(name, letter, threads)
        connection.send((True, None))
        while (question := connection.recv()) is not None:
            connection.send((True, getattr(server, question[0])(*question[1:])))
    except (EOFError, KeyboardInterrupt):
        pass
    except Exception:
        connection.send((False, traceback.format_exc(limit=-2).strip()))
    finally:
        if server:
            server.close()

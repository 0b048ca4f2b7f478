"""windage itself, through its public interface: `Study.run`."""

from __future__ import annotations

from typing import Any

import numpy as np

from loops import Problem
from loops.dc_drive import make_study as make_dc_study
from loops.problem import Values


class WindageStudy:
    """The loop as a study; its trials draw their own parameters and noise."""

    grain = 256

    def __init__(self, problem: Problem, threads: int) -> None:
        self._threads = threads
        self._studies = self._make_studies(problem)

    def _make_studies(self, problem: Problem) -> dict[bool, Any]:
        return {noise: problem.study(noise) for noise in (False, True)}

    def simulate(self, parameters: Values, noise: bool, seed: int) -> Values:
        """Return the measures, shape (measures, trials); of the parameters only their count is used."""
        del seed
        outcome = self._studies[noise].run(parameters.shape[1], threads=self._threads, progress=False)
        return np.array(list(outcome.measures.values()))

    def drawn(self, trials: int, noise: bool) -> dict[str, Values]:
        """Return the drawn parameters of the first trials by name."""
        outcome = self._studies[noise].run(trials, threads=self._threads, progress=False)
        return {name: np.array(values) for name, values in outcome.parameters.items()}


class WindageStockPlant(WindageStudy):
    """Loop (c) with the stock plant."""

    def _make_studies(self, problem: Problem) -> dict[bool, Any]:
        del problem
        return {noise: make_dc_study(noise, stock=True) for noise in (False, True)}

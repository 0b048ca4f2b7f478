"""What a loop of the benchmark is: its numbers, its study, and how its measures are compared."""

from __future__ import annotations

import dataclasses
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

Values = NDArray[np.float64]


@dataclass(frozen=True)
class Problem:
    """One loop, as every program of the comparison simulates it.

    Attributes
    ----------
    letter, title : str
        Its name on the command line, and in words.
    constants : mapping of str to float
        Numbers that are the same in every trial; they reach the C++ peers as a header of constants.
    parameters : tuple of str
        Names of the drawn parameters, in the order in which the peers take them.
    samples : int
        Sample instants of a trial, the first and the last included.
    scales : mapping of str to float
        The measures, in order, each with the size below which a difference does not matter. A relative tolerance
        is taken of the measure or of this size, whichever is larger.
    study : callable
        Makes windage's study, with or without noise.
    reference : callable
        The reference at the sample instants and as many derivatives as the controller feeds forward, shape
        (1 + derivatives, samples).
    has_noise : bool
    operations : int
        Additions, multiplications, divisions, comparisons and roots of one trial and sample, counted by hand from
        the difference equations; 0 where nobody counted.
    """

    letter: str
    title: str
    constants: Mapping[str, float]
    parameters: tuple[str, ...]
    samples: int
    scales: Mapping[str, float]
    study: Callable[[bool], Any]
    reference: Callable[[], Values]
    has_noise: bool
    operations: int = 0

    def columns(self, drawn: Mapping[str, Values]) -> Values:
        """Return drawn parameters as one array of shape (parameters, trials); what is not drawn is zero."""
        trials = len(next(iter(drawn.values())))
        rows = [np.asarray(drawn[name]) if name in drawn else np.zeros(trials) for name in self.parameters]
        return np.ascontiguousarray(rows)


def constants_of(settings: Any) -> dict[str, float]:
    """Return the fields of a dataclass of numbers by name."""
    return {f.name: float(getattr(settings, f.name)) for f in dataclasses.fields(settings)}

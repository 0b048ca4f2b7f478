"""Do the programs do the same work? Their measures are compared with windage's before anything is timed."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from loops import PROBLEMS
from loops.problem import Values
from peers import Program

from .worker import Worker

STANDARD_ERRORS = 4.0


@dataclass(frozen=True)
class Agreement:
    """What the comparison of one program's measures found.

    Attributes
    ----------
    difference : float
        Largest relative difference of a measure of a trial, without noise (with noise where it is the same noise).
    standard_errors : float
        Largest distance of the mean of a measure, with noise, in standard errors of the mean of the differences; 0
        where there is nothing to compare.
    agrees : bool
    words : str
        What was found, measure by measure where something is wrong.
    """

    difference: float
    standard_errors: float
    agrees: bool
    words: str


def compare(worker: Worker, windage: Worker, letter: str) -> Agreement:
    """Compare one program with windage on the same trials."""
    program, problem = worker.program, PROBLEMS[letter]
    names, scales = list(problem.scales), np.array(list(problem.scales.values()))
    difference = np.zeros(len(names))
    for noise in (False, True) if program.shares_noise else (False,):
        ours, theirs = both(worker, windage, letter, noise, program.check_trials)
        difference = np.maximum(difference, relative_difference(ours, theirs, scales))
    errors, limit = np.zeros(len(names)), STANDARD_ERRORS
    if problem.has_noise and not program.shares_noise:
        errors = distance_of_means(*both(worker, windage, letter, True, program.check_trials))
        limit = error_limit(program.check_trials)
    wrong = [
        f"{name}: {d:.2g} relative, {e:.1f} standard errors"
        for name, d, e in zip(names, difference, errors, strict=True)
        if not (d <= program.tolerance and e <= limit)
    ]
    found = f"{difference.max():.1e} of {program.tolerance:g} allowed"
    if errors.any():
        found += f"; means within {errors.max():.1f} standard errors of {limit:.1f} allowed"
    words = "differs in " + "; ".join(wrong) if wrong else found
    return Agreement(float(difference.max()), float(errors.max()), not wrong, words)


def both(worker: Worker, windage: Worker, letter: str, noise: bool, trials: int) -> tuple[Values, Values]:
    """Return the measures of windage and of another program for the same trials."""
    columns = PROBLEMS[letter].columns(windage.drawn(trials, noise))
    return windage.measures(columns, noise, 0), worker.measures(columns, noise, 12345)


def relative_difference(ours: Values, theirs: Values, scales: Values) -> Values:
    """Return the largest relative difference of each measure; infinite values have to be the same."""
    with np.errstate(invalid="ignore"):
        size = np.maximum(np.abs(ours), scales[:, np.newaxis])
        relative = np.where(ours == theirs, 0.0, np.abs(ours - theirs) / size)
    return np.array(np.nan_to_num(relative, nan=math.inf).max(axis=1))


def distance_of_means(ours: Values, theirs: Values) -> Values:
    """Return how far the mean difference of each measure is from zero, in its standard errors."""
    distances = []
    for a, b in zip(ours, theirs, strict=True):
        finite = np.isfinite(a) & np.isfinite(b)
        d = (a - b)[finite]
        spread = d.std(ddof=1) if len(d) > 1 else 0.0
        error = spread / math.sqrt(max(len(d), 1))
        distances.append(abs(d.mean()) / error if error > 0.0 else 0.0)
        if finite.mean() < 0.5 and not np.array_equal(np.isfinite(a), np.isfinite(b)):
            distances[-1] = math.inf
    return np.array(distances)


def error_limit(trials: int) -> float:
    """Return the limit in standard errors: 4, and for few trials as many as are exceeded as rarely."""
    if trials >= 100:
        return STANDARD_ERRORS
    from scipy import stats  # type: ignore[import-untyped]

    return float(stats.t.isf(stats.norm.sf(STANDARD_ERRORS), trials - 1))


def expected(program: Program) -> str:
    """Return the rule of a program in words."""
    rule = f"relative difference of a measure at most {program.tolerance:g} without noise"
    return rule + (" and with it" if program.shares_noise else "")

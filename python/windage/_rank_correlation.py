"""Spearman's rank correlation: with its interval, its p-value, and p-values adjusted for many of them."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from statistics import NormalDist

import numpy as np
from numpy.typing import NDArray

from ._loader import engine

CONFIDENCE = 0.95
#: Where two results with many ties meet, the coincidences of their rarer values have to be this many on average for
#: the law of a correlation to be that of the p-value; with fewer it is skewed, and nothing is called clear.
COINCIDENCES = 20.0

Values = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Ranked:
    """A column of results as ranks, centred and of length 1, and how many are outside its largest group of ties."""

    ranks: Values
    untied: int


def ranked(values: Values) -> Ranked | None:
    """Return the ranks of a column, ties at their mean, or None if it does not vary."""
    if not len(values):
        return None
    own = ranks(values)
    own -= own.mean()
    length = math.sqrt(float(np.einsum("i,i", own, own)))
    if not length > 0.0:
        return None
    _, counts = np.unique(own, return_counts=True)
    own /= length
    return Ranked(own, len(own) - int(counts.max()))


def ranks(values: Values) -> Values:
    """Return the ranks from 1 on; equal values share the mean of their ranks."""
    order = np.argsort(values, kind="stable")
    ordered = values[order]
    starts = np.flatnonzero(np.concatenate([[True], ordered[1:] != ordered[:-1]]))
    counts = np.diff(np.append(starts, len(values)))
    result = np.empty(len(values))
    result[order] = np.repeat(starts + 0.5 * (counts + 1), counts)
    return result


def correlation(a: Ranked, b: Ranked) -> float:
    """Return Spearman's correlation."""
    # Not a product of matrices: a few short sums are not worth waking the threads of a linear algebra library.
    return min(max(float(np.einsum("i,i", a.ranks, b.ranks)), -1.0), 1.0)


def p_value(a: Ranked, b: Ranked, found: float) -> float:
    """Return the chance of a correlation at least as strong where there is none.

    Notes
    -----
    t = r sqrt((n - 2)/(1 - r^2)) follows Student's law with n - 2 degrees of freedom (Kendall & Stuart, The Advanced
    Theory of Statistics, vol. 2, section 31.19, from memory), whose two tails are I_(1 - r^2)((n - 2)/2, 1/2). It is 1
    where ties leave too few coincidences to tell.
    """
    count = len(a.ranks)
    if count <= 3 or a.untied * b.untied < COINCIDENCES * count:
        return 1.0
    return float(engine().incomplete_beta(0.5 * (count - 2), 0.5, (1.0 - found) * (1.0 + found)))


def holm(p_values: Sequence[float]) -> list[float]:
    """Return p-values adjusted such that the chance of any false one at or below a level is at most that level.

    Notes
    -----
    S. Holm 1979, A simple sequentially rejective multiple test procedure, Scand. J. Stat. 6:65-70. It holds whatever
    the dependence between them.
    """
    adjusted, worst, count = [1.0] * len(p_values), 0.0, len(p_values)
    for place, index in enumerate(sorted(range(count), key=p_values.__getitem__)):
        worst = max(worst, min(1.0, (count - place) * p_values[index]))
        adjusted[index] = worst
    return adjusted


def fisher_interval(found: float, count: int) -> tuple[float, float]:
    """Return the interval of a rank correlation from `count` pairs.

    Notes
    -----
    Fisher's z with variance 1.06/(n - 3) for Spearman's correlation (Fieller, Hartley & Pearson 1957, Biometrika
    44:470-481, from memory).
    """
    if count <= 3:
        return -1.0, 1.0
    if abs(found) >= 1.0:
        return found, found
    half = NormalDist().inv_cdf(0.5 + 0.5 * CONFIDENCE) * math.sqrt(1.06 / (count - 3))
    z = math.atanh(found)
    return math.tanh(z - half), math.tanh(z + half)

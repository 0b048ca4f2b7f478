"""Responses of linear systems in multiple precision, and of the engine's plants without control.

The reference is the matrix exponential of the very coefficients that the engine is given, by its series after
scaling, and squared from sample to sample, in 100 digits (mpmath): exact for what is compared here.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Any

import mpmath as mp

import windage as wd

DIGITS = 100


def product(a: list[list[Any]], b: list[list[Any]]) -> list[list[Any]]:
    columns = list(zip(*b, strict=True))
    return [[mp.fdot(row, column) for column in columns] for row in a]


def exponential(m: list[list[Any]]) -> list[list[Any]]:
    """Return exp(m) in the digits that are set."""
    size = max(sum(abs(x) for x in row) for row in m)
    halvings = max(0, int(mp.ceil(mp.log(size, 2)))) + 24 if size else 0
    n = len(m)
    m = [[mp.ldexp(x, -halvings) for x in row] for row in m]
    unit = [[mp.mpf(i == j) for j in range(n)] for i in range(n)]
    result = unit
    for k in range(16, 0, -1):
        result = [
            [u + p / k for u, p in zip(*rows, strict=True)] for rows in zip(unit, product(m, result), strict=True)
        ]
    for _ in range(halvings):
        result = product(result, result)
    return result


def augmented(a: list[list[Any]], b: list[Any]) -> list[list[Any]]:
    return [[*row, x] for row, x in zip(a, b, strict=True)] + [[mp.mpf(0)] * (len(a) + 1)]


def companion(denominator: Sequence[float]) -> list[list[Any]]:
    """Return the controllable canonical form of coefficients in descending powers."""
    n = len(denominator) - 1
    last = [-mp.mpf(d) / mp.mpf(denominator[0]) for d in reversed(denominator[1:])]
    return [*([mp.mpf(j == i + 1) for j in range(n)] for i in range(n - 1)), last]


def polynomial(roots: Sequence[Any]) -> list[float]:
    """Return the coefficients of a denominator with these roots, rounded to doubles; the last one is 1 if it can be."""
    with mp.workdps(DIGITS):
        p = [mp.mpf(1)]
        for r in roots:
            p = [x - r * y for x, y in zip([*p, 0], [0, *p], strict=True)]
        last = mp.re(p[-1])
        return [float(mp.re(x) / (last if last else 1)) for x in p]


def step_response(numerator: Sequence[float], denominator: Sequence[float], period: float, doublings: int) -> list[Any]:
    """Return the response to a unit step at samples 1, 2, 4, ..., 2**doublings."""
    with mp.workdps(DIGITS):
        n = len(denominator) - 1
        c = [mp.mpf(x) / mp.mpf(denominator[0]) for x in reversed(numerator)]
        c += [mp.mpf(0)] * (n - len(c))
        m = augmented(companion(denominator), [mp.mpf(i == n - 1) for i in range(n)])
        step = exponential([[x * mp.mpf(period) for x in row] for row in m])
        found = []
        for k in range(doublings + 1):
            found.append(mp.fdot(c, [row[n] for row in step[:n]]))
            if k < doublings:
                step = product(step, step)
        return found


def uncontrolled(plant: Any, period: float, samples: int, load: Any = 1.0) -> wd.Replay:
    """Replay a plant on which nothing but its load acts: the command is 0 all the time."""
    loop = wd.Loop(
        plant=plant,
        controller=wd.OutputADRC(
            1, controller_gains=[0.0], observer_gains=[0.0, 0.0], b0=1.0, cancel_disturbance=False
        ),
        sample_period=period,
        duration=samples * period,
        reference=0.0,
        disturbances={"load": load},
    )
    return wd.Study(loop, requirements=[wd.peak("error") <= 1.0]).replay(0)


def worst_error(numerator: Sequence[float], denominator: Sequence[float], period: float, longest: float) -> float:
    """Return the largest error of a unit step's response until `longest`, relative to its largest value."""
    doublings = min(14, max(3, math.ceil(math.log2(longest / period))))
    exact = step_response(numerator, denominator, period, doublings)
    plant = wd.TransferFunction(list(numerator), list(denominator))
    got = uncontrolled(plant, period, 2**doublings)["output"]
    scale = max(abs(x) for x in exact)
    return float(max(abs(mp.mpf(float(got[2**k])) - x) for k, x in enumerate(exact)) / scale)

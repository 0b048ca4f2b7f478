"""Multiple-precision references for the lane functions, arguments to try them on, and the error in ULP.

Run as a program it measures the check program built from tests/cpp/lanes_check.cpp:

    python elementary_reference.py PATH_TO_LANES_CHECK [--samples N] [--width 1|wide]

One ULP is the distance of adjacent doubles in the binade of the exact result (never less than 2^-1074).
"""

from __future__ import annotations

import argparse
import math
import subprocess
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field

import mpmath
import numpy as np
from mpmath import mp, mpf
from numpy.typing import NDArray

Array = NDArray[np.float64]

mp.prec = 200

LARGEST_ANGLE = 2e5
EXPONENTIAL_TOP = 709.782712893384
HYPERBOLIC_TOP = 710.4758600739439


@dataclass(frozen=True)
class Range:
    """Arguments from low to high, spread evenly by value, or by bit pattern (every binade the same share)."""

    low: float
    high: float
    by_bits: bool = False
    both_signs: bool = False

    def draw(self, generator: np.random.Generator, count: int) -> Array:
        """Draw count arguments, shape (count,)."""
        if self.by_bits:
            low, high = (int(np.float64(x).view(np.int64)) for x in (self.low, self.high))
            values = generator.integers(low, high, count, endpoint=True).view(np.float64)
        else:
            values = generator.uniform(self.low, self.high, count)
        return values * generator.choice([-1.0, 1.0], count) if self.both_signs else values


@dataclass(frozen=True)
class Case:
    """One function: its exact value, arguments, and the largest error that its header states (ULP)."""

    exact: Callable[..., mpf]
    limit: float
    ranges: Sequence[Range | tuple[Range, Range]]
    hard: Array = field(default_factory=lambda: np.empty(0))

    @property
    def arguments(self) -> int:
        """Number of arguments of the function."""
        return 2 if isinstance(self.ranges[0], tuple) else 1

    def draw(self, generator: np.random.Generator, count: int) -> Array:
        """Draw about count arguments, shape (n,) or (n, 2), hard points included."""
        share = -(-count // len(self.ranges))
        parts = []
        for one in self.ranges:
            if isinstance(one, tuple):
                parts.append(np.stack([r.draw(generator, share) for r in one], axis=1))
            else:
                parts.append(one.draw(generator, share))
        return np.concatenate([*parts, self.hard]) if self.hard.size else np.concatenate(parts)


def neighbours(points: Sequence[float], steps: int = 2) -> Array:
    """Each point and the doubles up to so many steps away on both sides."""
    around = np.asarray(points, dtype=np.float64)
    result = [around]
    up = down = around
    for _ in range(steps):
        up, down = np.nextafter(up, np.inf), np.nextafter(down, -np.inf)
        result += [up, down]
    return np.concatenate(result)


def near_quarter_turns() -> Array:
    """Doubles next to k pi/2 for small k, powers of two and a stride up to the largest accurate angle."""
    ks = sorted({*range(1, 200), *(2**n for n in range(17)), *range(201, int(LARGEST_ANGLE * 2 / math.pi), 97)})
    points = neighbours([float(k * mpmath.pi / 2) for k in ks], 1)
    return points[np.abs(points) <= LARGEST_ANGLE]


def power_hard() -> Array:
    """Bases near one with large exponents, and results near both ends of the range of doubles."""
    pairs = [(x, y) for x in neighbours([1.0], 3) if x != 1.0 for y in (1e15, -1e15, 3e17, 0.5, 3.0)]
    generator = np.random.default_rng(5)
    for size in (1023.9, 1022.0, -1021.9, -1060.0, 512.0):
        pairs += [(b, size / math.log2(b)) for b in generator.uniform(0.01, 40.0, 200)]
    pairs += [(-2.5, n) for n in (-7.0, -2.0, 3.0, 20.0)]
    return np.array(pairs, dtype=np.float64)


def exact_quantile(p: mpf) -> mpf:
    """The normal quantile by Newton steps on the logarithm of the smaller tail."""
    tail, side = (p, -1) if p < 0.5 else (1 - p, 1)
    x = mpmath.sqrt(-2 * mpmath.log(2 * tail)) if tail < 0.3 else mpf(2.5) * (0.5 - tail)
    for _ in range(60):
        upper = exact_upper_tail(x)
        step = mpmath.log(upper / tail) * upper / mpmath.npdf(x)
        x += step
        if abs(step) <= abs(x) * mpf(2) ** -120:
            break
    return side * x


def exact_upper_tail(x: mpf) -> mpf:
    """Probability that a standard normal number exceeds x."""
    return mpmath.erfc(x / mpmath.sqrt(2)) / 2


def cases() -> dict[str, Case]:
    """Name of each lane function with its reference and arguments."""
    tiny = Range(5e-324, 1e-3, by_bits=True, both_signs=True)
    angles = [Range(-4.0, 4.0), Range(-100.0, 100.0), Range(-LARGEST_ANGLE, LARGEST_ANGLE), tiny]
    turns = [Range(0.0, 1.0), Range(-3.0, 3.0), Range(1e-12, 0.1, by_bits=True, both_signs=True)]
    unit = [Range(-1.0, 1.0), Range(0.4999, 0.5001, both_signs=True), tiny]
    every = Range(1e-300, 1e300, by_bits=True, both_signs=True)
    positive = Range(5e-324, 1.7e308, by_bits=True)
    below_one = neighbours([1.0 - 2.0**-n for n in range(1, 53)], 1)
    below_one = below_one[below_one <= 1.0]
    turn_hard = neighbours([k / 8 for k in range(-8, 9) if k], 2)
    return {
        "sine": Case(mpmath.sin, 1.7, angles, near_quarter_turns()),
        "cosine": Case(mpmath.cos, 1.7, angles, near_quarter_turns()),
        "tangent": Case(mpmath.tan, 1.7, angles, near_quarter_turns()),
        "sine_of_turn": Case(lambda u: mpmath.sinpi(2 * u), 1.7, turns, turn_hard),
        "cosine_of_turn": Case(lambda u: mpmath.cospi(2 * u), 1.7, turns, turn_hard),
        "arc_sine": Case(mpmath.asin, 1.8, unit, np.concatenate([below_one, -below_one])),
        "arc_cosine": Case(mpmath.acos, 1.3, unit, np.concatenate([below_one, -below_one])),
        "arc_tangent": Case(mpmath.atan, 1.7, [Range(-3.0, 3.0), tiny, every], neighbours([0.5, 1.0, 2.0, -2.0])),
        "exponential": Case(
            mpmath.exp,
            1.1,
            [Range(-1.0, 1.0), Range(-708.0, EXPONENTIAL_TOP), tiny],
            neighbours([-707.9999, 709.78, 0.34657359, -0.34657359, EXPONENTIAL_TOP - 1e-12]),
        ),
        "exponential_minus_one": Case(
            mpmath.expm1,
            1.4,
            [
                Range(-1.5, 1.5),
                Range(-45.0, EXPONENTIAL_TOP),
                tiny,
                Range(1e-3, 1.0, by_bits=True, both_signs=True),
            ],
            neighbours([0.34657359, -0.34657359, 1.0397, -1.0397, 37.4, -37.0]),
        ),
        "logarithm": Case(
            mpmath.log,
            1.1,
            [Range(0.5, 2.0), positive, Range(0.999, 1.001)],
            np.concatenate(
                [neighbours([1.0], 60), neighbours([math.sqrt(0.5), math.sqrt(2.0), 2.2250738585072014e-308])]
            ),
        ),
        "logarithm_one_plus": Case(
            mpmath.log1p,
            1.1,
            [Range(-0.9999, 3.0), tiny, Range(1e-3, 1e300, by_bits=True)],
            neighbours([math.sqrt(2.0) - 1.0, math.sqrt(0.5) - 1.0, 1.0, 2.0**52, 2.0**53, 2.0**54]),
        ),
        "hyperbolic_sine": Case(
            mpmath.sinh,
            1.9,
            [Range(-3.0, 3.0), Range(-HYPERBOLIC_TOP, HYPERBOLIC_TOP), tiny],
            neighbours([1.0, -1.0]),
        ),
        "hyperbolic_cosine": Case(mpmath.cosh, 1.6, [Range(-3.0, 3.0), Range(-HYPERBOLIC_TOP, HYPERBOLIC_TOP), tiny]),
        "hyperbolic_tangent": Case(
            mpmath.tanh,
            2.7,
            [Range(-1.0, 1.0), Range(-4.0, 4.0), Range(-22.0, 22.0), tiny, every],
            neighbours([math.log(2.0) / 4 * k for k in (1, -1, 3, 5, 35, 37)] + [19.0, 19.06, 20.0]),
        ),
        "square_root": Case(mpmath.sqrt, 0.5, [positive]),
        "floor": Case(mpmath.floor, 0.0, [Range(-1e3, 1e3), every]),
        "nearest_integer": Case(mpmath.nint, 0.0, [Range(-1e3, 1e3), every], np.arange(-40.5, 41.5)),
        "normal_upper_tail": Case(exact_upper_tail, 9.0, [Range(0.0, 6.0), Range(0.0, 37.5)]),
        "normal_cdf": Case(lambda x: exact_upper_tail(-x), 9.0, [Range(-8.0, 8.0), Range(-37.5, 0.0)]),
        "normal_quantile": Case(
            exact_quantile,
            8.0,
            [Range(0.001, 0.999), Range(1e-300, 0.4, by_bits=True), Range(0.4, 0.6)],
            np.concatenate([neighbours([0.075, 0.925, 1.388e-11, 1 - 1.388e-11]), 0.5 + 0.5 ** np.arange(2.0, 50.0)]),
        ),
        "arc_tangent2": Case(
            mpmath.atan2,
            1.7,
            [
                (Range(-1.0, 1.0), Range(-1.0, 1.0)),
                (Range(1e-3, 1e3, True, True), Range(1e-3, 1e3, True, True)),
                (Range(1e-300, 1.7e308, True, True), Range(1e-300, 1.7e308, True, True)),
            ],
        ),
        # Exact where the quotient is 1 or more.
        "floored_remainder": Case(
            lambda x, divisor: x - divisor * mpmath.floor(x / divisor),
            0.0,
            [
                (Range(1e3, 1e9, True, True), Range(1e-3, 1e3, True, True)),
                (Range(1e100, 1e110, True, True), Range(1e97, 1e100, True, True)),
            ],
        ),
        "power": Case(
            mpmath.power,
            1.4,
            [
                (Range(0.01, 100.0, by_bits=True), Range(-10.0, 10.0)),
                (Range(1e-300, 1e300, by_bits=True), Range(-1.0, 1.0)),
                (Range(0.9, 1.1), Range(-6000.0, 6000.0)),
                (Range(5e-324, 1e-300, by_bits=True), Range(-0.9, 1.0)),
            ],
            power_hard(),
        ),
    }


def ulp_error(computed: float, exact: mpf) -> float:
    """Distance from the exact value in units of the last place; infinite if only one of the two overflows."""
    if math.isnan(computed):
        return math.inf
    _, exponent = mpmath.frexp(exact)
    unit = mpf(2) ** (max(int(exponent), -1021) - 53)
    if math.isinf(computed):
        return 0.0 if abs(exact) >= mpf(2) ** 1024 * (1 - mpf(2) ** -54) and (computed > 0) == (exact > 0) else math.inf
    return float(abs(mpf(computed) - exact) / unit)


@dataclass(frozen=True)
class Worst:
    """The largest error found and where."""

    ulp: float
    argument: tuple[float, ...]
    computed: float


def worst_error(case: Case, arguments: Array, computed: Array) -> Worst:
    """Largest error over arguments of shape (n,) or (n, 2) with computed values of shape (n,)."""
    worst = Worst(-1.0, (), math.nan)
    for argument, value in zip(arguments.reshape(len(computed), -1).tolist(), computed.tolist(), strict=True):
        error = ulp_error(value, case.exact(*(mpf(a) for a in argument)))
        if error > worst.ulp:
            worst = Worst(error, tuple(argument), value)
    return worst


def main() -> int:
    """Measure every function of the check program; exit status 1 if one exceeds its stated error."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("program")
    parser.add_argument("--samples", type=int, default=20_000)
    parser.add_argument("--width", default="wide", choices=["1", "wide"])
    parser.add_argument("--only", default="")
    options = parser.parse_args()
    exceeded = False
    for name, case in cases().items():
        if options.only not in name:
            continue
        arguments = case.draw(np.random.default_rng(1), options.samples)
        done = subprocess.run(
            [options.program, "apply", name, options.width],
            input=arguments.tobytes(),
            capture_output=True,
            check=True,
        )
        worst = worst_error(case, arguments, np.frombuffer(done.stdout))
        exceeded |= worst.ulp > case.limit
        place = ", ".join(a.hex() for a in worst.argument)
        print(f"{name:24s} {worst.ulp:6.3f} ULP of {case.limit:4.2f} allowed, at {place}", flush=True)
    return 1 if exceeded else 0


if __name__ == "__main__":
    raise SystemExit(main())

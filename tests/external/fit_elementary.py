"""Fit the polynomials of cpp/include/windage/lanes by the Remez exchange, printed as hexadecimal literals.

Each table approximates a smooth function g on an interval so that the largest weighted error |w (p - g)| is
smallest (E. Ya. Remez, 1934; see W. J. Cody and W. Waite, Software Manual for the Elementary Functions, 1980,
for the argument reductions that lead to the intervals).  Leading coefficients that are exact are held fixed.

    python fit_elementary.py            print every table with its error in bits
    python fit_elementary.py --check    also look for the numbers in the headers; status 1 if one is absent
"""

from __future__ import annotations

import argparse
import sys
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import mpmath
from mpmath import mp, mpf

mp.dps = 60

Real = Callable[[mpf], mpf]
HEADERS = Path(__file__).resolve().parents[2] / "cpp" / "include" / "windage" / "lanes"


@dataclass(frozen=True)
class Table:
    """A polynomial to fit: p(x) ~ target(x) on [low, high], error weighted by weight(x)."""

    name: str
    header: str
    target: Real
    weight: Real
    low: mpf
    high: mpf
    count: int


def series_safe(direct: Real, terms: Callable[[int], mpf], limit: float = 1e-3) -> Real:
    """The function itself, or its Taylor series near zero, where the closed form cancels."""

    def value(x: mpf) -> mpf:
        if abs(x) > limit:
            return direct(x)
        return mpmath.fsum(terms(n) * x**n for n in range(24))

    return value


def remez(target: Real, weight: Real, low: mpf, high: mpf, count: int) -> tuple[list[mpf], mpf]:
    """Coefficients (lowest first) of the best weighted polynomial and its largest weighted error."""
    nodes = [
        (low + high) / 2 - (high - low) / 2 * mpmath.cos(mpmath.pi * (i + mpf(1) / 2) / (count + 1))
        for i in range(count + 1)
    ]
    grid = [
        (low + high) / 2 - (high - low) / 2 * mpmath.cos(mpmath.pi * i / (30 * count)) for i in range(30 * count + 1)
    ]
    known = [(target(x), weight(x)) for x in grid]
    coefficients: list[mpf] = []
    worst = mpf(0)
    for _ in range(12):
        matrix = mpmath.matrix(count + 1)
        right = mpmath.matrix(count + 1, 1)
        for row, x in enumerate(nodes):
            for column in range(count):
                matrix[row, column] = x**column
            matrix[row, count] = (-1) ** row / weight(x)
            right[row] = target(x)
        solution = mpmath.lu_solve(matrix, right)
        coefficients = [solution[i] for i in range(count)]
        errors = [w * (mpmath.polyval(coefficients[::-1], x) - g) for x, (g, w) in zip(grid, known, strict=True)]
        worst = max(abs(e) for e in errors)
        nodes = extrema(grid, errors, count + 1)
        if worst <= abs(solution[count]) * mpf("1.001"):
            break
    return coefficients, worst


def extrema(grid: list[mpf], errors: list[mpf], wanted: int) -> list[mpf]:
    """The largest error of every run of equal signs, sharpened by a parabola; surplus runs are dropped."""
    runs: list[int] = [0]
    for i in range(1, len(errors)):
        if errors[i] * errors[runs[-1]] < 0:
            runs.append(i)
        elif abs(errors[i]) > abs(errors[runs[-1]]):
            runs[-1] = i
    while len(runs) > wanted:
        runs.pop(0 if abs(errors[runs[0]]) < abs(errors[runs[-1]]) else -1)
    if len(runs) < wanted:
        raise ArithmeticError(f"error curve has {len(runs)} extrema, {wanted} needed: raise mp.dps or lower the degree")
    points = []
    for i in runs:
        x = grid[i]
        if 0 < i < len(grid) - 1:
            x0, x2, e0, e1, e2 = grid[i - 1], grid[i + 1], errors[i - 1], errors[i], errors[i + 1]
            top = (x - x0) ** 2 * (e1 - e2) - (x - x2) ** 2 * (e1 - e0)
            bottom = (x - x0) * (e1 - e2) - (x - x2) * (e1 - e0)
            if bottom != 0:
                x = min(max(x - top / (2 * bottom), x0), x2)
        points.append(x)
    return points


def factorial_series(first: int, step: int, sign: int = 1) -> Callable[[int], mpf]:
    return lambda n: mpf(sign) ** n / mpmath.factorial(first + step * n)


def odd_tail(function: Real, terms: Callable[[int], mpf], sign: int = 1) -> Real:
    """(function(sqrt z) / sqrt z - 1) / z, the part of an odd function behind its first term."""

    def direct(z: mpf) -> mpf:
        x = mpmath.sqrt(z)
        return sign * (function(x) / x - 1) / z

    return series_safe(direct, terms)


def taylor_tail(function: Real, order: int) -> Callable[[int], mpf]:
    """Taylor coefficients of an odd function from the cubic term on, as a series in the square."""
    with mp.workdps(120):
        coefficients = mpmath.taylor(function, 0, 2 * order + 3)
    return lambda n: mpf(coefficients[2 * n + 3])


def relative_odd(function: Real) -> Real:
    """Weight that turns the error of an odd tail into the relative error of the function."""

    def weight(z: mpf) -> mpf:
        x = mpmath.sqrt(z) if z > 0 else mpf(10) ** -30
        return x**3 / function(x)

    return weight


def tables() -> list[Table]:
    """All tables, in the order of the headers."""
    half_log = mpmath.log(2) / 2 * mpf("1.0001")
    eighth = (mpmath.pi / 4 * mpf("1.0001")) ** 2
    half_turn = (mpf("0.5") + mpf(2) ** -40) ** 2
    s_max = ((mpmath.sqrt(2) - 1) / (mpmath.sqrt(2) + 1)) ** 2 * mpf("1.0001")
    half_pi = mpmath.pi / 2

    def exponential_rest(x: mpf) -> mpf:  # (e^x - 1 - x - x^2/2) / x^3
        return (mpmath.exp(x) - 1 - x - x * x / 2) / x**3

    def logarithm_rest(z: mpf) -> mpf:  # (2 atanh(s) / s - 2) / z
        s = mpmath.sqrt(z)
        return (2 * mpmath.atanh(s) / s - 2) / z

    def power_rest(z: mpf) -> mpf:  # (3 atanh(s) / s - 3 - z) / z^2
        s = mpmath.sqrt(z)
        return (3 * mpmath.atanh(s) / s - 3 - z) / z**2

    def cosine_rest(z: mpf) -> mpf:  # (cos x - 1 + z/2) / z^2
        return (mpmath.cos(mpmath.sqrt(z)) - 1 + z / 2) / z**2

    def turn_sine(z: mpf) -> mpf:  # (sin(pi/2 f) / f - pi/2) / z
        f = mpmath.sqrt(z)
        return (mpmath.sin(half_pi * f) / f - half_pi) / z

    def turn_cosine(z: mpf) -> mpf:  # (cos(pi/2 f) - 1) / z
        return (mpmath.cos(half_pi * mpmath.sqrt(z)) - 1) / z

    def tail_ratio(t: mpf) -> mpf:  # (x + 5) e^(x^2/2) Q(x) with t = (x - 5) / (x + 5), Q the upper tail
        x = 5 * (1 + t) / (1 - t)
        return (x + 5) * mpmath.exp(x * x / 2) * mpmath.erfc(x / mpmath.sqrt(2)) / 2

    sine_terms = factorial_series(3, 2, -1)
    return [
        Table(
            "exponential_rest",
            "exponential.hpp",
            series_safe(exponential_rest, factorial_series(3, 1)),
            lambda x: abs(x) ** 3 / mpmath.exp(x) + mpf(10) ** -12,
            -half_log,
            half_log,
            9,
        ),
        Table(
            "logarithm_rest",
            "exponential.hpp",
            series_safe(logarithm_rest, lambda n: mpf(2) / (2 * n + 3)),
            lambda z: z + mpf(10) ** -12,
            mpf(0),
            s_max,
            7,
        ),
        Table(
            "power_rest",
            "power.hpp",
            series_safe(power_rest, lambda n: mpf(3) / (2 * n + 5)),
            lambda z: z**2 + mpf(10) ** -12,
            mpf(0),
            s_max,
            7,
        ),
        Table(
            "sine_rest",
            "trigonometric.hpp",
            odd_tail(mpmath.sin, lambda n: -sine_terms(n)),
            lambda z: z + mpf(10) ** -12,
            mpf(0),
            eighth,
            6,
        ),
        Table(
            "cosine_rest",
            "trigonometric.hpp",
            series_safe(cosine_rest, factorial_series(4, 2, -1)),
            lambda z: z**2 + mpf(10) ** -12,
            mpf(0),
            eighth,
            6,
        ),
        Table(
            "turn_sine_rest",
            "trigonometric.hpp",
            series_safe(turn_sine, lambda n: -((-1) ** n) * half_pi ** (2 * n + 3) / mpmath.factorial(2 * n + 3)),
            lambda z: z + mpf(10) ** -12,
            mpf(0),
            half_turn,
            6,
        ),
        Table(
            "turn_cosine",
            "trigonometric.hpp",
            series_safe(turn_cosine, lambda n: -((-1) ** n) * half_pi ** (2 * n + 2) / mpmath.factorial(2 * n + 2)),
            lambda z: z + mpf(10) ** -12,
            mpf(0),
            half_turn,
            7,
        ),
        Table(
            "tangent_rest",
            "trigonometric.hpp",
            odd_tail(mpmath.tan, taylor_tail(mpmath.tan, 24)),
            relative_odd(mpmath.tan),
            mpf(0),
            eighth,
            14,
        ),
        Table(
            "arc_tangent_rest",
            "inverse_trigonometric.hpp",
            odd_tail(mpmath.atan, lambda n: mpf(-1) ** (n + 1) / (2 * n + 3)),
            relative_odd(mpmath.atan),
            mpf(0),
            mpf("0.25") * mpf("1.0001"),
            12,
        ),
        Table(
            "arc_sine_rest",
            "inverse_trigonometric.hpp",
            odd_tail(mpmath.asin, taylor_tail(mpmath.asin, 24)),
            relative_odd(mpmath.asin),
            mpf(0),
            mpf("0.25") * mpf("1.0001"),
            13,
        ),
        Table(
            "hyperbolic_tangent_rest",
            "hyperbolic.hpp",
            odd_tail(mpmath.tanh, taylor_tail(mpmath.tanh, 24)),
            relative_odd(mpmath.tanh),
            mpf(0),
            mpf("0.1734") ** 2,
            6,
        ),
        Table(
            "hyperbolic_sine_rest",
            "hyperbolic.hpp",
            odd_tail(mpmath.sinh, factorial_series(3, 2)),
            relative_odd(mpmath.sinh),
            mpf(0),
            mpf("1.0001"),
            7,
        ),
        Table("normal_tail", "normal.hpp", tail_ratio, lambda t: 1 / tail_ratio(t), mpf(-1), mpf(33) / 43, 22),
    ]


def main() -> int:
    """Print all tables; with --check report those whose numbers are absent from their header."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--check", action="store_true")
    parser.add_argument("--only", default="")
    options = parser.parse_args()
    missing = []
    for table in tables():
        if options.only not in table.name:
            continue
        coefficients, worst = remez(table.target, table.weight, table.low, table.high, table.count)
        literals = [float(c).hex() for c in coefficients]
        bits = mpmath.nstr(mpmath.log(worst, 2), 4)
        print(f"// {table.name}: {table.count} coefficients, weighted error 2^{bits}")
        print("    " + ",\n    ".join(literals))
        if options.check:
            text = (HEADERS / table.header).read_text()
            missing += [f"{table.header}: {table.name}: {x}" for x in literals if x not in text]
    for line in missing:
        print("not in header:", line, file=sys.stderr)
    return 1 if missing else 0


if __name__ == "__main__":
    raise SystemExit(main())

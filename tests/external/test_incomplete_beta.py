"""The incomplete beta function of the engine against SciPy and closed forms."""

from __future__ import annotations

import math

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy import special, stats

from windage._loader import engine

INF, NAN = math.inf, math.nan


def beta_points() -> NDArray[np.float64]:
    """Parameters from 0.3 to 300 and probabilities down to 1e-12 on both sides, shape (n, 3)."""
    generator = np.random.default_rng(6)
    ab = np.exp(generator.uniform(np.log(0.3), np.log(300.0), (1500, 2)))
    tail = np.exp(generator.uniform(np.log(1e-12), 0.0, 1500))
    p = np.where(
        np.arange(1500) % 3 == 0,
        generator.uniform(0, 1, 1500),
        np.where(np.arange(1500) % 3 == 1, tail, 1 - tail),
    )
    return np.column_stack([ab, np.clip(p, 1e-12, 1 - 1e-12)])


def test_incomplete_beta_inverse_agrees_with_scipy() -> None:
    # Second opinion: scipy.special.betaincinv.
    for a, b, p in beta_points().tolist():
        expected = special.betaincinv(a, b, p)
        assert math.isclose(engine().incomplete_beta_inverse(a, b, p), expected, rel_tol=1e-10), (a, b, p)


def test_incomplete_beta_of_its_inverse_is_the_probability() -> None:
    for a, b, p in beta_points().tolist():
        x = engine().incomplete_beta_inverse(a, b, p)
        # One rounding of x moves the probability by density * spacing.
        moved = stats.beta.pdf(x, a, b) * np.spacing(x) if 0.0 < x < 1.0 else 1.0
        assert abs(engine().incomplete_beta(a, b, x) - p) <= 1e-10 * p + 2 * moved


@pytest.mark.parametrize(
    ("a", "b", "x", "expected"),
    [
        (1.0, 1.0, 0.3, 0.3),
        (1.0, 4.0, 0.25, 1 - 0.75**4),
        (3.0, 1.0, 0.5, 0.125),
        (0.5, 0.5, 0.5, 0.5),
        (2.0, 2.0, 0.0, 0.0),
    ],
)
def test_incomplete_beta_has_its_closed_forms(a: float, b: float, x: float, expected: float) -> None:
    # NIST Digital Library of Mathematical Functions, 8.17.5 with one parameter equal to 1; symmetry 8.17.4.
    assert math.isclose(engine().incomplete_beta(a, b, x), expected, rel_tol=1e-13, abs_tol=0.0)


@pytest.mark.parametrize(
    "a_b_x", [(0.0, 1.0, 0.5), (1.0, -1.0, 0.5), (1.0, 1.0, 1.5), (NAN, 1.0, 0.5), (1.0, INF, 0.5)]
)
def test_incomplete_beta_of_invalid_arguments_is_undefined(a_b_x: tuple[float, float, float]) -> None:
    assert math.isnan(engine().incomplete_beta(*a_b_x))
    assert math.isnan(engine().incomplete_beta_inverse(*a_b_x))

"""Spreads at their extremes: every one that is accepted draws finite numbers within its bounds, in ascending order."""

from __future__ import annotations

import math
from typing import Any

import mpmath
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import windage as wd
from windage._loader import engine

EDGES = np.array([2.0**-53, 1e-12, 0.25, 0.5, 0.75, 1.0 - 1e-12, 1.0 - 2.0**-53])
SIZES = st.one_of(
    st.floats(allow_nan=False, allow_infinity=False),
    st.sampled_from([0.0, -0.0, 5e-324, 1e-308, 1e-300, 1e-9, 1.0, 1e9, 1e12, 1e150, 1e300, 1.7e308]),
    st.floats(-10.0, 10.0),
)
NUMBERS = st.one_of(SIZES, SIZES.map(lambda x: -x))


def draws(spread: Any) -> np.ndarray:
    kind, numbers = spread._engine_form()
    return np.asarray(engine().spread_quantiles({"name": "x", "kind": kind, "numbers": numbers}, EDGES))


def made(maker: Any, *arguments: Any) -> Any:
    """The spread, or None where it is refused with a message that names a field."""
    refused: wd.DescriptionError
    try:
        return maker(*arguments)
    except wd.DescriptionError as error:
        refused = error
    assert refused.field.split(".")[0] == maker.__name__
    assert len(str(refused)) < 2000
    return None


@given(
    kind=st.sampled_from(["normal", "uniform", "triangular", "lognormal", "beta", "tolerance", "shaped"]),
    n=st.lists(NUMBERS, min_size=4, max_size=4),
)
@settings(max_examples=800, deadline=None, derandomize=True)
def test_what_is_accepted_draws_finite_numbers_within_its_bounds_in_ascending_order(kind: str, n: list[float]) -> None:
    makers: dict[str, tuple[Any, list[Any]]] = {
        "normal": (wd.normal, n),
        "uniform": (wd.uniform, sorted(n[:2])),
        "triangular": (wd.triangular, sorted(n[:3])),
        "lognormal": (wd.lognormal, [abs(n[0]), abs(n[1])]),
        "beta": (wd.beta, [abs(n[0]), abs(n[1]), *sorted(n[2:])]),
        "tolerance": (wd.tolerance, [n[0], abs(n[1])]),
        "shaped": (wd.tolerance, [n[0], abs(n[1]), "normal"]),
    }
    maker, arguments = makers[kind]
    spread = made(maker, *arguments)
    if spread is None:
        return
    values = draws(spread)
    assert np.all(np.isfinite(values)), (spread, values)
    assert np.all((spread.low <= values) & (values <= spread.high)), (spread, values)
    assert np.all(values[1:] >= values[:-1]), (spread, values)
    assert spread.low <= spread.nominal <= spread.high
    if kind == "lognormal":
        assert values[0] >= np.finfo(float).tiny


@given(
    values=st.lists(st.sampled_from([0.0, 1.0, 2.0, -3.0, 1e308, -1e308]), min_size=1, max_size=6),
    weights=st.lists(st.sampled_from([0.0, 1e-300, 1e-17, 0.1, 0.3, 1.0]), min_size=6, max_size=6),
)
@settings(max_examples=300, deadline=None, derandomize=True)
def test_a_choice_never_draws_a_value_of_probability_zero(values: list[float], weights: list[float]) -> None:
    weights = weights[: len(values)]
    total = sum(weights)
    if total <= 0.0:
        return
    probabilities = [w / total for w in weights]
    found = draws(wd.choice(values, probabilities))
    possible = {v for v, p in zip(values, probabilities, strict=True) if p > 0.0}
    assert set(found.tolist()) <= possible
    assert np.all(found[1:] >= found[:-1])


def test_a_last_value_of_probability_zero_is_not_drawn_where_the_sum_is_rounded_below_one() -> None:
    probabilities = [0.1] * 10 + [0.0]  # they add up to 1 - 2^-53
    assert sum(probabilities) < 1.0
    assert draws(wd.choice([*range(10), 99], probabilities)).max() == 9.0


# --- right, where it is accepted: multiple precision


def test_triangular_is_right_on_the_narrowest_and_the_widest_support() -> None:
    for low, mode, high in [(0.0, 1e-200, 3e-200), (-8e307, 1e307, 8e307), (0.0, 0.0, 1e300), (1e-310, 2e-310, 5e-310)]:
        width = mpmath.mpf(high) - low
        for p, found in zip(EDGES, draws(wd.triangular(low, mode, high)), strict=True):
            rising = mode - mpmath.mpf(low)
            exact = (
                low + mpmath.sqrt(p * width * rising)
                if p < rising / width
                else high - mpmath.sqrt((1 - mpmath.mpf(p)) * width * (high - mpmath.mpf(mode)))
            )
            assert abs(found - exact) <= 1e-14 * width + 5e-324, (low, mode, high, p)


@pytest.mark.parametrize(("a", "b"), [(1e9, 1e9), (1e9, 2.0), (3.0, 1e9), (1e-3, 1e-3), (1e-3, 5.0), (1e6, 1e3)])
def test_beta_is_right_up_to_the_largest_and_down_to_the_smallest_shapes(a: float, b: float) -> None:
    """The distribution function in multiple precision at what was drawn, 1e-9 of a deviation to each side."""
    with mpmath.workdps(50):
        sd = mpmath.sqrt(mpmath.mpf(a) * b / (a + b + 1)) / (a + b)
        for p, x in zip(EDGES[1:-1], draws(wd.beta(a, b))[1:-1], strict=True):
            rounding = mpmath.mpf(2) ** -53
            below, above = (max(min(x + sign * (1e-9 * sd + rounding), 1), 0) for sign in (-1, 1))
            assert probability(a, b, below) <= p <= probability(a, b, above), (a, b, p, x)


def probability(a: float, b: float, x: mpmath.mpf) -> mpmath.mpf:
    """I_x(a, b) by adaptive quadrature about the mode where the shapes are large, else by mpmath's own function."""
    if max(a, b) < 1e4:
        return mpmath.betainc(a, b, 0, x, regularized=True)
    mean, sd = mpmath.mpf(a) / (a + b), mpmath.sqrt(mpmath.mpf(a) * b / (a + b + 1)) / (a + b)
    logarithm = mpmath.loggamma(mpmath.mpf(a) + b) - mpmath.loggamma(a) - mpmath.loggamma(b)

    def density(t: mpmath.mpf) -> mpmath.mpf:
        return mpmath.exp(logarithm + (a - 1) * mpmath.log(t) + (b - 1) * mpmath.log1p(-t)) if 0 < t < 1 else 0

    steps = [mean + k * sd for k in range(-40, 41, 4)]
    points = sorted({max(min(t, x), mpmath.mpf(0)) for t in (*steps, x)})
    return mpmath.quad(density, points)


@pytest.mark.parametrize(
    ("low", "high"), [(6.9, math.inf), (-math.inf, -6.9), (6.5, 6.9), (-7.0, 8.0), (3.0, 3.0 + 1e-6), (-9.0, -6.5)]
)
def test_normal_is_right_far_in_the_tail(low: float, high: float) -> None:
    with mpmath.workdps(40):
        bounds = [mpmath.ncdf(mpmath.mpf(bound)) for bound in (low, high)]
        upper = [mpmath.ncdf(-mpmath.mpf(bound)) for bound in (low, high)]
        for p, z in zip(EDGES[2:5], draws(wd.normal(0.0, 1.0, low, high))[2:5], strict=True):
            # The smaller tail, which keeps its digits.
            if low > 0.0:
                found = (upper[0] - mpmath.ncdf(-mpmath.mpf(z))) / (upper[0] - upper[1])
            else:
                found = (mpmath.ncdf(mpmath.mpf(z)) - bounds[0]) / (bounds[1] - bounds[0])
            assert abs(found - p) < 1e-9, (low, high, p)


# --- refused, where it is not


@pytest.mark.parametrize(
    ("call", "field"),
    [
        (lambda: wd.beta(1e12, 1e12), "beta.a"),
        (lambda: wd.beta(1.0, 1e-4), "beta.b"),
        (lambda: wd.lognormal(1.0, 100.0), "lognormal.sd_log"),
        (lambda: wd.lognormal(1e300, 3.0), "lognormal.sd_log"),
        (lambda: wd.lognormal(1e-306, 1.0), "lognormal.sd_log"),
        (lambda: wd.triangular(-1e308, 0.0, 1e308), "triangular.high"),
        (lambda: wd.uniform(-1e308, 1e308), "uniform.high"),
        (lambda: wd.normal(0.0, 1e308), "normal.sd"),
        (lambda: wd.normal(0.0, 1.0, low=7.5), "normal.low"),
    ],
)
def test_what_cannot_be_drawn_is_refused(call: Any, field: str) -> None:
    with pytest.raises(wd.DescriptionError) as caught:
        call()
    assert caught.value.field == field


@pytest.mark.parametrize(
    ("kind", "numbers"),
    [
        ("beta", [1e12, 1e12, 0.0, 1.0]),
        ("beta", [1.0, 1e-5, 0.0, 1.0]),
        ("beta", [1.0, 1.0, -1e308, 1e308]),
        ("lognormal", [1.0, 100.0]),
        ("lognormal", [1e300, 3.0]),
        ("lognormal", [1e-306, 1.0]),
        ("uniform", [-1e308, 1e308]),
        ("triangular", [-1e308, 0.0, 1e308]),
        ("normal", [0.0, 1e308, -math.inf, math.inf]),
        ("normal", [5.0, 0.0, 0.0, 1.0]),
        ("normal", [0.0, 1.0, 9.0, 10.0]),
        ("choice", [1.0, 2.0, 0.5, 0.4]),
        ("choice", [1.0, 0.5, 0.5]),
        ("samples", []),
        ("drawn_rows", []),
    ],
)
def test_the_engine_refuses_it_too(kind: str, numbers: list[float]) -> None:
    with pytest.raises(ValueError, match="spread 'x': expected"):
        engine().spread_quantiles({"name": "x", "kind": kind, "numbers": numbers}, EDGES)


def test_a_tolerance_of_zero_is_the_number_itself() -> None:
    for shape in ("uniform", "normal"):
        assert set(draws(wd.tolerance(3.0, 0.0, shape)).tolist()) == {3.0}
    assert set(draws(wd.tolerance(0.0, 0.0)).tolist()) == {0.0}

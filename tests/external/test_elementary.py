"""Lane functions against multiple precision, published generator answers and closed forms."""

from __future__ import annotations

import math
import os
import subprocess
import sys
from pathlib import Path
from typing import Any

import mpmath
import numpy as np
import pytest
from mpmath import mpf
from scipy import stats

from windage._loader import engine

sys.path.insert(0, str(Path(__file__).parent))
from elementary_reference import Array, cases, ulp_error, worst_error

SAMPLES = int(os.environ.get("WINDAGE_ULP_SAMPLES", "4000"))
CASES = cases()
INF, NAN = math.inf, math.nan


def lane(name: str, x: Any, y: Any = None) -> Array:
    """Apply a lane function to anything that becomes an array of doubles."""
    second = None if y is None else np.ascontiguousarray(y, dtype=np.float64)
    result: Array = engine().lane_function(name, np.ascontiguousarray(x, dtype=np.float64), second)
    return result


def same_number(a: float, b: float) -> bool:
    """Equal including the sign of zero; undefined numbers are alike."""
    return (math.isnan(a) and math.isnan(b)) or (a == b and math.copysign(1, a) == math.copysign(1, b))


@pytest.mark.parametrize("name", CASES)
def test_error_in_ulp_stays_below_the_stated_one(name: str) -> None:
    case = CASES[name]
    arguments = case.draw(np.random.default_rng(2026), SAMPLES)
    columns = arguments.reshape(len(arguments), -1).T
    worst = worst_error(case, arguments, lane(name, *columns))
    assert 0.0 <= worst.ulp <= case.limit, f"{name}: {worst}"


@pytest.mark.parametrize(
    ("name", "x", "expected"),
    [
        ("sine", -0.0, -0.0),
        ("sine", INF, NAN),
        ("sine", 2.0**31, NAN),
        ("cosine", -INF, NAN),
        ("cosine", 0.0, 1.0),
        ("tangent", -0.0, -0.0),
        ("tangent", INF, NAN),
        ("arc_sine", -0.0, -0.0),
        ("arc_sine", 1.0000000000000002, NAN),
        ("arc_sine", INF, NAN),
        ("arc_cosine", 1.0, 0.0),
        ("arc_cosine", -1.0000000000000002, NAN),
        ("arc_cosine", -1.0, math.pi),
        ("arc_tangent", -0.0, -0.0),
        ("arc_tangent", INF, math.pi / 2),
        ("arc_tangent", -INF, -math.pi / 2),
        ("exponential", INF, INF),
        ("exponential", -INF, 0.0),
        ("exponential", 0.0, 1.0),
        ("exponential", 710.0, INF),
        ("exponential", -709.0, 0.0),
        ("exponential_minus_one", -0.0, -0.0),
        ("exponential_minus_one", INF, INF),
        ("exponential_minus_one", -INF, -1.0),
        ("logarithm", 0.0, -INF),
        ("logarithm", -0.0, -INF),
        ("logarithm", -5e-324, NAN),
        ("logarithm", INF, INF),
        ("logarithm", -INF, NAN),
        ("logarithm", 1.0, 0.0),
        ("logarithm_one_plus", -1.0, -INF),
        ("logarithm_one_plus", -1.1, NAN),
        ("logarithm_one_plus", -0.0, -0.0),
        ("logarithm_one_plus", INF, INF),
        ("hyperbolic_tangent", -0.0, -0.0),
        ("hyperbolic_tangent", INF, 1.0),
        ("hyperbolic_tangent", -INF, -1.0),
        ("hyperbolic_tangent", 5e-324, 5e-324),
        ("hyperbolic_sine", -0.0, -0.0),
        ("hyperbolic_sine", -INF, -INF),
        ("hyperbolic_sine", 711.0, INF),
        ("hyperbolic_cosine", -INF, INF),
        ("hyperbolic_cosine", 0.0, 1.0),
        ("normal_cdf", INF, 1.0),
        ("normal_cdf", -INF, 0.0),
        ("normal_quantile", 0.0, -INF),
        ("normal_quantile", 1.0, INF),
        ("normal_quantile", 0.5, 0.0),
        ("normal_quantile", -0.1, NAN),
        ("normal_quantile", 1.1, NAN),
    ],
)
def test_special_arguments_follow_iso_c_annex_f(name: str, x: float, expected: float) -> None:
    assert same_number(lane(name, [x])[0], expected)


@pytest.mark.parametrize("name", ["sine", "cosine"])
def test_error_at_huge_angles_is_that_of_half_a_unit_of_the_angle(name: str) -> None:
    generator = np.random.default_rng(8)
    x = generator.uniform(-1.0, 1.0, 600) * np.repeat([4e5, 1e7, 2.0**30], 200)
    for angle, value in zip(x.tolist(), lane(name, x).tolist(), strict=True):
        error = abs(mpf(value) - CASES[name].exact(mpf(angle)))
        assert error <= 0.5 * math.ulp(angle) + 2.0**-52


@pytest.mark.parametrize("name", CASES)
def test_undefined_number_stays_undefined_for_every_payload(name: str) -> None:
    # Payloads that would spoil an exponent field if it were computed from them.
    patterns = np.array([0x7FF8000000000000, 0x7FF8000000000FFF, 0xFFF80000000007FF, 0x7FFFFFFFFFFFFFFF], np.uint64)
    x = patterns.view(np.float64)
    if CASES[name].arguments == 1:
        assert np.isnan(lane(name, x)).all()
    else:
        other = np.full(4, 2.5)
        assert np.isnan(lane(name, x, other)).all()
        assert np.isnan(lane(name, other, x)).all()


def grid() -> tuple[Array, Array]:
    """All pairs of signed zeros, infinities, integers, fractions, huge and tiny numbers."""
    points = [0.0, 5e-324, 1e-310, 0.5, 0.999, 1.0, 1.5, 2.0, 3.0, 2.0**52 + 1, 2.0**53, 1e300, INF]
    both = np.array(points + [-p for p in points])
    x, y = np.meshgrid(both, both)
    return x.ravel(), y.ravel()


@pytest.mark.parametrize(("name", "reference"), [("power", math.pow), ("arc_tangent2", math.atan2)])
def test_pairs_of_extreme_arguments_agree_with_the_c_library(name: str, reference: Any) -> None:
    first, second = grid()
    for a, b, value in zip(first.tolist(), second.tolist(), lane(name, first, second).tolist(), strict=True):
        try:
            expected = reference(a, b)
        except OverflowError:  # finite arguments: sign from the parity of the exponent
            expected = -INF if a < 0 and b % 2 == 1 else INF
        except ValueError:  # Python raises where C returns an infinity (zero base) or NaN
            odd = abs(b) < 2**53 and b % 2 == 1
            expected = (math.copysign(INF, a) if odd else INF) if a == 0 else NAN
        close = math.isfinite(expected) and math.isclose(value, expected, rel_tol=4e-16, abs_tol=5e-324)
        assert same_number(value, expected) or (close and math.copysign(1, value) == math.copysign(1, expected)), (
            f"{name}({a!r}, {b!r}) = {value!r}, expected {expected!r}"
        )


def test_power_is_one_for_zero_exponent_and_for_base_one() -> None:
    assert (lane("power", [NAN, INF, 0.0, -3.0], [0.0, -0.0, 0.0, 0.0]) == 1.0).all()
    assert (lane("power", [1.0, 1.0, 1.0], [NAN, INF, -1e300]) == 1.0).all()


@pytest.mark.parametrize(
    "name", ["sine", "tangent", "arc_sine", "arc_tangent", "hyperbolic_sine", "hyperbolic_tangent"]
)
def test_odd_functions_are_odd_to_the_bit(name: str) -> None:
    x = np.random.default_rng(3).uniform(-1.0, 1.0, 4099) * 10.0 ** np.arange(-30, 1).repeat(133)[:4099]
    assert (lane(name, -x).view(np.int64) == (-lane(name, x)).view(np.int64)).all()


def test_arc_tangent_is_arc_tangent2_over_one_to_the_bit() -> None:
    x = np.random.default_rng(4).normal(size=5001) * 3.0
    assert (lane("arc_tangent", x) == lane("arc_tangent2", x, np.ones_like(x))).all()


@pytest.mark.parametrize("name", CASES)
def test_result_does_not_depend_on_the_place_in_the_array(name: str) -> None:
    arguments = CASES[name].draw(np.random.default_rng(5), 300)[:259]
    columns = arguments.reshape(len(arguments), -1).T
    whole = lane(name, *columns)
    for start, stop in [(0, 1), (1, 258), (7, 20), (130, 259)]:
        part = lane(name, *(c[start:stop] for c in columns))
        assert (part.view(np.int64) == whole[start:stop].view(np.int64)).all()


def test_unknown_name_and_wrong_number_of_arguments_are_refused() -> None:
    with pytest.raises(ValueError, match="not known"):
        lane("cotangent", [1.0])
    with pytest.raises(ValueError, match="argument"):
        lane("sine", [1.0], [2.0])
    with pytest.raises(ValueError, match="argument"):
        lane("power", [1.0])


def test_coefficients_in_the_headers_are_the_fitted_ones() -> None:
    script = Path(__file__).with_name("fit_elementary.py")
    done = subprocess.run([sys.executable, str(script), "--check"], capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr


PI_WORDS = [0x243F6A88, 0x85A308D3, 0x13198A2E, 0x03707344, 0xA4093822, 0x299F31D0]


@pytest.mark.parametrize(
    ("words", "expected"),
    [
        ([0] * 6, [0x6627E8D5, 0xE169C58D, 0xBC57AC4C, 0x9B00DBD8]),
        ([0xFFFFFFFF] * 6, [0x408F276D, 0x41C83B0E, 0xA20BC7C6, 0x6D5451FD]),
        (PI_WORDS, [0xD16CFE09, 0x94FDCCEB, 0x5001E420, 0x24126EA1]),
    ],
)
def test_philox_gives_the_published_known_answers(words: list[int], expected: list[int]) -> None:
    # Salmon, Moraes, Dror, Shaw, SC11; known-answer vectors of the Random123 distribution for philox4x32-10.
    assert [int(w) for w in engine().lane_philox(words[:4], words[4:])] == expected


def test_uniforms_are_the_philox_words_of_their_trial() -> None:
    seed, stream, draw, first = 0x0123456789ABCDEF, 9, 4, 2**32 - 5
    uniforms = engine().lane_uniforms(seed, stream, draw, first, 40)
    assert uniforms.shape == (2, 40)
    for i, pair in enumerate(uniforms.T.tolist()):
        trial = first + i
        words = engine().lane_philox([trial % 2**32, trial >> 32, stream, draw], [seed % 2**32, seed >> 32])
        low0, high0, low1, high1 = (int(w) for w in words)
        assert pair == [(((high << 32 | low) >> 12) + 0.5) * 2.0**-52 for low, high in ((low0, high0), (low1, high1))]


def test_normals_are_box_muller_of_the_uniforms() -> None:
    # G. E. P. Box, M. E. Muller, Ann. Math. Stat. 29 (1958) 610.
    uniforms = engine().lane_uniforms(77, 1, 2, 0, 400)
    normals = engine().lane_normals(77, 1, 2, 0, 400)
    for (u, turn), (a, b) in zip(uniforms.T.tolist(), normals.T.tolist(), strict=True):
        radius = mpmath.sqrt(-2 * mpmath.log(mpf(u)))
        assert ulp_error(a, radius * mpmath.cospi(2 * mpf(turn))) < 4.0
        assert ulp_error(b, radius * mpmath.sinpi(2 * mpf(turn))) < 4.0


def test_draws_of_a_trial_do_not_depend_on_the_request() -> None:
    whole = engine().lane_normals(5, 6, 7, 100, 333)
    assert (engine().lane_normals(5, 6, 7, 137, 11) == whole[:, 37:48]).all()
    assert (engine().lane_normals(5, 6, 7, 432, 1) == whole[:, 332:]).all()


def test_draws_have_the_moments_and_the_law_they_claim() -> None:
    # Fixed seeds: the outcome is certain. Bounds: five standard errors; p above 1e-3 in Kolmogorov's test.
    n = 200_000
    uniforms = engine().lane_uniforms(2026, 1, 0, 0, n)
    normals = engine().lane_normals(2026, 2, 0, 0, n)
    assert uniforms.min() > 0.0
    assert uniforms.max() < 1.0
    assert abs(normals.mean(axis=1)).max() < 5 / math.sqrt(n)
    assert abs(normals.var(axis=1) - 1.0).max() < 5 * math.sqrt(2 / n)
    assert abs(np.corrcoef(normals)[0, 1]) < 5 / math.sqrt(n)
    for row in range(2):
        assert stats.kstest(uniforms[row], "uniform").pvalue > 1e-3
        assert stats.kstest(normals[row], "norm").pvalue > 1e-3


def test_streams_draws_and_seeds_are_unrelated() -> None:
    n = 50_000
    base = engine().lane_normals(1, 1, 1, 0, n)[0]
    for seed, stream, draw, first in [
        (2, 1, 1, 0),
        (1, 2, 1, 0),
        (1, 1, 2, 0),
        (1 + 2**32, 1, 1, 0),
        (1, 1, 1, 2**32),
    ]:
        other = engine().lane_normals(seed, stream, draw, first, n)[0]
        assert abs(np.corrcoef(base, other)[0, 1]) < 5 / math.sqrt(n)

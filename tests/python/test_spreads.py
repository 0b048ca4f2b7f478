"""Spreads: bounds, nominal values, quantiles of the engine against closed forms, and who shares a draw."""

from __future__ import annotations

import math
from statistics import NormalDist
from typing import Any

import numpy as np
import pytest

import windage as wd
from windage._describe import fnv1a
from windage._loader import engine

P = np.array([1e-6, 0.01, 0.1, 0.25, 0.5, 0.75, 0.9, 0.99, 1 - 1e-6])
NORMAL = NormalDist()


def study(table: Any = None, correlations: Any = None, seed: int = 5, **parameters: Any) -> wd.Study:
    """A study whose parameters matter little: a short trial of a leaky integrator."""
    names = list(parameters)
    plant = wd.Plant(
        states={"level": 0.0},
        equations={"level": "flow - 0.1*level + 1e-9*(" + " + ".join(names) + ")"},
        input="flow",
        output="level",
        parameters=parameters,
    )
    loop = wd.Loop(
        plant=plant,
        controller=wd.OutputADRC(1, b0=1.0, controller_bandwidth=2.0, observer_bandwidth=10.0),
        sample_period=0.01,
        duration=0.02,
        reference=1.0,
        steps_per_sample=1,
    )
    return wd.Study(loop, [wd.peak("error") <= 2.0], seed=seed, table=table, correlations=correlations)


def drawn(trials: int, **arguments: Any) -> dict[str, np.ndarray]:
    return dict(study(**arguments).run(trials, progress=False).parameters)


def quantiles(spread: Any) -> np.ndarray:
    kind, numbers = spread._engine_form()
    described = {"name": "x", "kind": kind, "numbers": numbers, "stream": 0}
    return np.asarray(engine().spread_quantiles(described, P))


@pytest.mark.parametrize(
    ("spread", "low", "nominal", "high"),
    [
        (wd.normal(4.0, 0.5), -math.inf, 4.0, math.inf),
        (wd.normal(4.0, 0.5, sigmas=3), 2.5, 4.0, 5.5),
        (wd.normal(4.0, 0.5, low=4.2), 4.2, 4.2, math.inf),
        (wd.normal(4.0, 0.5, high=3.5), -math.inf, 3.5, 3.5),
        (wd.uniform(2.0, 3.0), 2.0, 2.5, 3.0),
        (wd.triangular(1.0, 1.5, 4.0), 1.0, 1.5, 4.0),
        (wd.lognormal(3.0, 0.2), 0.0, 3.0, math.inf),
        (wd.beta(2.0, 6.0, 10.0, 18.0), 10.0, 12.0, 18.0),
        (wd.tolerance(-200.0, percent=5), -210.0, -200.0, -190.0),
        (wd.choice([3, 1, 2], [0.2, 0.3, 0.5]), 1.0, 2.0, 3.0),
        (wd.choice([9, 1, 2], [0.0, 0.5, 0.5]), 1.0, 1.0, 2.0),
        (wd.samples([5.0, 1.0, 3.0, 4.0]), 1.0, 3.0, 5.0),
        (wd.shared("mass", wd.uniform(1.0, 3.0)), 1.0, 2.0, 3.0),
    ],
)
def test_support_and_nominal_value(spread: Any, low: float, nominal: float, high: float) -> None:
    assert (spread.low, spread.nominal, spread.high) == (low, nominal, high)


@pytest.mark.parametrize(
    ("spread", "expected"),
    [
        (wd.normal(4.0, 0.5), [4.0 + 0.5 * NORMAL.inv_cdf(p) for p in P]),
        (wd.uniform(-1.0, 3.0), -1.0 + 4.0 * P),
        # Triangular on 0, 1, 4: F(x) = x^2/4 up to 1 and 1 - (4 - x)^2/12 above.
        (wd.triangular(0.0, 1.0, 4.0), np.where(P < 0.25, np.sqrt(4.0 * P), 4.0 - np.sqrt(12.0 * (1.0 - P)))),
        (wd.lognormal(3.0, 0.2), [3.0 * math.exp(0.2 * NORMAL.inv_cdf(p)) for p in P]),
        # Beta(1, 1) is uniform, beta(2, 1) has F(x) = x^2, beta(1, 3) has F(x) = 1 - (1 - x)^3.
        (wd.beta(1.0, 1.0, 5.0, 7.0), 5.0 + 2.0 * P),
        (wd.beta(2.0, 1.0), np.sqrt(P)),
        (wd.beta(1.0, 3.0), -np.expm1(np.log1p(-P) / 3.0)),
        (wd.tolerance(100.0, percent=4), 96.0 + 8.0 * P),
        (wd.choice([7.0, 8.0, 9.0], [0.2, 0.3, 0.5]), np.where(P < 0.2, 7.0, np.where(P < 0.5, 8.0, 9.0))),
        (wd.samples([4.0, 6.0]), np.where(P < 0.5, 4.0, 6.0)),
    ],
)
def test_quantiles_match_closed_forms(spread: Any, expected: Any) -> None:
    np.testing.assert_allclose(quantiles(spread), expected, rtol=1e-10, atol=1e-12)


@pytest.mark.parametrize(
    ("spread", "low", "high"),
    [(wd.normal(1.0, 2.0, 0.5, 4.0), 0.5, 4.0), (wd.tolerance(1.0, percent=30, shape="normal"), 0.7, 1.3)],
)
def test_truncated_normal_keeps_the_shape_between_its_bounds(spread: Any, low: float, high: float) -> None:
    centre, deviation = (1.0, 2.0) if low == 0.5 else (1.0, 0.1)
    below, upto = NORMAL.cdf((low - centre) / deviation), NORMAL.cdf((high - centre) / deviation)
    expected = [centre + deviation * NORMAL.inv_cdf(below + p * (upto - below)) for p in P]
    np.testing.assert_allclose(quantiles(spread), expected, rtol=1e-8)
    assert low <= quantiles(spread).min() <= quantiles(spread).max() <= high
    assert spread._is_truncated()


def test_draws_follow_the_distribution() -> None:
    # Kolmogorov's statistic: above 1.95 / sqrt(n) with a probability of 1e-3; seed fixed.
    n = 20_000
    got = drawn(n, a=wd.uniform(2.0, 5.0), b=wd.normal(1.0, 0.1))
    for values, cdf in ((got["a"], lambda x: (x - 2.0) / 3.0), (got["b"], NormalDist(1.0, 0.1).cdf)):
        ordered = np.array([cdf(x) for x in np.sort(values)])
        distance = max(np.max(ordered - np.arange(n) / n), np.max(np.arange(1, n + 1) / n - ordered))
        assert distance < 1.95 / math.sqrt(n)


def test_a_further_spread_leaves_other_draws_as_they_are() -> None:
    alone = drawn(50, a=wd.uniform(0.0, 1.0))["a"]
    together = drawn(50, z=wd.normal(0.0, 1.0), a=wd.uniform(0.0, 1.0))["a"]
    assert np.array_equal(alone, together)


def test_places_draw_apart_unless_shared() -> None:
    spread = wd.uniform(0.0, 1.0)
    apart = drawn(50, a=spread, b=spread)
    assert set(apart) == {"a", "b"}
    assert not np.any(apart["a"] == apart["b"])
    shared = wd.shared("mass", spread)
    together = drawn(50, a=shared, b=shared, c=spread)
    assert set(together) == {"mass", "c"}


def test_shared_name_with_two_spreads_is_refused() -> None:
    a, b = wd.shared("mass", wd.uniform(0.0, 1.0)), wd.shared("mass", wd.uniform(0.0, 2.0))
    with pytest.raises(wd.DescriptionError, match=r"plant\.b: found .*same spread under the same shared name"):
        study(a=a, b=b)


def test_columns_take_their_rows() -> None:
    table = {"mass": [3.0, 1.0, 2.0], "drag": np.array([0.1, 0.2, 0.3])}
    columns = study(a=wd.column("mass"), b=wd.column("drag"), c=wd.column("mass"), table=table)
    in_order = columns.with_(table_rows="in_order")
    got = in_order.run(3, progress=False).parameters
    assert got["mass"].tolist() == [3.0, 1.0, 2.0]
    assert got["drag"].tolist() == [0.1, 0.2, 0.3]
    with pytest.raises(wd.DescriptionError, match="trials: found 4; expected at most 3, the rows"):
        in_order.run(4, progress=False)
    assert set(columns.run(100, progress=False).parameters["mass"]) == {1.0, 2.0, 3.0}
    assert columns.digest != in_order.digest
    with pytest.raises(wd.DescriptionError, match=r"study\.table_rows: found 'listed'"):
        columns.with_(table_rows="listed")


def test_columns_are_checked_where_they_stand() -> None:
    base = study(a=wd.column("period"), table={"period": [0.01, 0.02]})
    assert base.with_(sample_period=wd.column("period")).nominal().time[1] == 0.01
    bad = {"period": [0.01, -0.02]}
    with pytest.raises(wd.DescriptionError, match=r"loop\.sample_period: .*lower bound is -0\.02"):
        base.with_(sample_period=wd.column("period"), table=bad)
    with pytest.raises(wd.DescriptionError, match=r"study\.table: found 'period'"):
        base.with_(table=None)


def spearman(a: np.ndarray, b: np.ndarray) -> float:
    return float(np.corrcoef(np.argsort(np.argsort(a)), np.argsort(np.argsort(b)))[0, 1])


def test_rank_correlation_is_that_asked_for() -> None:
    n = 20_000
    spreads = {"a": wd.uniform(0.0, 1.0), "b": wd.lognormal(1.0, 0.5), "c": wd.normal(0.0, 1.0)}
    wanted = {("plant.a", "plant.b"): 0.6, ("c", "plant.b"): -0.3}
    got = drawn(n, correlations=wanted, **spreads)
    # The standard error of Spearman's correlation is at most about 1.03 / sqrt(n); four of them.
    error = 4.0 * 1.03 / math.sqrt(n)
    assert spearman(got["a"], got["b"]) == pytest.approx(0.6, abs=error)
    assert spearman(got["b"], got["c"]) == pytest.approx(-0.3, abs=error)
    assert spearman(got["a"], got["c"]) == pytest.approx(0.0, abs=error)
    assert np.mean(got["a"]) == pytest.approx(0.5, abs=4.0 / math.sqrt(12.0 * n))


def test_order_of_writing_has_no_influence_on_draws() -> None:
    a, b = wd.uniform(0.0, 1.0), wd.normal(0.0, 1.0)
    one = drawn(20, a=a, b=b, correlations={("plant.a", "plant.b"): 0.5})
    other = drawn(20, b=b, a=a, correlations={("plant.b", "plant.a"): 0.5})
    assert all(np.array_equal(one[name], other[name]) for name in ("a", "b"))


def test_contradicting_correlations_are_refused() -> None:
    spreads = {name: wd.uniform(0.0, 1.0) for name in "abc"}
    pairs = {("a", "b"): 0.9, ("b", "c"): 0.9, ("a", "c"): -0.9}
    with pytest.raises(wd.DescriptionError, match=r"study\.correlations: found a matrix|'a matrix"):
        study(correlations=pairs, **spreads)


def test_names_of_drawn_parameters() -> None:
    spread = wd.uniform(1.0, 2.0)
    named = study(a=spread, b=wd.uniform(1.0, 2.0, name="width"), status=spread)
    loop = named.loop.with_(
        controller=named.loop.controller.with_(b0=spread),
        actuator=wd.Actuator(delay=wd.uniform(0.0, 0.01), limits=(wd.uniform(-2.0, -1.0), 1.0)),
    )
    requirements = [wd.peak("error") <= spread, (wd.rms("error") <= spread).named("tight")]
    got = set(wd.Study(loop, requirements).parameters)
    assert got == {
        "a",
        "width",
        "plant.status",
        "controller.b0",
        "actuator.delay",
        "actuator.limits[0]",
        "requirements[0].limit",
        "requirements[tight].limit",
    }


def test_two_places_must_not_have_one_name() -> None:
    with pytest.raises(wd.DescriptionError, match=r"'width'.*shared\('width', \.\.\.\)"):
        study(a=wd.uniform(0.0, 1.0, name="width"), b=wd.uniform(0.0, 1.0, name="width"))


def test_streams_are_those_of_the_published_hash() -> None:
    # FNV-1a, 32 bits, test vectors of its authors (Fowler, Noll, Vo), from memory.
    assert [fnv1a(text) for text in ("", "a", "foobar")] == [0x811C9DC5, 0xE40C292C, 0xBF9CF968]


def test_spreads_print_as_the_call_that_makes_them() -> None:
    for spread in (
        wd.normal(1.0, 0.5, low=0.0),
        wd.tolerance(3.0, 5.0, "normal"),
        wd.shared("mass", wd.uniform(1.0, 2.0)),
        wd.column("mass"),
        wd.choice([1, 2], [0.5, 0.5], name="gear"),
    ):
        calls = {name: getattr(wd, name) for name in ("normal", "tolerance", "shared", "uniform", "column", "choice")}
        assert eval(repr(spread), {"__builtins__": {}}, calls) == spread


def test_equal_truncations_are_equal() -> None:
    assert wd.normal(0.0, 1.0, sigmas=3) == wd.normal(0.0, 1.0, low=-3.0, high=3.0)
    assert hash(wd.uniform(1, 2)) == hash(wd.uniform(1.0, 2.0))

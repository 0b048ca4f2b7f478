"""Spreads: quantiles against scipy.stats, drawn trials against moments and frequencies, joint draws.

Statistical checks use fixed seeds; each has a chance of failing for a right program of less than 1e-6 where
it says nothing else, but since a trial's digits are fixed it either always passes or never.
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy import stats

import windage as wd
from windage._loader import engine

Values = NDArray[np.float64]
TAILS = 10.0 ** np.arange(-12.0, -1.0)
PROBABILITIES = np.concatenate([TAILS, np.linspace(0.02, 0.98, 97), 1.0 - TAILS[::-1]])
TRIALS = 20_000


def quantiles(kind: str, numbers: list[float], p: Values = PROBABILITIES) -> Values:
    found: Values = engine().spread_quantiles({"name": "x", "kind": kind, "numbers": numbers}, p)
    return found


def test_normal() -> None:
    expected = stats.norm(2.0, 3.0).ppf(PROBABILITIES)
    np.testing.assert_allclose(quantiles("normal", [2.0, 3.0, -math.inf, math.inf]), expected, rtol=2e-15, atol=5e-15)


@pytest.mark.parametrize(
    ("low", "high"),
    [
        (-1.0, 2.0),
        (0.0, math.inf),
        (-math.inf, 0.5),
        (-3.0, 3.0),
        (-0.001, 0.001),
        (-8.0, -5.0),
        (-9.0, -6.5),
        (3.0, math.inf),
        (5.0, 8.0),
        (6.5, 9.0),
    ],
)
def test_truncated_normal(low: float, high: float) -> None:
    mean, sd = 10.0, 0.5
    p = PROBABILITIES[PROBABILITIES < 1.0 - 1e-9]
    expected = stats.truncnorm(low, high).ppf(p)
    found = quantiles("normal", [mean, sd, mean + sd * low, mean + sd * high], p)
    np.testing.assert_allclose((found - mean) / sd, expected, rtol=0.0, atol=1e-8)
    middle = (p > 0.01) & (p < 0.99)
    np.testing.assert_allclose(((found - mean) / sd)[middle], expected[middle], rtol=0.0, atol=5e-13)


@pytest.mark.parametrize(("low", "high"), [(-2.0, 5.0), (3.0, 3.0)])
def test_uniform(low: float, high: float) -> None:
    np.testing.assert_allclose(
        quantiles("uniform", [low, high]), low + PROBABILITIES * (high - low), rtol=1e-15, atol=1e-15
    )


@pytest.mark.parametrize(("low", "mode", "high"), [(0.0, 1.0, 3.0), (0.0, 0.0, 1.0), (-2.0, 5.0, 5.0)])
def test_triangular(low: float, mode: float, high: float) -> None:
    expected = stats.triang((mode - low) / (high - low), low, high - low).ppf(PROBABILITIES)
    np.testing.assert_allclose(quantiles("triangular", [low, mode, high]), expected, rtol=0.0, atol=4e-15)


@pytest.mark.parametrize("sd", [0.0, 0.1, 3.0])
def test_lognormal(sd: float) -> None:
    expected = stats.lognorm(sd, scale=2.0).ppf(PROBABILITIES) if sd else np.full(PROBABILITIES.shape, 2.0)
    np.testing.assert_allclose(quantiles("lognormal", [2.0, sd]), expected, rtol=3e-14)


@pytest.mark.parametrize(("a", "b"), [(2.0, 3.0), (0.5, 0.5), (1.0, 1.0), (0.1, 20.0), (50.0, 50.0), (300.0, 2.0)])
def test_beta(a: float, b: float) -> None:
    expected = stats.beta(a, b).ppf(PROBABILITIES)
    np.testing.assert_allclose(quantiles("beta", [a, b, 0.0, 1.0]), expected, rtol=1e-12)
    np.testing.assert_allclose(quantiles("beta", [a, b, -2.0, 6.0]), -2.0 + 8.0 * expected, rtol=0.0, atol=1e-13)


def test_choice_and_samples_are_step_functions() -> None:
    p = np.array([1e-9, 0.2499, 0.2501, 0.4999, 0.5001, 1.0 - 1e-9])
    np.testing.assert_array_equal(quantiles("choice", [7.0, 8.0, 9.0, 0.25, 0.25, 0.5], p), [7, 7, 8, 8, 9, 9])
    np.testing.assert_array_equal(quantiles("choice", [9.0, 7.0, 8.0, 0.5, 0.25, 0.25], p), [7, 7, 8, 8, 9, 9])
    np.testing.assert_array_equal(quantiles("samples", [4.0, 3.0, 1.0, 2.0], p), [1, 1, 2, 2, 3, 4])


def parameters(
    seed: int = 11,
    correlations: Any = None,
    table: Any = None,
    table_rows: str = "drawn",
    trials: int = TRIALS,
    **spreads: Any,
) -> Any:
    """Draw the parameters of a plant that does nothing with them."""
    plant = wd.Plant(
        states={"x": 0.0},
        equations={"x": "u + " + " + ".join(f"0*{name}" for name in spreads)},
        input="u",
        output="x",
        parameters=spreads,
    )
    loop = wd.Loop(
        plant=plant,
        controller=wd.OutputADRC(order=1, controller_bandwidth=1.0, observer_bandwidth=5.0, b0=1.0),
        sample_period=0.1,
        duration=0.1,
        reference=0.0,
        steps_per_sample=1,
    )
    study = wd.Study(
        loop, measures=[wd.peak("error")], seed=seed, correlations=correlations, table=table, table_rows=table_rows
    )
    return study.run(trials, progress=False).parameters


DISTRIBUTIONS = {
    "normal": (wd.normal(4200.0, 250.0), stats.norm(4200.0, 250.0)),
    "truncated": (wd.normal(1.0, 0.2, low=0.9, high=1.5), stats.truncnorm(-0.5, 2.5, 1.0, 0.2)),
    "sigmas": (wd.normal(-3.0, 0.5, sigmas=2.0), stats.truncnorm(-2.0, 2.0, -3.0, 0.5)),
    "uniform": (wd.uniform(150.0, 600.0), stats.uniform(150.0, 450.0)),
    "triangular": (wd.triangular(20.0, 60.0, 140.0), stats.triang(1.0 / 3.0, 20.0, 120.0)),
    "lognormal": (wd.lognormal(2.0, 0.4), stats.lognorm(0.4, scale=2.0)),
    "beta": (wd.beta(2.0, 5.0, 1.0, 3.0), stats.beta(2.0, 5.0, 1.0, 2.0)),
    "tolerance": (wd.tolerance(-310.0, percent=4), stats.uniform(-322.4, 24.8)),
    "tolerance_normal": (wd.tolerance(50.0, 6.0, "normal"), stats.truncnorm(-3.0, 3.0, 50.0, 1.0)),
}


def test_drawn_parameters_have_the_moments_and_the_distribution_asked_for() -> None:
    drawn = parameters(**{name: spread for name, (spread, _) in DISTRIBUTIONS.items()})
    for name, (_, law) in DISTRIBUTIONS.items():
        values = drawn[name]
        mean, variance, kurtosis = (float(m) for m in law.stats("mvk"))
        error = math.sqrt(variance / TRIALS)
        assert abs(np.mean(values) - mean) < 5.0 * error, name
        assert abs(np.var(values) / variance - 1.0) < 5.0 * math.sqrt((kurtosis + 2.0) / TRIALS), name
        # Dvoretzky, Kiefer, Wolfowitz with Massart's constant: P(sup > e) <= 2 exp(-2 n e^2) = 1e-6 (from
        # memory).
        distance = stats.kstest(values, law.cdf).statistic
        assert distance < math.sqrt(math.log(2e6) / (2.0 * TRIALS)), name
    # Parameters of different places are drawn independently.
    ranks = stats.spearmanr(np.array([drawn[name] for name in DISTRIBUTIONS]).T).statistic
    assert np.max(np.abs(ranks - np.eye(len(DISTRIBUTIONS)))) < 5.0 / math.sqrt(TRIALS)


def test_choice_and_samples_have_the_frequencies_asked_for() -> None:
    observed = [1.0, 2.0, 2.0, 5.0, 7.0]
    drawn = parameters(
        batch=wd.choice([3.0, 4.0, 9.0], [0.2, 0.5, 0.3]),
        even=wd.choice([0.0, 1.0]),
        seen=wd.samples(observed),
    )
    for name, expected in (
        ("batch", {3.0: 0.2, 4.0: 0.5, 9.0: 0.3}),
        ("even", {0.0: 0.5, 1.0: 0.5}),
        ("seen", {1.0: 0.2, 2.0: 0.4, 5.0: 0.2, 7.0: 0.2}),
    ):
        counts = [int(np.sum(drawn[name] == value)) for value in expected]
        assert sum(counts) == TRIALS
        assert stats.chisquare(counts, [TRIALS * p for p in expected.values()]).pvalue > 1e-6


@pytest.mark.parametrize("rank", [-0.8, 0.3, 0.95])
def test_rank_correlation_through_a_gaussian_copula(rank: float) -> None:
    """Spearman's rho is (6/pi) asin(r/2) (Kruskal 1958, JASA 53, 814-861, from memory)."""
    drawn = parameters(
        correlations={("inertia", "drag"): rank, ("drag", "gear"): 0.0},
        inertia=wd.normal(4200.0, 250.0),
        drag=wd.lognormal(300.0, 0.4),
        gear=wd.uniform(300.0, 320.0),
        free=wd.uniform(0.0, 1.0),
    )
    measured = stats.spearmanr(drawn["inertia"], drawn["drag"]).statistic
    assert abs(measured - rank) < 5.0 / math.sqrt(TRIALS)
    for other in ("gear", "free"):
        assert abs(stats.spearmanr(drawn["drag"], drawn[other]).statistic) < 5.0 / math.sqrt(TRIALS)
    # The copula is Gaussian: normal scores have the correlation 2 sin(pi rho/6), and each margin is left as
    # it was.
    scores = [stats.norm.ppf(stats.rankdata(drawn[n]) / (TRIALS + 1)) for n in ("inertia", "drag")]
    pearson = np.corrcoef(scores)[0, 1]
    assert abs(pearson - 2.0 * math.sin(math.pi * rank / 6.0)) < 5.0 / math.sqrt(TRIALS)
    assert stats.kstest(drawn["drag"], stats.lognorm(0.4, scale=300.0).cdf).pvalue > 1e-6
    assert stats.kstest(drawn["inertia"], stats.norm(4200.0, 250.0).cdf).pvalue > 1e-6


def test_three_correlated_parameters_keep_every_pair() -> None:
    wanted = {("a", "b"): 0.6, ("b", "c"): -0.4, ("a", "c"): 0.2}
    drawn = parameters(correlations=wanted, a=wd.uniform(0, 1), b=wd.beta(2, 2), c=wd.triangular(0, 1, 4))
    for (first, second), rank in wanted.items():
        assert abs(stats.spearmanr(drawn[first], drawn[second]).statistic - rank) < 5.0 / math.sqrt(TRIALS)


def test_adding_a_correlation_or_a_spread_leaves_other_draws_as_they_are() -> None:
    one = parameters(trials=50, a=wd.uniform(0, 1), b=wd.normal(0, 1))
    more = parameters(trials=50, z=wd.uniform(0, 1), a=wd.uniform(0, 1), b=wd.normal(0, 1), c=wd.beta(2, 2))
    tied = parameters(trials=50, correlations={("b", "c"): 0.5}, a=wd.uniform(0, 1), b=wd.normal(0, 1), c=wd.beta(2, 2))
    for name in ("a", "b"):
        np.testing.assert_array_equal(one[name], more[name])
    np.testing.assert_array_equal(one["a"], tied["a"])
    assert not np.array_equal(more["c"], tied["c"]) or not np.array_equal(more["b"], tied["b"])


def test_a_shared_parameter_has_one_value_at_all_its_places() -> None:
    mass = wd.shared("mass", wd.uniform(1.0, 3.0))
    plant = wd.Plant(states={"x": mass}, equations={"x": "0*u + 0*m"}, input="u", output="x", parameters={"m": mass})
    loop = wd.Loop(
        plant=plant,
        controller=wd.OutputADRC(order=1, controller_bandwidth=1.0, observer_bandwidth=5.0, b0=mass),
        sample_period=0.1,
        duration=0.1,
        reference=0.0,
        signals={"difference": "x - m"},
    )
    measures = [wd.peak("difference"), wd.maximum("output")]
    outcome = wd.Study(loop, measures=measures, seed=2).run(300, progress=False)
    assert list(outcome.parameters) == ["mass"]
    difference, start = outcome.measures.values()
    np.testing.assert_array_equal(difference, 0.0)
    np.testing.assert_array_equal(start, outcome.parameters["mass"])
    assert len(set(start)) == 300


def test_rows_of_a_table_stay_together() -> None:
    rng = np.random.default_rng(3)
    table = {"stiffness": rng.normal(size=40).tolist(), "inertia": rng.normal(size=40).tolist()}
    columns = {"a": wd.column("stiffness"), "b": wd.column("inertia"), "c": wd.column("stiffness")}
    listed = parameters(trials=40, table=table, table_rows="in_order", **columns)
    np.testing.assert_array_equal(listed["stiffness"], table["stiffness"])
    np.testing.assert_array_equal(listed["inertia"], table["inertia"])
    drawn = parameters(table=table, **columns)
    rows = [table["stiffness"].index(value) for value in drawn["stiffness"]]
    np.testing.assert_array_equal(drawn["inertia"], np.array(table["inertia"])[rows])
    # Each row is equally likely, whatever stands before it, and one trial's row tells nothing of the next one's.
    assert stats.chisquare(np.bincount(rows, minlength=40)).pvalue > 1e-6
    assert abs(np.corrcoef(rows[1:], rows[:-1])[0, 1]) < 5.0 / math.sqrt(TRIALS)

"""Rank correlations with listed values: the sign and size asked for, whatever the order of listing."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from scipy import integrate, stats

import windage as wd

TRIALS = 20_000
RANK = 0.8
LISTED = np.random.default_rng(0).permutation(np.linspace(1.0, 2.0, 100))


def parameters(correlations: Any, trials: int = TRIALS, **spreads: Any) -> Any:
    """Draw the parameters of a plant that does nothing with them."""
    plant = wd.Plant(states={"x": 0.0}, equations={"x": "u + 0*a + 0*b"}, input="u", output="x", parameters=spreads)
    loop = wd.Loop(
        plant=plant,
        controller=wd.OutputADRC(order=1, controller_bandwidth=1.0, observer_bandwidth=5.0, b0=1.0),
        sample_period=0.1,
        duration=0.1,
        reference=0.0,
        steps_per_sample=1,
    )
    study = wd.Study(loop, measures=[wd.peak("error")], seed=11, correlations=correlations)
    return study.run(trials, progress=False).parameters


def expected_spearman(probabilities: list[float]) -> float:
    """Spearman's correlation of a listed and a uniform number under a Gaussian copula, ties at their mean rank.

    By quadrature over the normal score z behind the listed number: given z, the other score is normal with mean r z
    and variance 1 - r^2, so that its rank is Phi(r z / sqrt(2 - r^2)) on average. Spearman's correlation is Pearson's
    of the mean ranks; that of the uniform one has the variance 1/12.
    """
    r = 2.0 * np.sin(np.pi * RANK / 6.0)
    sums = np.concatenate([[0.0], np.cumsum(probabilities)])
    ranks = 0.5 * (sums[1:] + sums[:-1])
    edges = stats.norm.ppf(np.clip(sums, 1e-15, 1.0 - 1e-15))
    product = sum(
        rank * integrate.quad(lambda z: stats.norm.pdf(z) * stats.norm.cdf(r * z / np.sqrt(2.0 - r * r)), a, b)[0]
        for rank, a, b in zip(ranks, edges[:-1], edges[1:], strict=True)
    )
    variance = float(np.dot(probabilities, (ranks - 0.5) ** 2))
    return float((product - 0.25) / np.sqrt(variance / 12.0))


@pytest.mark.parametrize(
    ("spread", "probabilities"),
    [
        (wd.samples(np.sort(LISTED)), [1e-2] * 100),
        (wd.samples(np.sort(LISTED)[::-1]), [1e-2] * 100),
        (wd.samples(LISTED), [1e-2] * 100),
        (wd.samples([2.0, 1.0, 2.0, 3.0]), [0.25, 0.5, 0.25]),
        (wd.choice([3.0, 2.0, 1.0]), [1 / 3] * 3),
        (wd.choice([2.0, 3.0, 1.0], [0.1, 0.7, 0.2]), [0.2, 0.1, 0.7]),
        (wd.choice([5.0, 4.0], [0.05, 0.95]), [0.95, 0.05]),
    ],
)
def test_rank_correlation_with_listed_values_is_that_asked_for_but_for_ties(
    spread: Any, probabilities: list[float]
) -> None:
    drawn = parameters(correlations={("a", "b"): RANK}, a=spread, b=wd.uniform(0.0, 1.0))
    found = stats.spearmanr(drawn["a"], drawn["b"]).statistic
    wanted = expected_spearman(probabilities)
    assert abs(found - wanted) < 5.0 / np.sqrt(TRIALS)
    assert wanted > 0.3  # the sign that was asked for, and much of its size
    if len(probabilities) == 100:
        assert wanted == pytest.approx(RANK, abs=1e-3)


@pytest.mark.parametrize(
    ("one", "other"),
    [
        (wd.samples([3.0, 1.0, 2.0, 0.0]), wd.samples([-0.0, 1.0, 2.0, 3.0])),
        (wd.choice([3.0, 1.0, 2.0]), wd.choice([1.0, 2.0, 3.0])),
        (wd.choice([3.0, 1.0, 2.0], [0.1, 0.7, 0.2]), wd.choice([1.0, 2.0, 3.0], [0.7, 0.2, 0.1])),
        (wd.choice([3.0, 1.0, 2.0, 9.0], [0.1, 0.7, 0.2, 0.0]), wd.choice([1.0, 2.0, 3.0], [0.7, 0.2, 0.1])),
    ],
)
def test_the_same_values_listed_in_another_order_give_the_same_digits(one: Any, other: Any) -> None:
    for correlations in (None, {("a", "b"): -0.5}):
        first, second = (
            parameters(trials=300, correlations=correlations, a=spread, b=wd.normal(0.0, 1.0))
            for spread in (one, other)
        )
        for name in ("a", "b"):
            assert first[name].tobytes() == second[name].tobytes()

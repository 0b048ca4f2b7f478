"""The guarantees of bounds and verdicts, proved by enumeration of every outcome rather than assumed.

A number of trials N has N + 1 possible counts of failures. For any true pass probability the chance of each
is known, so the coverage of a bound and the error rate of a verdict are finite sums, taken at their worst.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
import pytest
from scipy import stats

from windage._evidence import (
    Method,
    Side,
    chance_of_pass,
    failures_allowed,
    pass_probability_bounds,
    tolerance_bound,
)
from windage._verdict import judge, judge_many

Array = npt.NDArray[np.float64]

ROUNDING = 1e-9


def _bounds(trials: int, confidence: float, method: Method, side: Side) -> tuple[Array, Array]:
    """Lower and upper bound for each count of failures from 0 to trials."""
    found = [pass_probability_bounds(k, trials, confidence, method, side) for k in range(trials + 1)]
    return np.array([b.lower for b in found]), np.array([b.upper for b in found])


def _coverage(trials: int, lower: Array, upper: Array) -> Array:
    """Chance that the bounds enclose the pass probability, on a grid that holds the worst points.

    Coverage changes only where the probability crosses a bound, so both sides of every bound are in the grid.
    """
    ends = np.concatenate([lower, upper])
    ends = ends[(ends > 0) & (ends < 1)]
    grid = np.concatenate([np.linspace(0.001, 0.999, 199), ends, np.nextafter(ends, 0), np.nextafter(ends, 1)])
    chance = stats.binom.pmf(np.arange(trials + 1), trials, 1 - grid[:, None])
    covered = (lower <= grid[:, None]) & (grid[:, None] <= upper)
    return np.asarray(np.sum(chance * covered, axis=1), dtype=np.float64)


@pytest.mark.parametrize("trials", [1, 5, 20, 59, 200])
@pytest.mark.parametrize("confidence", [0.8, 0.9, 0.95, 0.99])
@pytest.mark.parametrize("side", ["lower", "upper"])
def test_one_sided_clopper_pearson_covers_exactly_the_nominal_confidence_at_worst(
    trials: int, confidence: float, side: Side
) -> None:
    # Clopper & Pearson 1934, Biometrika 26:404. The worst case attains the confidence: the bound is not
    # wasteful.
    worst = _coverage(trials, *_bounds(trials, confidence, "clopper-pearson", side)).min()
    assert worst == pytest.approx(confidence, abs=ROUNDING)


@pytest.mark.parametrize("trials", [1, 5, 20, 59, 200])
@pytest.mark.parametrize("confidence", [0.8, 0.9, 0.95, 0.99])
def test_two_sided_clopper_pearson_covers_at_least_the_nominal_confidence(trials: int, confidence: float) -> None:
    coverage = _coverage(trials, *_bounds(trials, confidence, "clopper-pearson", "two-sided"))
    assert coverage.min() >= confidence - ROUNDING


@pytest.mark.parametrize("method", ["wilson", "jeffreys"])
def test_the_display_methods_do_not_guarantee_their_confidence(method: Method) -> None:
    # Brown, Cai & DasGupta 2001, Stat. Sci. 16:101-133: both hold on average only, which is why no verdict
    # uses them.
    one_sided = _coverage(59, *_bounds(59, 0.95, method, "lower"))
    two_sided = _coverage(59, *_bounds(59, 0.95, method, "two-sided"))
    assert one_sided.min() < 0.95 - 0.01
    assert two_sided.min() < 0.95 - 0.01
    assert two_sided[:199].mean() == pytest.approx(0.95, abs=0.01)


CLAIMS = [
    (59, 0.95, 0.95),
    (300, 0.99, 0.95),
    (473, 0.99, 0.95),
    (1000, 0.97, 0.9),
    (40, 0.5, 0.75),
    (64, 0.9, 0.5),
]


@pytest.mark.parametrize(("trials", "at_least", "confidence"), CLAIMS)
def test_a_verdict_is_wrong_with_at_most_the_stated_risk(trials: int, at_least: float, confidence: float) -> None:
    verdicts = [judge(k, trials, 0, at_least, confidence).decision for k in range(trials + 1)]
    failures = np.arange(trials + 1)
    passed = np.array([decision == "pass" for decision in verdicts])
    failed = np.array([decision == "fail" for decision in verdicts])

    def chance(where: npt.NDArray[np.bool_], true_probability: float) -> float:
        return float(np.sum(stats.binom.pmf(failures[where], trials, 1 - true_probability)))

    risk = 1 - confidence
    below = [np.nextafter(at_least, 0), at_least - 1e-6, at_least - 1e-3, at_least - 0.02]
    above = [at_least, at_least + 1e-6, at_least + 1e-3, at_least + (1 - at_least) / 2]
    assert all(chance(passed, p) <= risk + ROUNDING for p in below)
    assert all(chance(failed, p) <= risk + ROUNDING for p in above)
    # Neither test is idle: the claim can be shown and, where the limit leaves room, refuted.
    assert chance(passed, 1.0) == 1.0
    assert chance(failed, 0.0) == 1.0
    # One failure more would be one too many: the pass rule is as permissive as the risk allows.
    more = passed | (failures == failures[passed].max() + 1)
    assert chance(more, at_least) > risk


@pytest.mark.parametrize("family", [1, 3, 20])
def test_corrected_verdicts_are_all_right_together_at_the_stated_confidence(family: int) -> None:
    # Bonferroni (Dunn 1961). Independent requirements, each just below its limit, are near the worst case.
    trials, at_least, confidence = 500, 0.98, 0.95
    names = [f"requirement {i}" for i in range(family)]
    wrong = 0.0
    for k in range(trials + 1):
        table = judge_many(dict.fromkeys(names, k), trials, 0, at_least, confidence)
        assert len({verdict.decision for verdict in table}) == 1
        if table[0].decision == "pass":
            wrong += float(stats.binom.pmf(k, trials, 1 - at_least))
    assert 0.0 < wrong <= (1 - confidence) / family + ROUNDING
    assert 1 - (1 - wrong) ** family <= 1 - confidence + ROUNDING


@pytest.mark.parametrize("trials", [59, 93, 300, 5000])
@pytest.mark.parametrize(("content", "confidence"), [(0.95, 0.95), (0.9, 0.99), (0.5, 0.8)])
def test_the_tolerance_rank_is_the_lowest_that_keeps_the_confidence(
    trials: int, content: float, confidence: float
) -> None:
    # The content below the value at rank r is Beta(r, n - r + 1) distributed, whatever the distribution of
    # the values: Wilks 1941, Ann. Math. Stat. 12:91-96.
    bound = tolerance_bound(np.arange(1.0, trials + 1), content, confidence)
    attained = stats.beta.sf(content, bound.rank, trials - bound.rank + 1)
    assert bound.attained_confidence == pytest.approx(attained, rel=1e-9)
    assert attained >= confidence
    assert stats.beta.sf(content, bound.rank - 1, trials - bound.rank + 2) < confidence


def test_tolerance_bounds_of_a_heavy_tailed_measure_hold_as_often_as_promised() -> None:
    # Fixed seed; 4 000 repetitions. A right implementation fails with a chance below 1e-5 (4.3 standard
    # deviations).
    repetitions, trials, content = 4000, 93, 0.95
    values = np.random.default_rng(20260101).standard_cauchy((repetitions, trials))
    bounds = [tolerance_bound(row, content, 0.95) for row in values]
    hits = np.mean([bound.value >= stats.cauchy.ppf(content) for bound in bounds])
    attained = bounds[0].attained_confidence
    assert hits == pytest.approx(attained, abs=4.3 * np.sqrt(attained * (1 - attained) / repetitions))


# The peeking experiment: 48 looks, every 100 trials from 300 to 5000, at an ordinary one-sided 95 % bound,
# while the true pass probability is the limit, 0.99. An independent simulation gave 20.8 % false accepts, and
# 4.9 % for a single look at 5000 (computed; its number of repetitions is not stated).
LOOKS = np.arange(300, 5001, 100)
LIMIT, CONFIDENCE = 0.99, 0.95
SIMULATED_ELSEWHERE, SINGLE_LOOK_ELSEWHERE = 0.208, 0.049


def _false_accepts_by_enumeration() -> float:
    """Carry the distribution of the failures among designs not yet accepted from look to look, exactly."""
    allowed = [failures_allowed(int(trials), LIMIT, CONFIDENCE) for trials in LOOKS]
    most = 300
    undecided = stats.binom.pmf(np.arange(most), LOOKS[0], 1 - LIMIT)
    step = stats.binom.pmf(np.arange(101), 100, 1 - LIMIT)
    accepted = 0.0
    for look, limit in enumerate(allowed):
        if look:
            undecided = np.convolve(undecided, step)[:most]
        if limit is not None:
            accepted += float(np.sum(undecided[: limit + 1]))
            undecided[: limit + 1] = 0.0
    assert accepted + float(np.sum(undecided)) == pytest.approx(1.0, abs=ROUNDING)
    return accepted


def test_peeking_accepts_a_marginal_design_four_times_too_often() -> None:
    accepted = _false_accepts_by_enumeration()
    assert accepted > 4 * (1 - CONFIDENCE)
    single = chance_of_pass(5000, LIMIT, CONFIDENCE, true_pass_probability=LIMIT)
    assert single <= 1 - CONFIDENCE
    # The other program drew designs at random, so its numbers scatter about ours.
    assert accepted == pytest.approx(SIMULATED_ELSEWHERE, abs=0.01)
    assert single == pytest.approx(SINGLE_LOOK_ELSEWHERE, abs=0.005)


def test_peeking_in_a_simulation_with_verdicts_as_a_user_would_ask_for_them() -> None:
    # Fixed seed, 20 000 designs; within 4.3 standard deviations of the enumeration.
    designs = 20_000
    steps = np.concatenate([LOOKS[:1], np.diff(LOOKS)])
    failures = np.random.default_rng(7).binomial(steps, 1 - LIMIT, size=(designs, len(LOOKS))).cumsum(axis=1)
    accepted = np.zeros(failures.shape, dtype=bool)
    for look, trials in enumerate(LOOKS):
        for k in np.unique(failures[:, look]):
            verdict = judge(int(k), int(trials), 0, LIMIT, CONFIDENCE, looks=look + 1)
            accepted[failures[:, look] == k, look] = verdict.decision == "pass"
    expected = _false_accepts_by_enumeration()
    spread = np.sqrt(expected * (1 - expected) / designs)
    assert accepted.any(axis=1).mean() == pytest.approx(expected, abs=4.3 * spread)
    assert accepted[:, -1].mean() < 1 - CONFIDENCE + 4.3 * np.sqrt(0.05 * 0.95 / designs)


def test_a_verdict_on_repeated_looks_says_that_the_confidence_is_void() -> None:
    once, again = judge(0, 5000, 0, 0.99, 0.95), judge(0, 5000, 0, 0.99, 0.95, looks=48)
    assert "does not keep the confidence" not in str(once).replace("\n", " ")
    assert "judged 48 times" in str(again)
    assert "does not keep the confidence" in " ".join(str(again).split())

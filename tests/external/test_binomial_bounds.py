"""Binomial bounds, numbers of trials and order statistics against published values and against SciPy.

Each table names its source. Values marked "computed" or "from memory" in the comment beside them have no
printed number behind them that was read: they are regression values from independent programs.
"""

from __future__ import annotations

import math
from decimal import Decimal, localcontext
from typing import Literal

import numpy as np
import pytest
from scipy import stats

from windage import _statistics
from windage._errors import DescriptionError
from windage._evidence import (
    Method,
    chance_of_pass,
    failures_allowed,
    pass_probability_bounds,
    tolerance_bound,
    trials_for_accuracy,
    trials_needed,
)

# Hanson & Beard 2010, "Applying Monte Carlo Simulation to Launch Vehicle Design and Requirements Analysis",
# NASA/TP-2010-216447 (also J. Spacecr. Rockets 49(1), 2012). 1705 is from memory, recomputed; the others are
# computed.
HANSON_BEARD = [
    (0.99865, 0.90, [1705, 2880, 3941, 4947, 5920, 6868, 7800, 8717, 9624, 10521, 11410]),
    (0.99865, 0.50, [514, 1243, 1981, 2720, 3460, 4200, 4941, 5681, 6422, 7162, 7903]),
    (0.99865, 0.95, [2218, 3513, 4662, 5742, 6778, 7785]),
    (0.99, 0.90, [230, 388, 531, 667, 798, 926]),
    (0.99, 0.95, [299, 473, 628, 773, 913, 1049]),
    (0.95, 0.95, [59, 93, 124, 153, 181, 208]),
]


@pytest.mark.parametrize(("at_least", "confidence", "numbers"), HANSON_BEARD)
def test_trials_needed_match_the_launch_vehicle_table(at_least: float, confidence: float, numbers: list[int]) -> None:
    assert [trials_needed(at_least, confidence, k) for k in range(len(numbers))] == numbers


# Computed by an independent program from the definition; failures allowed 0, 1, 2, 3, 5, 10.
PLANNING_TABLE = [
    (0.90, 0.90, [22, 38, 52, 65, 91, 152]),
    (0.95, 0.95, [59, 93, 124, 153, 208, 336]),
    (0.99, 0.90, [230, 388, 531, 667, 926, 1538]),
    (0.99, 0.95, [299, 473, 628, 773, 1049, 1693]),
    (0.9973, 0.90, [852, 1440, 1970, 2473, 3433, 5704]),
    (0.99865, 0.90, [1705, 2880, 3941, 4947, 6868, 11410]),
    (0.99865, 0.95, [2218, 3513, 4662, 5742, 7785, 12562]),
    (0.999, 0.95, [2995, 4742, 6294, 7752, 10511, 16959]),
    (0.9999, 0.90, [23025, 38896, 53222, 66806, 92745, 154064]),
    (0.99999, 0.90, [230258, 388971, 532231, 668077, 927466, 1540662]),
]


@pytest.mark.parametrize(("at_least", "confidence", "numbers"), PLANNING_TABLE)
def test_trials_needed_match_the_planning_table(at_least: float, confidence: float, numbers: list[int]) -> None:
    assert [trials_needed(at_least, confidence, k) for k in (0, 1, 2, 3, 5, 10)] == numbers


def test_a_half_probability_table_means_more_than_five_events_not_at_least_five() -> None:
    # Boost.Math documentation, negative_binomial_example.qbk: the row for p = 0.5 is headed "at least 5
    # failures" but holds the numbers for more than 5. Both rows recomputed. The first entry of each holds
    # with equality.
    levels = [0.5, 0.75, 0.9, 0.95, 0.99, 0.999, 0.9999, 0.99999]
    more_than_five = [11, 14, 17, 18, 22, 27, 31, 36]
    at_least_five = [9, 12, 14, 16, 19, 24, 28, 32]
    assert [trials_needed(0.5, level, 5) for level in levels] == more_than_five
    assert [trials_needed(0.5, level, 4) for level in levels] == at_least_five


def test_failure_fractions_with_allowed_failures() -> None:
    # Acceptance numbers 0, 1, 2, 5 at risk 0.05, transcribed second-hand and recomputed.
    published = {0.95: (59, 93, 124, 208), 0.98: (149, 236, 313, 523), 0.99: (299, 473, 628, 1049)}
    for at_least, numbers in published.items():
        assert tuple(trials_needed(at_least, 0.95, k) for k in (0, 1, 2, 5)) == numbers


# Wilks 1941, "Determination of sample sizes for setting tolerance limits", Ann. Math. Stat. 12:91-96; ISO
# 16269-6. Formulas published; numbers computed.
WILKS = [
    (0.90, 0.99, 44, 64),
    (0.95, 0.95, 59, 93),
    (0.95, 0.99, 90, 130),
    (0.99, 0.90, 230, 388),
    (0.99, 0.95, 299, 473),
    (0.99, 0.99, 459, 662),
    (0.999, 0.95, 2995, 4742),
]


@pytest.mark.parametrize(("content", "confidence", "one_sided", "two_sided"), WILKS)
def test_wilks_numbers(content: float, confidence: float, one_sided: int, two_sided: int) -> None:
    assert _statistics.wilks_one_sided(content, confidence) == one_sided
    assert _statistics.wilks_two_sided(content, confidence) == two_sided
    # The two-sided number is the smallest that satisfies Wilks' formula.
    for n, enough in ((two_sided, True), (two_sided - 1, False)):
        formula = 1 - content**n - n * (1 - content) * content ** (n - 1)
        assert (formula >= confidence) is enough


def test_wilks_orders_at_95_95() -> None:
    # Orders 1 to 5, transcribed second-hand, recomputed.
    assert [_statistics.wilks_one_sided(0.95, 0.95, k) for k in (1, 2, 3, 4, 5)] == [59, 93, 124, 153, 181]


def test_order_statistic_bounds_at_95_95() -> None:
    # The maximum of 59 values and the second largest of 93 (Wilks 1941; numbers computed).
    values = np.random.default_rng(1).permutation(np.arange(1.0, 94.0))
    second = tolerance_bound(values, content=0.95, confidence=0.95)
    assert (second.value, second.rank, second.trials) == (92.0, 92, 93)
    largest = tolerance_bound(values[:59], content=0.95, confidence=0.95)
    assert (largest.value, largest.rank) == (values[:59].max(), 59)
    assert largest.attained_confidence == pytest.approx(1 - 0.95**59, rel=1e-14)
    with pytest.raises(DescriptionError, match=r"values: found 58; expected at least 59 trials"):
        tolerance_bound(values[:58], content=0.95, confidence=0.95)


# Boost.Math documentation, doc/distributions/binomial_example.qbk (commit 4b1f2de5), 4 of 20 and 400 of 2000
# successes: two-sided Clopper-Pearson and Jeffreys limits, printed to five decimals. Older versions of that
# page print wrong lower limits for 2 of 20; see the test after this one.
BOOST_LIMITS = [
    (4, 20, 0.50, 0.12840, 0.29588, 0.14974, 0.26916),
    (4, 20, 0.75, 0.09775, 0.34633, 0.11653, 0.31861),
    (4, 20, 0.90, 0.07135, 0.40103, 0.08734, 0.37274),
    (4, 20, 0.95, 0.05733, 0.43661, 0.07152, 0.40823),
    (4, 20, 0.99, 0.03576, 0.50661, 0.04655, 0.47859),
    (4, 20, 0.999, 0.01905, 0.58632, 0.02634, 0.55960),
    (4, 20, 0.9999, 0.01042, 0.64997, 0.01530, 0.62495),
    (4, 20, 0.99999, 0.00577, 0.70216, 0.00901, 0.67897),
    (400, 2000, 0.90, 0.18537, 0.21528, 0.18561, 0.21503),
    (400, 2000, 0.95, 0.18267, 0.21821, 0.18291, 0.21796),
    (400, 2000, 0.99, 0.17745, 0.22400, 0.17769, 0.22374),
    (400, 2000, 0.999, 0.17150, 0.23079, 0.17173, 0.23053),
]
HALF_OF_FIVE_DECIMALS = 0.5e-5 * (1 + 1e-9)


@pytest.mark.parametrize(("passes", "trials", "confidence", "cp_low", "cp_high", "j_low", "j_high"), BOOST_LIMITS)
def test_clopper_pearson_and_jeffreys_intervals_match_the_printed_table(
    passes: int, trials: int, confidence: float, cp_low: float, cp_high: float, j_low: float, j_high: float
) -> None:
    exact = pass_probability_bounds(trials - passes, trials, confidence, side="two-sided")
    jeffreys = pass_probability_bounds(trials - passes, trials, confidence, "jeffreys", "two-sided")
    found = [exact.lower, exact.upper, jeffreys.lower, jeffreys.upper]
    assert found == pytest.approx([cp_low, cp_high, j_low, j_high], abs=HALF_OF_FIVE_DECIMALS)


def test_two_of_twenty_does_not_give_the_misprinted_limit() -> None:
    # Older Boost.Math documentation prints (0.03207, 0.31698); Clopper-Pearson is (0.01235, 0.31698),
    # recomputed.
    found = pass_probability_bounds(18, 20, 0.95, side="two-sided")
    assert (found.lower, found.upper) == pytest.approx((0.01235, 0.31698), abs=HALF_OF_FIVE_DECIMALS)
    assert abs(found.lower - 0.03207) > 0.01


def test_thirteen_of_sixteen() -> None:
    # Tests of the R package contingencytables (methods of Fagerland, Lydersen & Laake), 95 %.
    found = pass_probability_bounds(3, 16, 0.95, side="two-sided")
    assert (found.lower, found.upper) == pytest.approx((0.5435, 0.9595), abs=0.5e-4)


# The cases of Newcombe 1998, "Two-sided confidence intervals for the single proportion", Stat. Med.
# 17:857-872, at 95 %; digits computed. The Wilson upper limit of 1 in 29 is 0.171755219 by the formula in
# 30-digit arithmetic.
NEWCOMBE = [
    ("clopper-pearson", 81, 263, 0.25273675, 0.36762192, 0.5e-8),
    ("clopper-pearson", 15, 148, 0.05784401, 0.16165049, 0.5e-8),
    ("clopper-pearson", 0, 20, 0.0, 0.16843347, 0.5e-8),
    ("clopper-pearson", 1, 29, 0.00087265, 0.17764430, 0.5e-8),
    ("wilson", 81, 263, 0.25528852, 0.36620958, 0.5e-8),
    ("wilson", 15, 148, 0.06238640, 0.16048724, 0.5e-8),
    ("wilson", 0, 20, 0.0, 0.16112516, 0.5e-8),
    ("wilson", 1, 29, 0.00611321, 0.17175522, 0.5e-8),
    ("wilson", 48, 60, 0.68218, 0.88171, 0.5e-5),
    ("wilson", 160, 200, 0.73914, 0.84955, 0.5e-5),
]


@pytest.mark.parametrize(("method", "passes", "trials", "low", "high", "tolerance"), NEWCOMBE)
def test_newcombe_cases(method: Method, passes: int, trials: int, low: float, high: float, tolerance: float) -> None:
    found = pass_probability_bounds(trials - passes, trials, 0.95, method, "two-sided")
    assert (found.lower, found.upper) == pytest.approx((low, high), abs=tolerance * (1 + 1e-6))


def test_reference_bounds_of_failure_and_pass_probability() -> None:
    # Computed by an independent program, printed to three or four digits.
    def failure_upper(failures: int, trials: int) -> float:
        return pass_probability_bounds(failures, trials, 0.90).failure_upper

    assert failure_upper(0, 2000) == pytest.approx(1.151e-3, abs=0.5e-6)
    assert failure_upper(2, 2000) == pytest.approx(2.66e-3, abs=0.5e-5)
    assert failure_upper(20, 10000) == pytest.approx(2.704e-3, abs=0.5e-6)
    both = pass_probability_bounds(5, 2000, 0.95, side="two-sided")
    assert (both.failure_lower, both.failure_upper) == pytest.approx((8.12e-4, 5.82e-3), rel=1e-3)
    both = pass_probability_bounds(2, 2000, 0.95, side="two-sided")
    assert (both.failure_lower, both.failure_upper) == pytest.approx((1.21e-4, 3.61e-3), rel=2e-3)
    both = pass_probability_bounds(2, 2000, 0.95, "wilson", "two-sided")
    assert (both.failure_lower, both.failure_upper) == pytest.approx((2.74e-4, 3.64e-3), rel=2e-3)
    lower = {0: 0.99942, 3: 0.99833, 13: 0.99526, 32: 0.98988}
    for failures, printed in lower.items():
        assert pass_probability_bounds(failures, 4000, 0.90).lower == pytest.approx(printed, abs=0.5e-5)


def test_most_trials_without_an_event() -> None:
    # Boost.Math documentation, binomial_example.qbk. For p = 0.001 at 99.9 % that page prints 0; in real
    # numbers one trial meets the level with equality.
    levels = [0.50, 0.75, 0.90, 0.95, 0.99, 0.999, 0.9999, 0.99999]
    at_thousandth = [_statistics.trials_with_at_most(0, 0.001, level) for level in levels[:6]]
    assert at_thousandth == [692, 287, 105, 51, 10, 1]
    at_millionth = [_statistics.trials_with_at_most(0, 1e-6, level) for level in levels]
    assert at_millionth == [693146, 287681, 105360, 51293, 10050, 1000, 100, 10]


# Chernoff (Okamoto, Hoeffding) and log-over-log numbers: Tempo, Bai & Dabbene 1997, Syst. Control Lett.
# 30:237-242, and Tempo, Calafiore & Dabbene, "Randomized Algorithms for Analysis and Control of Uncertain
# Systems". Formulas from memory, numbers computed.
A_PRIORI = [
    (0.1, 0.1, 150, None),
    (0.1, 0.05, 185, None),
    (0.05, 0.05, 738, 59),
    (0.05, 0.01, 1060, 90),
    (0.02, 0.05, 4612, 149),
    (0.02, 0.01, 6623, 228),
    (0.01, 0.05, 18445, 299),
    (0.01, 0.01, 26492, 459),
    (0.01, 0.001, 38005, 688),
    (0.005, 0.05, 73778, 598),
    (0.005, 0.01, 105967, 919),
    (0.005, 0.005, 119830, 1058),
    (0.005, 0.001, 152019, 1379),
    (0.001, 0.05, 1844440, 2995),
    (0.001, 0.01, 2649159, 4603),
    (0.001, 0.001, 3800452, 6905),
]


@pytest.mark.parametrize(("accuracy", "risk", "chernoff", "log_over_log"), A_PRIORI)
def test_a_priori_numbers(accuracy: float, risk: float, chernoff: int, log_over_log: int | None) -> None:
    assert trials_for_accuracy(accuracy, 1 - risk) == chernoff
    if log_over_log is not None:
        assert _statistics.log_over_log_trials(accuracy, 1 - risk) == log_over_log


def _exact_tail_at_most(events: int, trials: int, probability: Decimal) -> Decimal:
    """Sum the binomial probabilities of 0..events in decimal arithmetic of 60 digits."""
    term = (1 - probability) ** trials
    total = term
    for k in range(events):
        term = term * (trials - k) / (k + 1) * probability / (1 - probability)
        total += term
    return total


@pytest.mark.parametrize(
    ("at_least", "confidence", "allowed"),
    [
        ("0.99999999", "0.9", 0),
        ("0.99999999", "0.95", 3),
        ("0.99999999", "0.9", 1000),
        ("0.9999", "0.999", 200),
        ("0.75", "0.99", 1000),
        ("0.9", "0.271", 0),
    ],
)
def test_trials_needed_is_the_smallest_number_in_sixty_digit_arithmetic(
    at_least: str, confidence: str, allowed: int
) -> None:
    found = trials_needed(float(at_least), float(confidence), allowed)
    with localcontext() as context:
        context.prec = 60
        limit, risk = 1 - Decimal(at_least), 1 - Decimal(confidence)
        assert _exact_tail_at_most(allowed, found, limit) <= risk
        assert _exact_tail_at_most(allowed, found - 1, limit) > risk


CASES = [(k, n) for n in (1, 2, 7, 40, 1000, 10**6, 10**10) for k in (0, 1, 2, n // 3, n - 1, n) if 0 <= k <= n]


@pytest.mark.parametrize(("failures", "trials"), CASES)
@pytest.mark.parametrize("confidence", [0.5, 0.9, 0.95, 0.9999])
def test_bounds_agree_with_scipy_beta_quantiles(failures: int, trials: int, confidence: float) -> None:
    passes, risk = trials - failures, _statistics.complement(confidence)
    low = stats.beta.ppf(risk, passes, failures + 1) if passes else 0.0
    high = stats.beta.isf(risk, passes + 1, failures) if failures else 1.0
    failure_high = stats.beta.isf(risk, failures + 1, passes) if passes else 1.0
    lower = pass_probability_bounds(failures, trials, confidence, side="lower")
    upper = pass_probability_bounds(failures, trials, confidence, side="upper")
    assert lower.lower == pytest.approx(low, rel=1e-11)
    assert upper.upper == pytest.approx(high, rel=1e-11)
    assert lower.failure_upper == pytest.approx(failure_high, rel=1e-11)
    jeffreys = pass_probability_bounds(failures, trials, confidence, "jeffreys", "lower")
    assert jeffreys.lower == pytest.approx(
        stats.beta.ppf(risk, passes + 0.5, failures + 0.5) if passes else 0.0, rel=1e-11
    )


@pytest.mark.parametrize(("failures", "trials"), [case for case in CASES if case[1] <= 10**6])
def test_two_sided_intervals_agree_with_scipy_binomtest(failures: int, trials: int) -> None:
    test = stats.binomtest(trials - failures, trials)
    names: list[tuple[Method, Literal["exact", "wilson"]]] = [
        ("clopper-pearson", "exact"),
        ("wilson", "wilson"),
    ]
    for method, name in names:
        low, high = test.proportion_ci(0.95, name)
        found = pass_probability_bounds(failures, trials, 0.95, method, "two-sided")
        assert (found.lower, found.upper) == pytest.approx((low, high), rel=1e-8, abs=1e-14)


@pytest.mark.parametrize(("failures", "trials"), [(0, 10**10), (3, 10**10), (1000, 10**10), (10**6, 10**10)])
def test_bounds_solve_their_defining_equation_for_ten_thousand_million_trials(failures: int, trials: int) -> None:
    # Clopper & Pearson 1934: at the bound the tail equals the risk. The tail is SciPy's.
    found = pass_probability_bounds(failures, trials, 0.95)
    assert stats.binom.cdf(failures, trials, found.failure_upper) == pytest.approx(0.05, rel=1e-9)
    assert found.lower == pytest.approx(1 - found.failure_upper, rel=1e-15)


@pytest.mark.parametrize(
    ("failures", "trials"), [(78363001786, 7652915875277), (89420908457450, 96716466780313), (2**52, 2**53)]
)
@pytest.mark.parametrize("confidence", [0.6, 0.95, 0.999999])
def test_bounds_hold_for_counts_that_the_library_cannot_invert_at_once(
    failures: int, trials: int, confidence: float
) -> None:
    # For the first two the inverse of Boost 1.85 raises "series evaluation exceeded". Reference: the normal
    # approximation, whose error at such counts is far below the standard deviation in which the bound is
    # measured.
    found = pass_probability_bounds(failures, trials, confidence, side="lower")
    mean = 1 - failures / trials
    spread = math.sqrt(mean * (1 - mean) / trials)
    assert (mean - found.lower) / spread == pytest.approx(stats.norm.ppf(confidence), abs=1e-3)


@pytest.mark.parametrize(("trials", "confidence"), [(1, 0.9), (59, 0.95), (4000, 0.9), (10**10, 0.999)])
def test_zero_failure_bound_in_closed_form(trials: int, confidence: float) -> None:
    # 1 - risk^(1/N): the Clopper-Pearson bound without failures.
    closed = -math.expm1(math.log(_statistics.complement(confidence)) / trials)
    assert _statistics.zero_failure_upper(trials, confidence) == pytest.approx(closed, rel=1e-15)
    found = pass_probability_bounds(0, trials, confidence)
    assert found.failure_upper == pytest.approx(closed, rel=1e-13)
    assert found.upper == 1.0


def test_no_failure_in_four_thousand_trials_leaves_one_in_1740() -> None:
    # Computed by an independent program, three digits.
    assert 1 / _statistics.zero_failure_upper(4000, 0.90) == pytest.approx(1740, abs=5)


def test_two_thousand_runs_for_three_sigma_is_two_failures_at_90_percent() -> None:
    # The customary count of 2 000 runs: common practice; the number 1970 is computed.
    assert trials_needed(0.9973, 0.90, 2) == 1970
    assert failures_allowed(2000, 0.9973, 0.90) == 2
    assert failures_allowed(1969, 0.9973, 0.90) == 1


@pytest.mark.parametrize("trials", [1, 22, 59, 500, 3941])
@pytest.mark.parametrize("at_least", [0.5, 0.9, 0.99865])
def test_failures_allowed_agrees_with_scipy_and_is_the_inverse_of_trials_needed(trials: int, at_least: float) -> None:
    limit = _statistics.complement(at_least)
    passing = [k for k in range(trials + 1) if stats.binom.cdf(k, trials, limit) <= 0.10 + 1e-12]
    found = failures_allowed(trials, at_least, 0.90)
    assert found == (max(passing) if passing else None)
    if found is not None:
        assert trials_needed(at_least, 0.90, found) <= trials < trials_needed(at_least, 0.90, found + 1)


def test_chance_of_pass_agrees_with_scipy() -> None:
    assert chance_of_pass(1970, 0.9973, 0.90, 0.9995) == pytest.approx(stats.binom.cdf(2, 1970, 0.0005), rel=1e-12)
    assert chance_of_pass(58, 0.95, 0.95, 1.0) == 0.0
    assert chance_of_pass(59, 0.95, 0.95, 1.0) == 1.0

"""Verdicts: decisions, what is missing, wording, the table of several requirements, bad input."""

from __future__ import annotations

import html.parser
import json
import math
import pickle
import re
from decimal import Decimal
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats

from windage import _statistics
from windage._cautions import percent, percent_above, percent_below, standing_cautions
from windage._errors import DescriptionError
from windage._evidence import (
    failures_allowed,
    pass_probability_bounds,
    tolerance_bound,
    trials_for_accuracy,
    trials_needed,
)
from windage._verdict import Verdict, judge, judge_many


def _flat(text: object) -> str:
    """The text in one line."""
    return " ".join(str(text).split())


# --- decisions
# ------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("failures", "trials", "at_least", "confidence", "decision"),
    [
        (0, 59, 0.95, 0.95, "pass"),
        (0, 58, 0.95, 0.95, "inconclusive"),
        (1, 93, 0.95, 0.95, "pass"),
        (1, 92, 0.95, 0.95, "inconclusive"),
        (2, 1970, 0.9973, 0.90, "pass"),
        (2, 1969, 0.9973, 0.90, "inconclusive"),
        (60, 4000, 0.99, 0.90, "fail"),
        (59, 59, 0.95, 0.95, "fail"),
        (0, 0, 0.95, 0.95, "inconclusive"),
    ],
)
def test_decision(failures: int, trials: int, at_least: float, confidence: float, decision: str) -> None:
    # The pass cases sit at the numbers of trials of Wilks 1941 and of Hanson & Beard 2010 (computed).
    verdict = judge(failures, trials, 0, at_least, confidence)
    assert verdict.decision == decision
    assert bool(verdict) is (decision == "pass")


@given(
    trials=st.integers(0, 3000),
    share=st.floats(0, 1),
    at_least=st.floats(0.001, 0.9999),
    confidence=st.floats(0.5, 0.9999),
)
@settings(max_examples=300, deadline=None, derandomize=True)
def test_decision_is_that_of_the_reported_bounds(trials: int, share: float, at_least: float, confidence: float) -> None:
    verdict = judge(round(share * trials), trials, 0, at_least, confidence)
    assert 0.0 <= verdict.lower_bound <= verdict.upper_bound <= 1.0
    assert (verdict.decision == "pass") == (verdict.lower_bound >= at_least)
    if abs(verdict.upper_bound - at_least) > 1e-12:
        assert (verdict.decision == "fail") == (verdict.upper_bound < at_least)
    assert (verdict.further_trials == 0) == (verdict.decision != "inconclusive")


@pytest.mark.parametrize(
    ("trials", "at_least", "confidence"),
    [(2, 0.5, 0.75), (2, 0.7, 0.51), (2, 0.6, 0.64), (7, 0.9, 0.5217031), (3, 0.99, 0.029701)],
)
def test_a_claim_that_holds_with_equality_in_decimals_is_shown(trials: int, at_least: float, confidence: float) -> None:
    # For example 0.9^7 = 0.4782969 = 1 - 0.5217031: rounding to doubles must not cost a trial.
    assert trials_needed(at_least, confidence) == trials
    if confidence >= 0.5:
        verdict = judge(0, trials, 0, at_least, confidence)
        assert verdict.decision == "pass"
        assert verdict.lower_bound >= at_least
        assert judge(0, trials - 1, 0, at_least, confidence).decision == "inconclusive"


def test_no_claim_that_holds_with_equality_loses_a_trial_to_rounding() -> None:
    for trials in range(1, 6):
        for thousandths in range(50, 1000, 7):
            at_least = Decimal(thousandths) / 1000
            confidence = 1 - at_least**trials
            assert trials_needed(float(at_least), float(confidence)) == trials, (at_least, confidence)


def test_a_bound_equal_to_the_limit_does_not_refute() -> None:
    # Two failures in two trials: the upper bound is 1 - 0.25^(1/2) = 0.5, not below 0.5.
    assert judge(2, 2, 0, 0.5, 0.75).decision == "inconclusive"
    assert judge(2, 2, 0, 0.51, 0.75).decision == "fail"


def test_more_failures_never_improve_a_verdict() -> None:
    order = {"pass": 0, "inconclusive": 1, "fail": 2}
    ranks = [order[judge(k, 700, 0, 0.97, 0.95).decision] for k in range(701)]
    assert ranks == sorted(ranks)
    assert set(ranks) == {0, 1, 2}


def test_estimate_and_bounds_are_those_of_the_evidence() -> None:
    verdict = judge(13, 4000, 2, 0.99, 0.90)
    assert verdict.estimate == (4000 - 13) / 4000
    assert verdict.lower_bound == pass_probability_bounds(13, 4000, 0.90).lower
    assert verdict.upper_bound == pass_probability_bounds(13, 4000, 0.90, side="upper").upper
    assert math.isnan(judge(0, 0, 0, 0.99, 0.90).estimate)


# --- further trials
# -------------------------------------------------------------------------------------------


def _further_by_search(failures: int, trials: int, at_least: float, confidence: float, most: int) -> int | None:
    """The definition, tried number by number: expected failures rounded up for a pass, down for a fail."""
    limit, risk = _statistics.complement(at_least), _statistics.complement(confidence)
    more = np.arange(most + 1)
    rounded_up = failures + -(-more * failures // trials)
    rounded_down = failures + more * failures // trials
    shown = stats.binom.cdf(rounded_up, trials + more, limit) <= risk * (1 + 1e-12)
    refuted = stats.binom.sf(rounded_down - 1, trials + more, limit) < risk * (1 - 1e-12)
    decided = np.flatnonzero(shown | refuted)
    return int(decided[0]) if len(decided) else None


@pytest.mark.parametrize("trials", [1, 3, 10, 60, 200, 297, 1000])
@pytest.mark.parametrize(("at_least", "confidence"), [(0.95, 0.95), (0.99, 0.9), (0.5, 0.75), (0.97, 0.6)])
def test_further_trials_are_the_smallest_number_of_a_plain_search(
    trials: int, at_least: float, confidence: float
) -> None:
    most = 30_000
    found = []
    at_limit = round(trials * (1 - at_least))
    for failures in range(max(0, at_limit - 20), min(trials, at_limit + 25) + 1):
        expected = _further_by_search(failures, trials, at_least, confidence, most)
        further = judge(failures, trials, 0, at_least, confidence).further_trials
        if further is not None and further > most:
            further = None
        if further is None or expected is None or further * failures <= 1000 * trials:
            assert further == expected, (failures, trials)
        else:
            # More than a thousand further failures: bisection, which may settle on a somewhat larger number.
            assert expected <= further <= 1.05 * expected, (failures, trials)
        found.append(further)
    assert any(found)


def test_further_trials_without_failure_are_those_of_the_plan() -> None:
    assert judge(0, 10, 0, 0.99, 0.95).further_trials == 299 - 10
    assert judge(0, 0, 0, 0.99, 0.95).further_trials == 299


def test_no_number_of_trials_decides_at_the_limit_or_beyond_a_million_million() -> None:
    at_limit = judge(100, 10_000, 0, 0.99, 0.95)
    near = judge(10**5 + 1, 10**7, 0, 0.99, 0.95)
    assert at_limit.decision == near.decision == "inconclusive"
    assert at_limit.further_trials is None
    assert near.further_trials is None
    assert "too near the limit" in _flat(at_limit)


@pytest.mark.parametrize("failures", [99, 101])
def test_many_further_trials_decide_when_the_rate_goes_on(failures: int) -> None:
    # Beyond the thousand failures that are tried one by one the number is found by bisection.
    further = judge(failures, 10_000, 0, 0.99, 0.95).further_trials
    assert further is not None
    assert further > 10**6
    total = 10_000 + further
    expected = further * failures / 10_000
    whole = math.ceil(expected) if failures < 100 else math.floor(expected)
    decision = "pass" if failures < 100 else "fail"
    assert judge(failures + whole, total, 0, 0.99, 0.95).decision == decision
    # One per cent fewer would not do.
    fewer = round(0.99 * further)
    expected = fewer * failures / 10_000
    whole = math.ceil(expected) if failures < 100 else math.floor(expected)
    assert judge(failures + whole, 10_000 + fewer, 0, 0.99, 0.95).decision == "inconclusive"


# --- wording
# --------------------------------------------------------------------------------------------------


VERDICTS = [
    judge(0, 4000, 0, 0.99, 0.90, spreads=["inertia: normal(4200, 250)", "gear"], not_varied=["drag"]),
    judge(60, 4000, 3, 0.99, 0.90, truncated=["inertia"]),
    judge(32, 4000, 3, 0.99, 0.90, looks=4),
    judge(0, 0, 0, 0.99, 0.90),
    judge(0, 1, 0, 0.5, 0.95, requirement="peak error after 5 s <= 0.005 " * 8),
    judge(10**6, 10**10, 10, 0.9999, 0.999999, not_varied=[f"parameter_number_{i}" for i in range(60)]),
]


@pytest.mark.parametrize("verdict", VERDICTS)
def test_text_fits_a_terminal_and_carries_every_standing_caution(verdict: Verdict) -> None:
    text = str(verdict)
    assert max(len(line) for line in text.splitlines()) <= 80
    assert "\u00a0" not in text
    assert "Clopper-Pearson, exact, one-sided" in text
    assert text.startswith(verdict.decision.upper() + ":")
    for caution in standing_cautions(verdict):
        assert _flat(caution.replace("\u00a0", " ")) in _flat(text)


def test_standing_cautions_are_at_most_six_and_name_what_a_verdict_does_not_cover() -> None:
    lines = standing_cautions(judge(3, 100, 3, 0.9, 0.9, not_varied=["drag", "sample period"]))
    assert len(lines) <= 6
    text = " ".join(lines)
    for part in (
        "model",
        "stated spreads",
        "Not varied: drag, sample period.",
        "Diverged trials count as failures (3 here)",
        "holds for one look, at a number of trials that was fixed beforehand",
        "Hardware and software faults",
        "evidence, not permission",
        "local codes",
        "applicable functional-safety standard",
        "licensed practice",
    ):
        assert part in text


def test_no_failure_is_said_as_a_bound_in_words() -> None:
    # 1 - 0.1^(1/4000) is one in 1737.7; the words round towards caution. An independent program gave 1740 to
    # three digits (computed).
    line = "No failure seen in 4 000 trials: up to 1 in 1 737 could still fail."
    assert line in _flat(VERDICTS[0])
    assert "No failure seen" not in str(VERDICTS[1])
    assert "No failure seen" not in str(VERDICTS[3])
    assert "No failure seen in 1 trial: up to 95.00 % could still fail." in _flat(judge(0, 1, 0, 0.5, 0.95))


def test_pass_and_fail_name_the_exact_bound_and_the_counts() -> None:
    assert "PASS: at least 99 % of all trials pass, at confidence 90 %." in _flat(VERDICTS[0])
    assert "at least 99.9424 % of all trials pass" in _flat(VERDICTS[0])
    assert "Spreads inertia: normal(4200, 250), gear" in _flat(VERDICTS[0])
    failed = _flat(VERDICTS[1])
    assert "FAIL: fewer than 99 % of all trials pass, at confidence 90 %." in failed
    assert "60 of 4 000 trials failed, 3 of them diverged; 98.50 % passed" in failed
    assert "Tails cut off, nothing beyond them was tried: inertia." in failed


def test_inconclusive_tells_what_is_missing_and_warns_of_looking_again() -> None:
    verdict = judge(32, 4000, 3, 0.99, 0.90)
    text = _flat(verdict)
    assert f"about {verdict.further_trials} further trials" in text
    assert "would make it a pass" in text
    assert "Deciding again and again at this bound does not keep the confidence" in text
    assert "plan the number of trials beforehand and use fresh trials (another seed)" in text
    assert "would make it a fail" in _flat(judge(42, 4000, 0, 0.99, 0.90))


def test_several_looks_are_named_in_the_headline_and_warned_of_once() -> None:
    text = _flat(VERDICTS[2])
    assert "at confidence 90 % for a single look, but this is look 4." in text
    assert text.count("Deciding again and again") == 1


@pytest.mark.parametrize("probability", [0.5, 0.9499999, 0.95, 0.98765432, 0.9999994, 1 - 1e-9, 1e-7, 0.0, 1.0])
def test_printed_bounds_never_promise_more_than_the_number(probability: float) -> None:
    def number(text: str) -> float:
        return float(text.removesuffix("\u00a0%")) / 100

    below, above = number(percent_below(probability)), number(percent_above(probability))
    assert below <= probability * (1 + 1e-15)
    assert above >= probability * (1 - 1e-15)
    rare = min(probability, 1 - probability)
    assert above - below <= max(0.011 * rare, 1e-4) + 1e-15


def test_stated_probabilities_print_as_they_were_written() -> None:
    written = {0.95: "95", 0.9973: "99.73", 0.99865: "99.865", 0.99999999: "99.999999", 0.5: "50"}
    for value, text in written.items():
        assert percent(value) == f"{text}\u00a0%"


class _Tags(html.parser.HTMLParser):
    def __init__(self) -> None:
        super().__init__()
        self.open: list[str] = []
        self.seen: set[str] = set()

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.open.append(tag)
        assert all(name == "style" for name, _ in attrs)
        self.seen.add(tag)

    def handle_endtag(self, tag: str) -> None:
        assert self.open.pop() == tag


def test_html_escapes_every_text_and_closes_every_tag() -> None:
    hostile = "<script>alert('x')</script> & \"peak\" <= 3"
    verdict = judge(
        1, 40, 0, 0.9, 0.9, requirement=hostile, not_varied=[hostile], spreads=[hostile], truncated=[hostile]
    )
    table = judge_many({hostile: 0, "rms <= 1": 3}, 40, 0, 0.9, 0.9, not_varied=[hostile], truncated=[hostile])
    for page in (verdict._repr_html_(), table._repr_html_()):
        tags = _Tags()
        tags.feed(page)
        assert tags.open == []
        assert tags.seen <= {"div", "p", "strong", "table", "thead", "tbody", "tr", "th", "td", "ul", "li"}
        assert "&lt;script&gt;" in page
        assert "PASS" in page


def test_plain_data_survives_json_and_pickle() -> None:
    for verdict in VERDICTS:
        plain = verdict.to_dict()
        assert json.loads(json.dumps(plain, allow_nan=False)) == plain
        assert plain["method"] == "Clopper-Pearson, exact, one-sided"
        assert plain["cautions"]
        assert not any("\u00a0" in line for line in plain["cautions"])
    assert VERDICTS[3].to_dict()["estimate"] is None
    assert pickle.loads(pickle.dumps(VERDICTS[1])) == VERDICTS[1]
    with pytest.raises(AttributeError):
        VERDICTS[1].decision = "pass"  # type: ignore[misc]


# --- several requirements
# -------------------------------------------------------------------------------------


def test_each_requirement_is_judged_at_the_corrected_confidence() -> None:
    failures = {"peak error <= 0.005": 3, "rms torque <= 12": 40, "overshoot <= 0.1": 90}
    table = judge_many(failures, 4000, 1, 0.99, 0.95)
    assert [verdict.decision for verdict in table] == ["pass", "inconclusive", "fail"]
    for verdict in table:
        assert verdict.confidence == pytest.approx(1 - 0.05 / 3, rel=1e-15)
        assert (verdict.family, verdict.family_confidence) == (3, 0.95)
        alone = pass_probability_bounds(failures[verdict.requirement], 4000, 1 - 0.05 / 3)
        assert verdict.lower_bound == pytest.approx(alone.lower, rel=1e-12)
        assert "Bonferroni: 3 verdicts hold together at 95 %" in _flat(verdict)
    assert table["rms torque <= 12"] is table[1]
    assert len(table) == 3
    text = str(table)
    assert max(len(line) for line in text.splitlines()) <= 80
    assert "Bonferroni correction: each verdict, and each bound by itself, at 98.3333 %" in _flat(text)
    assert re.search(r"FAIL +overshoot <= 0.1 +99 % +90/4 000", text)
    assert json.loads(json.dumps(table.to_dict(), allow_nan=False))["correction"] == "Bonferroni"


def test_a_single_requirement_is_not_corrected() -> None:
    table = judge_many({"peak error <= 0.005": 0}, 59, 0, 0.95, 0.95)
    plain = judge(0, 59, 0, 0.95, 0.95, requirement="peak error <= 0.005")
    assert table[0] == plain
    assert "Bonferroni" not in str(table)
    assert "peak error <= 0.005: No failure seen in 59 trials" in _flat(table)


def test_limits_may_differ_between_requirements() -> None:
    table = judge_many({"a": 0, "b": 0}, 120, 0, {"b": 0.999, "a": 0.95}, 0.9)
    assert {verdict.requirement: verdict.at_least for verdict in table} == {"a": 0.95, "b": 0.999}
    assert [verdict.decision for verdict in table] == ["pass", "inconclusive"]


# --- bad input
# ------------------------------------------------------------------------------------------------


BAD_CALLS: list[tuple[str, Any]] = [
    ("trials: found -1; expected a whole number from 0 to 2^53", lambda: judge(0, -1, 0, 0.9, 0.9)),
    ("trials: found True", lambda: judge(0, True, 0, 0.9, 0.9)),
    ("trials: found 4000.0", lambda: judge(0, 4000.0, 0, 0.9, 0.9)),  # type: ignore[arg-type]
    ("trials: found 90071992547409", lambda: judge(0, 2**53 + 1, 0, 0.9, 0.9)),
    ("failures: found 5; expected a whole number from 0 to the 4 trials", lambda: judge(5, 4, 0, 0.9, 0.9)),
    ("diverged: found 3; expected a whole number from 0 to 2", lambda: judge(2, 4, 3, 0.9, 0.9)),
    ("at_least: found 1.0", lambda: judge(0, 4, 0, 1.0, 0.9)),
    ("Percent are written as a fraction: 95 % is 0.95", lambda: judge(0, 4, 0, 95, 0.9)),
    ("No number of trials proves certainty", lambda: trials_needed(1.0, 0.9)),
    ("confidence: found nan", lambda: judge(0, 4, 0, 0.9, math.nan)),
    ("confidence: found '0.9'", lambda: judge(0, 4, 0, 0.9, "0.9")),  # type: ignore[arg-type]
    ("confidence: found 0.05; expected at least 0.5", lambda: judge(0, 4, 0, 0.9, 0.05)),
    ("confidence: found 1.0", lambda: trials_needed(0.9, 1.0)),
    ("looks: found 0", lambda: judge(0, 4, 0, 0.9, 0.9, looks=0)),
    ("not_varied: found 'drag'", lambda: judge(0, 4, 0, 0.9, 0.9, not_varied="drag")),
    ("spreads: found", lambda: judge(0, 4, 0, 0.9, 0.9, spreads=[1])),  # type: ignore[list-item]
    ("failures: found {}", lambda: judge_many({}, 4, 0, 0.9, 0.9)),
    ("for the requirement 'b' too", lambda: judge_many({"a": 0, "b": 0}, 4, 0, {"a": 0.9}, 0.9)),
    ("Did you mean 'peak'", lambda: judge_many({"peak": 0}, 4, 0, {"peak": 0.9, "peek": 0.9}, 0.9)),
    ("diverged: found 2", lambda: judge_many({"a": 1}, 4, 2, 0.9, 0.9)),
    ("requirement: found 'peek'", lambda: judge_many({"peak": 0}, 4, 0, 0.9, 0.9)["peek"]),
    ("allowed_failures: found -1", lambda: trials_needed(0.9, 0.9, -1)),
    ("at most 2^53 trials", lambda: trials_needed(1 - 1e-12, 0.9, 10**6)),
    ("accuracy: found 0", lambda: trials_for_accuracy(0, 0.9)),
    ("Did you mean 'wilson'", lambda: pass_probability_bounds(0, 4, 0.9, "wilsn")),  # type: ignore[arg-type]
    ("side: found 'both'", lambda: pass_probability_bounds(0, 4, 0.9, side="both")),  # type: ignore[arg-type]
    ("values: found 'an array of shape (2, 2)'", lambda: tolerance_bound(np.ones((2, 2)), 0.9, 0.9)),
    ("values: found 'abc'; expected numbers along one axis", lambda: tolerance_bound("abc", 0.9, 0.9)),
    ("values: found 0; expected at least 22 trials", lambda: tolerance_bound(np.array([]), 0.9, 0.9)),
    ("values: found 10; expected at least 22 trials", lambda: tolerance_bound(range(10), 0.9, 0.9)),
]


@pytest.mark.parametrize(("message", "call"), BAD_CALLS)
def test_bad_input_names_field_value_and_expectation(message: str, call: Any) -> None:
    with pytest.raises(DescriptionError) as caught:
        call()
    assert message in str(caught.value)
    assert isinstance(caught.value, ValueError)


@pytest.mark.parametrize(
    "call",
    [
        lambda: _statistics.clopper_pearson_lower(5, 3, 0.9),
        lambda: _statistics.clopper_pearson_upper(-1, 3, 0.9),
        lambda: _statistics.wilson_interval(0, 3, 1.0),
        lambda: _statistics.jeffreys_lower(0, 2**53 + 1, 0.9),
        lambda: _statistics.zero_failure_upper(0, 0.9),
        lambda: _statistics.trials_to_demonstrate(0.0, 0.9, 0),
        lambda: _statistics.allowed_failures(-1, 0.9, 0.9),
        lambda: _statistics.further_trials(0, 10, math.nan, 0.9),
        lambda: _statistics.trials_with_at_most(0, 0.0, 0.9),
        lambda: _statistics.tolerance_rank(0, 0.9, 0.9),
        lambda: _statistics.wilks_one_sided(0.9, 0.9, 0),
        lambda: _statistics.chernoff_trials(1.0, 0.9),
        lambda: _statistics.log_over_log_trials(-0.1, 0.9),
    ],
)
def test_the_compiled_functions_refuse_by_themselves(call: Any) -> None:
    with pytest.raises(ValueError, match=r"^\w+: found .+; expected "):
        call()


def test_numpy_numbers_are_numbers() -> None:
    verdict = judge(np.int64(0), np.uint32(59), np.int8(0), np.float64(0.95), 0.95)  # type: ignore[arg-type]
    assert verdict == judge(0, 59, 0, 0.95, 0.95)
    assert type(verdict.trials) is int
    assert type(verdict.at_least) is float
    assert failures_allowed(np.int64(93), 0.95, 0.95) == 1  # type: ignore[arg-type]


# --- tolerance bounds of a measure
# ----------------------------------------------------------------------------


def test_values_that_are_not_finite_are_the_worst_on_either_side() -> None:
    good = list(range(91))
    for lost in (math.nan, math.inf, -math.inf):
        # Two of 93 trials lost: the second largest of 93 is one of them.
        upper = tolerance_bound([*good, lost, lost], 0.95, 0.95)
        assert upper.rank == 92
        assert upper.value == math.inf
        lower = tolerance_bound([*good, lost, lost], 0.95, 0.95, side="lower")
        assert lower.value == -math.inf
        # One of 93 lost: the largest finite value is the bound.
        assert tolerance_bound([*good, 91, lost], 0.95, 0.95).value == 91.0
        assert tolerance_bound([*good, 91, lost], 0.95, 0.95, side="lower").value == 0.0


def test_a_lower_bound_mirrors_an_upper_bound_and_leaves_the_values_alone() -> None:
    values = np.random.default_rng(3).normal(size=500)
    kept = values.copy()
    lower, upper = tolerance_bound(values, 0.9, 0.99, side="lower"), tolerance_bound(-values, 0.9, 0.99)
    assert lower.value == -upper.value
    assert lower.rank == upper.rank
    assert np.mean(values >= lower.value) >= 0.9
    np.testing.assert_array_equal(values, kept)


def test_a_table_is_true_only_where_every_verdict_passes() -> None:
    assert judge_many({"a": 0, "b": 0}, 1000, 0, 0.95, 0.95)
    assert not judge_many({"a": 0, "b": 1000}, 1000, 0, 0.95, 0.95)
    assert not judge_many({"a": 0, "b": 50}, 1000, 0, 0.95, 0.95)
    with pytest.raises(DescriptionError, match="requirement: found None; expected a requirement of this table"):
        judge_many({"a": 0}, 1000, 0, 0.95, 0.95)[None]  # type: ignore[index]

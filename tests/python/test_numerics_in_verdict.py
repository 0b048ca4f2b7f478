"""Numerical error is part of a claim: it counts against a pass, and against a fail."""

from __future__ import annotations

import json

import pytest

from windage._numerics import Numerics
from windage._verdict import judge, judge_many


def numerics(**fields: int) -> Numerics:
    return Numerics(text="64 trials run again", **fields)


def test_hidden_failures_count_against_a_pass() -> None:
    plain = judge(13, 4000, 0, 0.99, 0.90)
    assert plain.decision == "pass"
    safe = judge(13, 4000, 0, 0.99, 0.90, numerics=numerics(hidden=10))
    assert safe.decision == "pass"
    assert safe.failures == 23
    assert safe.lower_bound == judge(23, 4000, 0, 0.99, 0.90).lower_bound
    assert safe.estimate == plain.estimate
    assert safe.upper_bound == plain.upper_bound
    assert judge(13, 4000, 0, 0.99, 0.90, numerics=numerics(hidden=30)).decision == "inconclusive"
    assert "13 of 4 000 trials failed" in str(safe)
    assert "Numerics     64 trials run again" in str(safe)


def test_doubtful_failures_do_not_refute_a_claim() -> None:
    assert judge(100, 4000, 0, 0.99, 0.90).decision == "fail"
    unsure = judge(100, 4000, 0, 0.99, 0.90, numerics=numerics(doubtful=60))
    assert unsure.decision == "inconclusive"
    assert unsure.failures == 100
    assert unsure.upper_bound == judge(40, 4000, 0, 0.99, 0.90).upper_bound
    assert "the numerical error has to be known better" in str(unsure)
    # Doubtful failures never make a pass: only what is hidden counts there.
    assert judge(60, 4000, 0, 0.99, 0.90, numerics=numerics(doubtful=60)).decision == "inconclusive"


def test_an_examination_that_is_missing_leaves_the_claim_open() -> None:
    for failures in (0, 4000):
        verdict = judge(
            failures, 4000, 0, 0.99, 0.90, numerics=Numerics(text="stopped", is_open=True, caution="Audit.")
        )
        assert verdict.decision == "inconclusive"
        assert not verdict
        assert verdict.cautions[0] == "Audit."


def test_the_table_judges_each_requirement_with_its_own_numerics() -> None:
    known = {"a": numerics(hidden=300), "b": numerics()}
    table = judge_many({"a": 0, "b": 0}, 4000, 0, 0.99, 0.90, numerics=known)
    assert [verdict.decision for verdict in table] == ["inconclusive", "pass"]
    assert "64 trials run again" in str(table)
    plain = json.loads(json.dumps(table.to_dict()))["verdicts"]
    assert [verdict["numerics"]["hidden"] for verdict in plain] == [300, 0]
    assert plain[0]["failures"] == 300


def test_counts_of_numerics_stay_within_the_trials() -> None:
    for fields in ({"hidden": 4000}, {"hidden": -1}, {"doubtful": 14}):
        with pytest.raises(ValueError, match=r"numerics\.(hidden|doubtful)"):
            judge(13, 4000, 0, 0.99, 0.90, numerics=numerics(**fields))

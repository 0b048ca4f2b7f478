"""Claims say no more than the trials know: samples, lists, one trial repeated, runs that were stopped, and looks."""

from __future__ import annotations

import json
from fractions import Fraction
from typing import Any

import numpy as np
import pytest

import windage as wd
from windage._basis import Basis
from windage._command_line import main
from windage._verdict import judge, judge_many

CONTROLLER = wd.ErrorADRC(1, controller_bandwidth=1.0, observer_bandwidth=5.0, b0=1.0)


def study(gain: Any = 1.0, limit: Any = 0.5, **options: Any) -> wd.Study:
    """A first-order lag: the larger its gain, the smaller the error at the end. Seeds differ from test to test."""
    inner = {name: options.pop(name) for name in ("sensor", "disturbances") if name in options}
    loop = wd.Loop(
        plant=wd.FirstOrder(gain=gain, time_constant=1.0),
        controller=CONTROLLER,
        sample_period=0.1,
        duration=1.0,
        reference=wd.Step(1.0),
        **{"disturbances": {"load": 0.0}, **inner},
    )
    return wd.Study(loop, requirements=[wd.peak("error", after=0.9) <= limit], **options)


def text_of(verdict: object) -> str:
    return " ".join(str(verdict).split())


# --- one trial, repeated


@pytest.mark.parametrize(
    "same",
    [
        {"gain": 1.0},
        {"gain": wd.uniform(1.0, 1.0)},
        {"gain": wd.tolerance(1.0, 0.0)},
        {"gain": wd.normal(1.0, 0.0, low=0.5)},
        {"gain": wd.shared("gain", wd.lognormal(1.0, 0.0))},
        {"gain": wd.samples([1.0, 1.0])},
        {"gain": wd.column("g"), "table": {"g": [1.0, 1.0]}},
        {"sensor": wd.Sensor(noise=0.0), "disturbances": {"load": wd.Gust(0.0, 1.0)}},
        {"disturbances": {"load": wd.WhiteNoise(0.0)}},
        {"sensor": wd.Sensor(noise=wd.choice([0.0]))},
    ],
)
def test_a_study_in_which_nothing_varies_passes_no_verdict_however_often_it_is_repeated(same: Any) -> None:
    verdict = study(**same).run(1000, progress=False).verdict(0.95)
    assert verdict.decision == "inconclusive"
    assert not verdict
    assert verdict.basis.kind == "one trial"
    assert (verdict.lower_bound, verdict.upper_bound) == (0.0, 1.0)
    assert text_of(verdict).startswith("NO CLAIM: one trial, repeated 1 000 times, passes; nothing varies")
    assert "Clopper" not in str(verdict)
    assert "could still fail" not in str(verdict)


def test_one_trial_that_fails_is_a_fail_for_certain() -> None:
    verdict = study(limit=0.01).run(1000, progress=False).verdict(0.95)
    assert (verdict.decision, verdict.upper_bound) == ("fail", 0.0)
    assert "FAIL: one trial, repeated 1 000 times, fails" in text_of(verdict)


@pytest.mark.parametrize(
    "varied",
    [
        {"gain": wd.uniform(0.9, 1.1)},
        {"limit": wd.uniform(0.4, 0.6)},
        {"sensor": wd.Sensor(noise=1e-6)},
        {"sensor": wd.Sensor(noise=wd.uniform(0.0, 1e-6))},
        {"disturbances": {"load": wd.Gust(1e-6, 1.0)}},
        {"disturbances": {"load": wd.WhiteNoise(1e-9)}},
    ],
)
def test_any_spread_or_noise_makes_a_sample(varied: Any) -> None:
    assert study(**varied).run(30, progress=False).verdict(0.5).basis.kind == "sample"


def test_a_spread_that_reaches_no_measure_is_advised_of() -> None:
    only_limit = study(limit=wd.uniform(2.0, 3.0), seed=3).run(100, progress=False).verdict(0.9)
    assert "Advice: all trials measured the same; see whether any spread or noise reaches" in text_of(only_limit)
    reaches = study(gain=wd.uniform(0.9, 1.1), seed=3).run(100, progress=False).verdict(0.9)
    assert "measured the same" not in str(reaches)
    for gain, batch, is_said in ((1.0, 30, True), (1.0, 100, True), (wd.choice([1.0, 1.1]), 1, False)):
        counted = study(gain=gain, limit=wd.uniform(2.0, 3.0), seed=4).count(100, size=batch, progress=False)
        assert ("measured the same" in text_of(counted.verdict(0.9))) is is_said


def test_the_command_says_no_claim_for_a_nominal_check(tmp_path: Any, monkeypatch: Any, capsys: Any) -> None:
    monkeypatch.chdir(tmp_path)
    wd.save(study(), "nominal.toml")
    assert main(["run", "nominal.toml", "--trials", "20", "--json", "report.json"]) == 2
    assert "NO CLAIM: one trial, repeated 20 times, passes" in capsys.readouterr().out
    report = json.loads((tmp_path / "report.json").read_text())
    assert report["verdict"]["decision"] == "inconclusive"
    assert report["verdict"]["basis"] == {"kind": "one trial", "planned": 0}
    wd.save(study(limit=0.01), "failing.toml")
    assert main(["run", "failing.toml", "--trials", "20"]) == 1


# --- a table


GAINS = np.linspace(2.0, 0.2, 1000)  # the good units first


def test_a_sorted_table_no_longer_passes_for_its_first_rows() -> None:
    drawn = study(gain=wd.column("gain"), table={"gain": GAINS})
    whole = drawn.with_(table_rows="in_order").run(1000, progress=False)
    share = len(whole.failures) / 1000
    assert 0.02 < share < 0.06
    # Drawn rows are a sample of the table: a false pass has at most the risk that was asked for.
    false, seeds = 0, 300
    for seed in range(seeds):
        outcome = drawn.with_(seed=seed).run(60, progress=False)
        false += outcome.verdict(1.0 - share + 1e-9, confidence=0.9).decision == "pass"
    assert false <= seeds * 0.1 + 4.0 * np.sqrt(seeds * 0.09)
    # In the order of the table the first 300 rows say nothing of the others.
    first = drawn.with_(table_rows="in_order").run(300, progress=False)
    assert len(first.failures) == 0
    assert first.verdict(1.0 - share + 1e-9).decision == "inconclusive"


def test_a_list_is_counted_exactly_and_claims_nothing_beyond() -> None:
    listed = study(gain=wd.column("gain"), table={"gain": GAINS}, table_rows="in_order")
    whole = listed.run(1000, progress=False)
    passed = 1000 - len(whole.failures)
    assert whole.verdict(passed / 1000).decision == "pass"
    verdict = whole.verdict(passed / 1000 + 1e-9)
    assert (verdict.decision, verdict.lower_bound, verdict.upper_bound) == ("fail", passed / 1000, passed / 1000)
    assert verdict.basis == Basis(kind="list", planned=1000)
    text = text_of(verdict)
    assert "of the 1 000 rows of the table pass." in text
    assert "a count of the list, exact" in text
    assert "nothing is claimed of other units" in text
    assert "confidence" not in text.split("Read with care")[0]


@pytest.mark.parametrize(
    ("failures", "trials", "at_least", "decision", "bounds"),
    [
        (7, 100, 0.93, "pass", (0.93, 0.93)),
        (8, 100, 0.93, "fail", (0.92, 0.92)),
        (0, 92, 0.93, "inconclusive", (0.92, 1.0)),
        (0, 93, 0.93, "pass", (0.93, 1.0)),
        (8, 8, 0.93, "fail", (0.0, 0.92)),
        (71, 100, 0.29, "pass", (0.29, 0.29)),
        (93, 100, 0.07, "pass", (0.07, 0.07)),
    ],
)
def test_rows_that_were_not_run_stay_open(
    failures: int, trials: int, at_least: float, decision: str, bounds: tuple[float, float]
) -> None:
    verdict = judge(failures, trials, 0, at_least, 0.95, basis=Basis(kind="list", planned=100))
    assert (verdict.decision, (verdict.lower_bound, verdict.upper_bound)) == (decision, bounds)
    assert verdict.further_trials == (100 - trials if decision == "inconclusive" else 0)


def test_few_observed_values_are_named_with_the_claim_that_they_cannot_carry() -> None:
    values = np.linspace(0.9, 1.1, 150).tolist()
    outcome = study(gain=wd.samples(values), seed=5).run(400, progress=False)
    # Ten values have to lie in the fraction that may fail: 100 do for 90 %, 200 would be needed for 95 %.
    assert outcome.verdict(0.9).few_values == ()
    verdict = outcome.verdict(0.95)
    assert verdict.few_values == ("gain (150 values)",)
    line = "Drawn from few observed values, nothing beyond them was tried and their tails are not known: gain"
    assert line in text_of(verdict)
    assert line in text_of(outcome.verdicts(0.95))
    table = study(gain=wd.column("g"), table={"g": values}, seed=5).run(20, progress=False)
    assert table.verdict(0.99).few_values == ("g (150 values)",)
    shared = study(gain=wd.shared("mass", wd.samples([0.9, 1.1, 1.1])), seed=5).run(20, progress=False)
    assert shared.verdict(0.5).few_values == ("mass (2 values)",)
    # Exactly ten in the fraction that may fail are enough.
    for count, few in ((200, ()), (199, ("gain (199 values)",))):
        gains = wd.samples(np.linspace(0.9, 1.1, count))
        assert study(gain=gains, seed=6).run(20, progress=False).verdict(0.95).few_values == few
    # The values of a choice are all there are.
    assert study(gain=wd.choice([0.9, 1.1]), seed=5).run(20, progress=False).verdict(0.99).few_values == ()


# --- a run that was stopped


def stopped(kind: str, seed: int, limit: float = 0.5) -> Any:
    run = study(gain=wd.uniform(0.8, 1.2), limit=limit, seed=seed)
    if kind == "run":
        return run.run(3_000_000, threads=1, progress=lambda done, _: done < 300)
    return run.count(3_000_000, size=500, threads=1, progress=lambda done, _: done < 300)


@pytest.mark.parametrize("kind", ["run", "count"])
@pytest.mark.parametrize("limit", [0.5, 0.01])
def test_a_stopped_run_gives_neither_a_pass_nor_a_fail(kind: str, limit: float) -> None:
    found = stopped(kind, 11, limit)
    assert found.trials < found.requested
    verdict = found.verdict(0.5)
    assert verdict.decision == "inconclusive"
    assert not verdict
    assert (verdict.lower_bound, verdict.upper_bound) == (0.0, 1.0)
    assert verdict.further_trials == found.requested - found.trials
    assert text_of(verdict).startswith("INTERIM: stopped after ")
    assert "of 3 000 000 trials; this is no verdict, neither a pass nor a fail" in text_of(verdict)
    assert "INTERIM" in str(found.verdicts(0.5))
    assert not any(found.verdicts(0.5))


def test_nobody_waits_for_an_audit_of_a_run_that_was_stopped(monkeypatch: pytest.MonkeyPatch) -> None:
    found = [stopped("run", 14), stopped("count", 14)]
    for kind in (wd.Outcome, type(found[1])):
        monkeypatch.setattr(kind, "audit", lambda _: pytest.fail("audited"))
    for outcome in found:
        assert not outcome.verdict(0.5)
        assert not any(outcome.verdicts(0.5))


def test_a_complete_run_does_not_speak_of_interim_results() -> None:
    outcome = study(gain=wd.uniform(0.8, 1.2), seed=12).run(100, progress=False)
    for found in (outcome.verdict(0.5), outcome.verdicts(0.5), outcome.verdict(0.999)):
        assert "interim" not in str(found).lower()


def test_a_stopped_run_that_is_run_to_its_end_is_one_look_and_any_other_end_is_two() -> None:
    outcome = stopped("run", 13)
    short = wd.Outcome.__new__(wd.Outcome)
    short.__dict__ |= {**outcome.__dict__, "requested": outcome.trials + 50, "_judged": set()}
    short.verdict(0.5)
    assert short.extend(50, progress=False).verdict(0.5).looks == 1
    assert short.extend(70, progress=False).verdict(0.5).looks == 3  # stopped, the planned end, another end


def test_a_picture_shows_no_bounds_where_there_are_none() -> None:
    pytest.importorskip("matplotlib")

    def legend_of(outcome: Any) -> str:
        return " ".join(text.get_text() for text in outcome.plot(parameters=0).legends[0].get_texts())

    sample = study(gain=wd.uniform(0.8, 1.2), seed=15)
    assert "Clopper-Pearson" in legend_of(sample.run(50, progress=False))
    listed = study(gain=wd.column("g"), table={"g": GAINS}, table_rows="in_order").run(1000, progress=False)
    for outcome in (study().run(50, progress=False), listed, stopped("run", 15)):
        assert "Clopper-Pearson" not in legend_of(outcome)


def test_a_table_of_one_row_and_a_study_without_requirements_are_spoken_of_as_such() -> None:
    listed = study(gain=wd.column("g"), table={"g": [1.0]}, table_rows="in_order").run(1, progress=False)
    assert listed.verdict(0.9).headline == "PASS: at least 90 % of the 1 row of the table pass."
    free = study(gain=wd.uniform(0.8, 1.2)).with_(requirements=[], measures=[wd.rms("error")])
    for found in (free.run(5, progress=False), free.count(5, progress=False)):
        with pytest.raises(wd.DescriptionError, match=r"study\.requirements: found 'none'"):
            found.verdicts(0.5)


# --- looks


def test_looks_are_counted_by_study_and_number_of_trials() -> None:
    one = study(gain=wd.uniform(0.8, 1.2), seed=21)
    first = one.run(50, progress=False)
    assert first.verdict(0.5).looks == first.verdict(0.9, 0.8).looks == first.verdicts(0.5)[0].looks == 1
    assert one.run(50, progress=False).verdict(0.5).looks == 1  # the same trials again
    assert study(gain=wd.uniform(0.8, 1.2), seed=21).run(60, progress=False).verdict(0.5).looks == 2  # a longer run
    assert first.extend(50, progress=False).verdict(0.5).looks == 3
    assert first.verdict(0.5).looks == 3  # a sibling
    assert one.count(100, progress=False).verdict(0.5).looks == 3
    assert one.count(120, progress=False).verdict(0.5).looks == 4
    assert one.count(120, progress=False).verdicts(0.5)[0].looks == 4
    assert "but this is look 4" in text_of(one.count(120, progress=False).verdict(0.5))
    assert one.with_(seed=22).run(60, progress=False).verdict(0.5).looks == 1  # fresh trials


# --- several requirements


def test_bounds_of_several_requirements_are_those_that_the_verdicts_rest_on() -> None:
    table = judge_many({"a": 3, "b": 9, "c": 290}, 300, 1, 0.95, 0.95)
    passed, open_, failed = (line.split("  ")[-1].strip() for line in str(table).splitlines()[4:7])
    assert (passed[:2], "<" in passed) == (">=", False)
    assert (failed[:2], ">" in failed) == ("<=", False)
    assert (open_[:2], "<= " in open_) == (">=", True)
    assert "each verdict, and each bound by itself, at 98.3333 %" in text_of(table)


@pytest.mark.parametrize("confidence", [0.999999999999, 0.999999, 0.95, 0.5])
@pytest.mark.parametrize("count", [2, 3, 7, 100, 1000])
def test_a_shared_risk_is_never_refused_and_never_larger_than_what_was_given(confidence: float, count: int) -> None:
    table = judge_many({f"r{i}": 0 for i in range(count)}, 10**6, 0, 0.9, confidence)
    each = Fraction(table[0].confidence)
    assert count * (1 - Fraction(repr(table[0].confidence))) <= 1 - Fraction(repr(confidence))
    assert 1 - each >= (1 - Fraction(repr(confidence))) / count * Fraction(1, 2)
    assert all(table)


def test_requirements_that_no_risk_is_left_for_are_refused_by_what_was_given() -> None:
    with pytest.raises(wd.DescriptionError, match=r"confidence: found 0\.999999999999; .* 30000 verdicts can share"):
        judge_many({f"r{i}": 0 for i in range(30_000)}, 10, 0, 0.9, 0.999999999999)

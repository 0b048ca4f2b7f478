"""What numerical error can have changed is found after the run and counts against either decision."""

from __future__ import annotations

import json
import pickle
from functools import cache
from typing import Any

import numpy as np
import pytest

import windage as wd
from windage import _audit, _progress, _reporter
from windage._audit_trials import Rows
from windage._demo import demo_study
from windage._runner import Columns, make_campaign, run_columns


def loop_of(plant: Any, **loop: Any) -> wd.Loop:
    settings: dict[str, Any] = {
        "plant": plant,
        "controller": wd.ErrorADRC(1, controller_bandwidth=4.0, observer_bandwidth=20.0, b0=1.0),
        "sample_period": 1e-2,
        "duration": 4.0,
        "reference": wd.Step(1.0),
        "actuator": wd.Actuator(limits=(-3.0, 3.0)),
    }
    return wd.Loop(**(settings | loop))


def flexible(steps: Any, limit: float = 0.05) -> wd.Study:
    """A mode of 200 rad/s sampled at 10 ms: one step of RK4 damps it away, and every trial seems to pass."""
    plant = wd.Plant(
        {"y": 0.0, "q": 1.0, "p": 0.0},
        {"y": "grow*y + u", "q": "p", "p": "-200**2*(q - 0.1*y) - 0.4*p"},
        input="u",
        output="y",
        parameters={"grow": wd.uniform(-1.2, -0.8)},
    )
    requirements = [wd.peak("error", after=2.0) <= 0.05, wd.standard_deviation("q", after=2.0) <= limit]
    return wd.Study(loop_of(plant, steps_per_sample=steps), requirements, seed=1)


def stiff(steps: Any) -> wd.Study:
    """An electrical lag of a tenth of the sample period: one step of RK4 diverges, though the loop is stable."""
    plant = wd.Plant(
        {"i": 0.0, "w": 0.0},
        {"i": "(u - i)/1e-3", "w": "i - load*tanh(w/0.01) - 0.1*w"},
        input="u",
        output="w",
        parameters={"load": wd.uniform(0.0, 2.0)},
    )
    return wd.Study(loop_of(plant, steps_per_sample=steps), [wd.peak("error", after=3.5) <= 0.02], seed=1)


def friction(seed: int = 3, **loop: Any) -> wd.Study:
    """A friction drive with one coarse step of Euler; about half of the trials pass."""
    plant = wd.Plant(
        {"x": 0.0, "v": 0.0},
        {"x": "v", "v": "(g*u - d*v - c*tanh(v/0.05))/m"},
        input="u",
        output="x",
        parameters={"m": wd.normal(1.0, 0.1), "g": wd.uniform(0.8, 1.2), "d": 0.5, "c": wd.uniform(0.0, 0.3)},
    )
    controller = wd.ErrorADRC(2, controller_bandwidth=6.0, observer_bandwidth=30.0, b0=1.0)
    settings = {"controller": controller, "integrator": "euler", "steps_per_sample": 1, "duration": 2.0} | loop
    return wd.Study(loop_of(plant, **settings), [wd.overshoot() <= 1e-3, wd.iae() <= 0.88], seed=seed)


def truth(study: wd.Study, trials: int) -> wd.Outcome:
    """Return the same trials under step control."""
    described = study._describe(1)
    described.study["loop"]["integrator"] = "reference"
    return wd.Outcome(study, described, run_columns(make_campaign(described.study), 0, trials))


def words(verdict: wd.Verdict) -> str:
    return " ".join(str(verdict).split())


def test_a_pass_that_the_integrator_made_is_no_pass() -> None:
    outcome = flexible(1).run(1000, progress=False)
    assert len(outcome.failures) == 0
    unexamined = outcome.verdict(0.85, audit=False)
    assert unexamined.decision == "pass"
    assert unexamined.cautions[0] == "Numerical error was not examined; it is in no bound."
    verdict = outcome.verdict(0.85)
    assert verdict.decision == "inconclusive"
    assert verdict.failures == 1000
    assert verdict.numerics.hidden == 1000
    assert "set steps_per_sample=4" in words(verdict)
    assert set(outcome.audit().flips.tolist()) <= set(range(1000))
    assert outcome.audit().flipped + outcome.audit().undecided == 1000
    table = outcome.verdicts(0.85)
    assert [v.decision for v in table] == ["pass", "inconclusive"]
    assert [v.decision for v in outcome.verdicts(0.85, audit=False)] == ["pass", "pass"]


def test_a_fail_that_the_integrator_made_is_no_fail() -> None:
    outcome = stiff(1).run(1000, progress=False)
    assert len(outcome.diverged) == 1000
    assert outcome.verdict(0.1, audit=False).decision == "fail"
    verdict = outcome.verdict(0.1)
    assert verdict.decision == "inconclusive"
    assert verdict.upper_bound == 1.0
    assert stiff("auto").run(1000, progress=False).verdict(0.1).decision == "pass"


def test_steps_that_are_enough_leave_the_verdict_as_it_is() -> None:
    for study in (flexible("auto"), stiff("auto"), friction(integrator="rk4", steps_per_sample="auto")):
        outcome = study.run(600, progress=False)
        audit, verdict = outcome.audit(), outcome.verdict(0.5)
        assert (audit.flipped, audit.undecided) == (0, 0)
        assert audit.steps == 4 * study.resolved_steps()
        assert 0 < audit.trials < 160
        assert verdict.failures == len(outcome.failures)
        assert verdict.decision == outcome.verdict(0.5, audit=False).decision
        assert f"{audit.trials} trials run again" in words(verdict)
        assert "0 flipped, 0 undecided" in words(verdict)
        assert all(0.0 <= change < 1e-3 for change in audit.largest_change.values())


def test_the_true_failures_lie_between_what_the_verdict_counts() -> None:
    study = friction()
    outcome, true = study.run(400, progress=False), truth(study, 400)
    audit, verdict = outcome.audit(), outcome.verdict(0.5)
    flips = np.flatnonzero(outcome.passed != true.passed)
    assert len(flips) >= 5
    assert set(audit.flips.tolist()) <= set(flips.tolist())
    assert len(flips) <= audit.flipped + audit.undecided
    assert verdict.failures - verdict.numerics.hidden == len(outcome.failures)
    assert len(outcome.failures) - verdict.numerics.doubtful <= len(true.failures) <= verdict.failures
    for label, missed in zip(outcome.requirements, (~true.met).sum(axis=0).tolist(), strict=True):
        numerics = audit.by_requirement[label]
        seen = len(outcome.failed(label))
        assert seen - numerics.doubtful <= missed <= seen + numerics.hidden


def test_an_audit_is_made_once_and_reads_well() -> None:
    outcome = friction().run(300, progress=False)
    audit = outcome.audit()
    assert outcome.audit() is audit
    text = repr(audit)
    assert text.startswith(f"Audit: {audit.trials} trials run again with 4 steps of order 5 a sample period")
    assert "of slack and limit: overshoot of output <= 0.001" in text
    plain = json.loads(json.dumps(outcome.verdict(0.5).to_dict()))
    assert plain["numerics"]["hidden"] == audit.numerics.hidden
    copy = pickle.loads(pickle.dumps(outcome))
    assert np.array_equal(copy.audit().flips, audit.flips)
    assert not copy.audit().flips.flags.writeable
    assert np.array_equal(friction().run(300, threads=1, progress=False).audit(threads=1).flips, audit.flips)


@pytest.mark.parametrize("threads", [-1, 1025, 1.5])
def test_threads_of_an_audit_are_checked_as_those_of_a_run(threads: Any) -> None:
    with pytest.raises(wd.DescriptionError, match="threads: found"):
        demo_study().run(20, progress=False).audit(threads=threads)


def test_a_tally_is_audited_as_an_outcome_is() -> None:
    study = friction(integrator="rk4", steps_per_sample=1)
    outcome, tally = study.run(900, progress=False), study.count(900, size=250, progress=False)
    assert np.array_equal(tally.audit().flips, outcome.audit().flips)
    assert tally.audit() is tally.audit()
    assert tally.verdict(0.5).to_dict() == outcome.verdict(0.5).to_dict()
    assert tally.verdict(0.5, audit=False).numerics == outcome.verdict(0.5, audit=False).numerics
    assert [v.numerics for v in tally.verdicts(0.5)] == [v.numerics for v in outcome.verdicts(0.5)]


def test_a_tally_counts_what_it_has_not_kept() -> None:
    study, trials = friction(), 2000
    tally, true = study.count(trials, size=500, progress=False), truth(study, trials)
    verdict = tally.verdict(0.5)
    assert len(tally.watch.rows.trials) < 1000
    assert tally.failures - verdict.numerics.doubtful <= len(true.failures) <= tally.failures + verdict.numerics.hidden
    assert set(tally.audit().flips.tolist()) <= set(np.flatnonzero(study.run(trials).passed != true.passed).tolist())


def test_an_interrupted_audit_decides_nothing_and_loses_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    outcome = flexible("auto", limit=2.0).run(300, progress=False)

    def stopped(_campaign: Any, trials: Any, *_rest: Any) -> Columns:
        none = np.empty((0, 0))
        return Columns(none, none, np.empty(0, dtype=np.uint8), len(trials))

    with monkeypatch.context() as patch:
        patch.setattr(_audit, "run_chosen", stopped)
        verdict = outcome.verdict(0.9)
        assert outcome.audit().interrupted
    assert verdict.decision == "inconclusive"
    assert "not examined: stopped" in words(verdict)
    assert "call verdict again" in verdict.cautions[0]
    assert outcome.verdict(0.9).decision == "pass"
    heard = flexible("auto", limit=2.0).run(300, progress=False)
    assert heard.audit(progress=lambda _done, _asked: False).interrupted
    assert not heard.audit().interrupted


def linear(gain: float) -> wd.Study:
    plant = wd.FirstOrder(gain=gain, time_constant=wd.lognormal(0.1, 0.4))
    controller = wd.ErrorADRC(1, controller_bandwidth=4.0, observer_bandwidth=20.0, b0=10.0)
    loop = loop_of(plant, controller=controller, disturbances={"load": wd.Step(0.1, at=2.0)})
    return wd.Study(loop, [wd.peak("error", after=1.5) <= 0.033, wd.overshoot() <= 0.05], seed=1)


def test_linear_plants_are_integrated_beside_their_exact_sampling() -> None:
    outcome = linear(1.0).run(500, progress=False)
    audit = outcome.audit()
    assert 4 <= audit.trials <= 12
    assert (audit.flipped, audit.undecided) == (0, 0)
    assert all(0.0 < change < 1e-6 for change in audit.largest_change.values())
    assert "step control, not sampled exactly" in words(outcome.verdict(0.5))


def test_linear_plants_too_fast_to_be_integrated_are_not_audited_and_that_is_said() -> None:
    plant = wd.FirstOrder(gain=1.0, time_constant=1e-9)
    study = linear(1.0).with_(plant=plant)
    verdict = study.run(50, progress=False).verdict(0.5)
    assert "not audited: the plant is too fast" in words(verdict)
    assert "Numerical error was not examined" in verdict.cautions[0]


def test_a_study_without_requirements_is_audited_for_finishing() -> None:
    study = stiff(1).with_(requirements=(), measures=[wd.iae()])
    verdict = study.run(100, progress=False).verdict(0.5)
    assert verdict.decision == "inconclusive"
    assert verdict.numerics.doubtful == 100


@cache
def blind_spot() -> wd.Study:
    """One step is so far outside stability that four times as many diverge as well."""
    plant = wd.Plant({"x": 0.0}, {"x": "-k*(x - u)"}, "u", "x", parameters={"k": wd.uniform(3000.0, 4000.0)})
    controller = wd.ErrorADRC(1, b0=3500.0, controller_bandwidth=4.0, observer_bandwidth=20.0)
    loop = loop_of(plant, controller=controller, actuator=wd.Actuator(), duration=2.0, steps_per_sample=1)
    return wd.Study(loop, [wd.peak("error", after=1.5) <= 0.05], seed=3)


def test_the_tighter_run_is_itself_confirmed() -> None:
    outcome = blind_spot().run(200, progress=False)
    assert len(outcome.diverged) == 200
    assert outcome.audit().steps == 16
    assert outcome.audit().flipped + outcome.audit().undecided == 200
    assert outcome.verdict(0.5).decision == "inconclusive"


def test_a_divergence_that_cannot_be_confirmed_decides_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(_audit, "MOST_TIGHTER_STEPS", 4)
    outcome = blind_spot().run(200, progress=False)
    verdict = outcome.verdict(0.5)
    assert verdict.decision == "inconclusive"
    assert "no number of steps tried was enough" in words(verdict)
    assert 'set steps_per_sample="auto"' in words(verdict)


class Confirming:
    """An examination whose shares are known, with a finer run that differs from it as told."""

    def __init__(self, shares: list[float], missing: list[float]) -> None:
        places = np.arange(len(shares))
        slack = np.ones((1, len(shares)))
        self.share = np.array([shares])
        self.scales = np.ones(1)
        self.tight = Rows(places.astype(np.uint64), np.empty((0, len(shares))), slack, np.zeros(len(shares), np.uint8))
        self.missing = np.array(missing)
        self.asked: list[tuple[int, list[int]]] = []

    def again(self, steps: int) -> Any:
        def run(rows: Rows) -> Rows:
            self.asked.append((steps, rows.trials.tolist()))
            changed = rows.slack / (1.0 - 2.0 * self.missing[rows.trials.astype(np.int64)])
            return Rows(rows.trials, rows.parameters, changed, rows.status)

        return run

    def holds(self) -> bool:
        told: Any = self
        return _audit._is_confirmed(told, told, 4)


def test_the_tighter_run_is_confirmed_on_the_first_and_the_most_changed_trials() -> None:
    shares = [0.0, 1e-4, 0.02, 0.03, 0.01, 0.2]
    exact = Confirming(shares, [0.0] * 6)
    assert exact.holds()
    assert exact.asked == [(8, [0, 1, 3, 5])]
    assert not Confirming(shares, [0.0, 0.0, 0.0, 0.006, 0.0, 0.03]).holds()  # more than an eighth of the change
    assert Confirming(shares, [0.0, 0.0, 0.0, 0.002, 0.0, 0.015]).holds()
    assert Confirming(shares, [0.0, 0.0, 0.0, 0.006, 0.0, 0.0]).holds()  # one may have been rounded otherwise
    assert Confirming([0.0] * 6, [2e-7] * 6).holds()
    assert not Confirming([0.0] * 6, [2e-6] * 6).holds()
    assert not Confirming([9.0] * 6, [0.2] * 6).holds()  # however wrong the run is, this is no reference


def test_a_few_flips_call_for_no_advice() -> None:
    study = friction(steps_per_sample=20)
    study = study.with_(requirements=[wd.iae() <= float(np.median(study.run(400).measures["IAE of error"]) + 1e-7)])
    outcome = study.run(1500, progress=False)
    assert 1 <= outcome.audit().flipped + outcome.audit().undecided <= 7
    assert outcome.audit().numerics.caution == ""


def test_the_scale_of_a_limit_of_zero_is_that_of_the_first_trials() -> None:
    described = friction().with_(requirements=[wd.iae() <= 0.0])._describe(1)
    measures = np.concatenate([np.full(128, 1.0), np.full(10_000, 5.0)])[None, :]
    columns = Columns(np.empty((3, 10_128)), measures, np.zeros(10_128, np.uint8), 10_128)
    study = friction().with_(requirements=[wd.iae() <= 0.0])
    assert _audit.scales_for(study, described, columns).tolist() == [1.0]
    measures[0, 1:127] = 3.0
    assert _audit.scales_for(study, described, columns).tolist() == [3.0]


@pytest.mark.parametrize("linear", [False, True])
def test_what_never_happens_may_be_required_never_to_happen(linear: bool) -> None:
    """Every slack is zero, and no integration changes that: nothing is in question."""
    gain = wd.uniform(0.8, 1.2)
    written = wd.Plant({"y": 0.0}, {"y": "gain*u - y"}, input="u", output="y", parameters={"gain": gain})
    loop = loop_of(wd.FirstOrder(gain=gain, time_constant=1.0) if linear else written, actuator=wd.Actuator((-40, 40)))
    requirements = [wd.time_in_saturation() <= 0.0, wd.time_outside("output", -1.0, 2.0) <= 0.0]
    outcome = wd.Study(loop, requirements, seed=1).run(500, progress=False)
    assert outcome.audit().undecided == 0
    assert outcome.verdict(0.95).decision == "pass"


def test_an_audit_shows_progress_once_it_takes_a_while(monkeypatch: pytest.MonkeyPatch) -> None:
    shown: list[str] = []
    monkeypatch.setattr(_progress.ProgressBar, "_draw", lambda bar, work, *counts, **ends: shown.append(work))  # noqa: ARG005
    outcome = stiff(1).run(300, progress=False)
    outcome.audit(progress=True)
    assert shown == []
    monkeypatch.setattr(_reporter, "UNSHOWN", 0.0)
    stiff(1).run(300, progress=False).audit(progress=True)
    assert shown[0] == "trials run again"
    assert shown[-1] == "trials"

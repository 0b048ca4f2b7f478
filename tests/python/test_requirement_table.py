"""The table of requirements: what was asked, missed and measured, the same in every place that shows it."""

from __future__ import annotations

import json
import math
import re
from html.parser import HTMLParser
from pathlib import Path
from typing import Any

import numpy as np
import pytest

import windage as wd
from windage import _study
from windage._command_line import main
from windage._requirement_table import number_beside
from windage._runner import Columns
from windage._text_table import text_table

TRIALS = 600


def servo(requirements: Any, **changes: Any) -> wd.Study:
    """A loop whose error grows with the gain that is drawn."""
    loop = wd.Loop(
        plant=wd.FirstOrder(gain=wd.uniform(0.7, 1.3), time_constant=1.0),
        controller=wd.OutputADRC(order=1, controller_bandwidth=4.0, observer_bandwidth=40.0, b0=1.0),
        sample_period=0.01,
        duration=1.0,
        reference=wd.Step(1.0),
        disturbances={"load": 0.0},
    )
    return wd.Study(loop, requirements=requirements, seed=11, **changes)


LATE_ERROR = wd.peak("error", after=0.5)


@pytest.fixture(scope="module")
def outcome() -> wd.Outcome:
    requirements = [(LATE_ERROR <= 0.146).named("late error"), wd.minimum("output", after=0.8) >= 0.9535]
    return servo(requirements, measures=[wd.rms("command")]).run(TRIALS, progress=False)


@pytest.fixture(scope="module")
def unstable() -> wd.Study:
    """A study of which a part diverges."""
    plant = wd.Plant(
        states={"x": 0.0},
        equations={"x": "growth*x*x*x + u"},
        input="u",
        output="x",
        parameters={"growth": wd.uniform(0.0, 8.0)},
    )
    loop = wd.Loop(
        plant=plant,
        controller=wd.OutputADRC(order=1, controller_bandwidth=3.0, observer_bandwidth=20.0, b0=1.0),
        sample_period=0.02,
        duration=3.0,
        reference=wd.Step(1.0),
        actuator=wd.Actuator(limits=(-5.0, 5.0)),
        steps_per_sample=2,
    )
    return wd.Study(loop, requirements=[wd.overshoot() <= 0.3], seed=3)


def cells(shown: wd.Outcome | wd.Replay) -> dict[str, list[str]]:
    """The rows of the printed table by their names; wide enough to wrap none of them."""
    lines = shown._text(200).splitlines()
    rows = [re.split(r"  +", line.strip()) for line in lines if line.startswith("  ")]
    return {row[0]: row[1:] for row in rows}


def test_every_value_of_the_table_is_that_of_the_columns(outcome: wd.Outcome) -> None:
    rows = cells(outcome)
    assert rows["Requirement"] == ["Limit", "Missed", "Median", "Extreme", "Nominal"]
    nominal = outcome.study.nominal()
    for i, (name, worst) in enumerate(
        [("late error: peak of error after 0.5 s", np.max), ("minimum of output after 0.8 s", np.min)]
    ):
        label = name.split(": ")[-1]
        values = outcome.measures[label]
        limit, missed, median, extreme, at_nominal = rows[name]
        assert limit == outcome.study.requirements[i].words.removeprefix(label).strip()
        assert int(missed) == len(outcome.failed(i)) > 0
        assert float(median) == pytest.approx(np.quantile(values, 0.5, method="lower"), rel=1e-3)
        assert float(extreme) == pytest.approx(worst(values), rel=1e-3)
        assert float(at_nominal) == pytest.approx(nominal.measures[label], rel=1e-3)


def test_a_measure_without_a_limit_has_a_row_too(outcome: wd.Outcome) -> None:
    median, largest, nominal = cells(outcome)["rms of command"]
    values = outcome.measures["rms of command"]
    assert float(largest) == pytest.approx(values.max(), rel=1e-3)
    assert float(median) == pytest.approx(np.median(values), rel=1e-2)
    assert float(nominal) == pytest.approx(outcome.study.nominal().measures["rms of command"], rel=1e-3)


def test_the_same_table_is_in_text_notebook_and_command_line(
    outcome: wd.Outcome, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.chdir(tmp_path)
    wd.save(outcome.study, "servo.toml")
    main(["run", "servo.toml", "--trials", str(TRIALS), "--json", "verdict.json"])
    assert repr(outcome) in capsys.readouterr().out

    class Cells(HTMLParser):
        found: list[str]

        def handle_data(self, data: str) -> None:
            self.found.append(data)

    parser = Cells()
    parser.found = []
    parser.feed(outcome._repr_html_())
    for name, values in cells(outcome).items():
        assert name in parser.found
        assert set(values) <= set(parser.found)
    (first, second) = json.loads(Path("verdict.json").read_text(encoding="utf-8"))["requirements"]
    assert first["requirement"] == "late error"
    assert first["limit"] == "<= 0.146"
    assert first["extreme"] == outcome.measures[LATE_ERROR.label].max()
    assert second["nominal"] == outcome.study.nominal().measures["minimum of output after 0.8 s"]


def test_a_replay_shows_limit_value_slack_and_whether_met(outcome: wd.Outcome) -> None:
    replay = outcome.study.replay(int(outcome.failed(0)[0]))
    row = cells(replay)["late error: peak of error after 0.5 s"]
    assert row[0] == "<= 0.146"
    assert float(row[1]) == pytest.approx(replay.measures[LATE_ERROR.label], rel=1e-3)
    assert float(row[2]) == pytest.approx(replay.slack[0], rel=1e-3)
    assert row[3] == "MISSED"
    assert "rms of command" in cells(replay)
    assert "MISSED" in replay._repr_html_()


def test_a_drawn_limit_shows_its_range_and_in_a_replay_its_value() -> None:
    strictness = wd.uniform(0.1, 0.2, name="strictness")
    study = servo([wd.Requirement(LATE_ERROR, at_most=strictness)])
    outcome = study.run(TRIALS, progress=False)
    drawn = outcome.parameters["strictness"]
    row = cells(outcome)[LATE_ERROR.label]
    assert row[0] == f"<= {drawn.min():.4g} .. {drawn.max():.4g}"
    # The extreme value is that of the trial that is worst off, not the largest one of all.
    worst = int(outcome.slack[:, 0].argmin())
    assert float(row[3]) == pytest.approx(outcome.measures[LATE_ERROR.label][worst], rel=1e-3)
    replay = study.replay(worst)
    assert cells(replay)[LATE_ERROR.label][0] == f"<= {drawn[worst]:.10g}"


def test_diverged_trials_are_counted_and_left_out_of_median_and_extreme(unstable: wd.Study) -> None:
    outcome = unstable.run(400, progress=False)
    diverged = len(outcome.diverged)
    assert 0 < diverged < 400
    text = repr(outcome)
    assert f"{diverged} diverged trials have no value and missed every requirement" in text
    row = cells(outcome)["overshoot of output"]
    assert int(row[1]) == len(outcome.failed(0)) >= diverged
    finished = outcome.measures["overshoot of output"][outcome.status == 0]
    assert float(row[3]) == pytest.approx(finished.max(), rel=1e-3)
    assert f"{diverged} diverged trials" in outcome._repr_html_()


def test_an_outcome_in_which_every_trial_diverged_or_none_was_run_has_a_text(unstable: wd.Study) -> None:
    wild = unstable.with_(plant=unstable.loop.plant.with_(parameters={"growth": wd.uniform(50.0, 60.0)}))
    outcome = wild.run(20, progress=False)
    assert len(outcome.diverged) == 20
    assert cells(outcome)["overshoot of output"][1:] == ["20", "none", "none", "none"]
    nothing = Columns(np.empty((1, 0)), np.empty((1, 0)), np.empty(0, dtype=np.uint8), requested=10)
    stopped = wd.Outcome(unstable, unstable._run_description, nothing)
    assert cells(stopped)["overshoot of output"][1:4] == ["0", "none", "none"]
    assert "(stopped; 10 asked for)" in repr(stopped)


def test_the_nominal_unit_is_run_once_without_its_signals(outcome: wd.Outcome, monkeypatch: pytest.MonkeyPatch) -> None:
    study = servo(outcome.study.requirements)
    fresh = study.run(10, progress=False)
    made: list[Any] = []
    original = _study.make_campaign

    def counted(description: dict[str, Any]) -> Any:
        made.append(description)
        return original(description)

    monkeypatch.setattr(_study, "make_campaign", counted)
    for _ in range(3):
        repr(fresh), fresh._repr_html_(), repr(study.run(20, progress=False))
    assert len(made) == 1


def test_a_nominal_unit_that_cannot_be_run_fails_no_text(monkeypatch: pytest.MonkeyPatch) -> None:
    study = servo([LATE_ERROR <= 0.15])
    outcome = study.run(10, progress=False)

    def refused(*_: object) -> Any:
        raise wd.EngineError("no such unit")

    monkeypatch.setattr(_study, "make_campaign", refused)
    assert cells(outcome)[LATE_ERROR.label][-1] == "none"


def test_measures_that_become_one_at_nominal_keep_their_rows() -> None:
    band = wd.settling_time(band=wd.uniform(0.01, 0.05))
    study = servo([band <= 0.9, wd.settling_time(band=0.03) <= 0.8])
    outcome = study.run(50, progress=False)
    lines = outcome._lines
    assert lines[0].nominal == lines[1].nominal == next(iter(study.nominal().measures.values()))


@pytest.mark.parametrize("name", ["n" * 130, "a name of many words " * 6, "short"])
@pytest.mark.parametrize("limit", [0.15, 1.23456789e-300, 1e300])
def test_no_line_is_longer_than_eighty_columns(name: str, limit: float) -> None:
    study = servo(
        [wd.Requirement(LATE_ERROR, at_most=limit, name=name.strip()), wd.rms("command") >= wd.uniform(-1e-12, 1e12)]
    )
    outcome = study.run(20, progress=False)
    for text in (repr(outcome), repr(study.replay(3))):
        assert max(map(len, text.splitlines())) <= 80
        written = "".join(text.split())
        assert "".join(name.split()) in written or len(name) > 100


def test_counts_of_ten_million_trials_are_grouped_and_fit() -> None:
    row = ("peak of the pitch deviation from the reference after 12.5 s", "<= 0.0123456", "10 000 000")
    values = ("-1.234e-05", "-1.234e-05", "-1.234e-05")
    lines = text_table(("Requirement", "Limit", "Missed", "Median", "Extreme", "Nominal"), [(*row, *values)])
    assert max(map(len, lines)) <= 80
    assert "10 000 000" in "\n".join(lines)


def test_a_value_beside_its_limit_is_written_apart_from_it() -> None:
    assert number_beside(0.10004, (0.1,)) == "0.10004"
    assert number_beside(0.1, (0.1,)) == "0.1"
    assert number_beside(math.nextafter(0.1, 1.0), (0.1,)) == "0.10000000000000002"
    assert number_beside(0.123456, (0.1,)) == "0.1235"
    assert number_beside(math.inf, (0.1,)) == "infinite"
    assert number_beside(math.nan, (0.1,)) == "none"

"""Drivers are worked out once, however many rows, pictures and hints ask for them."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import numpy as np
import pytest

import windage as wd
from windage import _drivers
from windage._command_line import main
from windage._demo import demo_study


def test_every_parameter_and_result_is_ranked_once(monkeypatch: pytest.MonkeyPatch) -> None:
    requirements = [wd.peak("error", after=5.0) <= 1e-3, wd.rms("torque") <= 12.0, wd.peak("torque") <= 50.0]
    outcome = demo_study().with_(requirements=requirements).run(400, progress=False)
    ranked, sizes = _drivers.ranked, list[int]()

    def counted(values: Any) -> Any:
        sizes.append(len(values))
        return ranked(values)

    monkeypatch.setattr(_drivers, "ranked", counted)
    outcome.plot()
    outcome.plot(parameters=6)
    assert outcome.drivers() is outcome.drivers()
    assert len(sizes) == len(outcome.parameters) + len(requirements) + 1


def test_of_very_many_trials_some_are_ranked_and_that_is_said(monkeypatch: pytest.MonkeyPatch) -> None:
    outcome = demo_study().run(3000, progress=False)
    every = outcome.drivers()
    assert (every.trials, every.failures, "Ranked" in every.note) == (3000, len(outcome.failures), False)
    monkeypatch.setattr(_drivers, "MOST_RANKED", 1400)
    some = _drivers.find_drivers(outcome)
    failed = int(np.count_nonzero(~outcome.passed[::3]))
    assert (some.trials, some.failures) == (1000, failed)
    assert "Ranked: 1 000 of 3 000 trials, evenly taken." in str(some)
    assert some[0].parameter == every[0].parameter
    assert abs(some[0].correlation - every[0].correlation) < 0.1
    assert some[0].high - some[0].low > 1.5 * (every[0].high - every[0].low)  # fewer trials know less


def test_too_few_failures_among_those_ranked_name_no_cause_of_failing(
    monkeypatch: pytest.MonkeyPatch, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.setattr(_drivers, "MOST_RANKED", 500)
    wd.save(demo_study(), tmp_path / "dish.toml")
    main(["run", str(tmp_path / "dish.toml"), "--trials", "3000", "--json", str(tmp_path / "report.json")])
    assert json.loads((tmp_path / "report.json").read_text())["trials"]["failed"] >= _drivers.FEW_FAILURES
    printed = " ".join(capsys.readouterr().out.split())
    assert "among them) to rank causes of failing" in printed
    assert "rank correlation of drawn parameters with failing" not in printed
    assert "rank correlation of drawn parameters with the slack of" in printed


def test_an_outcome_without_any_trial_has_no_drivers() -> None:
    outcome = list(demo_study().batches(1000, size=10, progress=lambda *_: False))[-1]
    assert (outcome.trials, len(outcome.drivers())) == (0, 0)


def test_no_requirement_is_called_as_the_drivers_call_all_of_them() -> None:
    with pytest.raises(wd.DescriptionError, match=r"requirement\.name: found 'failing'"):
        (wd.rms("error") <= 1.0).named("failing")

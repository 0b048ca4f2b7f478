"""A command that is interrupted says so and ends with the code of that, whatever it was busy with."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest

import windage as wd
from windage import _audit
from windage._command_line import main
from windage._demo import demo_study


@pytest.fixture
def study_file(tmp_path: Path) -> str:
    wd.save(demo_study(), tmp_path / "dish.toml")
    return str(tmp_path / "dish.toml")


def interrupt(*_: Any, **__: Any) -> Any:
    raise KeyboardInterrupt


def test_ctrl_c_that_no_run_hears_has_the_code_of_an_interruption(
    study_file: str, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.setattr(wd.Study, "warnings", interrupt)
    assert main(["run", study_file, "--trials", "10"]) == 4
    assert "interrupted; what is not printed above was not finished" in capsys.readouterr().err


def test_a_verdict_whose_audit_was_interrupted_is_interim(
    study_file: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    def stop(*_: Any) -> Any:
        raise _audit.Stopped

    monkeypatch.setattr(_audit, "_integrated", stop)
    report = tmp_path / "report.json"
    assert main(["run", study_file, "--trials", "200", "--at-least", "0.5", "--json", str(report)]) == 4
    found = json.loads(report.read_text(encoding="utf-8"))
    assert (found["exit_code"], found["interim"], found["verdict"]) == (4, True, None)
    assert found["interim_verdict"]["decision"] == "inconclusive"
    printed = " ".join(capsys.readouterr().out.split())
    assert "not examined: stopped before it was done" in printed
    assert "INTERIM: whether at least 50 % of all trials pass is open until the numerical error is known." in printed
    assert "PASS" not in printed


def test_a_run_that_was_stopped_before_its_first_trial_says_so(
    study_file: str, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    nothing = next(iter(demo_study().batches(10, size=1, progress=lambda *_: False)))
    assert nothing.trials == 0
    monkeypatch.setattr(wd.Study, "run", lambda *_: nothing)
    assert main(["run", study_file, "--trials", "10"]) == 4
    assert "interrupted; what is not printed above was not finished" in capsys.readouterr().err

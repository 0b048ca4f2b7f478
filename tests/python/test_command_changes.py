"""`--set`, `--seed`, `--short` and titles; printed commands run as they are printed."""

from __future__ import annotations

import json
import os
import shlex
import shutil
import subprocess
import sys
from pathlib import Path

import pytest

import windage as wd
from windage import _command_output
from windage._command_changes import changed
from windage._command_line import main
from windage._demo import demo_study


@pytest.fixture(scope="module")
def study() -> wd.Study:
    named = [wd.Requirement(wd.peak("error", after=5.0), at_most=1e-3, name="late error"), wd.rms("torque") <= 12.0]
    return demo_study().with_(requirements=named, duration=6.0)


def test_every_drawn_parameter_can_be_set_at_the_path_that_is_printed(study: wd.Study) -> None:
    def drawn(value: float) -> object:
        return wd.uniform(0.9 * value, 1.1 * value)

    window = {"after": drawn(1.0), "before": drawn(3.0)}
    requirements = [
        (wd.peak("error", **window) <= drawn(1e-3)).named("late error <= 1 mrad"),
        wd.minimum("torque") >= drawn(90.0),
        wd.settling_time(tolerance=drawn(0.01)) / wd.rms("torque", **window) <= drawn(2.0),
    ]
    everywhere = study.with_(
        sample_period=drawn(2e-3),
        duration=drawn(6.0),
        sensor=wd.Sensor(noise=drawn(1e-5), range=(-1.0, drawn(2.0)), delay=drawn(1e-3)),
        reference=wd.Step(drawn(0.1)) + wd.Sine(0.1, period=drawn(3.0)),
        controller=wd.ErrorADRC(2, b0=drawn(0.07), controller_bandwidth=8.0, observer_gains=[drawn(99.0), 6e3, 5e5]),
        requirements=requirements,
        measures=[wd.reversals("torque", drawn(0.1))],
    )
    paths = list(everywhere.parameters)
    assert len(paths) == 24
    for path in paths:
        value = everywhere.parameters[path].nominal
        rest = changed(everywhere, [f"{path}={value!r}"]).parameters
        assert list(rest) == [other for other in paths if other != path]


@pytest.fixture
def study_file(study: wd.Study, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> str:
    monkeypatch.chdir(tmp_path)
    wd.save(study, "a dish.toml")
    return "a dish.toml"


@pytest.mark.parametrize(
    ("path", "value", "reads"),
    [
        ("loop.controller.observer_bandwidth", "120", lambda s: s.loop.controller.observer_bandwidth == 120.0),
        ("controller.observer_bandwidth", "120", lambda s: s.loop.controller.observer_bandwidth == 120.0),
        ("inertia", "4000.5", lambda s: s.loop.plant.parameters["inertia"] == 4000.5),
        ("plant.inertia", "4000.5", lambda s: s.loop.plant.parameters["inertia"] == 4000.5),
        ("inertia.sd", "300", lambda s: s.loop.plant.parameters["inertia"].sd == 300.0),
        ("plant.states.azimuth", "0.1", lambda s: s.loop.plant.states["azimuth"] == 0.1),
        ("actuator.limits[1]", "50", lambda s: s.loop.actuator.limits[1] == 50.0),
        ("actuator.time_constant", "0.01", lambda s: s.loop.actuator.time_constant == 0.01),
        ("disturbances.wind.intensity", "700", lambda s: s.loop.disturbances["wind"].intensity == 700.0),
        ("requirements[1].at_most", "9", lambda s: s.requirements[1].at_most == 9.0),
        ("requirements[late error].at_most", "0.01", lambda s: s.requirements[0].at_most == 0.01),
        (
            "sample_period",
            "{spread='uniform', low=0.001, high=0.002}",
            lambda s: getattr(s.loop.sample_period, "high", 0) == 0.002,
        ),
        ("integrator", "euler", lambda s: s.loop.integrator == "euler"),
        ("title", "'dish, b0 raised'", lambda s: s.title == "dish, b0 raised"),
        ("seed", "7", lambda s: s.seed == 7),
    ],
)
def test_a_path_of_the_file_or_of_the_messages_is_set(study: wd.Study, path: str, value: str, reads: object) -> None:
    assert callable(reads)
    assert not reads(study)
    assert reads(changed(study, [f"{path}={value}"]))


def test_nothing_changed_is_the_same_study_and_changes_add_up(study: wd.Study) -> None:
    assert changed(study, []) is study
    assert changed(study, ["seed=2026"]).digest == study.digest
    both = changed(study, ["controller.b0=0.1", "inertia=4000"], seed=9)
    assert (both.loop.controller.b0, both.loop.plant.parameters["inertia"], both.seed) == (0.1, 4000.0, 9)


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ("inertai=1", ["inertai", "Did you mean 'inertia'"]),
        ("plant.inertai=1", ["inertai"]),
        ("controller.observer_bandwith=1", ["controller.observer_bandwith", "Did you mean 'observer_bandwidth'"]),
        ("senzor.noise=1", ["senzor.noise", "Did you mean 'sensor.noise'"]),
        ("actuator.limits[7]=1", ["actuator.limits[7]"]),
        ("requirements[none].at_most=1", ["requirements[none].at_most"]),
        ("b0=1", ["Did you mean 'controller.b0'?"]),
        ("windage_study=2", ["Known: "]),
        ("sample_period.low=1", ["sample_period.low"]),
        ("sample_period=-1", ["sample_period", "-1"]),
        ("sample_period", ["PATH=VALUE"]),
        ("=1", ["PATH=VALUE"]),
        ("controller.b0=", ["PATH=VALUE"]),
        ("controller.b0=1\nseed = 3", ["One value at a time"]),
        ("controller.b0=[", ["as in a study file"]),
        ("a..b=1", ["a path such as"]),
        ("[0]=1", ["a path such as"]),
    ],
)
def test_a_wrong_change_names_the_path_and_suggests(
    study_file: str, change: str, words: list[str], capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["run", study_file, "--trials", "8", "--set", change]) == 3
    printed = capsys.readouterr()
    assert printed.out == ""
    for word in words:
        assert word in printed.err
    assert "Traceback" not in printed.err


def test_run_and_replay_with_changes_are_those_of_python(
    study: wd.Study, study_file: str, capsys: pytest.CaptureFixture[str]
) -> None:
    changes = ["--set", "controller.observer_bandwidth=140", "--seed", "5"]
    main(["run", study_file, "--trials", "64", *changes, "--json", "verdict.json"])
    capsys.readouterr()
    same = changed(study, ["controller.observer_bandwidth=140"], seed=5)
    report = json.loads(Path("verdict.json").read_text(encoding="utf-8"))
    assert report["study"]["digest"] == same.digest
    assert report["study"]["seed"] == 5
    assert report["trials"]["failed"] == len(same.run(64, progress=False).failures)
    assert main(["replay", study_file, "--trial", "3", *changes]) == 0
    assert capsys.readouterr().out.startswith(repr(same.replay(3)))


def test_the_printed_command_replays_the_trial_with_the_changes_of_the_run(
    study_file: str, capsys: pytest.CaptureFixture[str]
) -> None:
    main(["run", study_file, "--trials", "64", "--set", "requirements[0].at_most=1e-5", "--seed", "5"])
    last = capsys.readouterr().out.splitlines()[-1]
    words = shlex.split(last.partition(": ")[2])
    assert words[:3] == ["windage", "replay", study_file]
    assert main(words[1:]) == 0
    assert "MISSED" in capsys.readouterr().out


def called_with(monkeypatch: pytest.MonkeyPatch, name: str) -> str:
    monkeypatch.setattr(sys, "argv", [name])
    return _command_output.called_as()


def test_commands_are_printed_as_the_tool_was_called(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    script = tmp_path / ".venv" / "bin" / "windage"
    script.parent.mkdir(parents=True)
    script.write_text("#!/bin/sh\n")
    script.chmod(0o755)
    monkeypatch.setenv("PATH", "/nowhere")
    assert called_with(monkeypatch, ".venv/bin/windage") == ".venv/bin/windage"
    assert called_with(monkeypatch, str(script)) == str(script)
    monkeypatch.setenv("PATH", str(script.parent))
    assert called_with(monkeypatch, str(script)) == "windage"
    other = tmp_path / "other" / "windage"
    other.parent.mkdir()
    shutil.copy(script, other)
    assert called_with(monkeypatch, "other/windage") == "other/windage"
    assert called_with(monkeypatch, "/anywhere/pytest") == "windage"


def test_the_module_runs_and_prints_commands_that_run(study_file: str) -> None:
    command = [sys.executable, "-m", "windage"]
    arguments = ["run", study_file, "--trials", "32", "--set", "requirements[0].at_most=1e-5"]
    environment = {**os.environ, "PATH": "/usr/bin:/bin"}
    done = subprocess.run([*command, *arguments], capture_output=True, text=True, check=False, env=environment)
    assert done.returncode == 1, done.stderr
    again = done.stdout.splitlines()[-1].partition(": ")[2]
    assert "-m windage replay" in again
    replayed = subprocess.run(shlex.split(again), capture_output=True, text=True, check=True, env=environment)
    assert "MISSED" in replayed.stdout


def test_short_is_one_line_and_loses_nothing(
    study: wd.Study, study_file: str, capsys: pytest.CaptureFixture[str]
) -> None:
    code = main(["run", study_file, "--trials", "200", "--short", "--json", "verdict.json"])
    printed = capsys.readouterr()
    outcome = study.run(200, progress=False)
    verdict = outcome.verdict(0.95)
    assert printed.out == f"{verdict.headline} {len(outcome.failures)} of 200 trials failed.\n"
    assert code == {"pass": 0, "fail": 1, "inconclusive": 2}[verdict.decision]
    assert "Advice: " in printed.err
    assert "Wrote verdict.json" in printed.err


# --- title
# ------------------------------------------------------------------------------------------------


def test_a_title_heads_everything_and_decides_no_digit(
    study: wd.Study, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    titled = study.with_(title="Dish <3>, winter")
    assert titled.digest == study.digest
    wd.save(titled, tmp_path / "titled.toml")
    assert wd.load(tmp_path / "titled.toml").title == titled.title
    outcome, plain = titled.run(64, progress=False), study.run(64, progress=False)
    assert repr(outcome) == f"Study: Dish <3>, winter\n{plain!r}"
    assert repr(titled.replay(0)) == f"Study: Dish <3>, winter\n{study.replay(0)!r}"
    assert "Dish <3>, winter" in repr(titled).splitlines()[0]
    assert "Study        Dish <3>, winter" in str(outcome.verdict(0.9))
    assert "Dish <3>, winter" in str(outcome.verdicts(0.9)).splitlines()[0]
    assert outcome.verdict(0.9).to_dict()["title"] == titled.title
    assert "Study  " not in str(plain.verdict(0.9))
    for page in (outcome._repr_html_(), titled.replay(0)._repr_html_(), outcome.verdict(0.9)._repr_html_()):
        assert "Dish &lt;3&gt;, winter" in page
    monkeypatch.chdir(tmp_path)
    main(["run", "titled.toml", "--trials", "64", "--short"])
    assert capsys.readouterr().out.endswith(" Study: Dish <3>, winter\n")


@pytest.mark.parametrize("title", [3, None, "two\nlines", "a\x1b[2Kb", "x" * 201])
def test_a_title_that_is_no_line_of_text_is_refused(study: wd.Study, title: object) -> None:
    with pytest.raises(wd.DescriptionError, match="title"):
        study.with_(title=title)


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (["--trials", "1e4"], ["--trials", "'1e4'", "a whole number", "Write 10000, without point and exponent."]),
        (["--trials=20,000.5"], ["--trials", "'20,000.5'", "a whole number"]),
        (["--at-least", "95%"], ["--at-least", "'95%'", "a number", "fraction: 0.95."]),
        (["--at-least", "0.9", "--at-least", "0,95"], ["'0,95'", "a number", "Write decimals with a point."]),
        (["--seed", "abc"], ["--seed", "'abc'", "a whole number"]),
        (["--sede", "3"], ["--sede", "--seed", "run --help"]),
    ],
)
def test_what_is_no_number_is_shown(
    arguments: list[str], words: list[str], study_file: str, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["run", study_file, *arguments]) == 3
    written = capsys.readouterr().err
    assert all(word in written for word in words), written


@pytest.mark.parametrize("option", [["--after", "1"], ["--before", "2"], ["--onset"], ["--signal", "wind"]])
def test_what_the_picture_shows_asks_for_a_picture(
    option: list[str], study_file: str, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["replay", study_file, "--nominal", *option]) == 3
    captured = capsys.readouterr()
    assert option[0] in captured.err
    assert "--plot FILE" in captured.err
    assert not captured.out

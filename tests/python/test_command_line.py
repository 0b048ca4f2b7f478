"""The command line: exit codes, what is printed and written, errors in one block, Ctrl-C."""

from __future__ import annotations

import io
import json
import re
import signal
import subprocess
import sys
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow.csv
import pyarrow.parquet
import pytest
from rich.console import Console

import windage as wd
from windage import _command_line, _command_output, _reporter
from windage._command_line import main
from windage._demo import DEMO_TRIALS, demo_study
from windage._progress import ProgressBar
from windage._study_file import from_toml
from windage._text_table import plainly_grouped

TRIALS = 2_000
COMMANDS = ("demo", "run", "replay", "config")


def servo(limit: float, observer_bandwidth: float = 40.0) -> wd.Study:
    """A quick study whose error grows with the gain that is drawn."""
    loop = wd.Loop(
        plant=wd.FirstOrder(gain=wd.uniform(0.7, 1.3), time_constant=1.0),
        controller=wd.OutputADRC(order=1, controller_bandwidth=4.0, observer_bandwidth=observer_bandwidth, b0=1.0),
        sample_period=0.01,
        duration=1.0,
        reference=wd.Step(1.0),
        sensor=wd.Sensor(noise=1e-3),
        disturbances={"load": 0.0},
    )
    return wd.Study(loop, requirements=[wd.peak("error", after=0.5) <= limit], seed=11)


@pytest.fixture(scope="module")
def limit() -> float:
    """The limit that nine out of ten trials keep."""
    (values,) = servo(1.0).run(TRIALS, progress=False).measures.values()
    return float(np.sort(values)[TRIALS * 9 // 10 - 1])


@pytest.fixture
def study(limit: float) -> wd.Study:
    return servo(limit)


@pytest.fixture
def study_file(study: wd.Study, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> str:
    """The name of a study file in the current folder, which is empty apart from it."""
    monkeypatch.chdir(tmp_path)
    wd.save(study, "servo.toml")
    return "servo.toml"


def run_study(study_file: str, *more: str) -> int:
    return main(["run", study_file, "--trials", str(TRIALS), *more])


# --- run
# ------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("at_least", "decision", "code"), [(0.85, "pass", 0), (0.95, "fail", 1), (0.9, "inconclusive", 2)]
)
def test_exit_code_says_the_verdict(
    study: wd.Study,
    study_file: str,
    at_least: float,
    decision: str,
    code: int,
    capsys: pytest.CaptureFixture[str],
) -> None:
    verdict = study.run(TRIALS, progress=False).verdict(at_least, 0.9)
    assert verdict.decision == decision
    assert run_study(study_file, "--at-least", str(at_least), "--confidence", "0.9") == code
    printed = capsys.readouterr()
    assert str(verdict) in printed.out
    assert printed.err == ""


def test_json_report_is_that_of_python(study: wd.Study, study_file: str) -> None:
    code = run_study(study_file, "--at-least", "0.95", "--json", "verdict.json")

    def refuse(constant: str) -> Any:
        raise AssertionError(f"{constant} is no JSON")

    report = json.loads(Path("verdict.json").read_text(encoding="utf-8"), parse_constant=refuse)
    outcome = study.run(TRIALS, progress=False)
    assert report["exit_code"] == code == 1
    assert report["interim"] is False
    assert report["interim_verdict"] is None
    assert report["verdict"] == outcome.verdict(0.95).to_dict()
    assert report["study"] == {"file": "servo.toml", "title": "", "digest": study.digest, "seed": 11}
    assert report["trials"] == {"asked_for": TRIALS, "run": TRIALS, "failed": TRIALS // 10, "diverged": 0}
    assert report["first_failures"] == outcome.failures.tolist()
    (requirement,) = report["requirements"]
    assert requirement["missed"] == TRIALS // 10
    assert requirement["worst_trial"] == int(np.argmin(outcome.slack[:, 0]))
    strongest = outcome.drivers().rows[0]
    assert report["drivers"][0]["parameter"] == strongest.parameter
    assert report["drivers"][0]["rank_correlation"] == strongest.correlation


def test_table_has_every_trial_and_says_what_it_came_from(study: wd.Study, study_file: str) -> None:
    run_study(study_file, "--table", "trials.parquet")
    table = pyarrow.parquet.read_table("trials.parquet")
    expected = study.run(TRIALS, progress=False).table()
    assert table.column_names == expected.column_names
    for name in table.column_names:
        assert table[name].to_pylist() == expected[name].to_pylist()
    about = table.schema.metadata
    assert from_toml(about[b"windage.study"].decode()) == study
    assert about[b"windage.digest"].decode() == study.digest


def test_table_as_csv(study: wd.Study, study_file: str) -> None:
    run_study(study_file, "--table", "trials.csv")
    table = pyarrow.csv.read_csv("trials.csv")
    expected = study.run(TRIALS, progress=False).table()
    assert table.column_names == expected.column_names
    assert table.to_pylist() == expected.to_pylist()


@pytest.mark.parametrize(("name", "start"), [("o.png", b"\x89PNG"), ("o.pdf", b"%PDF"), ("o.svg", b"<?xml")])
def test_plot_is_written_in_the_format_of_its_name(study_file: str, name: str, start: bytes) -> None:
    run_study(study_file, "--plot", name)
    assert Path(name).read_bytes().startswith(start)


def test_threads_change_nothing_that_is_printed(study_file: str, capsys: pytest.CaptureFixture[str]) -> None:
    printed = []
    for threads in ("1", "2", "5"):
        run_study(study_file, "--threads", threads)
        printed.append(capsys.readouterr().out)
    assert printed[0] == printed[1] == printed[2]


def test_advice_and_the_next_command_are_printed(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.chdir(tmp_path)
    study = servo(0.0, observer_bandwidth=150.0)
    wd.save(study, "a servo.toml")
    assert run_study("a servo.toml") == 1
    printed = capsys.readouterr().out
    assert f"Advice: {study.warnings()[0]}." in printed
    # The name has a blank: the command can be copied as it is.
    assert "windage replay 'a servo.toml' --trial 0" in printed


# --- replay
# ------------------------------------------------------------------------------------------------


def test_replay_writes_the_signals_to_the_last_digit(study: wd.Study, study_file: str) -> None:
    assert main(["replay", study_file, "--trial", "7", "--csv", "seven.csv", "--parquet", "seven.parquet"]) == 0
    expected = study.replay(7)
    for table in (pyarrow.csv.read_csv("seven.csv"), pyarrow.parquet.read_table("seven.parquet")):
        assert table.column_names[: len(expected)] == list(expected.signals)
        for name in expected.signals:
            np.testing.assert_array_equal(table[name].to_numpy(), expected[name])
    written = pyarrow.parquet.read_table("seven.parquet")
    np.testing.assert_array_equal(written["total_disturbance"].to_numpy(), expected.total_disturbance)
    np.testing.assert_array_equal(written["estimated_disturbance"].to_numpy(), expected.estimated_disturbance)


def test_replay_prints_what_was_drawn_and_met(
    study: wd.Study, study_file: str, capsys: pytest.CaptureFixture[str]
) -> None:
    failing = int(study.run(TRIALS, progress=False).failures[0])
    assert main(["replay", study_file, "--trial", str(failing), "--plot", "failing.png"]) == 0
    printed = capsys.readouterr().out
    replay = study.replay(failing)
    assert repr(replay) in printed
    assert "MISSED" in printed
    assert f"gain = {replay.parameters['gain']!r}" in printed
    assert Path("failing.png").read_bytes().startswith(b"\x89PNG")


def test_nominal_unit(study: wd.Study, study_file: str, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["replay", study_file, "--nominal"]) == 0
    assert capsys.readouterr().out.startswith(repr(study.nominal()))


# --- demo
# ------------------------------------------------------------------------------------------------


def test_demo_leaves_a_study_and_a_picture(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    folder = tmp_path / "first" / "look"
    assert main(["demo", "--trials", "600", "--output", str(folder)]) == 0
    printed = capsys.readouterr().out
    assert wd.load(folder / "dish.toml") == demo_study()
    assert (folder / "windage-demo.png").read_bytes().startswith(b"\x89PNG")
    assert sorted(path.name for path in folder.iterdir()) == ["dish.toml", "windage-demo.png"]
    assert "PASS: at least 95 % of all trials pass, at confidence 95 %." in printed
    assert "disturbances.wind.intensity" in printed
    assert f"windage replay {folder / 'dish.toml'} --trial 48" in printed


def test_demo_can_be_repeated_but_keeps_a_changed_study(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.setattr(_command_line, "has_matplotlib", lambda: False)
    arguments = ["demo", "--trials", "16", "--output", str(tmp_path)]
    main(arguments)
    assert main(arguments) in (0, 1, 2)
    changed = (tmp_path / "dish.toml").read_text().replace("seed = 2026", "seed = 2027")
    (tmp_path / "dish.toml").write_text(changed)
    capsys.readouterr()
    assert main(arguments) == 3
    assert (tmp_path / "dish.toml").read_text() == changed
    assert "It holds another study" in capsys.readouterr().err


def test_demo_without_matplotlib_says_how_to_get_it_and_prints_the_rest(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.setattr(_command_line, "has_matplotlib", lambda: False)
    assert main(["demo", "--trials", "600", "--output", str(tmp_path)]) == 0
    printed = capsys.readouterr().out
    assert "pip install 'windage[plots]'" in printed
    assert "PASS" in printed
    assert "Next:" in printed
    assert sorted(path.name for path in tmp_path.iterdir()) == ["dish.toml"]


def test_demo_study_tells_its_story() -> None:
    # The nominal unit passes, a few in a hundred fail, for two reasons.
    study = demo_study()
    assert study.nominal().passed
    outcome = study.run(4_000, progress=False)
    assert 0.015 < len(outcome.failures) / outcome.trials < 0.045
    assert outcome.verdict(0.95).decision == "pass"
    assert outcome.verdict(0.99).decision == "fail"
    peak, effort = outcome.requirements
    assert len(outcome.failed(effort)) >= 20
    assert len(np.setdiff1d(outcome.failed(peak), outcome.failed(effort))) >= 20
    delays = outcome.parameters["actuator.delay"]
    assert delays[outcome.failed(effort)].min() > np.quantile(delays, 0.7)
    assert DEMO_TRIALS == 10_000


def test_cancelling_the_disturbance_is_worth_a_factor_of_ten() -> None:
    # Common practice: without the cancellation the tracking error grows about tenfold.
    study = demo_study().with_(requirements=(), measures=[wd.rms("error", after=5.0), wd.peak("error", after=5.0)])
    without = study.with_controller(study.loop.controller.with_(cancel_disturbance=False))
    for name, values in study.run(300, progress=False).measures.items():
        ratio = np.median(without.run(300, progress=False).measures[name] / values)
        assert 7.0 < ratio < 15.0


# --- errors
# ------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (["run", "absent.toml"], ["study file", "absent.toml", "a file that can be read"]),
        (["run", "servo.toml", "--trials", "0"], ["trials", "0", "a whole number from 1"]),
        (["run", "servo.toml", "--trials", "many"], ["--trials", "whole number"]),
        (["run", "servo.toml", "--trails", "10"], ["--trails", "--trials", "windage run --help"]),
        (["run", "servo.toml", "--at-least", "95"], ["at_least", "95", "below 1", "fraction"]),
        (["run", "servo.toml", "--confidence", "0.05"], ["confidence", "0.05", "at least 0.5"]),
        (["run", "servo.toml", "--threads", "-1"], ["threads", "-1"]),
        (["run", "servo.toml", "--plot", "a.bmp"], ["--plot", "a.bmp", ".png"]),
        (["run", "servo.toml", "--json", "absent/a.json"], ["--json", "a folder that exists", "Make absent"]),
        (["run", "servo.toml", "--table", "."], ["--table", ".parquet"]),
        (["run"], ["STUDY.toml", "windage run --help"]),
        (["replay", "servo.toml"], ["--trial", "neither", "--nominal"]),
        (["replay", "servo.toml", "--trial", "3", "--nominal"], ["--trial", "both"]),
        (["replay", "servo.toml", "--trial", "-1"], ["trial", "-1"]),
        (["replay", "servo.toml", "--trial", "1", "--plot", "a.png", "--after", "9"], ["after", "9 s"]),
        (["demo", "--output", "servo.toml"], ["--output", "a folder"]),
        (["simulate"], ["simulate", "windage --help"]),
        (["--verbose"], ["--verbose", "windage --help"]),
    ],
    ids=" ".join,
)
def test_wrong_usage_is_one_readable_block(
    study_file: str, arguments: list[str], words: list[str], capsys: pytest.CaptureFixture[str]
) -> None:
    before = sorted(Path().iterdir())
    assert main(arguments) == 3
    printed = capsys.readouterr()
    assert printed.err.startswith("Error: ")
    assert "Traceback" not in printed.out + printed.err
    assert len(printed.err.splitlines()) <= 4
    for word in words:
        assert word in printed.err
    assert sorted(Path().iterdir()) == before
    assert study_file == "servo.toml"


def test_wrong_study_file_names_the_place_in_it(study_file: str, capsys: pytest.CaptureFixture[str]) -> None:
    text = Path(study_file).read_text()
    Path(study_file).write_text(text.replace("sample_period = 0.01", "sample_period = -0.01"))
    assert main(["run", study_file]) == 3
    assert "sample_period" in capsys.readouterr().err


def test_plot_without_matplotlib_is_refused_before_any_trial(
    study_file: str, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.setattr(_command_output, "has_matplotlib", lambda: False)
    assert run_study(study_file, "--plot", "o.png") == 3
    printed = capsys.readouterr()
    assert "pip install 'windage[plots]'" in printed.err
    assert printed.out == ""


def test_a_defect_is_told_apart_from_wrong_usage(
    study_file: str, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    def broken(*_: object) -> None:
        raise ZeroDivisionError("division by zero")

    monkeypatch.setattr(_command_line, "load", broken)
    assert main(["run", study_file]) == 5
    printed = capsys.readouterr().err
    assert "a defect in windage" in printed
    assert "ZeroDivisionError: division by zero" in printed
    assert "test_command_line.py, line" in printed


def test_files_are_written_in_one_piece(tmp_path: Path) -> None:
    target = tmp_path / "verdict.json"
    target.write_text("old")
    with pytest.raises(ValueError, match="Out of range float values"):
        _command_output.write_json({"bound": float("nan")}, target)
    writing = _command_output.in_one_piece(target)
    writing.__enter__().write(b"half")
    assert writing.__exit__(KeyboardInterrupt, KeyboardInterrupt(), None) is False
    assert target.read_text() == "old"
    assert [path.name for path in tmp_path.iterdir()] == ["verdict.json"]


@pytest.mark.skipif(not Path("/dev/null").exists(), reason="no devices")
def test_reports_go_into_pipes_and_devices_as_they_stand(study_file: str, tmp_path: Path) -> None:
    (tmp_path / "link.json").symlink_to("real.json")
    assert run_study(study_file, "--at-least", "0.8", "--json", "/dev/null", "--table", "link.parquet") == 0
    assert run_study(study_file, "--at-least", "0.8", "--json", "link.json") == 0
    assert json.loads((tmp_path / "real.json").read_text())["exit_code"] == 0
    assert not Path("/dev/null").is_file()
    assert run_study(study_file, "--table", "/dev/null") == 3  # which kind?
    assert run_study(study_file, "--json", "missing/link.json") == 3
    code = f"from windage._command_line import main; raise SystemExit(main(['run', {study_file!r}, '--short', "
    code += "'--trials', '100', '--json', '/dev/stdout']))"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False)
    assert json.loads(done.stdout[done.stdout.index("{") : done.stdout.rindex("}") + 1])["trials"]["run"] == 100


# --- interruption and progress
# ------------------------------------------------------------------------------------------------


def test_interrupted_run_is_judged_as_interim(
    study: wd.Study, study_file: str, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    class Interrupted(ProgressBar):
        def __call__(self, done: int, total: int) -> bool:  # noqa: ARG002
            if done >= 1_000:
                raise KeyboardInterrupt
            return True

    monkeypatch.setattr(_reporter, "ProgressBar", Interrupted)
    monkeypatch.setattr(sys.stderr, "isatty", lambda: True)
    trials = 3_000_000
    code = main(["run", study_file, "--trials", str(trials), "--at-least", "0.8", "--json", "interim.json"])
    assert code == 4
    report = json.loads(Path("interim.json").read_text(encoding="utf-8"))
    done = report["trials"]["run"]
    assert 1_000 <= done < trials
    assert report["interim"] is True
    assert report["verdict"] is None
    same = study.run(done, progress=False)
    assert report["interim_verdict"]["failures"] == len(same.failures)
    printed = capsys.readouterr().out
    assert f"INTERIM: stopped after {done:,} of {trials:,} trials;".replace(",", " ") in printed
    assert "PASS:" not in printed


@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM])
def test_ctrl_c_and_termination_end_the_process_with_what_is_done(number: signal.Signals, tmp_path: Path) -> None:
    # The observer is too fast for advice to be absent: its line tells that the run begins.
    wd.save(servo(0.1, observer_bandwidth=150.0), tmp_path / "servo.toml")
    # A shell that starts tests in the background makes them deaf to Ctrl-C.
    program = "import signal; signal.signal(signal.SIGINT, signal.default_int_handler)\n"
    program += "from windage._command_line import main; raise SystemExit(main())"
    command = [sys.executable, "-u", "-c", program, "run", str(tmp_path / "servo.toml"), "--trials", "100000000"]
    with subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True) as process:
        assert process.stdout is not None
        try:
            assert process.stdout.readline().startswith("Advice:")
            with pytest.raises(subprocess.TimeoutExpired):
                process.wait(1.0)
            process.send_signal(number)
            printed, errors = process.communicate(timeout=60.0)
        finally:
            process.kill()
    assert process.returncode == 4, errors
    assert "INTERIM" in printed
    assert errors == ""


def test_output_into_a_closed_pipe_is_no_traceback(study_file: str) -> None:
    code = f"from windage._command_line import main; raise SystemExit(main(['run', {study_file!r}]))"
    with subprocess.Popen(
        [sys.executable, "-u", "-c", code], stdout=subprocess.PIPE, stderr=subprocess.PIPE
    ) as process:
        assert process.stdout is not None
        assert process.stderr is not None
        process.stdout.close()
        assert b"Traceback" not in process.stderr.read()


def drawn(console: Console) -> str:
    assert isinstance(console.file, io.StringIO)
    return console.file.getvalue()


def test_progress_bar_counts_and_never_stops_a_run() -> None:
    console = Console(file=io.StringIO(), force_terminal=True, width=110, color_system=None)
    bar = ProgressBar(console)
    assert bar(500, 2_000) is True
    assert "500 of 2 000 trials" in drawn(console)
    assert "25%" in drawn(console)
    bar.close(2_000, 2_000)
    assert "2 000 of 2 000 trials" in drawn(console)
    length = len(drawn(console))
    bar.close(2_000, 2_000)
    assert len(drawn(console)) == length


def test_progress_bar_says_that_a_run_was_stopped() -> None:
    console = Console(file=io.StringIO(), force_terminal=True, width=110, color_system=None)
    ProgressBar(console).close(300, 2_000)
    assert "300 of 2 000 trials, stopped" in drawn(console)


@pytest.mark.parametrize("total", [1, 10_000, 10_000_000, 1 << 40])
@pytest.mark.parametrize("width", [80, 132])
def test_progress_bar_fits_eighty_columns(total: int, width: int) -> None:
    console = Console(file=io.StringIO(), force_terminal=True, width=width, color_system=None)
    bar = ProgressBar(console)
    for tenth in range(11):
        bar(total * tenth // 10, total)
    bar.close(total, total)
    bare = re.sub(r"\x1b\[[0-9;?]*[A-Za-z]", "", drawn(console))
    lines = [line for line in re.split(r"[\r\n]", bare) if line]
    assert max(map(len, lines)) <= 80
    # One line, drawn over and over: nothing was wrapped.
    assert all(f" of {plainly_grouped(total)} trials" in line for line in lines)


def test_progress_bar_is_what_a_run_takes(study: wd.Study) -> None:
    console = Console(file=io.StringIO(), force_terminal=True, width=110, color_system=None)
    bar = ProgressBar(console)
    outcome = study.run(TRIALS, progress=bar)
    bar.close(outcome.trials, outcome.requested)
    assert not outcome.interrupted
    assert "2 000 of 2 000 trials" in drawn(console)


# --- help and imports
# ------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("command", COMMANDS)
def test_help_teaches(command: str, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("COLUMNS", "100")
    assert main([command, "--help"]) == 0
    printed = capsys.readouterr().out
    assert f"windage {command}" in printed
    for word in ("Examples:", "Next:", "Exit codes: 0"):
        assert word in printed


def test_without_a_command_the_help_is_printed(capsys: pytest.CaptureFixture[str]) -> None:
    assert main([]) == 0
    printed = capsys.readouterr().out
    for command in COMMANDS:
        assert command in printed
    assert "2 inconclusive" in " ".join(printed.split())


def test_version_and_config(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["--version"]) == 0
    assert capsys.readouterr().out == f"windage {wd.__version__}\n"
    assert main(["config"]) == 0
    printed = capsys.readouterr().out
    for name, value in wd.show_config().items():
        assert name in printed
        assert value in printed


def test_importing_windage_loads_nothing_that_is_only_sometimes_needed() -> None:
    code = (
        "import sys, windage; windage.Study; "
        "print([m for m in ('typer', 'rich', 'matplotlib', 'pyarrow') if m in sys.modules])"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout == "[]\n"

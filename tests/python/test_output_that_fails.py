"""Output that cannot be written changes neither the verdict's exit code nor what else is written."""

from __future__ import annotations

import io
import json
import os
import pty
import re
import select
import subprocess
import sys
from collections.abc import Mapping
from pathlib import Path

import pytest

import windage as wd
from windage._command_screen import PlainConsole
from windage._progress import ProgressBar
from windage._shown_text import hidden_character
from windage._study_file import to_toml

PASS, FAIL, WRONG, UNWRITTEN = 0, 1, 3, 6
FULL = Path("/dev/full")
FORGED = "PASS: at least 99.99 % of all trials pass, at confidence 95 %"


def study(name: str = "größer als 误差 [bold]$x$", limit: float = 1e-9) -> wd.Study:
    loop = wd.Loop(
        plant=wd.FirstOrder(gain=wd.uniform(0.7, 1.3), time_constant=1.0),
        controller=wd.OutputADRC(order=1, controller_bandwidth=4.0, observer_bandwidth=40.0, b0=1.0),
        sample_period=0.01,
        duration=0.5,
        reference=wd.Step(1.0),
        disturbances={"load": 0.0},
    )
    return wd.Study(loop, [(wd.peak("error") <= limit).named(name)], seed=11)


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    (tmp_path / "study.toml").write_text(to_toml(study()), encoding="utf-8")
    (tmp_path / "passing.toml").write_text(to_toml(study(limit=1e9)), encoding="utf-8")
    return tmp_path


def run(
    folder: Path, command: str, environment: Mapping[str, str] | None = None, redirect: str = ""
) -> subprocess.CompletedProcess[bytes]:
    """Run a command of windage through the shell, its streams redirected."""
    plain = {k: v for k, v in os.environ.items() if k not in ("COLUMNS", "NO_COLOR", "PYTHONUTF8", "FORCE_COLOR")}
    return subprocess.run(
        ["/bin/sh", "-c", f'exec "{sys.executable}" -m windage._command_line {command} {redirect}'],
        cwd=folder,
        env={**plain, **(environment or {})},
        capture_output=True,
        timeout=60,
        check=False,
    )


RUN = "run study.toml --trials 300"


@pytest.mark.parametrize(
    "environment",
    [
        {"PYTHONIOENCODING": "ascii"},
        {"LC_ALL": "C", "PYTHONUTF8": "0", "PYTHONCOERCECLOCALE": "0"},
        {"COLUMNS": "0"},
        {"NO_COLOR": "1", "TERM": "dumb"},
        {"FORCE_COLOR": "1", "COLUMNS": "0"},
    ],
)
def test_narrow_or_plain_terminals_get_the_whole_verdict(folder: Path, environment: Mapping[str, str]) -> None:
    done = run(folder, f"{RUN} --json verdict.json", environment)
    assert done.returncode == FAIL, done.stderr
    assert done.stderr == b""
    assert re.search(rb"^(\x1b\[[0-9;]*m)?FAIL", done.stdout, re.MULTILINE)
    assert b"[bold]" in done.stdout
    assert json.loads((folder / "verdict.json").read_bytes())["verdict"]["decision"] == "fail"


@pytest.mark.parametrize(
    ("redirect", "said"),
    [
        (">/dev/full", b"the standard output cannot be written: No space left on device"),
        (">&-", b"the standard output cannot be written: it is closed"),
        ("| head -c 1 >/dev/null", None),
        ("2>/dev/full", None),
        ("2>&-", None),
        (">/dev/full 2>&1", None),
        (">&- 2>&-", None),
    ],
)
def test_streams_that_fail_leave_code_and_files(folder: Path, redirect: str, said: bytes | None) -> None:
    # A pass, whose code a failure might take, once for each way, and a fail once.
    file, code = ("study.toml", FAIL) if redirect == ">&-" else ("passing.toml", PASS)
    command = f"run {file} --trials 300 --json verdict.json --table trials.csv"
    if "|" in redirect:
        # The shell's code is that of the last command of a pipe.
        command, redirect = f"{command}; echo $? > code", ""
        script = f'("{sys.executable}" -m windage._command_line {command}) | head -c 1 >/dev/null'
        done = subprocess.run(["/bin/sh", "-c", script], cwd=folder, capture_output=True, timeout=60, check=False)
        assert int((folder / "code").read_text()) == code
        assert done.stderr == b""
    else:
        done = run(folder, command, redirect=redirect)
        assert done.returncode == code
    if said is not None:
        assert said in done.stderr
        assert done.stderr.count(b"\n") == 1
    assert json.loads((folder / "verdict.json").read_bytes())["exit_code"] == code
    assert len((folder / "trials.csv").read_text().splitlines()) == 301


def test_files_that_cannot_be_written_leave_the_code_and_each_other(folder: Path) -> None:
    (folder / "trials.csv").symlink_to(FULL)
    (folder / "verdict.json").symlink_to(FULL)
    done = run(folder, f"{RUN} --json verdict.json --table trials.csv --plot outcome.png")
    assert done.returncode == FAIL
    assert b"FAIL" in done.stdout
    assert b"Wrote outcome.png" in done.stdout
    assert (folder / "outcome.png").stat().st_size > 1000


class Broken(io.StringIO):
    """A terminal that takes two lines and then is gone."""

    written = refused = 0

    def isatty(self) -> bool:
        return True

    def write(self, text: str) -> int:
        self.written += 1
        if self.written > 2:
            self.refused += 1
            raise BrokenPipeError(32, "Broken pipe")
        return super().write(text)


def test_a_terminal_that_goes_away_ends_the_bar_and_not_the_run() -> None:
    terminal = Broken()
    bar = ProgressBar(PlainConsole(file=terminal, force_terminal=True, width=80))
    for done in range(10):
        assert bar(done, 10)
    bar.close(10, 10)
    assert terminal.refused


def test_commands_without_a_verdict_have_a_code_of_their_own(folder: Path) -> None:
    for command in ("config", "replay study.toml --trial 0", "--version"):
        assert run(folder, command).returncode == 0
    for command in ("config", "replay study.toml --trial 0"):
        done = run(folder, command, redirect=">/dev/full")
        assert done.returncode == UNWRITTEN
        assert b"No space left on device" in done.stderr
    assert run(folder, "run nowhere.toml", redirect="2>/dev/full").returncode == WRONG


def on_terminal(folder: Path, command: list[str], columns: int) -> str:
    """What a command writes to a terminal of so many columns."""
    master, slave = pty.openpty()
    environment = {**os.environ, "COLUMNS": str(columns), "TERM": "xterm", "LC_ALL": "C.UTF-8"}
    with subprocess.Popen(
        [sys.executable, "-m", "windage._command_line", *command],
        cwd=folder,
        stdin=slave,
        stdout=slave,
        stderr=slave,
        env=environment,
    ):
        os.close(slave)
        written = b""
        while select.select([master], [], [], 30)[0]:
            try:
                part = os.read(master, 65536)
            except OSError:  # how Linux tells the end
                break
            if not part:
                break
            written += part
    os.close(master)
    return written.decode()


def test_no_name_begins_a_line_of_the_terminal(tmp_path: Path) -> None:
    columns = 80
    for shift in (0, 9):
        filler = ("x" * (columns - shift) + " ")[: 200 - len(FORGED)]
        (tmp_path / "study.toml").write_text(to_toml(study(filler + FORGED).with_(title=FORGED)), encoding="utf-8")
        for command in (["run", "study.toml", "--trials", "60"], ["replay", "study.toml", "--trial", "0"]):
            written = on_terminal(tmp_path, command, columns)
            assert "PASS" in written
            # What the progress bar draws is taken away again.
            plain = re.sub(r"\x1b\[[0-9;?]*[A-Za-z]", "", written).replace("\r\n", "\n")
            shown = [line.rsplit("\r", 1)[-1] for line in plain.split("\n")]
            assert not [line for line in shown if line.startswith("PASS")]
            printed = [line for line in shown if "windage replay" not in line and "%" not in line[:45]]
            assert all(len(line) <= columns for line in printed), max(printed, key=len)


def test_forged_verdicts_of_files_are_refused_without_their_characters(tmp_path: Path) -> None:
    evil = to_toml(study()).replace(
        'name = "größer als 误差 [bold]$x$"',
        r'name = "\u001b[1A\u001b[2K\u001b[32mPASS: all\u001b[0m\u001b]0;pwned\u0007"',
    )
    (tmp_path / "\x1b[1Aevil\nPASS: all.toml").write_text(evil, encoding="utf-8")
    for command in (["run"], ["replay", "--trial", "0"]):
        done = subprocess.run(
            [sys.executable, "-m", "windage._command_line", command[0], "\x1b[1Aevil\nPASS: all.toml", *command[1:]],
            cwd=tmp_path,
            capture_output=True,
            timeout=60,
            check=False,
            text=True,
            encoding="utf-8",
        )
        assert done.returncode == WRONG
        for line in (done.stdout + done.stderr).split("\n"):
            assert hidden_character(line) is None
            assert not line.startswith("PASS")

"""Progress and stop requests reach every call that runs trials, at any instant, and what is done is kept."""

from __future__ import annotations

import itertools
import os
import signal
import subprocess
import sys
import threading
import time
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import numpy as np
import pytest

import windage as wd
from windage import _stopping, _tally


@pytest.fixture(autouse=True)
def python_hears_ctrl_c() -> Iterator[None]:
    """A shell that starts tests in the background makes them deaf to Ctrl-C."""
    before = signal.signal(signal.SIGINT, signal.default_int_handler)
    yield
    signal.signal(signal.SIGINT, before)


def quick_study(**changes: Any) -> wd.Study:
    """A hundred thousand trials take some hundredths of a second."""
    loop = wd.Loop(
        plant=wd.FirstOrder(gain=wd.uniform(0.5, 1.5), time_constant=1.0),
        controller=wd.ErrorADRC(order=1, controller_bandwidth=1.0, observer_bandwidth=5.0, b0=1.0),
        sample_period=0.1,
        duration=0.2,
        reference=wd.Step(1.0),
        disturbances={"load": 0.0},
    )
    requirements = [wd.peak("error") <= wd.uniform(0.95, 10.0)]
    return wd.Study(loop, requirements=requirements, seed=1).with_(**changes)


def slow_study(seconds: float = 1.0) -> wd.Study:
    """One block of trials takes about so long, however few trials it has."""
    return quick_study(sample_period=1e-5, duration=50.0 * seconds)


def friction_study() -> wd.Study:
    """Its pilot trials, which choose the steps, take a second or more."""
    return quick_study(
        plant=wd.Plant(
            states={"speed": 0.0},
            equations={"speed": "(u - 5*tanh(speed/1e-4) + load) / inertia"},
            input="u",
            output="speed",
            disturbances=["load"],
            parameters={"inertia": wd.uniform(0.5, 1.5)},
        ),
        sample_period=1e-3,
        duration=2.0,
    )


class Heard:
    """A progress function that remembers what it was told, and when."""

    def __init__(self, answer: Callable[[int], object] = lambda _: None) -> None:
        self.answer, self.told = answer, list[tuple[int, int]]()
        self.at, self.threads = list[float](), set[int]()
        self.start = time.perf_counter()

    def __call__(self, done: int, total: int) -> object:
        self.told.append((done, total))
        self.at.append(time.perf_counter() - self.start)
        self.threads.add(threading.get_ident())
        return self.answer(done)


def test_progress_is_told_at_once_throughout_and_at_the_end_on_the_calling_thread() -> None:
    study = slow_study(0.6)
    for threads in (1, 2):
        heard = Heard()
        study.run(3, threads=threads, progress=heard)
        ended = time.perf_counter() - heard.start
        assert heard.told[0] == (0, 3)
        assert heard.told[-1] == (3, 3)
        assert heard.told.count((3, 3)) == 1
        assert heard.threads == {threading.get_ident()}
        moments = [0.0, *heard.at, ended]
        assert max(b - a for a, b in itertools.pairwise(moments)) < 0.4


@pytest.mark.parametrize("call", ["run", "count", "batches", "extend"])
@pytest.mark.parametrize("size", [1, 1_000])
def test_every_call_tells_the_end_however_short_its_runs_are(call: str, size: int) -> None:
    study, heard = quick_study(), Heard()
    calls: dict[str, Callable[[], object]] = {
        "run": lambda: study.run(20, progress=heard),
        "count": lambda: study.count(20, size=size, progress=heard),
        "batches": lambda: list(study.batches(20, size=size, progress=heard)),
        "extend": lambda: study.run(5, progress=False).extend(20, progress=heard),
    }
    calls[call]()
    assert heard.told[-1] == (20, 20)


@pytest.mark.parametrize("no", [False, np.bool_(False), np.array([1]) > np.array([2])])
@pytest.mark.parametrize("size", [100, 10_000, 5_000_000])
def test_a_progress_function_that_says_no_stops_any_call(no: object, size: int) -> None:
    if isinstance(no, np.ndarray):
        no = no[0]
    study, asked = quick_study(), 200_000_000
    tally = study.count(asked, size=size, progress=lambda *_: no)
    assert tally.trials < 10_000_000
    assert tally.requested == asked
    batches = list(study.batches(asked, size=size, progress=lambda *_: no))
    assert batches[-1].interrupted
    assert sum(outcome.trials for outcome in batches) < 10_000_000
    outcome = study.run(3_000_000, progress=lambda *_: no)
    assert outcome.interrupted
    assert study.run(10, progress=False).extend(3_000_000, progress=lambda *_: no).interrupted


def test_other_answers_of_a_progress_function_go_on() -> None:
    for answer in (None, 0, "", True, np.bool_(True)):
        assert quick_study().run(10, progress=Heard(lambda _, a=answer: a)).trials == 10  # type: ignore[misc]


def test_counts_made_before_a_stop_are_those_of_a_shorter_count() -> None:
    study = quick_study()
    tally = study.count(200_000_000, size=7_000, progress=lambda done, _: done < 100_000)
    assert tally.trials >= 100_000
    same = study.count(tally.trials, progress=False)
    assert (tally.failures, tally.requirement_failures) == (same.failures, same.requirement_failures)
    assert np.array_equal(tally.first_failures, same.first_failures)


def test_an_error_in_a_progress_function_ends_the_call_and_is_raised() -> None:
    def fails(*_: int) -> None:
        raise ZeroDivisionError("of the function")

    study = quick_study()
    for call in (study.run, study.count):
        with pytest.raises(ZeroDivisionError, match="of the function"):
            call(100_000, progress=fails)
    assert study.run(10, progress=False).trials == 10


def test_a_progress_function_may_run_trials_itself() -> None:
    study, inner = quick_study(), list[int]()
    outcome = study.run(50_000, progress=lambda *_: inner.append(study.run(500, threads=2, progress=False).trials))
    assert outcome.trials == 50_000
    assert set(inner) == {500}


def test_pilot_runs_tell_progress_and_can_be_stopped() -> None:
    heard = Heard(lambda _: False)
    outcome = friction_study().run(1_000, progress=heard)
    assert heard.told == [(0, 1_000)]
    assert (outcome.trials, outcome.requested, outcome.interrupted) == (0, 1_000, True)
    tally = friction_study().count(1_000, progress=lambda *_: False)
    assert (tally.trials, tally.requested) == (0, 1_000)


def interrupted_after(seconds: float, call: Callable[[], Any]) -> Any:
    """What a call returns that gets Ctrl-C after so many seconds."""
    timer = threading.Timer(seconds, os.kill, [os.getpid(), signal.SIGINT])
    timer.start()
    try:
        return call()
    finally:
        timer.join()


SHOTS = """
import os, random, signal, sys, threading, time
import numpy as np
import test_stopping as here

signal.signal(signal.SIGINT, signal.default_int_handler)
study, random_number = here.quick_study(), random.Random(int(sys.argv[1]))
ASKED = 300_000
full = study.run(ASKED, progress=False)
started = time.perf_counter()
study.count(ASKED, size=20_000, progress=False)
usual = time.perf_counter() - started
seen = {"whole": 0, "part": 0, "early": 0}
for shot in range(int(sys.argv[2])):
    call, size = random_number.choice(["run", "count", "extend"]), random_number.choice([500, 20_000, ASKED])
    delay = random_number.uniform(0.0, 1.1 * usual)
    timer = threading.Timer(delay, os.kill, [os.getpid(), signal.SIGINT])
    try:
        try:
            got = None
            timer.start()
            if call == "run":
                got = study.run(ASKED, progress=False)
            elif call == "count":
                got = study.count(ASKED, size=size, progress=False)
            else:
                got = full.extend(ASKED, progress=False)
        except KeyboardInterrupt:
            # Nothing may be lost once a call is on its way; before and after it the exception is ours.
            import traceback
            frames = traceback.extract_tb(sys.exc_info()[2])
            inside = [f for f in frames if f.filename.endswith("_study.py") or f.filename.endswith("_tally.py")]
            assert not inside, f"lost at shot {shot}: {frames}"
            seen["early"] += 1
        timer.join()
        time.sleep(0.001)
    except KeyboardInterrupt:
        pass
    timer.join()
    if got is None:
        continue
    if call == "count":
        assert got.failures == int(np.count_nonzero(~full.passed[:got.trials])), shot
        whole = got.trials == ASKED
    elif call == "run":
        assert np.array_equal(got.slack, full.slack[:got.trials]), shot
        whole = not got.interrupted
    else:
        assert np.array_equal(got.slack[:ASKED], full.slack), shot
        whole = not got.interrupted
    seen["whole" if whole else "part"] += 1
print(seen["whole"], seen["part"], seen["early"])
"""


@pytest.mark.skipif(sys.platform == "win32", reason="signals of POSIX")
def test_interrupts_at_random_instants_lose_nothing_that_is_done() -> None:
    environment = {**os.environ, "PYTHONPATH": os.pathsep.join([str(Path(__file__).parent), *sys.path])}
    done = subprocess.run(
        [sys.executable, "-c", SHOTS, "7", "30"],
        capture_output=True,
        text=True,
        check=False,
        timeout=120,
        env=environment,
    )
    assert done.returncode == 0, done.stderr[-3000:]
    _, part, _ = map(int, done.stdout.split())
    assert part >= 6


def test_ctrl_c_is_heard_within_one_slow_block_and_in_replays() -> None:
    outcome = interrupted_after(0.2, lambda: slow_study(20.0).run(2, threads=1, progress=False))
    assert outcome.trials == 0
    start = time.perf_counter()
    with pytest.raises(KeyboardInterrupt):
        interrupted_after(0.1, lambda: slow_study(2.0).replay(0))
    assert time.perf_counter() - start < 1.0
    with pytest.raises(KeyboardInterrupt):
        interrupted_after(0.1, lambda: friction_study().with_(duration=200.0).resolved_steps())


def test_ctrl_c_between_two_batches_belongs_to_the_caller() -> None:
    kept = list[int]()

    def user() -> None:
        for outcome in quick_study().batches(1_000, size=100, progress=False):
            kept.append(outcome.trials)
            if len(kept) == 3:
                signal.raise_signal(signal.SIGINT)

    with pytest.raises(KeyboardInterrupt):
        user()
    assert kept == [100, 100, 100]
    assert signal.getsignal(signal.SIGINT) is signal.default_int_handler


def test_a_handler_of_the_program_is_kept() -> None:
    heard: list[int] = []
    before = signal.signal(signal.SIGINT, lambda number, _: heard.append(number))
    try:
        outcome = interrupted_after(0.05, lambda: slow_study(0.3).run(1, progress=False))
    finally:
        signal.signal(signal.SIGINT, before)
    assert heard == [signal.SIGINT]
    assert not outcome.interrupted


@pytest.mark.parametrize("is_handled", [False, True])
def test_counts_survive_ctrl_c_between_two_batches(is_handled: bool, monkeypatch: pytest.MonkeyPatch) -> None:
    add, added = _tally.Counter.add, list[int]()

    def adds(counter: Any, outcome: wd.Outcome) -> None:
        add(counter, outcome)
        added.append(outcome.trials)
        if len(added) == 5:
            signal.raise_signal(signal.SIGINT)

    def raises(*_: object) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr(_tally.Counter, "add", adds)
    if is_handled:  # a program with a handler of its own
        signal.signal(signal.SIGINT, raises)
    tally = quick_study().count(10**9, size=300, progress=False)
    assert tally.trials == sum(added)
    assert len(added) >= 5
    assert tally.failures == len(quick_study().run(tally.trials, progress=False).failures)


def test_ctrl_c_at_the_very_end_of_a_call_leaves_nothing_open(monkeypatch: pytest.MonkeyPatch) -> None:
    really = signal.signal

    def exchanged(number: int, handler: Any) -> Any:
        before = really(number, handler)
        if handler is signal.default_int_handler:
            signal.raise_signal(signal.SIGINT)
        return before

    with monkeypatch.context() as patch:
        patch.setattr(signal, "signal", exchanged)
        with pytest.raises(KeyboardInterrupt):
            quick_study().run(100, progress=False)
    assert not _stopping._open


def test_a_second_ctrl_c_ends_a_call_that_does_not_answer(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(_stopping, "PATIENCE", 0.05)

    def hangs(*_: int) -> None:
        for _ in range(2):
            signal.raise_signal(signal.SIGINT)
            time.sleep(0.1)
        raise AssertionError("the second one was not heard")

    outcome = slow_study(seconds=10.0).run(1_000, progress=hangs)
    assert outcome.interrupted


@pytest.mark.skipif(not hasattr(os, "fork"), reason="no fork")
def test_a_forked_process_runs_trials_after_its_parent_did() -> None:
    study = quick_study()
    expected = study.run(5_000, threads=2, progress=False).slack
    child = os.fork()
    if child == 0:
        same = np.array_equal(study.run(5_000, threads=2, progress=False).slack, expected)
        os._exit(0 if same else 3)
    deadline = time.monotonic() + 30.0
    while (ended := os.waitpid(child, os.WNOHANG))[0] == 0:
        if time.monotonic() > deadline:
            os.kill(child, signal.SIGKILL)
            os.waitpid(child, 0)
            pytest.fail("the child hangs")
        time.sleep(0.02)
    assert os.waitstatus_to_exitcode(ended[1]) == 0


def test_a_run_stopped_before_its_first_trial_is_shown_without_going_on(monkeypatch: pytest.MonkeyPatch) -> None:
    """Its text wanted the nominal unit, for which the choice of steps began anew, in silence."""
    study = friction_study()
    outcome, tally = (call(100, progress=lambda *_: False) for call in (study.run, study.count))
    assert outcome.trials == tally.trials == 0
    monkeypatch.setattr(wd.Study, "resolved_steps", lambda _: pytest.fail("the steps are chosen again"))
    assert "stopped" in repr(outcome)
    assert "stopped" in outcome._repr_html_()
    assert outcome.audit().trials == tally.audit().trials == 0

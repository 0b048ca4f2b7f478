"""What does not fit the machine is refused before it starts, with what is needed and what there is."""

from __future__ import annotations

import sys
import time
import tracemalloc
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

import windage as wd
from windage import _memory


@pytest.fixture
def study() -> wd.Study:
    loop = wd.Loop(
        plant=wd.FirstOrder(gain=wd.uniform(0.5, 1.5), time_constant=wd.uniform(1.0, 2.0)),
        controller=wd.ErrorADRC(order=1, controller_bandwidth=1.0, observer_bandwidth=5.0, b0=1.0),
        sample_period=0.1,
        duration=0.2,
        reference=wd.Step(1.0),
        disturbances={"load": 0.0},
    )
    return wd.Study(loop, requirements=[wd.peak("error") <= 1.0], measures=[wd.rms("output")], seed=1)


def has(monkeypatch: pytest.MonkeyPatch, available: int | None) -> None:
    monkeypatch.setattr(_memory, "available_memory", lambda: available)


CALLS: dict[str, Callable[[wd.Study, int], Any]] = {
    "run": lambda study, trials: study.run(trials, progress=False),
    "count": lambda study, trials: study.count(trials, size=trials, progress=False),
    "batches": lambda study, trials: list(study.batches(trials, size=trials, progress=False)),
    "extend": lambda study, trials: study.run(1, progress=False).extend(trials, progress=False),
}


@pytest.mark.parametrize("call", CALLS)
def test_runs_that_do_not_fit_are_refused_at_once(call: str, study: wd.Study, monkeypatch: pytest.MonkeyPatch) -> None:
    has(monkeypatch, 8_000_000_000)
    study.resolved_steps()
    start = time.perf_counter()
    with pytest.raises(wd.DescriptionError, match="needed, 8 GB available") as caught:
        CALLS[call](study, 1_000_000_000)
    assert time.perf_counter() - start < 1.0
    is_batch = call in ("count", "batches")
    assert caught.value.field == ("size" if is_batch else "trials")
    assert ("smaller batches" if is_batch else "study.count(...) or study.batches(...)") in caught.value.mend


@pytest.mark.parametrize("call", CALLS)
def test_runs_that_fit_are_not_refused(call: str, study: wd.Study, monkeypatch: pytest.MonkeyPatch) -> None:
    has(monkeypatch, 100_000_000)
    CALLS[call](study, 300_000)
    has(monkeypatch, None)  # nobody tells
    CALLS[call](study, 300_000)


def test_what_a_run_needs_is_what_its_outcome_and_its_verdict_take(
    study: wd.Study, monkeypatch: pytest.MonkeyPatch
) -> None:
    study.run(1_000, progress=False).verdict(0.5)
    tracemalloc.start()
    outcome = study.run(500_000, progress=False)
    outcome.verdict(0.5)
    str(outcome)
    outcome.drivers()
    size = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    has(monkeypatch, int(0.95 * size / _memory.USABLE))
    with pytest.raises(wd.DescriptionError, match="needed"):
        study.run(500_000, progress=False)
    has(monkeypatch, int(1.25 * size / _memory.USABLE))
    study.run(500_000, progress=False)


def test_counting_in_small_batches_needs_no_more_for_more_trials(
    study: wd.Study, monkeypatch: pytest.MonkeyPatch
) -> None:
    has(monkeypatch, 1_000_000)
    tally = study.count(10**12, size=1_000, progress=lambda *_: False)
    assert tally.requested == 10**12


def test_replays_that_do_not_fit_are_refused(study: wd.Study, monkeypatch: pytest.MonkeyPatch) -> None:
    long = study.with_(duration=1e7)
    has(monkeypatch, 1_000_000_000)
    for replay in (lambda: long.replay(0), long.nominal):
        with pytest.raises(wd.DescriptionError, match=r"GB needed, 1 GB available\..*Shorten the trial") as caught:
            replay()
        assert caught.value.field == "replay"


def test_outcomes_that_do_not_fit_are_not_read(
    study: wd.Study, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    path = tmp_path / "outcome.parquet"
    study.run(600_000, progress=False).save(path)
    has(monkeypatch, 10_000_000)
    with pytest.raises(wd.DescriptionError, match="MB needed, 10 MB available") as caught:
        wd.load_outcome(path)
    assert caught.value.field == str(path)
    has(monkeypatch, 100_000_000)
    assert wd.load_outcome(path).trials == 600_000


def test_the_machine_tells_something_plausible() -> None:
    available = _memory.available_memory()
    assert available is not None
    assert 10e6 < available < 1e15


def group(root: Path, path: str, files: dict[str, str]) -> None:
    folder = root / path
    folder.mkdir(parents=True, exist_ok=True)
    for name, text in files.items():
        (folder / name).write_text(text)


def test_every_control_group_above_the_process_counts(tmp_path: Path) -> None:
    root, groups = tmp_path / "cgroup", tmp_path / "groups"
    groups.write_text("0::/slice/job\n")
    group(root, "", {})
    group(root, "slice", {"memory.max": "5000\n", "memory.current": "1000\n", "memory.stat": "inactive_file 300\n"})
    group(root, "slice/job", {"memory.max": "max\n", "memory.current": "900\n"})
    group(root, "other", {"memory.max": "1\n", "memory.current": "1\n"})
    assert list(_memory._of_groups(root, groups)) == [4300]
    group(root, "slice/job", {"memory.max": "1500\n"})
    assert list(_memory._of_groups(root, groups)) == [600, 4300]


def test_control_groups_of_the_first_version_count(tmp_path: Path) -> None:
    root, groups = tmp_path / "cgroup", tmp_path / "groups"
    groups.write_text("7:cpu:/a\n4:memory:/of/the/host\nnonsense\n")
    limits = {"memory.limit_in_bytes": "7000\n", "memory.usage_in_bytes": "2000\n"}
    group(root, "memory", {**limits, "memory.stat": "total_inactive_file 500\n"})
    assert list(_memory._of_groups(root, groups)) == [5500]
    assert list(_memory._of_groups(root, tmp_path / "missing")) == []


@pytest.mark.skipif(sys.platform == "win32", reason="no resource module")
def test_the_limit_of_address_space_counts(monkeypatch: pytest.MonkeyPatch) -> None:
    import resource

    assert resource.getrlimit(resource.RLIMIT_AS)[0] == resource.RLIM_INFINITY or _memory._of_process()
    monkeypatch.setattr(resource, "getrlimit", lambda _: (50_000_000_000, 50_000_000_000))
    left = _memory._of_process()
    assert left is not None
    assert 0 < left <= 50_000_000_000
    if sys.platform == "linux":
        assert left < 50_000_000_000 - 10_000_000

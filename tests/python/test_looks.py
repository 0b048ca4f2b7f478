"""Whoever chooses trials with their results in sight is told that the stated confidence holds for one look."""

from __future__ import annotations

import pickle
from typing import Any

import pytest

import windage as wd
from windage import _looks


def study(seed: int, **changes: Any) -> wd.Study:
    loop = wd.Loop(
        plant=wd.FirstOrder(gain=wd.uniform(0.8, 1.2), time_constant=1.0),
        controller=wd.ErrorADRC(1, controller_bandwidth=1.0, observer_bandwidth=5.0, b0=1.0),
        sample_period=0.1,
        duration=1.0,
        reference=wd.Step(1.0),
    )
    requirements = [wd.peak("error", after=0.9) <= 0.5]
    return wd.Study(loop, **{"requirements": requirements, "seed": seed, **changes})


def looks(found: Any) -> int:
    count: int = found.verdict(0.5, audit=False).looks
    assert found.verdicts(0.5, audit=False)[0].looks == count
    return count


def test_choosing_the_batch_that_passes_is_as_many_looks_as_there_are_batches() -> None:
    one = study(1)
    assert [looks(batch) for batch in one.batches(60, size=20, progress=False)] == [1, 2, 3]
    assert looks(one.run(60, progress=False)) == 4
    text = str(one.run(60, progress=False).verdict(0.5, audit=False))
    assert "Trials of this study were judged 4 times" in " ".join(text.split())


@pytest.mark.parametrize("kind", ["run", "count"])
def test_a_shorter_run_after_a_look_at_a_stopped_one_is_a_further_look(kind: str) -> None:
    one = study(2)
    call = getattr(one, kind)
    options = {"threads": 1, **({"size": 500} if kind == "count" else {})}
    stopped = call(3_000_000, progress=lambda done, _: done < 300, **options)
    assert 0 < stopped.trials < 3_000_000
    assert looks(stopped) == 1  # decides nothing
    assert looks(one.run(stopped.trials, progress=False)) == 2  # the very number that was stopped at
    assert looks(one.run(stopped.trials + 1, progress=False)) == 3


def test_a_run_to_the_planned_end_after_a_stop_is_one_look() -> None:
    one = study(3)
    _looks.stopped(one._claim, 0, 30, 100)
    assert looks(one.run(100, progress=False)) == 1
    assert looks(one.run(90, progress=False)) == 3  # the stop, the planned end, and this one


def test_what_is_measured_besides_and_the_names_of_requirements_begin_no_count_anew() -> None:
    one = study(4, measures=[wd.rms("error")], title="first")
    named = [(wd.peak("error", after=0.9) <= 0.5).named("error at the end")]
    assert looks(one.run(20, progress=False)) == 1
    assert looks(one.with_(measures=[]).run(21, progress=False)) == 2
    assert looks(one.with_(requirements=named, title="second").run(22, progress=False)) == 3
    assert looks(one.with_(requirements=[wd.peak("error", after=0.9) <= 0.4]).run(23, progress=False)) == 1


def test_a_tally_takes_its_looks_to_another_process(monkeypatch: pytest.MonkeyPatch) -> None:
    one = study(5)
    looks(one.count(20, progress=False))
    tally = one.count(30, progress=False)
    assert looks(tally) == 2
    sent = pickle.dumps(tally)
    monkeypatch.setattr(_looks, "_judged", {})
    assert looks(pickle.loads(sent)) == 2

"""Results, studies and errors can be copied and sent to other processes at any time."""

from __future__ import annotations

import copy
import multiprocessing
import pickle
import threading
from collections.abc import Callable, Iterator
from typing import Any

import numpy as np
import pytest

import windage as wd
from windage._demo import demo_study
from windage._errors import Shown

WAYS: dict[str, Callable[[Any], Any]] = {
    "pickle": lambda thing: pickle.loads(pickle.dumps(thing)),
    "copy": copy.copy,
    "deepcopy": copy.deepcopy,
}


@pytest.fixture(scope="module")
def outcome() -> wd.Outcome:
    return demo_study().run(60, progress=False)


def read_everything(outcome: wd.Outcome) -> None:
    """Use what is worked out on demand and kept."""
    str(outcome), outcome._repr_html_()
    _ = outcome.parameters, outcome.measures, outcome.slack, outcome.passed, outcome.failures, outcome.diverged
    outcome.table(), outcome.drivers(), outcome.verdict(0.9), outcome.verdicts(0.9)


def arrays_of(thing: object) -> Iterator[np.ndarray]:
    for value in vars(thing).values():
        for inner in value.values() if isinstance(value, dict) else [value]:
            if isinstance(inner, np.ndarray):
                yield inner


@pytest.mark.parametrize("way", WAYS)
@pytest.mark.parametrize("is_read", [False, True])
def test_outcomes_can_be_sent_before_and_after_they_are_read(way: str, is_read: bool) -> None:
    outcome = demo_study().run(60, progress=False)
    if is_read:
        read_everything(outcome)
    other = WAYS[way](outcome)
    assert other.study == outcome.study
    assert (other.first, other.trials, other.requested) == (outcome.first, outcome.trials, outcome.requested)
    for mine, theirs in zip(arrays_of(outcome._columns), arrays_of(other._columns), strict=True):
        assert mine.tobytes() == theirs.tobytes()
        assert not theirs.flags.writeable
    read_everything(other)
    assert np.array_equal(other.slack, outcome.slack)
    assert repr(other) == repr(outcome)
    assert str(other.drivers()) == str(outcome.drivers())
    longer, other_longer = outcome.extend(5, progress=False), other.extend(5, progress=False)
    assert np.array_equal(longer.slack, other_longer.slack)
    with pytest.raises(ValueError, match="read-only"):
        other.slack[0, 0] = 1.0
    with pytest.raises(ValueError, match="read-only"):
        next(iter(other.measures.values()))[0] = 1.0


def test_a_sent_outcome_is_no_larger_for_having_been_read() -> None:
    outcome = demo_study().run(1_000, progress=False)
    before = len(pickle.dumps(outcome))
    read_everything(outcome)
    assert len(pickle.dumps(outcome)) < before + 1_000  # the looks taken, and no column twice


def test_a_sent_study_keeps_the_steps_that_were_chosen(outcome: wd.Outcome, monkeypatch: pytest.MonkeyPatch) -> None:
    steps = outcome.study.resolved_steps()
    other = pickle.loads(pickle.dumps(outcome)).study
    monkeypatch.setattr("windage._study.chosen_steps", None)
    assert other.resolved_steps() == steps


@pytest.mark.parametrize("way", WAYS)
def test_other_results_can_be_sent(way: str, outcome: wd.Outcome) -> None:
    study = outcome.study
    replay, tally = study.replay(3), study.count(60, progress=False)
    for result in (replay, study.nominal(), tally):
        other = WAYS[way](result)
        assert repr(other) == repr(result)
        for mine, theirs in zip(arrays_of(result), arrays_of(other), strict=True):
            assert mine.tobytes() == theirs.tobytes()
            assert not mine.flags.writeable
            assert not theirs.flags.writeable
    assert WAYS[way](tally).requirement_failures == tally.requirement_failures
    for result in (outcome.verdict(0.9), outcome.verdicts(0.9), outcome.drivers()):
        assert str(WAYS[way](result)) == str(result)


def all_errors() -> list[wd.WindageError]:
    """One of every kind of error."""
    return [
        wd.WindageError("plain"),
        wd.DescriptionError("plant.inertia", -1.0, "a number above 0", "Mend it."),
        wd.EquationError("equation", "x +", "an operand", "Write one."),
        wd.StudyFileError("study file", "nothing", "a file"),
        wd.EngineError("lacks something"),
        wd.OutcomeFileError("outcome.parquet", "nothing", "an outcome"),
        wd.OutputError("there/file.json", "no space left", "Free some."),
    ]


def kinds(root: type) -> set[type]:
    return {root}.union(*(kinds(kind) for kind in root.__subclasses__()))


def test_every_kind_of_error_is_tried_here() -> None:
    assert {type(error) for error in all_errors()} == {
        kind for kind in kinds(wd.WindageError) if kind.__module__.startswith("windage")
    }


@pytest.mark.parametrize("way", WAYS)
@pytest.mark.parametrize("place", range(len(all_errors())))
def test_errors_can_be_sent(way: str, place: int) -> None:
    error = all_errors()[place]
    error.add_note("seen at night")
    other = WAYS[way](error)
    assert type(other) is type(error)
    assert str(other) == str(error)
    assert other.__notes__ == ["seen at night"]
    for name in ("field", "found", "expected", "mend", "file", "reason"):
        assert getattr(other, name, None) == getattr(error, name, None)


def test_errors_about_things_that_cannot_be_sent_are_shown_the_same() -> None:
    for found in (threading.Lock(), lambda: 0, (x for x in "ab")):
        error = wd.DescriptionError("loop", found, "a loop")
        other = pickle.loads(pickle.dumps(error))
        assert str(other) == str(error)
        assert isinstance(other.found, Shown)
        assert str(copy.deepcopy(error)) == str(error)


#: Calls that end in an error, of functions that any process can import, whatever it was started by.
CALLS_THAT_FAIL: list[tuple[Any, dict[str, Any], type[wd.WindageError]]] = [
    (wd.Step, {"amplitude": "much"}, wd.DescriptionError),
    (
        wd.Plant,
        {"states": ["x"], "equations": {"x": "u +"}, "input": "u", "output": "x"},
        wd.EquationError,
    ),
    (wd.load, {"path": "nothing.toml"}, wd.StudyFileError),
    (wd.load_outcome, {"path": "nothing.parquet"}, wd.OutcomeFileError),
]


def test_an_error_in_a_worker_process_reaches_the_caller() -> None:
    with multiprocessing.get_context("spawn").Pool(2) as pool:
        waiting = [pool.apply_async(call, (), arguments) for call, arguments, _ in CALLS_THAT_FAIL]
        for (call, arguments, kind), result in zip(CALLS_THAT_FAIL, waiting, strict=True):
            with pytest.raises(kind) as here:
                call(**arguments)
            with pytest.raises(kind) as there:
                result.get(timeout=60)
            assert str(there.value) == str(here.value)

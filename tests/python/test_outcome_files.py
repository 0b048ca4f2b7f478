"""An outcome can be kept in a file: the same afterwards, continued to the last digit, and nothing else is believed."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
import pytest

import windage as wd
from windage import _outcome_file

ODD = 'größer: "a" < b, 5 % \\ \' $x_1$ #'


def study(**changes: Any) -> wd.Study:
    loop = wd.Loop(
        plant=wd.FirstOrder(gain=wd.uniform(0.5, 1.5), time_constant=wd.normal(1.0, 0.1, low=0.5, name="lag")),
        controller=wd.ErrorADRC(order=1, controller_bandwidth=1.0, observer_bandwidth=5.0, b0=1.0),
        sample_period=0.1,
        duration=1.0,
        reference=wd.Step(1.0),
        disturbances={"load": wd.Gust(0.1, correlation_time=0.5)},
    )
    requirements = [wd.peak("error") <= wd.uniform(0.95, 1.2), (wd.rms("output") >= 0.1).named(ODD)]
    return wd.Study(loop, requirements=requirements, seed=2**63 + 5, measures=[wd.rms("error")]).with_(**changes)


def friction() -> wd.Study:
    """Its steps are chosen by comparison."""
    return study(
        plant=wd.Plant(
            states={"speed": 0.0},
            equations={"speed": "(u - 0.5*tanh(speed/0.01) + load) / inertia"},
            input="u",
            output="speed",
            disturbances=["load"],
            parameters={"inertia": wd.uniform(0.5, 1.5)},
        )
    )


def with_table() -> wd.Study:
    rows = np.random.default_rng(1).uniform(0.5, 1.5, 40)
    return study(plant=wd.FirstOrder(gain=wd.column("gain"), time_constant=1.0), table={"gain": rows})


def diverging() -> wd.Study:
    return study(plant=wd.FirstOrder(gain=wd.uniform(0.5, 400.0), time_constant=0.01), duration=60.0)


STUDIES = {"drawn": study, "friction": friction, "table": with_table, "diverging": diverging}


def assert_same(one: wd.Outcome, other: wd.Outcome) -> None:
    assert other.study == one.study
    assert (other.first, other.trials, other.requested) == (one.first, one.trials, one.requested)
    for mine, theirs in ((one.parameters, other.parameters), (one.measures, other.measures)):
        assert list(mine) == list(theirs)
        for a, b in zip(mine.values(), theirs.values(), strict=True):
            assert a.tobytes() == b.tobytes()
            assert not b.flags.writeable
    assert one.status.tobytes() == other.status.tobytes()
    assert not other.status.flags.writeable
    assert np.array_equal(one.slack, other.slack)
    assert repr(one) == repr(other)


@pytest.mark.parametrize("kind", STUDIES)
def test_an_outcome_is_the_same_after_it_was_kept(kind: str, tmp_path: Path) -> None:
    outcome = STUDIES[kind]().run(30, progress=False)
    outcome.save(tmp_path / "kept.parquet")
    loaded = wd.load_outcome(tmp_path / "kept.parquet")
    assert_same(outcome, loaded)
    assert loaded.study.resolved_steps() == outcome.study.resolved_steps()
    assert_same(outcome.study.run(40, progress=False), loaded.extend(10, progress=False))
    assert loaded.study.replay(3)["output"].tobytes() == outcome.study.replay(3)["output"].tobytes()


def test_columns_of_many_groups_of_rows_come_back_whole(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    outcome = study().run(1_000, progress=False)
    monkeypatch.setattr(_outcome_file, "ROWS", 300)
    outcome.save(tmp_path / "kept.parquet")
    monkeypatch.setattr(_outcome_file, "ROWS", 170)
    assert_same(outcome, wd.load_outcome(tmp_path / "kept.parquet"))


def test_batches_interrupted_and_empty_outcomes_can_be_kept(tmp_path: Path) -> None:
    path = tmp_path / "kept.parquet"
    second = list(study().batches(25, size=10, progress=False))[1]
    second.save(path)
    assert wd.load_outcome(path).first == 10
    assert_same(second, wd.load_outcome(path))
    stopped = study().run(3_000_000, progress=lambda *_: False)
    stopped.save(path)
    assert_same(stopped, wd.load_outcome(path))
    early = friction().run(100, progress=lambda *_: False)
    assert early.trials == 0
    early.save(path)
    assert_same(early, wd.load_outcome(path))
    assert_same(friction().run(20, progress=False).extend(1, progress=False), early.extend(21, progress=False))


def test_steps_are_those_chosen_then(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    outcome = friction().run(10, progress=False)
    outcome.save(tmp_path / "kept.parquet")
    monkeypatch.setattr("windage._study.chosen_steps", None)
    assert_same(wd.load_outcome(tmp_path / "kept.parquet").extend(5, progress=False), outcome.extend(5, progress=False))


def test_looks_that_were_taken_are_remembered(tmp_path: Path) -> None:
    outcome = study().run(50, progress=False)
    outcome.verdict(0.5)
    outcome = outcome.extend(50, progress=False)
    outcome.save(tmp_path / "kept.parquet")
    expected = outcome.verdict(0.5)
    assert wd.load_outcome(tmp_path / "kept.parquet").verdict(0.5) == expected


def test_other_programs_read_the_columns(tmp_path: Path) -> None:
    outcome = study().run(30, progress=False)
    outcome.save(tmp_path / "kept.parquet")
    table = pq.read_table(tmp_path / "kept.parquet")
    assert table["trial"].to_pylist() == list(range(30))
    assert np.array_equal(table["lag"].to_numpy(), outcome.parameters["lag"])


@pytest.fixture
def kept(tmp_path: Path) -> Path:
    path = tmp_path / "kept.parquet"
    study().run(200, progress=False).save(path)
    return path


def rewritten(path: Path, table: Any = None, facts: dict[str, Any] | None = None, about: Any = None) -> None:
    """Write the file again with another table, other facts or other metadata, as another program could."""
    old = pq.read_table(path)
    words = {key.decode(): value.decode() for key, value in old.schema.metadata.items()}
    new = json.loads(words["windage.outcome"]) | (facts or {})
    words["windage.outcome"] = json.dumps({key: value for key, value in new.items() if value != "left out"})
    if about:
        words = about(words)
    pq.write_table((table(old) if table else old).replace_schema_metadata(words), path)


def with_value(table: pa.Table, place: int) -> pa.Table:
    values = table.column(place).to_numpy().copy()
    values[17] = np.nextafter(values[17], 9.0) if values.dtype == np.float64 else values[17] ^ 1
    return table.set_column(place, table.schema.field(place), pa.array(values))


def with_text(old: str, new: str) -> Any:
    return lambda words: {**words, "windage.study": words["windage.study"].replace(old, new)}


CHANGES: dict[str, dict[str, Any]] = {
    "a drawn number": {"table": lambda table: with_value(table, 1)},
    "a measure": {"table": lambda table: with_value(table, table.num_columns - 2)},
    "a status": {"table": lambda table: with_value(table, table.num_columns - 1)},
    "the index of a trial": {"table": lambda table: with_value(table, 0)},
    "a row less": {"table": lambda table: table.slice(0, 199)},
    "two columns exchanged": {"table": lambda table: table.select([0, 2, 1, *range(3, table.num_columns)])},
    "whole numbers": {"table": lambda table: table.set_column(1, "gain", pa.array(range(200)))},
    "missing values": {"table": lambda table: table.set_column(1, "gain", pa.array([None] * 200, pa.float64()))},
    "more asked for": {"facts": {"requested": 300}},
    "other looks": {"facts": {"looks": [1, 2]}},
    "other steps": {"facts": {"steps": 3}},
    "words for numbers": {"facts": {"trials": "many"}},
    "another release": {"facts": {"windage": "9.9"}},
    "another format": {"facts": {"format": 2}},
    "no digest": {"facts": {"digest": "left out"}},
    "another seed": {"about": with_text("9223372036854775813", "7")},
    "a study of another format": {"about": with_text('"windage_study": ', '"windage_study": 9')},
    "half a study": {"about": with_text('"loop"', "")},
    "no study": {"about": lambda words: {**words, "windage.study": "[]"}},
    "no metadata": {"about": lambda _: {}},
}


@pytest.mark.parametrize("change", CHANGES)
def test_a_changed_file_is_refused_by_its_name(change: str, kept: Path) -> None:
    rewritten(kept, **CHANGES[change])
    with pytest.raises(wd.OutcomeFileError) as caught:
        wd.load_outcome(kept)
    assert caught.value.field == str(kept)
    assert len(str(caught.value)) < 2_000


def test_a_file_that_was_only_rewritten_is_believed(kept: Path) -> None:
    rewritten(kept)
    assert wd.load_outcome(kept).trials == 200


def test_damaged_and_foreign_files_are_refused_by_their_names(kept: Path, tmp_path: Path) -> None:
    whole = kept.read_bytes()
    generator = np.random.default_rng(3)
    contents = [b"", b"PAR1", whole[:-1], whole[: len(whole) // 2], whole[100:], b"windage_study = 1\n", whole[::-1]]
    for _ in range(60):
        damaged = bytearray(whole)
        damaged[int(generator.integers(len(whole)))] ^= int(generator.integers(1, 256))
        contents.append(bytes(damaged))
    original, believed = wd.load_outcome(kept), 0
    for content in contents:
        kept.write_bytes(content)
        try:
            loaded = wd.load_outcome(kept)
        except wd.OutcomeFileError:
            continue
        # Some bytes of a Parquet file decide nothing.
        assert_same(original, loaded)
        believed += 1
    assert believed < 30
    for path in (tmp_path, tmp_path / "missing"):
        with pytest.raises(wd.OutcomeFileError, match="expected a file written by"):
            wd.load_outcome(path)


@pytest.mark.parametrize("kind", [pa.ArrowNotImplementedError, pa.ArrowInvalid, pa.ArrowSerializationError, IndexError])
def test_whatever_arrow_says_of_a_damaged_file_names_the_file(
    kind: type[Exception], kept: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def fails(*_: Any) -> None:
        raise kind("whole numbers of 128 bits")

    monkeypatch.setattr(pq, "ParquetFile", fails)
    with pytest.raises(wd.OutcomeFileError, match="whole numbers of 128 bits") as caught:
        wd.load_outcome(kept)
    assert caught.value.field == str(kept)


def test_another_release_with_other_digits_is_told_apart(kept: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(wd, "__version__", "9.9")
    assert wd.load_outcome(kept).trials == 200  # the digits are those of this one

    def other(*arguments: Any) -> Any:
        columns = run_columns(*arguments)
        columns.measures[0, 0] = np.nextafter(columns.measures[0, 0], 9.0)
        return columns

    run_columns = _outcome_file.run_columns
    monkeypatch.setattr(_outcome_file, "run_columns", other)
    with pytest.raises(wd.OutcomeFileError, match="other digits"):
        wd.load_outcome(kept)

"""Outcomes kept in files: Parquet with the study inside, and a digest over everything.

A row is a trial: its index, what it drew, what was measured, and 0 or 1 for finished or diverged. Slacks and counts
follow from them and are worked out again. The metadata of the file hold the study as JSON ("windage.study") and the
facts of the run ("windage.outcome"), among them the integration steps, so that further trials have the same digits.
"""

from __future__ import annotations

import hashlib
import json
import os
from collections.abc import Iterator
from pathlib import Path
from typing import TYPE_CHECKING, Any, BinaryIO

import numpy as np
from numpy.typing import NDArray

from ._accuracy import Choice
from ._arguments import explained
from ._describe import Described
from ._errors import DescriptionError, OutcomeFileError
from ._memory import check_memory
from ._outcome import Outcome
from ._runner import Columns, run_columns
from ._study_text import from_data, to_data
from ._written_file import written

if TYPE_CHECKING:
    from ._study import Study

FORMAT = 1
#: Trials written and read at a time.
ROWS = 1 << 17
_STUDY, _FACTS = "windage.study", "windage.outcome"
_FOREIGN = "a file written by Outcome.save"
Arrays = list[NDArray[Any]]


def save_outcome(outcome: Outcome, path: str | os.PathLike[str]) -> None:
    """Write an outcome to a Parquet file; see `Outcome.save`."""
    import pyarrow as pa  # type: ignore[import-untyped]
    import pyarrow.parquet as pq  # type: ignore[import-untyped]

    study = json.dumps(to_data(outcome.study), ensure_ascii=False, allow_nan=False)
    facts = _facts(outcome)
    arrays = _arrays(outcome._columns)
    facts["digest"] = _digest(facts, study, arrays)
    types = [pa.int64(), *(pa.from_numpy_dtype(array.dtype) for array in arrays)]
    fields = [pa.field(*field, nullable=False) for field in zip(_names(outcome._described), types, strict=True)]
    schema = pa.schema(fields, {_STUDY: study, _FACTS: json.dumps(facts)})
    with written(path) as file, pq.ParquetWriter(file, schema, compression="zstd", use_dictionary=False) as writer:
        for start in range(0, max(outcome.trials, 1), ROWS):
            part = slice(start, min(start + ROWS, outcome.trials))
            trials = np.arange(outcome.first + part.start, outcome.first + part.stop, dtype=np.int64)
            columns = [pa.array(array) for array in (trials, *(array[part] for array in arrays))]
            writer.write_table(pa.Table.from_arrays(columns, schema=schema))


@explained
def load_outcome(path: str | os.PathLike[str]) -> Outcome:
    """Read an outcome that `Outcome.save` wrote.

    Parameters
    ----------
    path : str or path
        The file.

    Returns
    -------
    Outcome
        Equal to the one that was saved, with its study and the looks that were taken at it; `extend` continues it.

    Raises
    ------
    OutcomeFileError
        If the file cannot be read, is none of windage, is damaged or changed, comes from a release with other
        digits, or holds a study that this release does not read.
    DescriptionError
        If the outcome does not fit into the memory.
    """
    import pyarrow as pa

    name = str(path)
    # What JSON, Arrow and the parts of a study say to content that is none of theirs.
    foreign = (
        pa.ArrowException,
        ValueError,
        KeyError,
        IndexError,
        TypeError,
        AttributeError,
        OverflowError,
        RecursionError,
    )
    try:
        with Path(path).open("rb") as file:
            return _read(file, name)
    except OutcomeFileError:
        raise
    except OSError as error:
        raise OutcomeFileError(name, error.strerror or str(error), _FOREIGN) from error
    except DescriptionError as error:
        if error.field == name:  # does not fit
            raise
        raise OutcomeFileError(name, f"a study with {error}", "a study of this release") from error
    except foreign as error:
        raise OutcomeFileError(name, f"{type(error).__name__}: {error}", _FOREIGN) from error


def _facts(outcome: Outcome) -> dict[str, Any]:
    """Return what is known of a run besides its columns."""
    from windage import __version__

    choice: Choice | None = vars(outcome.study).get("_choice")
    return {
        "format": FORMAT,
        "windage": __version__,
        "study": outcome.study.digest,
        "first": outcome.first,
        "trials": outcome.trials,
        "requested": outcome.requested,
        "looks": sorted(outcome._judged),
        "steps": None if choice is None else choice.steps,
        "caution": "" if choice is None else choice.caution,
    }


def _arrays(columns: Columns) -> Arrays:
    """Return the columns in the order of the file, without the indices of the trials."""
    return [*columns.parameters, *columns.measures, columns.status]


def _names(described: Described) -> list[str]:
    return ["trial", *(column.name for column in described.columns), *described.measure_names, "status"]


def _digest(facts: dict[str, Any], study: str, arrays: Arrays) -> str:
    """Return the SHA-256 of facts, study and columns, whatever groups of rows they are stored in."""
    digest = hashlib.sha256(json.dumps(facts, sort_keys=True).encode())
    digest.update(study.encode())
    for array in arrays:
        digest.update(np.ascontiguousarray(array, dtype=array.dtype.newbyteorder("<")).data)
    return digest.hexdigest()


def _read(file: BinaryIO, name: str) -> Outcome:
    import pyarrow.parquet as pq

    stored = pq.ParquetFile(file)
    about = {key.decode(): value.decode() for key, value in (stored.schema_arrow.metadata or {}).items()}
    if _FACTS not in about or _STUDY not in about:
        raise OutcomeFileError(name, "a Parquet file without an outcome", _FOREIGN)
    facts, text = json.loads(about[_FACTS]), about[_STUDY]
    if facts["format"] != FORMAT:
        mend = "It comes from another release of windage."
        raise OutcomeFileError(name, f"format {facts['format']}", f"the format {FORMAT}", mend)
    study = _study(facts, text, name)
    described = study._describe(1) if facts["steps"] is None else study._run_description
    if stored.schema_arrow.names != _names(described) or stored.metadata.num_rows != facts["trials"]:
        raise OutcomeFileError(name, "other columns or rows than its study has", _FOREIGN)
    columns = _columns(stored, described, facts, name)
    given = facts.pop("digest")
    if _digest(facts, text, _arrays(columns)) != given:
        mend = "It was damaged or changed after it was written."
        raise OutcomeFileError(name, "a content that its digest does not fit", "the content that was saved", mend)
    outcome = Outcome(
        study,
        described,
        columns,
        facts["first"],
        frozenset((first, run, asked) for first, run, asked in facts["looks"]),
    )
    _check_release(outcome, facts["windage"], name)
    return outcome


def _study(facts: dict[str, Any], text: str, name: str) -> Study:
    study = from_data(json.loads(text))
    if study.digest != facts["study"]:
        mend = "It was changed, or comes from another release of windage."
        raise OutcomeFileError(name, f"a study with the digest {study.digest[:12]}", facts["study"][:12], mend)
    if facts["steps"] is not None:
        # As chosen then: a later release might choose others, and the digits of further trials would not fit.
        vars(study)["_choice"] = Choice(facts["steps"], facts["caution"])
    return study


def _columns(stored: Any, described: Described, facts: dict[str, Any], name: str) -> Columns:
    trials = facts["trials"]
    parameters, measures = len(described.columns), len(described.measures)
    needed = trials * (8.0 * (parameters + measures) + 1.0)
    check_memory(name, f"{trials} trials", needed, "Read it on a larger machine.")
    columns = Columns(
        np.empty((parameters, trials)),
        np.empty((measures, trials)),
        np.empty(trials, dtype=np.uint8),
        facts["requested"],
    )
    arrays, done = _arrays(columns), 0
    for group in _groups(stored):
        rows = slice(done, done + len(group[0]))
        done = rows.stop
        expected = np.arange(facts["first"] + rows.start, facts["first"] + rows.stop)
        if not np.array_equal(group[0], expected):
            raise OutcomeFileError(name, "trials that are missing or out of order", "one trial after the other")
        for array, values in zip(arrays, group[1:], strict=True):
            if values.dtype != array.dtype:
                raise OutcomeFileError(name, f"a column of {values.dtype}", f"a column of {array.dtype}")
            array[rows] = values
    return columns


def _groups(stored: Any) -> Iterator[Arrays]:
    # One after the other: batches of rows would be read ahead, and held twice.
    for group in range(stored.num_row_groups):
        yield [column.to_numpy() for column in stored.read_row_group(group).columns]


def _check_release(outcome: Outcome, version: str, name: str) -> None:
    """Run the last trial again where another release wrote the file: what is added to it must fit."""
    from windage import __version__

    if version == __version__ or not outcome.trials:
        return
    again = run_columns(outcome.study._campaign, outcome.first + outcome.trials - 1, 1, 1)
    for mine, theirs in zip(_arrays(outcome._columns), _arrays(again), strict=True):
        if mine[-1:].tobytes() != theirs.tobytes():
            found = f"trials of windage {version}, which windage {__version__} computes with other digits"
            raise OutcomeFileError(name, found, "a file of this release", f"Read it with windage {version}.")

"""From objects to the plain study that the engine takes.

Every number passes through `Numbers`: a plain one stays itself, a spread becomes the column of a drawn
parameter. A column's random stream is a function of the place's name alone, so that a further sensor, spread
or requirement leaves all other draws as they are.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from ._errors import DescriptionError, suggestion
from ._measures import Measure, Requirement
from ._numbers import Number, Spread
from ._shared_numbers import Column, Shared

if TYPE_CHECKING:
    from ._loop import Loop

#: Names of columns of `Outcome.table()` that no parameter may take.
TABLE_COLUMNS = ("trial", "passed", "status")
MOST_DRAWN = 10_000
MOST_CORRELATED = 500

Taken = float | tuple[str, int]


@dataclass(frozen=True)
class DrawnColumn:
    """A drawn parameter: the name it goes by, the place it was first met at, and its spread."""

    name: str
    path: str
    spread: Spread


class Numbers:
    """Collects the drawn parameters of a study while it is being described."""

    def __init__(self) -> None:
        self._keys: dict[str, int] = {}
        self._spreads: list[tuple[str, str, Spread]] = []  # key, path, spread
        self._streams: dict[int, str] = {}

    def take(self, value: Number, path: str) -> Taken:
        """Return a number as the engine wants it: itself, or the column it is drawn into."""
        if not isinstance(value, Spread):
            return value
        key = _key(value, path)
        if key not in self._keys:
            if len(self._spreads) >= MOST_DRAWN:
                raise DescriptionError(path, "one more spread", f"a study of at most {MOST_DRAWN} drawn parameters")
            self._keys[key] = len(self._spreads)
            self._spreads.append((key, path, value))
        known = self._spreads[self._keys[key]]
        if known[2] != value:
            mend = f"At {known[1]} it is {known[2]!r}; use one spread, or another name."
            raise DescriptionError(path, value, "the same spread under the same shared name", mend)
        return ("drawn", self._keys[key])

    def take_all(self, values: Sequence[Number], path: str) -> list[Taken]:
        """Return a list of numbers as the engine wants it."""
        return [self.take(value, f"{path}[{i}]") for i, value in enumerate(values)]

    def stream(self, purpose: str) -> int:
        """Return the random stream of a purpose, a function of its name alone."""
        stream = fnv1a(purpose)
        if self._streams.setdefault(stream, purpose) != purpose:
            mend = "Their random numbers would be the same; rename one of them."
            pair = f"{purpose!r} and {self._streams[stream]!r}"
            raise DescriptionError("study", pair, "names with different random streams", mend)
        return stream

    def columns(self) -> tuple[DrawnColumn, ...]:
        """Return the drawn parameters under their names, in column order."""
        short = [_short_name(path, spread) for _, path, spread in self._spreads]
        counts = Counter(short)
        named = [(spread.name, path) for _, path, spread in self._spreads if spread.name is not None]
        _refuse_equal_names(named)
        columns = []
        for name, (_, path, spread) in zip(short, self._spreads, strict=True):
            is_clear = counts[name] == 1 and name not in TABLE_COLUMNS
            columns.append(DrawnColumn(name if is_clear else path, path, spread))
        _refuse_equal_names([(column.name, column.path) for column in columns])
        return tuple(columns)

    def describe_spreads(self, columns: Sequence[DrawnColumn]) -> list[dict[str, Any]]:
        """Return the spreads as the engine wants them, in column order."""
        described = []
        for (key, _, spread), column in zip(self._spreads, columns, strict=True):
            kind, numbers = spread._engine_form()
            # One stream for all columns: a trial takes them from one row.
            stream = self.stream("rows of the table" if isinstance(spread, Column) else f"spread:{key}")
            described.append({"name": column.name, "kind": kind, "numbers": numbers, "stream": stream})
        return described

    def places(self, columns: Sequence[DrawnColumn]) -> dict[str, int]:
        """Return the column that each path, shared name and parameter name stands for."""
        places: dict[str, int] = {}
        for i, ((key, path, _), column) in enumerate(zip(self._spreads, columns, strict=True)):
            for name in (key, path, column.name):
                places.setdefault(name, i)
        return places


@dataclass(frozen=True)
class Described:
    """A study in the engine's form, with what is needed to read the engine's answer."""

    study: dict[str, Any]
    columns: tuple[DrawnColumn, ...]
    measures: tuple[Measure, ...]
    requirement_rows: tuple[int, ...]
    limits: tuple[Taken, ...]

    @property
    def measure_names(self) -> list[str]:
        """A name for each measure: its words, with a number where they are the same."""
        names: dict[str, None] = {}
        counts: dict[str, int] = {}
        for measure in self.measures:
            words = label = measure.label
            while label in names:
                counts[words] = counts.get(words, 1) + 1
                label = f"{words} [{counts[words]}]"
            names[label] = None
        return list(names)


def describe(
    loop: Loop,
    requirements: Sequence[Requirement],
    measures: Sequence[Measure],
    correlations: Mapping[tuple[str, str], float],
    seed: int,
    steps: int,
    *,
    every_signal: bool = False,
) -> Described:
    """Return a study in the engine's form.

    Parameters
    ----------
    loop, requirements, measures, correlations, seed
        As of the study, with the columns of its table bound.
    steps : int
        Integration steps in a sample period.
    every_signal : bool
        Compute all named expressions, not only those that a measure reads.
    """
    numbers = Numbers()
    distinct, rows, paths = _distinct_measures(requirements, measures)
    signals = (
        list(loop.signal_names) if every_signal else [part.signal for measure in distinct for part in measure.parts]
    )
    described_loop = loop._describe(numbers, loop.expressions_for(signals))
    described_loop["steps_per_sample"] = steps
    described_measures = [
        measure._describe(numbers, path, loop.actuator.limits) for measure, path in zip(distinct, paths, strict=True)
    ]
    limits = tuple(
        numbers.take(requirement.limit, f"{requirement_path(i, requirement)}.limit")
        for i, requirement in enumerate(requirements)
    )
    columns = numbers.columns()
    study = {
        "loop": described_loop,
        "measures": described_measures,
        "spreads": numbers.describe_spreads(columns),
        "correlations": _correlations(correlations, numbers, columns),
        "seed": seed,
    }
    return Described(study, columns, tuple(distinct), tuple(rows), limits)


def requirement_path(index: int, requirement: Requirement) -> str:
    """Return the path of a requirement: by its name where it has one, so that order has no meaning then."""
    return f"requirements[{index if requirement.name is None else requirement.name}]"


def fnv1a(text: str) -> int:
    """Return the 32-bit FNV-1a hash of a text in UTF-8 (Fowler, Noll, Vo; from memory)."""
    value = 0x811C9DC5
    for byte in text.encode():
        value = ((value ^ byte) * 0x01000193) & 0xFFFFFFFF
    return value


def _distinct_measures(
    requirements: Sequence[Requirement], measures: Sequence[Measure]
) -> tuple[list[Measure], list[int], list[str]]:
    """Return each measure once, the row of each requirement's measure, and the path of each measure.

    Measures that hold spreads of their own are drawn each by itself.
    """
    distinct: list[Measure] = []
    known: dict[Measure, int] = {}
    paths: list[str] = []

    def row(measure: Measure, path: str) -> int:
        if measure in known and not _draws(measure):
            return known[measure]
        known.setdefault(measure, len(distinct))
        distinct.append(measure)
        paths.append(path)
        return len(distinct) - 1

    rows = [row(r.measure, f"{requirement_path(i, r)}.measure") for i, r in enumerate(requirements)]
    for i, measure in enumerate(measures):
        row(measure, f"measures[{i}]")
    return distinct, rows, paths


def _draws(measure: Measure) -> bool:
    values = (value for part in measure.parts for value in part._key())
    return any(isinstance(value, Spread) and not isinstance(value, Shared | Column) for value in values)


def _key(spread: Spread, path: str) -> str:
    if isinstance(spread, Shared):
        return f"shared.{spread.name}"
    return f"column.{spread.name}" if isinstance(spread, Column) else path


def _short_name(path: str, spread: Spread) -> str:
    if spread.name is not None:
        return spread.name
    is_plant_number = path.startswith("plant.") and path.count(".") == 1 and "[" not in path
    return path.removeprefix("plant.") if is_plant_number else path


def _refuse_equal_names(named: Sequence[tuple[str, str]]) -> None:
    seen: dict[str, str] = {}
    for name, path in named:
        if name in seen:
            mend = f"{seen[name]} has it already; for one draw at both places use shared({name!r}, ...)."
            raise DescriptionError(path, name, "a name of its own for each drawn parameter", mend)
        seen[name] = path


def _correlations(
    correlations: Mapping[tuple[str, str], float], numbers: Numbers, columns: Sequence[DrawnColumn]
) -> list[dict[str, Any]]:
    """Return one matrix for each group of parameters that hang together.

    Within a group parameters are sorted by path: the copula's digits depend on their order, which therefore
    must not be that of writing.
    """
    pairs: dict[frozenset[int], float] = {}
    places = numbers.places(columns) if correlations else {}
    for name in (name for pair in correlations for name in pair):
        if name not in places:
            mend = suggestion(name, places)
            raise DescriptionError("study.correlations", name, "the path or name of a drawn parameter", mend)
    for (first, second), value in correlations.items():
        a, b = places[first], places[second]
        pair = frozenset((a, b))
        if a == b or pair in pairs:
            found = f"({first!r}, {second!r})"
            raise DescriptionError("study.correlations", found, "each pair of two parameters once")
        for which, name in ((a, first), (b, second)):
            if isinstance(columns[which].spread, Column):
                mend = "Columns keep the correlation that their rows have."
                raise DescriptionError("study.correlations", name, "a parameter that is not a column", mend)
        pairs[pair] = value
    described = []
    for group in _groups(pairs):
        if len(group) > MOST_CORRELATED:
            found = f"{len(group)} parameters that hang together"
            raise DescriptionError("study.correlations", found, f"at most {MOST_CORRELATED}")
        order = sorted(group, key=lambda i: columns[i].path)
        matrix = [1.0 if a == b else pairs.get(frozenset((a, b)), 0.0) for a in order for b in order]
        described.append({"parameters": order, "rank_correlation": matrix})
    return described


def _groups(pairs: Mapping[frozenset[int], float]) -> list[set[int]]:
    """Return the parameters that hang together, group by group."""
    neighbours: dict[int, set[int]] = {}
    for pair in pairs:
        for which in pair:
            neighbours.setdefault(which, set()).update(pair)
    groups: list[set[int]] = []
    seen: set[int] = set()
    for start in neighbours:
        if start in seen:
            continue
        group: set[int] = set()
        pending = [start]
        while pending:
            which = pending.pop()
            if which not in group:
                group.add(which)
                pending.extend(neighbours[which])
        seen |= group
        groups.append(group)
    return groups

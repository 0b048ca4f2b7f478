"""Checks of a study as a whole: tables, correlations, signals and windows of measures."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Any, TypeVar

import numpy as np

from ._descriptions import FrozenMapping, copied, frozen, rebuilt
from ._errors import DescriptionError, suggestion
from ._loop import Loop
from ._measures import Measure, Requirement
from ._numbers import Spread, check_count, checked_label, checked_sequence, high_of, low_of, plain_number
from ._shared_numbers import Column
from ._shown_text import LONGEST_NAME, hidden_character

MOST_REQUIREMENTS = MOST_MEASURES = 1000
MOST_PAIRS = 200_000
MOST_ROWS = 10_000_000
DRAWN, IN_ORDER = "drawn", "in_order"
Part = TypeVar("Part")


def checked_requirements(value: object) -> tuple[Requirement, ...]:
    """Return the requirements of a study, each under a label of its own."""
    place = "study.requirements"
    if isinstance(value, Requirement):
        value = [value]
    items = checked_sequence(value, place, "a list of requirements")
    check_count(items, place, MOST_REQUIREMENTS)
    for i, item in enumerate(items):
        if not isinstance(item, Requirement):
            mend = "Compare it with a limit: measure <= limit." if isinstance(item, Measure) else ""
            raise DescriptionError(f"{place}[{i}]", item, "a requirement such as peak('error') <= 0.01", mend)
    labels: dict[str, int] = {}
    for i, item in enumerate(items):
        if item.label in labels:
            mend = f"Number {labels[item.label]} reads the same; leave one out or use .named('...')."
            raise DescriptionError(f"{place}[{i}]", item.label, "a label of its own for each requirement", mend)
        labels[item.label] = i
    return tuple(items)


def checked_measures(value: object) -> tuple[Measure, ...]:
    """Return the further measures of a study."""
    place = "study.measures"
    if isinstance(value, Measure):
        value = [value]
    items = checked_sequence(value, place, "a list of measures")
    check_count(items, place, MOST_MEASURES)
    for i, item in enumerate(items):
        if not isinstance(item, Measure):
            raise DescriptionError(f"{place}[{i}]", item, "a measure such as rms('command')")
    return tuple(items)


def checked_table(value: object) -> FrozenMapping[tuple[float, ...]] | None:
    """Return the table of a study: columns of the same length with finite numbers."""
    if value is None:
        return None
    given = frozen(value, "study.table", "a mapping from column names to values")
    if not given:
        raise DescriptionError("study.table", value, "a mapping from column names to values")
    columns: dict[str, tuple[float, ...]] = {}
    for name, rows in given.items():
        if checked_label(name, "study.table") is None:
            raise DescriptionError("study.table", name, "column names written as text")
        place = f"study.table.{name}"
        items = checked_sequence(rows, place, "a list of numbers")
        if not 1 <= len(items) <= MOST_ROWS:
            raise DescriptionError(place, f"{len(items)} rows", f"1 to {MOST_ROWS} rows")
        columns[name] = tuple(plain_number(x, f"{place}[{i}]") for i, x in enumerate(items))
    lengths = {name: len(rows) for name, rows in columns.items()}
    if len(set(lengths.values())) != 1:
        raise DescriptionError("study.table", lengths, "columns of the same length")
    return FrozenMapping(columns)


def checked_correlations(value: object) -> FrozenMapping[float] | None:
    """Return the rank correlations of a study, keyed by pairs of names."""
    if value is None:
        return None
    place = "study.correlations"
    given = copied(value, place, "a mapping such as {('plant.inertia', 'plant.drag'): 0.6}")
    check_count(given, place, MOST_PAIRS)
    pairs: dict[Any, float] = {}
    for key, item in given.items():
        is_pair = isinstance(key, tuple) and len(key) == 2 and all(isinstance(name, str) for name in key)
        if not is_pair:
            raise DescriptionError(place, key, "pairs of names, ('plant.inertia', 'plant.drag')")
        rho = plain_number(item, f"{place}[{key}]")
        if not -1.0 < rho < 1.0:
            mend = "For a perfect correlation use shared(name, spread)." if abs(rho) == 1.0 else ""
            raise DescriptionError(f"{place}[{key}]", item, "a number between -1 and 1", mend)
        if (key[1], key[0]) in pairs or key[0] == key[1]:
            raise DescriptionError(place, key, "each pair of two parameters once")
        pairs[key] = rho
    return FrozenMapping(pairs)


def check_positive_definite(described: Sequence[Mapping[str, Any]]) -> None:
    """Refuse correlations that no random numbers can have.

    The Gaussian copula with rank correlation r has the correlation 2 sin(pi r / 6) (Kruskal 1958, JASA 53,
    814-861); the matrix of those must be positive definite.
    """
    for group in described:
        n = len(group["parameters"])
        ranks = np.asarray(group["rank_correlation"]).reshape(n, n)
        gaussian = np.where(np.eye(n) > 0, 1.0, 2.0 * np.sin(math.pi / 6.0 * ranks))
        smallest = float(np.linalg.eigvalsh(gaussian)[0])
        if not smallest > 1e-9:
            found = f"a matrix with the smallest eigenvalue {smallest:.3g}"
            expected = "correlations that do not contradict each other (a positive definite matrix)"
            mend = "Pairs that are not given count as 0; give them too, or lower the others."
            raise DescriptionError("study.correlations", found, expected, mend)


def check_windows(loop: Loop, requirements: Sequence[Requirement], measures: Sequence[Measure]) -> None:
    """Refuse measures of signals that do not exist, and windows outside the trial."""
    whole = [(f"study.requirements[{i}]", r.measure) for i, r in enumerate(requirements)]
    whole += [(f"study.measures[{i}]", m) for i, m in enumerate(measures)]
    shortest = low_of(loop.duration)
    known = set(loop.signal_names)
    for place, measure in (placed for start, m in whole for placed in m._placed_parts(start)):
        if measure.signal not in known:
            mend = suggestion(measure.signal, loop.signal_names)
            raise DescriptionError(f"{place}.signal", measure.signal, "the name of a signal of the loop", mend)
        if measure.kind == "time_in_saturation" and loop.actuator.limits is None:
            mend = "Add Actuator(limits=(low, high))."
            raise DescriptionError(place, "an actuator without limits", "limits for the time in saturation", mend)
        if high_of(measure.after) >= shortest:
            expected = f"a time before the end of the trial ({shortest:g} s)"
            raise DescriptionError(f"{place}.after", measure.after, expected)
        if measure.before != math.inf and high_of(measure.before) > shortest * (1.0 + 1e-12):
            expected = f"a time up to the end of the trial ({shortest:g} s)"
            mend = "Leave it out for a window up to the end."
            raise DescriptionError(f"{place}.before", measure.before, expected, mend)
        _check_holds_sample(place, measure, loop)


def _check_holds_sample(place: str, measure: Measure, loop: Loop) -> None:
    if measure.before != math.inf and low_of(measure.before) - high_of(measure.after) < high_of(loop.sample_period):
        found = f"{high_of(measure.after):g} s to {low_of(measure.before):g} s"
        expected = f"at least one sample period ({high_of(loop.sample_period):g} s)"
        raise DescriptionError(f"{place}.before", found, expected, "Widen the window.")


def with_table(part: Part, table: Mapping[str, tuple[float, ...]] | None, rows: str) -> Part:
    """Return a description whose columns know their values and order; all checks are made anew."""
    known = table or {}

    def change(value: Any) -> Any:
        if not isinstance(value, Column):
            return value if isinstance(value, Spread) else None
        if value.name not in known:
            mend = suggestion(value.name, known) if known else "Give Study(..., table={name: values})."
            raise DescriptionError("study.table", value.name, "a column for each column(...)", mend)
        return value.bound(known[value.name], rows == IN_ORDER)

    result: Part = rebuilt(part, change)
    return result


def check_title(title: object) -> None:
    """Refuse a title that is no single line of text."""
    if not isinstance(title, str) or hidden_character(title) is not None or len(title) > LONGEST_NAME:
        expected = f"one line of at most {LONGEST_NAME} characters that all show"
        raise DescriptionError("study.title", title, expected)

"""Numbers that several places have in common: shared spreads and columns of the user's own table."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import Any, ClassVar

from ._arguments import explained
from ._errors import DescriptionError
from ._numbers import NAME_EXPECTED, Spread, checked_label


@dataclass(frozen=True, repr=False)
class Shared(Spread):
    """One draw used at several places. Made by `shared`."""

    _kind: ClassVar[str] = "shared"
    name: str
    spread: Any

    def __post_init__(self) -> None:
        _check_name(self.name, "shared.name")
        if not isinstance(self.spread, Spread):
            mend = "Write for example shared('mass', normal(12.0, 0.5))."
            raise DescriptionError("shared.spread", self.spread, "a spread", mend)
        if isinstance(self.spread, Shared | Column):
            mend = "A column is shared already wherever it is used." if isinstance(self.spread, Column) else ""
            raise DescriptionError("shared.spread", self.spread, "a spread that is not shared itself", mend)
        if self.spread.name is not None:
            mend = "The shared name is the name of the drawn parameter."
            raise DescriptionError("shared.spread", self.spread, "a spread without a name of its own", mend)

    def __repr__(self) -> str:
        return f"shared({self.name!r}, {self.spread!r})"

    @property
    def low(self) -> float:
        """Lower bound of the spread."""
        return float(self.spread.low)

    @property
    def high(self) -> float:
        """Upper bound of the spread."""
        return float(self.spread.high)

    @property
    def nominal(self) -> float:
        """Nominal value of the spread."""
        return float(self.spread.nominal)

    def _excludes_low(self) -> bool:
        return bool(self.spread._excludes_low())

    def _is_truncated(self) -> bool:
        return bool(self.spread._is_truncated())

    def _values(self) -> tuple[float, ...] | None:
        values: tuple[float, ...] | None = self.spread._values()
        return values

    def _engine_form(self) -> tuple[str, list[float]]:
        kind, numbers = self.spread._engine_form()
        return kind, numbers


@dataclass(frozen=True, repr=False)
class Column(Spread):
    """A column of the study's table: trial i has the value in row i. Made by `column`."""

    _kind: ClassVar[str] = "column"
    name: str
    # Known once the study brings the table; checks are repeated there.
    low: float = field(init=False, default=math.nan, compare=False)
    high: float = field(init=False, default=math.nan, compare=False)
    nominal: float = field(init=False, default=math.nan, compare=False)
    rows: tuple[float, ...] | None = field(init=False, default=None, compare=False)

    def __post_init__(self) -> None:
        _check_name(self.name, "column.name")

    def bound(self, rows: tuple[float, ...]) -> Column:
        """Return the column with the values that the table of a study has for it."""
        column = Column(self.name)
        bounds = {"low": min(rows), "high": max(rows), "nominal": sorted(rows)[(len(rows) - 1) // 2]}
        for key, value in {**bounds, "rows": rows}.items():
            object.__setattr__(column, key, value)
        return column

    def _values(self) -> tuple[float, ...] | None:
        return self.rows

    def __repr__(self) -> str:
        return f"column({self.name!r})"

    def _engine_form(self) -> tuple[str, list[float]]:
        if self.rows is None:
            raise DescriptionError("column", self.name, "a column of the study's table", "Give it to Study(table=...).")
        return "rows", list(self.rows)


@explained
def shared(name: str, spread: Any) -> Shared:
    """Use one draw of a spread at several places.

    Parameters
    ----------
    name : str
        Name of the drawn parameter; the same name at several places means the same value in a trial.
    spread : Spread
        The spread, the same at each place.

    Examples
    --------
    >>> from windage import shared, uniform
    >>> mass = shared("mass", uniform(10.0, 14.0))
    >>> mass.nominal
    12.0
    """
    return Shared(name, spread)


@explained
def column(name: str) -> Column:
    """Take a number from the study's table: trial i has the value in row i of this column.

    Notes
    -----
    The table is given to `Study(..., table={name: values})`. Columns keep the joint distribution of measured
    parameters, whatever it is. A study cannot run more trials than the table has rows.
    """
    return Column(name)


def _check_name(name: object, place: str) -> None:
    if checked_label(name, place) is None:
        raise DescriptionError(place, name, NAME_EXPECTED)

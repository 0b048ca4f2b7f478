"""Numbers that several places have in common: shared spreads and columns of the user's own table."""

from __future__ import annotations

import math
from dataclasses import KW_ONLY, dataclass, field
from typing import Any, ClassVar

from ._arguments import explained
from ._distributions import STATED, Distribution, lower_median
from ._errors import DescriptionError
from ._numbers import NAME_EXPECTED, Spread, checked_label, plain_number


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

    def _varies(self) -> bool:
        return bool(self.spread._varies())

    def _is_truncated(self) -> bool:
        return bool(self.spread._is_truncated())

    def _values(self) -> tuple[float, ...] | None:
        values: tuple[float, ...] | None = self.spread._values()
        return values

    def _engine_form(self) -> tuple[str, list[float]]:
        kind, numbers = self.spread._engine_form()
        return kind, numbers


@dataclass(frozen=True, repr=False)
class Column(Distribution):
    """A column of the study's table. Made by `column`."""

    _kind: ClassVar[str] = "column"
    name: str
    _: KW_ONLY
    stated_nominal: Any = field(default=None, metadata=STATED)
    # Known once the study brings the table; checks are repeated there.
    low: float = field(init=False, default=math.nan, compare=False)
    high: float = field(init=False, default=math.nan, compare=False)
    rows: tuple[float, ...] | None = field(init=False, default=None, compare=False)
    in_order: bool = field(init=False, default=False, compare=False)

    def __post_init__(self) -> None:
        _check_name(self.name, "column.name")
        if self.stated_nominal is not None:
            object.__setattr__(self, "stated_nominal", plain_number(self.stated_nominal, "column.nominal"))

    def bound(self, rows: tuple[float, ...], in_order: bool) -> Column:
        """Return the column with the values that the table of a study has for it."""
        column = Column(self.name, stated_nominal=self.stated_nominal)
        known = {"low": min(rows), "high": max(rows), "rows": rows, "in_order": in_order}
        for key, value in known.items():
            object.__setattr__(column, key, value)
        column._check_nominal(f"column.{self.name}.nominal")
        return column

    def _usual_nominal(self) -> float:
        # The lower median, itself one of the values.
        return math.nan if self.rows is None else lower_median(self.rows)

    def _values(self) -> tuple[float, ...] | None:
        return self.rows

    def __repr__(self) -> str:
        stated = "" if self.stated_nominal is None else f", nominal={self.stated_nominal!r}"
        return f"column({self.name!r}{stated})"

    def _engine_form(self) -> tuple[str, list[float]]:
        if self.rows is None:
            raise DescriptionError("column", self.name, "a column of the study's table", "Give it to Study(table=...).")
        return "rows" if self.in_order else "drawn_rows", list(self.rows)


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
def column(name: str, *, nominal: float | None = None) -> Column:
    """Take a number from a column of the study's table, `Study(..., table={name: values})`.

    Parameters
    ----------
    name : str
        Name of the column, and of the drawn parameter.
    nominal : float, optional
        Value of the nominal unit, within the column; by default the (lower) median.

    Notes
    -----
    Each trial draws one row, by its own random number and each row equally likely, and takes all columns from
    it: the joint distribution of measured parameters is kept, whatever it is, and the order of the rows has
    no meaning. `Study(..., table_rows="in_order")` runs the rows one after another instead, each once; its
    verdict is a count of that list.
    """
    return Column(name, stated_nominal=nominal)


def _check_name(name: object, place: str) -> None:
    if checked_label(name, place) is None:
        raise DescriptionError(place, name, NAME_EXPECTED)

"""Stock plants: linear ones, sampled exactly by the matrix exponential, and the drives of `_drives`.

All but `StateSpace` have one disturbance, called "load"; what it acts on is said at each plant.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any, ClassVar

from ._drives import DCDrive, TwoMassDrive
from ._errors import DescriptionError
from ._numbers import (
    ANY,
    NONZERO,
    POSITIVE,
    Number,
    checked_integer,
    checked_number,
    checked_numbers,
    checked_sequence,
    takes,
)
from ._plants import DEAD_TIME
from ._stock_plant import StockPlant

if TYPE_CHECKING:
    from ._describe import Numbers

HIGHEST_ORDER = 20


class LinearPlant(StockPlant):
    """Root of the linear stock plants.

    Disturbances are exact as well: functions of time wherever they jump or bend, also between two samples, and noises,
    which are held from sample to sample. A trial for which the digits of the engine are not enough is refused with an
    `EngineError` that names it.
    """

    is_linear = True


@dataclass(frozen=True, repr=False)
class IntegratorChain(LinearPlant):
    """A chain of integrators: the n-th derivative of the output is gain * input + load.

    Parameters
    ----------
    order : int
        Number of integrators n, 1 to 20.
    gain : float or spread
        Input gain, not 0.
    initial : float, spread or sequence of them
        Output at time 0, or output and its derivatives up to n - 1.
    dead_time : float or spread, s
        Before the input, any number.
    """

    engine_kind: ClassVar[str] = "integrator_chain"
    engine_order: ClassVar[tuple[str, ...]] = ("gain",)

    order: int
    gain: Number = field(metadata=takes(NONZERO))
    initial: Number | Sequence[Number] = 0.0
    dead_time: Number = field(default=0.0, metadata=takes(DEAD_TIME))

    def __post_init__(self) -> None:
        object.__setattr__(self, "order", checked_integer(self.order, "plant.order", 1, HIGHEST_ORDER))
        super().__post_init__()
        _check_initial(self, self.order)

    def _states(self) -> int:
        return self.order

    def _initial(self) -> Sequence[Number]:
        return _filled(self.initial, self.order)

    def _describe(self, numbers: Numbers) -> dict[str, Any]:
        return {**super()._describe(numbers), "order": self.order}


@dataclass(frozen=True, repr=False)
class FirstOrder(LinearPlant):
    """gain / (time_constant s + 1), with a dead time at its input; the load adds to the input."""

    engine_kind: ClassVar[str] = "first_order"
    engine_order: ClassVar[tuple[str, ...]] = ("gain", "time_constant")

    gain: Number = field(metadata=takes(NONZERO))
    time_constant: Number = field(metadata=takes(POSITIVE))
    dead_time: Number = field(default=0.0, metadata=takes(DEAD_TIME))
    initial: Number = field(default=0.0, metadata=takes(ANY))

    def _states(self) -> int:
        return 1

    def _initial(self) -> Sequence[Number]:
        return (self.initial,)

    def path_of(self, name: str) -> str:
        """Return the path of a named number; the initial value is drawn as that of the first state."""
        return "plant.initial[0]" if name == "initial" else super().path_of(name)


@dataclass(frozen=True, repr=False)
class SecondOrder(LinearPlant):
    """gain / (T^2 s^2 + 2 damping T s + 1) with T = time_constant and a dead time at its input.

    The load adds to the input. `initial` is the output at time 0, or output and rate.
    """

    engine_kind: ClassVar[str] = "second_order"
    engine_order: ClassVar[tuple[str, ...]] = ("gain", "time_constant", "damping")

    gain: Number = field(metadata=takes(NONZERO))
    time_constant: Number = field(metadata=takes(POSITIVE))
    damping: Number = field(metadata=takes(ANY))
    dead_time: Number = field(default=0.0, metadata=takes(DEAD_TIME))
    initial: Number | Sequence[Number] = 0.0

    def __post_init__(self) -> None:
        super().__post_init__()
        _check_initial(self, 2)

    def _states(self) -> int:
        return 2

    def _initial(self) -> Sequence[Number]:
        return _filled(self.initial, 2)


@dataclass(frozen=True, repr=False)
class TransferFunction(LinearPlant):
    """A strictly proper transfer function with a dead time at its input; the load adds to the input.

    Parameters
    ----------
    numerator, denominator : sequence of float or spread
        Coefficients in descending powers of s; the denominator has the higher degree, and its first
        coefficient is not 0.
    dead_time : float or spread, s
        At the input.

    Notes
    -----
    The states are those of the controllable canonical form and start at 0.
    """

    engine_kind: ClassVar[str] = "transfer_function"

    numerator: Sequence[Number]
    denominator: Sequence[Number]
    dead_time: Number = field(default=0.0, metadata=takes(DEAD_TIME))

    def __post_init__(self) -> None:
        super().__post_init__()
        numerator = checked_numbers(self.numerator, "plant.numerator")
        denominator = checked_numbers(self.denominator, "plant.denominator")
        checked_number(denominator[0], "plant.denominator[0]", NONZERO)
        if all(x == 0.0 for x in numerator):
            raise DescriptionError("plant.numerator", self.numerator, "a coefficient other than 0")
        if not len(numerator) < len(denominator) <= HIGHEST_ORDER + 1:
            found = f"{len(numerator)} coefficients over {len(denominator)}"
            expected = f"a denominator of higher degree than the numerator, at most {HIGHEST_ORDER}"
            raise DescriptionError("plant.numerator", found, expected, "Leave leading zeros out.")
        object.__setattr__(self, "numerator", numerator)
        object.__setattr__(self, "denominator", denominator)

    def _states(self) -> int:
        return len(self.denominator) - 1

    def _engine_numbers(self, numbers: Numbers) -> list[Any]:
        top = numbers.take_all(self.numerator, "plant.numerator")
        return [*top, *numbers.take_all(self.denominator, "plant.denominator")]

    def _describe(self, numbers: Numbers) -> dict[str, Any]:
        return {**super()._describe(numbers), "order": len(self.numerator)}


@dataclass(frozen=True, repr=False)
class StateSpace(LinearPlant):
    """x' = a x + b u + e w, y = c x.

    Parameters
    ----------
    a : matrix of float or spread, shape (n, n)
        State matrix, a list of rows.
    b : sequence of float or spread, shape (n,)
        Input.
    c : sequence of float or spread, shape (n,)
        Output.
    e : matrix of float or spread, shape (n, m), optional
        Disturbances, one a column: "load" if there is one, else "load_1", "load_2", ... By default none.
    initial : sequence of float or spread, shape (n,), optional
        States at time 0, by default 0.
    dead_time : float or spread, s
        Before the input, any number.
    """

    engine_kind: ClassVar[str] = "state_space"

    a: Sequence[Sequence[Number]]
    b: Sequence[Number]
    c: Sequence[Number]
    e: Sequence[Sequence[Number]] | None = None
    initial: Sequence[Number] | None = None
    dead_time: Number = field(default=0.0, metadata=takes(DEAD_TIME))

    def __post_init__(self) -> None:
        super().__post_init__()
        a = _matrix(self.a, "plant.a", None, None)
        n = len(a)
        if not n <= HIGHEST_ORDER:
            raise DescriptionError("plant.a", f"{n} rows", f"at most {HIGHEST_ORDER} states")
        if len(a[0]) != n:
            raise DescriptionError("plant.a", f"{n} rows of {len(a[0])} numbers", "a square matrix")
        object.__setattr__(self, "a", a)
        object.__setattr__(self, "b", _vector(self.b, "plant.b", n))
        object.__setattr__(self, "c", _vector(self.c, "plant.c", n))
        if self.e is not None:
            object.__setattr__(self, "e", _matrix(self.e, "plant.e", n, None))
        if self.initial is not None:
            object.__setattr__(self, "initial", checked_numbers(self.initial, "plant.initial", ANY, n))

    @property
    def disturbance_names(self) -> tuple[str, ...]:
        """Names of the disturbances, one a column of e."""
        if self.e is None:
            return ()
        count = len(self.e[0])
        return ("load",) if count == 1 else tuple(f"load_{i + 1}" for i in range(count))

    def _states(self) -> int:
        return len(self.a)

    def _initial(self) -> Sequence[Number]:
        return (0.0,) * len(self.a) if self.initial is None else self.initial

    def _engine_numbers(self, numbers: Numbers) -> list[Any]:
        taken: list[Any] = []
        for i, row in enumerate(self.a):
            taken += numbers.take_all(row, f"plant.a[{i}]")
        taken += numbers.take_all(self.b, "plant.b")
        for i, row in enumerate(self.e or ()):
            taken += numbers.take_all(row, f"plant.e[{i}]")
        return taken + numbers.take_all(self.c, "plant.c")


def _filled(initial: Any, count: int) -> tuple[Number, ...]:
    """Return one initial value a state: a single one is that of the output."""
    return initial if isinstance(initial, tuple) else (initial, *([0.0] * (count - 1)))


def _check_initial(plant: IntegratorChain | SecondOrder, count: int) -> None:
    value: Any = plant.initial
    is_list = isinstance(value, list | tuple) or (hasattr(value, "ndim") and value.ndim > 0)
    checked: Any = (
        checked_numbers(value, "plant.initial", ANY, count) if is_list else checked_number(value, "plant.initial", ANY)
    )
    object.__setattr__(plant, "initial", checked)


def _matrix(value: object, place: str, rows: int | None, columns: int | None) -> tuple[tuple[Number, ...], ...]:
    items = checked_sequence(value, place, "a matrix, written as a list of rows")
    if not items or (rows is not None and len(items) != rows):
        expected = "at least one row" if rows is None else f"{rows} rows, one a state"
        raise DescriptionError(place, f"{len(items)} rows", expected)
    matrix = tuple(checked_numbers(row, f"{place}[{i}]", ANY, columns) for i, row in enumerate(items))
    widths = {len(row) for row in matrix}
    if len(widths) != 1:
        raise DescriptionError(place, f"rows of {sorted(widths)} numbers", "rows of the same length")
    return matrix


def _vector(value: object, place: str, count: int) -> tuple[Number, ...]:
    """Return a vector, also where it is written as a matrix with one row or one column."""
    items = checked_sequence(value, place, f"a list of {count} numbers")
    flat: list[Any] = []
    for item in items:
        is_row = isinstance(item, list | tuple) or (hasattr(item, "ndim") and item.ndim > 0)
        flat += list(item) if is_row else [item]
    return checked_numbers(flat, place, ANY, count)


__all__ = [
    "DCDrive",
    "FirstOrder",
    "IntegratorChain",
    "LinearPlant",
    "SecondOrder",
    "StateSpace",
    "TransferFunction",
    "TwoMassDrive",
]

"""What the stock plants have in common."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any, ClassVar

from ._descriptions import parts
from ._numbers import Number, checked_number
from ._plants import AnyPlant

if TYPE_CHECKING:
    from ._describe import Numbers


class StockPlant(AnyPlant):
    """Root of the stock plants."""

    is_undisturbed = True
    engine_kind: ClassVar[str]
    #: Arguments that are the engine's numbers, in its order.
    engine_order: ClassVar[tuple[str, ...]] = ()

    def __post_init__(self) -> None:
        for f, value in parts(self):
            if "rule" in f.metadata and value is not None:
                checked = checked_number(value, f"plant.{f.name}", f.metadata["rule"])
                object.__setattr__(self, f.name, checked)

    @property
    def state_names(self) -> tuple[str, ...]:
        """Names of the states: state_1, state_2, ..."""
        return tuple(f"state_{i + 1}" for i in range(self._states()))

    @property
    def disturbance_names(self) -> tuple[str, ...]:
        """Names of the disturbances."""
        return ("load",)

    @property
    def named_numbers(self) -> Mapping[str, Number]:
        """The numbers under the names of their arguments."""
        return {f.name: value for f, value in parts(self) if "rule" in f.metadata and value is not None}

    def _states(self) -> int:
        return len(self.state_names)

    def _initial(self) -> Sequence[Number]:
        return (0.0,) * self._states()

    def _engine_numbers(self, numbers: Numbers) -> list[Any]:
        return [numbers.take(getattr(self, name), f"plant.{name}") for name in self.engine_order]

    def _describe(self, numbers: Numbers) -> dict[str, Any]:
        return {
            "kind": self.engine_kind,
            "states": list(self.state_names),
            "initial_state": numbers.take_all(self._initial(), "plant.initial"),
            "numbers": self._engine_numbers(numbers),
            "disturbances": len(self.disturbance_names),
            "dead_time": numbers.take(self.dead_time, "plant.dead_time"),
        }

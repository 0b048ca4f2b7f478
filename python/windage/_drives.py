"""Two drives with friction, ready-made in the engine."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any, ClassVar

from ._numbers import NON_NEGATIVE, POSITIVE, Number, checked_choice, takes
from ._stock_plant import StockPlant

if TYPE_CHECKING:
    from ._describe import Numbers


@dataclass(frozen=True, repr=False)
class DCDrive(StockPlant):
    """Permanent-magnet DC drive with friction: voltage in, angle or speed out; the load is a torque.

    Parameters
    ----------
    resistance : float or spread, Ohm
    inductance : float or spread, H
    torque_constant : float or spread, N m/A and V s
    inertia : float or spread, kg m^2
    viscous_friction : float or spread, N m s
    coulomb_friction : float or spread, N m
        Its torque is coulomb_friction * tanh(speed / friction_speed).
    friction_speed : float or spread, rad/s
        Speed below which Coulomb friction fades; smaller is sharper and needs more integration steps.
    output : {"angle", "speed"}
        What the sensor measures, in rad or rad/s.

    Notes
    -----
    The load torque (N m) acts against the motor. States: angle, speed, current, all 0 at time 0.
    """

    engine_kind: ClassVar[str] = "dc_drive"
    engine_order: ClassVar[tuple[str, ...]] = (
        "resistance",
        "inductance",
        "torque_constant",
        "inertia",
        "viscous_friction",
        "coulomb_friction",
        "friction_speed",
    )

    resistance: Number = field(metadata=takes(POSITIVE))
    inductance: Number = field(metadata=takes(POSITIVE))
    torque_constant: Number = field(metadata=takes(POSITIVE))
    inertia: Number = field(metadata=takes(POSITIVE))
    viscous_friction: Number = field(default=0.0, metadata=takes(NON_NEGATIVE))
    coulomb_friction: Number = field(default=0.0, metadata=takes(NON_NEGATIVE))
    friction_speed: Number = field(default=0.1, metadata=takes(POSITIVE))
    output: str = "angle"

    def __post_init__(self) -> None:
        super().__post_init__()
        checked_choice(self.output, "plant.output", ("angle", "speed"))

    @property
    def state_names(self) -> tuple[str, ...]:
        """Angle, speed, current."""
        return ("angle", "speed", "current")

    @property
    def input_name(self) -> str:
        """Voltage."""
        return "voltage"

    def _describe(self, numbers: Numbers) -> dict[str, Any]:
        return {**super()._describe(numbers), "output_state": self.state_names.index(self.output)}


@dataclass(frozen=True, repr=False)
class TwoMassDrive(StockPlant):
    """Motor and load on an elastic shaft: motor torque in; the load is a torque against the load side.

    Parameters
    ----------
    motor_inertia, load_inertia : float or spread, kg m^2
    stiffness : float or spread, N m/rad
    damping : float or spread, N m s/rad
        Of the shaft.
    coulomb_friction : float or spread, N m
        On the load side.
    breakaway_friction : float or spread, N m, optional
        Friction at standstill; by default equal to `coulomb_friction`.
    stribeck_speed : float or spread, rad/s
        Speed over which friction falls from breakaway to Coulomb friction.
    friction_speed : float or spread, rad/s
        Speed below which friction fades; smaller is sharper and needs more integration steps.
    viscous_friction : float or spread, N m s/rad
        On the load side.
    output : {"motor_angle", "load_angle", "motor_speed", "load_speed"}
        What the sensor measures.

    Notes
    -----
    Friction torque: (Fc + (Fs - Fc) exp(-(w/ws)^2)) tanh(w/w0) + B w (Stribeck friction after
    Armstrong-Helouvry, Dupont, Canudas de Wit 1994, Automatica 30(7), equation form from memory). States:
    motor_angle, motor_speed, load_angle, load_speed, all 0 at time 0.
    """

    engine_kind: ClassVar[str] = "two_mass_drive"
    engine_order: ClassVar[tuple[str, ...]] = (
        "motor_inertia",
        "load_inertia",
        "stiffness",
        "damping",
        "coulomb_friction",
        "breakaway_friction",
        "stribeck_speed",
        "friction_speed",
        "viscous_friction",
    )

    motor_inertia: Number = field(metadata=takes(POSITIVE))
    load_inertia: Number = field(metadata=takes(POSITIVE))
    stiffness: Number = field(metadata=takes(POSITIVE))
    damping: Number = field(metadata=takes(NON_NEGATIVE))
    coulomb_friction: Number = field(default=0.0, metadata=takes(NON_NEGATIVE))
    breakaway_friction: Number | None = field(default=None, metadata=takes(NON_NEGATIVE))
    stribeck_speed: Number = field(default=1.0, metadata=takes(POSITIVE))
    friction_speed: Number = field(default=0.1, metadata=takes(POSITIVE))
    viscous_friction: Number = field(default=0.0, metadata=takes(NON_NEGATIVE))
    output: str = "motor_angle"

    def __post_init__(self) -> None:
        super().__post_init__()
        checked_choice(self.output, "plant.output", self.state_names)

    @property
    def state_names(self) -> tuple[str, ...]:
        """Angle and speed of motor and load."""
        return ("motor_angle", "motor_speed", "load_angle", "load_speed")

    @property
    def input_name(self) -> str:
        """Torque."""
        return "torque"

    def _engine_numbers(self, numbers: Numbers) -> list[Any]:
        taken = []
        for name in self.engine_order:
            is_coulomb = name == "breakaway_friction" and self.breakaway_friction is None
            source = "coulomb_friction" if is_coulomb else name
            taken.append(numbers.take(getattr(self, source), f"plant.{source}"))
        return taken

    def _describe(self, numbers: Numbers) -> dict[str, Any]:
        return {**super()._describe(numbers), "output_state": self.state_names.index(self.output)}

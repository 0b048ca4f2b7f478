"""How the input acts on the output: whether at all, and by which gain, which is what b0 stands for.

The plant is linearised on the nominal unit, at its initial state. The first derivative of the output that the input
reaches at once is the relative degree r of the plant, and its gain the Markov parameter c A^(r-1) b (T. Kailath,
Linear Systems, 1980, section 2.3, from memory). ADRC of order n takes b0 for the gain of the n-th derivative.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from ._drives import DCDrive, TwoMassDrive
from ._equation_gradient import gradients, reads
from ._numbers import nominal_of
from ._plants import AnyPlant, Plant
from ._stock_plants import FirstOrder, IntegratorChain, SecondOrder, StateSpace, TransferFunction

if TYPE_CHECKING:
    from ._loop import Loop

#: By this factor b0 may differ from the gain that it stands for; tunings seldom go farther on purpose.
FACTOR = 5.0
#: A Markov parameter below this part of its terms is taken for a cancelled one.
ROUNDING = 1e-9

Matrix = NDArray[np.float64]


@dataclass(frozen=True)
class InputGain:
    """The gain of the first derivative of the output that the input reaches at once, with the linear model."""

    order: int
    value: float
    model: tuple[Matrix, Matrix, Matrix]

    def at(self, s: float) -> float:
        """Return the transfer function at a real s."""
        a, b, c = self.model
        try:
            return float(c @ np.linalg.solve(s * np.eye(len(a)) - a, b))
        except np.linalg.LinAlgError:
            return math.nan


def advice_on_input(loop: Loop) -> Iterator[str]:
    """Yield what looks wrong with the way from the input to the output, and with b0."""
    plant, controller = loop.plant, loop.controller
    if isinstance(plant, Plant) and not _is_reached(plant):
        yield f"plant: the output does not depend on the input {plant.input!r}; the loop is open"
        return
    found = input_gain(plant, nominal_of(loop.actuator.initial))
    b0 = nominal_of(controller.b0)
    if found is None or math.isnan(b0):
        return
    gain = f"{found.value:.3g}, the gain from the input to derivative {found.order} of the output"
    where = "(nominal unit, at the start)"
    if found.value * b0 < 0.0:
        # A zero in the right half plane turns the sign at once; what counts is the sign where the loop works.
        bandwidth = controller.controller_bandwidth
        s = nominal_of(bandwidth) if bandwidth is not None else 10.0 / nominal_of(loop.duration)
        if found.value * found.at(s) > 0.0:
            yield f"controller: b0 = {b0:.3g} has another sign than {gain} {where}; the feedback is positive"
    elif found.order == controller.order and not 1.0 / FACTOR <= b0 / found.value <= FACTOR:
        yield f"controller: b0 = {b0:.3g} is {b0 / found.value:.3g} times {gain} {where}"


def input_gain(plant: AnyPlant, command: float = 0.0) -> InputGain | None:
    """Return the gain from the input, or None where it is 0 or not known."""
    model = _model(plant, command)
    if model is None or not all(np.isfinite(part).all() for part in model):
        return None
    a, b, c = model
    row, size = c, np.abs(c)
    for order in range(1, len(a) + 1):
        value, terms = float(row @ b), float(size @ np.abs(b))
        if abs(value) > ROUNDING * terms:
            return InputGain(order, value, model)
        row, size = row @ a, size @ np.abs(a)
    return None


def _is_reached(plant: Plant) -> bool:
    """Tell whether the output reads the input by way of the states."""
    derivatives, output = plant._programs
    of_state = dict(zip(plant.states, reads(derivatives), strict=True))
    seen, open_states = set[str](), set(reads(output)[0])
    while open_states:
        name = open_states.pop()
        if name == plant.input:
            return True
        if name in of_state and name not in seen:
            seen.add(name)
            open_states |= of_state[name]
    return False


def _model(plant: AnyPlant, command: float) -> tuple[Matrix, Matrix, Matrix] | None:
    """Return A, b and c of the plant on its nominal unit."""
    if isinstance(plant, Plant):
        return _of_equations(plant, command)
    makers: Mapping[type, Any] = {
        IntegratorChain: _of_chain,
        FirstOrder: _of_first_order,
        SecondOrder: _of_second_order,
        TransferFunction: _of_transfer_function,
        StateSpace: _of_state_space,
        DCDrive: _of_dc_drive,
        TwoMassDrive: _of_two_masses,
    }
    maker = makers.get(type(plant))
    model: tuple[Matrix, Matrix, Matrix] | None = maker(plant) if maker else None
    return model


def _of_equations(plant: Plant, command: float) -> tuple[Matrix, Matrix, Matrix]:
    values = {name: nominal_of(value) for name, value in {**plant.states, **plant.parameters}.items()}
    values |= dict.fromkeys(plant.disturbances, 0.0) | {plant.input: command, "t": 0.0}
    names = [*plant.states, plant.input]
    derivatives, output = plant._programs
    with np.errstate(all="ignore"):
        slopes = gradients(derivatives, values, names)
        return slopes[:, :-1], slopes[:, -1], gradients(output, values, names)[0, :-1]


def _companion(denominator: list[float], numerator: list[float]) -> tuple[Matrix, Matrix, Matrix]:
    """Return the controllable canonical form; coefficients in descending powers of s."""
    order = len(denominator) - 1
    scaled = np.asarray(denominator) / denominator[0]
    a, b, c = np.diag(np.ones(order - 1), 1), np.zeros(order), np.zeros(order)
    a[-1] = -scaled[:0:-1]
    b[-1] = 1.0
    c[: len(numerator)] = np.asarray(numerator[::-1]) / denominator[0]
    return a, b, c


def _of_chain(plant: IntegratorChain) -> tuple[Matrix, Matrix, Matrix]:
    return _companion([1.0] + [0.0] * plant.order, [nominal_of(plant.gain)])


def _of_first_order(plant: FirstOrder) -> tuple[Matrix, Matrix, Matrix]:
    return _companion([nominal_of(plant.time_constant), 1.0], [nominal_of(plant.gain)])


def _of_second_order(plant: SecondOrder) -> tuple[Matrix, Matrix, Matrix]:
    time = nominal_of(plant.time_constant)
    return _companion([time * time, 2.0 * nominal_of(plant.damping) * time, 1.0], [nominal_of(plant.gain)])


def _of_transfer_function(plant: TransferFunction) -> tuple[Matrix, Matrix, Matrix]:
    return _companion([nominal_of(x) for x in plant.denominator], [nominal_of(x) for x in plant.numerator])


def _of_state_space(plant: StateSpace) -> tuple[Matrix, Matrix, Matrix]:
    a = np.array([[nominal_of(x) for x in row] for row in plant.a])
    return a, np.array([nominal_of(x) for x in plant.b]), np.array([nominal_of(x) for x in plant.c])


def _of_dc_drive(plant: DCDrive) -> tuple[Matrix, Matrix, Matrix]:
    n = {name: nominal_of(getattr(plant, name)) for name in plant.engine_order}
    drag = n["viscous_friction"] + n["coulomb_friction"] / n["friction_speed"]
    a = np.array(
        [
            [0.0, 1.0, 0.0],
            [0.0, -drag / n["inertia"], n["torque_constant"] / n["inertia"]],
            [0.0, -n["torque_constant"] / n["inductance"], -n["resistance"] / n["inductance"]],
        ]
    )
    return a, np.array([0.0, 0.0, 1.0 / n["inductance"]]), _chosen(plant)


def _of_two_masses(plant: TwoMassDrive) -> tuple[Matrix, Matrix, Matrix]:
    motor, load = nominal_of(plant.motor_inertia), nominal_of(plant.load_inertia)
    stiffness, damping = nominal_of(plant.stiffness), nominal_of(plant.damping)
    standstill = plant.coulomb_friction if plant.breakaway_friction is None else plant.breakaway_friction
    drag = nominal_of(plant.viscous_friction) + nominal_of(standstill) / nominal_of(plant.friction_speed)
    a = np.array(
        [
            [0.0, 1.0, 0.0, 0.0],
            [-stiffness / motor, -damping / motor, stiffness / motor, damping / motor],
            [0.0, 0.0, 0.0, 1.0],
            [stiffness / load, damping / load, -stiffness / load, -(damping + drag) / load],
        ]
    )
    return a, np.array([0.0, 1.0 / motor, 0.0, 0.0]), _chosen(plant)


def _chosen(plant: DCDrive | TwoMassDrive) -> Matrix:
    return np.array([1.0 if name == plant.output else 0.0 for name in plant.state_names])

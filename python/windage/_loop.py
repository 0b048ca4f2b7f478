"""The loop: plant, controller, sensor, actuator, reference, disturbances and timing, checked as a whole."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property
from typing import TYPE_CHECKING, Any

from ._controllers import Controller, OutputADRC, _LinearADRC
from ._descriptions import Description, FrozenMapping, frozen
from ._equations import Program, check_name, compile_each
from ._errors import DescriptionError, suggestion
from ._loop_checks import advice, check_delay, check_length, delay_is_whole
from ._numbers import (
    POSITIVE,
    Number,
    Rule,
    check_count,
    checked_choice,
    checked_integer,
    checked_number,
)
from ._plants import LOOP_SIGNALS, AnyPlant, engine_program, inputs_read, is_loop_signal
from ._sensor_actuator import Actuator, Sensor
from ._time_functions import Constant, Disturbance, Noise, Sum, TimeFunction, describe_disturbance

if TYPE_CHECKING:
    from ._describe import Numbers

INTEGRATORS = ("rk4", "euler", "cash_karp5")
MOST_STEPS = 1024
MOST_SIGNALS = 1000


@dataclass(frozen=True, repr=False)
class Loop(Description):
    """A control loop.

    Parameters
    ----------
    plant : Plant or stock plant
        What is controlled.
    controller : OutputADRC or ErrorADRC
        What controls it.
    sample_period : float or spread, s
        Time between two samples.
    duration : float or spread, s
        Length of a trial.
    reference : time function or float
        What the output should follow.
    sensor : Sensor
        By default ideal.
    actuator : Actuator
        By default ideal, with the command acting at once.
    disturbances : mapping of str to time function, noise or float
        What each disturbance of the plant is, or a sum of these. Every one of a plant written as equations has to
        be given; on a stock plant nothing acts where none is.
    integrator : {"rk4", "euler", "cash_karp5"}
        How equations are integrated between samples. Linear stock plants are sampled exactly instead.
    steps_per_sample : "auto" or int
        Integration steps in a sample period; "auto" lets the study choose (`Study.resolved_steps`).
    signals : mapping of str to str
        Named expressions over signals, auxiliaries and parameters of the plant; each is a signal. At most
        1000, and 200 000 characters and operations altogether.

    Raises
    ------
    DescriptionError
        If parts do not fit together; the message names the field.
    """

    plant: AnyPlant
    controller: Controller
    sample_period: Number
    duration: Number
    reference: TimeFunction
    sensor: Sensor = field(default_factory=Sensor)
    actuator: Actuator = field(default_factory=Actuator)
    disturbances: Mapping[str, Disturbance] = field(default_factory=FrozenMapping)
    integrator: str = "rk4"
    steps_per_sample: str | int = "auto"
    signals: Mapping[str, str] = field(default_factory=FrozenMapping)

    def __post_init__(self) -> None:
        self._check_parts()
        for name in ("sample_period", "duration"):
            object.__setattr__(self, name, checked_number(getattr(self, name), f"loop.{name}", POSITIVE))
        object.__setattr__(self, "reference", _time_function(self.reference))
        object.__setattr__(self, "disturbances", self._checked_disturbances())
        checked_choice(self.integrator, "loop.integrator", INTEGRATORS)
        self._check_steps()
        object.__setattr__(self, "signals", self._checked_signals())
        check_length(self)
        check_delay(self)
        _ = self._expressions

    @cached_property
    def signal_names(self) -> tuple[str, ...]:
        """Names of all signals that measures may use."""
        plant = self.plant
        words = [plant.input_name, plant.output_name, *plant.named_expressions, *self.signals]
        names = [*self._plain_signals(), *(word for word in words if word)]
        return tuple(dict.fromkeys(names))

    def warnings(self) -> list[str]:
        """Return what looks wrong with the loop but is allowed, in words; empty where nothing does."""
        return list(self._advice)

    @cached_property
    def _advice(self) -> tuple[str, ...]:
        return tuple(advice(self))

    def _check_parts(self) -> None:
        parts: tuple[tuple[str, object, type, str], ...] = (
            ("plant", self.plant, AnyPlant, "a plant"),
            ("controller", self.controller, _LinearADRC, "OutputADRC(...) or ErrorADRC(...)"),
            ("sensor", self.sensor, Sensor, "Sensor(...)"),
            ("actuator", self.actuator, Actuator, "Actuator(...)"),
        )
        for name, value, wanted, expected in parts:
            if not isinstance(value, wanted):
                raise DescriptionError(f"loop.{name}", value, expected)

    def _checked_disturbances(self) -> FrozenMapping[Disturbance]:
        given = frozen(self.disturbances, "loop.disturbances", "a mapping from names to time functions or noises")
        names = self.plant.disturbance_names
        for name in given:
            if name not in names:
                mend = suggestion(name, names) if names else "This plant has no disturbance."
                raise DescriptionError("loop.disturbances", name, "the name of a disturbance of the plant", mend)
        for name in names:
            if name not in given and not self.plant.is_undisturbed:
                mend = f"Add {name!r}; if nothing acts there, as Constant(0)."
                raise DescriptionError("loop.disturbances", sorted(given), f"a description of {name!r}", mend)
        # The order of the plant, so that the order of writing has no meaning.
        return FrozenMapping({name: _disturbance(given.get(name, 0.0), name) for name in names})

    def _check_steps(self) -> None:
        if not isinstance(self.steps_per_sample, str) or self.steps_per_sample != "auto":
            if isinstance(self.steps_per_sample, str):
                expected = f"'auto' or a whole number from 1 to {MOST_STEPS}"
                raise DescriptionError("loop.steps_per_sample", self.steps_per_sample, expected)
            steps = checked_integer(self.steps_per_sample, "loop.steps_per_sample", 1, MOST_STEPS)
            object.__setattr__(self, "steps_per_sample", steps)

    def _checked_signals(self) -> FrozenMapping[str]:
        signals = frozen(self.signals, "loop.signals", "a mapping from names to expressions")
        check_count(signals, "loop.signals", MOST_SIGNALS)
        plant = self.plant
        taken = {*self._plain_signals(), plant.input_name, *plant.named_numbers, *plant.named_expressions}
        for name in signals:
            check_name(name, "loop.signals")
            if name in taken or name == plant.output_name or is_loop_signal(name):
                mend = f"{name!r} is taken already; choose another name."
                raise DescriptionError("loop.signals", name, "a name of its own", mend)
        return signals

    def _plain_signals(self) -> list[str]:
        """Names of the signals that the engine has by itself, without aliases."""
        estimates = [f"estimate_{i + 1}" for i in range(self.controller.order + 1)]
        return [*LOOP_SIGNALS, *self.plant.state_names, *self.plant.disturbance_names, *estimates]

    @cached_property
    def _expressions(self) -> dict[str, Program]:
        """Each named signal and auxiliary as a program, with all that it reads written into it."""
        own = {**self.plant.named_expressions, **self.signals}
        if not own:
            return {}
        inputs = [*self._plain_signals(), self.plant.input_name, *self.plant.named_numbers, "t"]
        return compile_each(
            {**self.plant.named_expressions, **self._output_word(), **self.signals},
            list(own),
            list(dict.fromkeys(inputs)),
            field="loop.signals",
        )

    def _output_word(self) -> dict[str, str]:
        return {self.plant.output_name: "output"} if self.plant.output_name else {}

    def _describe(self, numbers: Numbers, wanted: list[str]) -> dict[str, Any]:
        """Return the loop as the engine wants it, with the expressions that are wanted."""
        described: dict[str, Any] = {
            "plant": self.plant._describe(numbers),
            "controller": self.controller._describe(numbers),
            "sample_period": numbers.take(self.sample_period, "sample_period"),
            "duration": numbers.take(self.duration, "duration"),
            "reference": self.reference._describe(numbers, "reference"),
            "sensor": self.sensor._describe(numbers),
            "actuator": self.actuator._describe(numbers),
            "integrator": self.integrator,
            "input_name": self.plant.input_name,
            "output_name": self.plant.output_name,
        }
        described["actuator"]["delay_is_whole"] = delay_is_whole(self)
        described["disturbances"] = [self._describe_disturbance(name, numbers) for name in self.disturbances]
        described["expressions"] = [self._describe_expression(name, numbers) for name in wanted]
        return described

    def _describe_disturbance(self, name: str, numbers: Numbers) -> dict[str, Any]:
        described = describe_disturbance(self.disturbances[name], numbers, f"disturbances.{name}")
        return {"name": name, **described}

    def _describe_expression(self, name: str, numbers: Numbers) -> dict[str, Any]:
        program = self._expressions[name]
        sources: dict[str, tuple[str, int, Any, str]] = {}
        for used in inputs_read(program):
            if used in self.plant.named_numbers:
                value = numbers.take(self.plant.named_numbers[used], self.plant.path_of(used))
                sources[used] = ("value", 0, value, "")
            elif used == "t":
                sources[used] = ("time", 0, 0.0, "")
            else:
                sources[used] = ("signal", 0, 0.0, used)
        return {"name": name, "formula": engine_program(program, sources)}

    def expressions_for(self, signals: list[str]) -> list[str]:
        """Return which of some signals are expressions that the engine has to be given."""
        wanted = set(signals)
        return [name for name in (*self.plant.named_expressions, *self.signals) if name in wanted]


def _time_function(value: object) -> TimeFunction:
    if isinstance(value, Noise) or (isinstance(value, Sum) and value.noises):
        mend = "A noise, or a sum with one, can be a disturbance, not a reference."
        raise DescriptionError("loop.reference", value, "a function of time", mend)
    if isinstance(value, TimeFunction):
        return value
    expected = "a function of time such as Step(...) or Sine(...), or a number"
    return _constant(value, "loop.reference", expected)


def _disturbance(value: object, name: str) -> Disturbance:
    if isinstance(value, TimeFunction | Noise):
        return value
    expected = "a function of time such as Step(...), a noise such as Gust(...), or a number"
    return _constant(value, f"loop.disturbances.{name}", expected)


def _constant(value: object, place: str, expected: str) -> Constant:
    return Constant(checked_number(value, place, Rule(expected)))


__all__ = ["INTEGRATORS", "Loop", "OutputADRC"]

"""Plants: what every plant offers to a loop, and plants written as equations."""

from __future__ import annotations

import re
from abc import ABC, abstractmethod
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from functools import cached_property
from typing import TYPE_CHECKING, Any

from ._descriptions import Description, FrozenMapping, frozen
from ._equations import Program, check_name, compile_equations
from ._errors import DescriptionError, suggestion
from ._numbers import ANY, Number, Rule, Spread, check_count, checked_number, checked_sequence, is_text, takes

if TYPE_CHECKING:
    from ._describe import Numbers

#: Names of signals that every loop has.
LOOP_SIGNALS = ("time", "reference", "error", "output", "measured", "command", "input")
DEAD_TIME = Rule("a dead time of at least 0 s or a spread of such times", low=0.0, bounded=True)
MOST_STATES = 100
MOST_AUXILIARIES = 1000
MOST_PARAMETERS = 10_000
#: Operations whose result can jump.
_JUMPS = frozenset(
    (
        "sign",
        "floor",
        "round",
        "mod",
        "less",
        "less_equal",
        "equal",
        "not_equal",
        "logical_and",
        "logical_or",
        "logical_not",
        "select",
    )
)


class AnyPlant(Description, ABC):
    """What a loop has to know of a plant."""

    #: Linear plants are sampled exactly and need no integrator.
    is_linear: bool = False
    #: Whether nothing acts where a loop does not describe a disturbance; otherwise it has to say so.
    is_undisturbed: bool = False
    dead_time: Number = 0.0

    @property
    @abstractmethod
    def state_names(self) -> tuple[str, ...]:
        """Names of the states, each a signal."""

    @property
    @abstractmethod
    def disturbance_names(self) -> tuple[str, ...]:
        """Names of the disturbances, each a signal that the loop describes."""

    @property
    def input_name(self) -> str:
        """The plant's own word for its input."""
        return "input"

    @property
    def output_name(self) -> str:
        """The plant's own word for its output, empty if it has none."""
        return ""

    @property
    @abstractmethod
    def named_numbers(self) -> Mapping[str, Number]:
        """Numbers that signals may read by name; their paths are `plant.<name>`."""

    def path_of(self, name: str) -> str:
        """Return the path of a named number, under which the plant itself draws it."""
        return f"plant.{name}"

    @property
    def named_expressions(self) -> Mapping[str, str]:
        """Expressions over states, input, disturbances and numbers that are signals too."""
        return {}

    @property
    def may_jump(self) -> bool:
        """Whether the derivatives of the states can jump at some value of a state."""
        return False

    @abstractmethod
    def _describe(self, numbers: Numbers) -> dict[str, Any]:
        """Return the plant as the engine wants it."""


@dataclass(frozen=True, repr=False)
class Plant(AnyPlant):
    """A plant given by its differential equations, written as text.

    Parameters
    ----------
    states : mapping of str to float or spread
        Names of the states with their values at time 0. A sequence of names stands for zeros. At most 100.
    equations : mapping of str to str
        The time derivative of each state. An equation may read states, the input, disturbances, parameters,
        auxiliaries, the time `t` and `pi`; see the notes.
    input : str
        Name of the input, which the actuator drives.
    output : str
        What the sensor measures: the name of a state or auxiliary, or an expression. It must not read the
        input.
    disturbances : sequence of str
        Names of the disturbances; the loop says what they are.
    parameters : mapping of str to float or spread
        Parameters, SI units throughout. At most 10 000.
    auxiliaries : mapping of str to str
        Named expressions that equations, the output and each other may read. At most 1000; with the equations
        at most 200 000 characters.
    dead_time : float or spread, s
        Time after which the input acts, besides the delay of the actuator; any number. (Dead time at the output is
        the delay of the sensor.)

    Raises
    ------
    DescriptionError
        If an equation is missing or of no state, a name has two meanings, or an expression cannot be
        understood.

    Notes
    -----
    Equations are numbers, names, `+ - * / **`, comparisons, `and`, `or`, `not`, `a if condition else b`, and the
    functions `sin cos tan asin acos atan atan2 exp log pow tanh sinh cosh sqrt abs sign step floor round mod min
    max clip deadzone where`. Comparisons give 1 or 0; both sides of a choice are evaluated. `round` takes a tie to
    the even number; `mod(x, divisor)` is `x - divisor*floor(x/divisor)` of the exact quotient, with the sign of
    the divisor. Limits, where the engine differs from a pocket calculator:

    - `sin`, `cos` and `tan` are accurate up to an angle of 2e5, lose digits up to 2^30 = 1.07e9, and are undefined
      (NaN) beyond; wrap an angle that grows with `mod(angle, 2*pi)`.
    - `exp` is 0 below -708 and infinite above 709.78.
    - `mod` is undefined for a quotient of 2^51 and more, and for a divisor of 0.
    - Division by what does not change within a trial (numbers and parameters) is multiplication by its
      reciprocal: its last digit may differ from that of a division, and a divisor below 5.6e-309 in magnitude
      counts as 0.
    - An undefined number goes on through sums, products and functions, but not through a comparison, which is
      false (`!=` true), nor as a later argument of `min`, `max` and `clip`, where the first one is taken: in
      `max(0, sqrt(x))` a negative x counts as 0.
    - Constants that alone give no finite number (`1/0`, `log(-1)`, `2**1024`) are an error. What a state or
      parameter makes undefined or infinite makes the trial diverge, or its measures undefined: it fails.

    Examples
    --------
    >>> cart = Plant(states={"position": 0.0, "speed": 0.0},
    ...              equations={"position": "speed", "speed": "(force - drag*speed)/mass"},
    ...              input="force", output="position", parameters={"mass": 12.0, "drag": 3.0})
    >>> cart.state_names
    ('position', 'speed')
    """

    states: Mapping[str, Number]
    equations: Mapping[str, str]
    input: str
    output: str
    disturbances: Sequence[str] = ()
    parameters: Mapping[str, Number] = field(default_factory=FrozenMapping)
    auxiliaries: Mapping[str, str] = field(default_factory=FrozenMapping)
    dead_time: Number = field(default=0.0, metadata=takes(DEAD_TIME))

    def __post_init__(self) -> None:
        object.__setattr__(self, "dead_time", checked_number(self.dead_time, "plant.dead_time", DEAD_TIME))
        states = _states(self.states)
        disturbances = _names(self.disturbances, "plant.disturbances")
        parameters = _numbers(self.parameters, "plant.parameters")
        equations = frozen(self.equations, "plant.equations", "a mapping from each state to its derivative")
        auxiliaries = frozen(self.auxiliaries, "plant.auxiliaries", "a mapping from names to expressions")
        check_count(auxiliaries, "plant.auxiliaries", MOST_AUXILIARIES)
        _check_one_equation_a_state(states, equations)
        for name, value in (
            ("states", states),
            ("disturbances", disturbances),
            ("parameters", parameters),
            ("equations", equations),
            ("auxiliaries", auxiliaries),
        ):
            object.__setattr__(self, name, value)
        self._check_names()
        self._check_output()
        _ = self._programs

    @property
    def state_names(self) -> tuple[str, ...]:
        """Names of the states."""
        return tuple(self.states)

    @property
    def disturbance_names(self) -> tuple[str, ...]:
        """Names of the disturbances."""
        return tuple(self.disturbances)

    @property
    def input_name(self) -> str:
        """Name of the input."""
        return self.input

    @property
    def output_name(self) -> str:
        """Name of the output where it is an auxiliary."""
        return self.output if self.output in self.auxiliaries else ""

    @property
    def named_numbers(self) -> Mapping[str, Number]:
        """The parameters."""
        return self.parameters

    @property
    def named_expressions(self) -> Mapping[str, str]:
        """The auxiliaries, without one that is the output."""
        return {name: text for name, text in self.auxiliaries.items() if name != self.output}

    @cached_property
    def _programs(self) -> tuple[Program, Program]:
        """Derivatives and output."""
        derivatives = compile_equations(
            {name: self.equations[name] for name in self.states},
            self._inputs(),
            field="plant.equations",
            auxiliaries=self.auxiliaries,
            auxiliary_field="plant.auxiliaries",
        )
        named = self.output in self.auxiliaries
        output = compile_equations(
            {} if named else {"output": self.output},
            self._inputs(),
            field="plant.output",
            auxiliaries=self.auxiliaries,
            auxiliary_field="plant.auxiliaries",
            outputs=[self.output] if named else None,
        )
        if self.input in _loaded(output):
            mend = "Leave the direct path out, or put a state (a lag) into it."
            raise DescriptionError("plant.output", self.output, f"an output without {self.input!r}", mend)
        return derivatives, output

    @property
    def may_jump(self) -> bool:
        """Whether the equations hold a sign, a step, a rounding, a remainder, a comparison or a choice."""
        return any(step.op in _JUMPS for step in self._programs[0].code)

    def unused(self) -> list[str]:
        """Return the names of parameters and disturbances that no equation reads."""
        read = set().union(*(_loaded(program) for program in self._programs))
        return [name for name in (*self.parameters, *self.disturbances) if name not in read]

    def _inputs(self) -> list[str]:
        return [*self.states, self.input, *self.disturbances, *self.parameters, "t"]

    def _check_names(self) -> None:
        taken: dict[str, str] = {}
        groups: list[tuple[str, Sequence[str]]] = [
            ("plant.states", list(self.states)),
            ("plant.input", [self.input]),
            ("plant.disturbances", self.disturbances),
            ("plant.parameters", list(self.parameters)),
            ("plant.auxiliaries", list(self.auxiliaries)),
        ]
        for place, names in groups:
            for name in names:
                check_name(name, place)
                self._check_free(name, place, taken)
                taken[name] = place

    def _check_free(self, name: str, place: str, taken: Mapping[str, str]) -> None:
        if name in taken:
            mend = f"{name!r} is in {taken[name]} already; rename one of them."
            raise DescriptionError(place, name, "a name of its own", mend)
        if (place, name) == ("plant.parameters", "dead_time") and isinstance(self.dead_time, Spread):
            mend = "Both would be drawn as plant.dead_time; rename the parameter."
            raise DescriptionError(place, name, "a name of its own", mend)
        is_own_word = (place, name) == ("plant.input", "input")
        if is_loop_signal(name) and not is_own_word:
            mend = f"{name!r} is a signal of every loop; choose another name."
            raise DescriptionError(place, name, "a name that is free in a loop", mend)

    def _check_output(self) -> None:
        if not is_text(self.output):
            mend = "Write output='position', for example."
            raise DescriptionError("plant.output", self.output, "the name of a state or an expression", mend)

    def _describe(self, numbers: Numbers) -> dict[str, Any]:
        sources: dict[str, tuple[str, int, Any, str]] = {"t": ("time", 0, 0.0, "")}
        sources |= {name: ("state", i, 0.0, "") for i, name in enumerate(self.states)}
        sources[self.input] = ("plant_input", 0, 0.0, "")
        sources |= {name: ("disturbance", i, 0.0, "") for i, name in enumerate(self.disturbances)}
        for name, value in self.parameters.items():
            sources[name] = ("value", 0, numbers.take(value, f"plant.{name}"), "")
        derivatives, output = self._programs
        return {
            "kind": "equations",
            "states": list(self.states),
            "initial_state": [numbers.take(x, f"plant.states.{name}") for name, x in self.states.items()],
            "disturbances": len(self.disturbances),
            "derivatives": engine_program(derivatives, sources),
            "output": engine_program(output, sources),
            "dead_time": numbers.take(self.dead_time, "plant.dead_time"),
        }


def engine_program(program: Program, sources: Mapping[str, tuple[str, int, Any, str]]) -> dict[str, Any]:
    """Return a program as the engine wants it, with the inputs that it loads and no others."""
    loaded = sorted({s.a for s in program.code if s.op == "load"})
    place = {index: i for i, index in enumerate(loaded)}
    code = [(s.op, place[s.a] if s.op == "load" else s.a, s.b, s.c, s.constant) for s in program.code]
    inputs = [sources[program.inputs[index]] for index in loaded]
    return {"inputs": inputs, "code": code, "outputs": list(program.outputs)}


def inputs_read(program: Program) -> list[str]:
    """Return the names of the inputs that a program reads, in its order."""
    return [program.inputs[index] for index in sorted({s.a for s in program.code if s.op == "load"})]


def is_loop_signal(name: str) -> bool:
    """Tell whether a name is taken by a signal of every loop."""
    return name in LOOP_SIGNALS or re.fullmatch(r"estimate_[0-9]+", name) is not None


def _loaded(program: Program) -> set[str]:
    return set(inputs_read(program))


def _states(value: object) -> FrozenMapping[Number]:
    if isinstance(value, list | tuple):
        value = dict.fromkeys(_names(value, "plant.states"), 0.0)
    states = _numbers(value, "plant.states")
    if not 1 <= len(states) <= MOST_STATES:
        raise DescriptionError("plant.states", f"{len(states)} states", f"1 to {MOST_STATES} states")
    return states


def _numbers(value: object, place: str) -> FrozenMapping[Number]:
    mapping = frozen(value, place, "a mapping from names to numbers or spreads")
    check_count(mapping, place, MOST_PARAMETERS)
    return FrozenMapping({name: checked_number(x, f"{place}.{name}", ANY) for name, x in mapping.items()})


def _names(value: object, place: str) -> tuple[str, ...]:
    names = checked_sequence(value, place, "a list of names")
    check_count(names, place, MOST_PARAMETERS)
    for name in names:
        check_name(name, place)
    if len(set(names)) != len(names):
        raise DescriptionError(place, names, "each name once")
    return tuple(names)


def _check_one_equation_a_state(states: Mapping[str, Number], equations: Mapping[str, str]) -> None:
    for name in equations:
        if name not in states:
            mend = suggestion(name, states)
            raise DescriptionError("plant.equations", name, "equations of states only", mend)
    for name in states:
        if name not in equations:
            mend = f"Add the time derivative of {name!r}."
            raise DescriptionError("plant.equations", sorted(equations), f"an equation for {name!r}", mend)

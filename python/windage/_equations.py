"""Equations written as text become a checked, flat program for the engine.

The language is that of Python's arithmetic: numbers, names, `+ - * / **`, comparisons (chains such as `0 < x
< 1` too), `and`, `or`, `not`, `a if condition else b`, and the functions listed in
`_equation_language.FUNCTIONS`; `pi` is a constant and `t` the time. Comparisons and logic give 1 or 0, and
what differs from 0 counts as true. Both sides of a choice are evaluated. The text is parsed, never executed;
any text gives a program or an `EquationError`.
"""

from __future__ import annotations

import graphlib
import keyword
import math
import re
from collections.abc import Mapping, Sequence
from types import MappingProxyType

from ._equation_language import CONSTANTS, FUNCTIONS, LONGEST_TEXT, TIME
from ._equation_lowering import lower
from ._equation_program import Instruction, Program, Tape
from ._equation_reference import evaluate_reference
from ._equation_text import Formula, parse
from ._errors import EquationError, suggestion
from ._shown_text import LONGEST_NAME, shorten

__all__ = [
    "Instruction",
    "Program",
    "check_name",
    "compile_each",
    "compile_equations",
    "evaluate_reference",
    "names_used",
]

#: Operations of all named expressions of a loop together.
MOST_INSTRUCTIONS = 200_000
#: Characters of all expressions of a plant, and of a loop, together.
LONGEST_TEXTS = 200_000

_NOTHING: Mapping[str, str] = MappingProxyType({})


def check_name(name: object, field: str) -> str:
    """Return a name if it can be used in equations.

    Parameters
    ----------
    name : object
        Letters a to z, A to Z, digits and underscores, not starting with a digit; neither a function, a
        constant nor the time of the equation language, nor a Python keyword.
    field : str
        Name of the field, for messages.

    Raises
    ------
    EquationError
        If it is not such a name.
    """
    expected = "a name of letters (a to z, A to Z), digits and underscores that does not start with a digit"
    if not isinstance(name, str) or not re.fullmatch(r"[A-Za-z_][A-Za-z0-9_]*", name):
        raise EquationError(field, name, expected)
    if len(name) > LONGEST_NAME:
        raise EquationError(field, name, f"a name of at most {LONGEST_NAME} characters")
    meaning = ""
    if name in FUNCTIONS:
        meaning = "a function of the equation language"
    elif name in CONSTANTS:
        meaning = "a constant of the equation language"
    elif name == TIME:
        meaning = "the time"
    elif keyword.iskeyword(name):
        meaning = "a Python keyword"
    if meaning:
        mend = f"{name!r} is {meaning}; choose another name."
        raise EquationError(field, name, "a name without another meaning", mend)
    return name


def names_used(text: str, field: str) -> set[str]:
    """Return the names that an expression reads, `t` included, without functions and constants.

    Parameters
    ----------
    text : str
        An expression of the equation language.
    field : str
        Name of the field, for messages.

    Raises
    ------
    EquationError
        If the text is not one expression of the language.
    """
    return set(parse(text, field).names())


def compile_equations(
    equations: Mapping[str, str],
    inputs: Sequence[str],
    *,
    field: str,
    auxiliaries: Mapping[str, str] = _NOTHING,
    auxiliary_field: str | None = None,
    outputs: Sequence[str] | None = None,
) -> Program:
    """Compile equations to one program.

    Parameters
    ----------
    equations : mapping of str to str
        Expressions by name.
    inputs : sequence of str
        Names that the expressions may read, each once: states, inputs, disturbances, parameters and, where it
        is known, the time "t".
    field : str
        Name of the field that holds the equations, for messages: "plant.equations".
    auxiliaries : mapping of str to str
        Named expressions. They and the equations may read them, in any order but not in a circle. All are
        checked, also those that no output needs.
    auxiliary_field : str, optional
        Name of the field that holds the named expressions; by default "auxiliaries" beside `field`.
    outputs : sequence of str, optional
        Names of equations or named expressions, in the order in which the program returns them; by default
        the equations as they stand.

    Returns
    -------
    Program
        `inputs` as given, and the instructions that the outputs need.

    Raises
    ------
    EquationError
        If an expression is malformed, a name is unknown, ambiguous or given twice, named expressions form a
        circle, or constants alone give no finite number.
    """
    if auxiliary_field is None:
        auxiliary_field = ".".join([*field.split(".")[:-1], "auxiliaries"])
    tape, results = _tape_of(equations, inputs, field, auxiliaries, auxiliary_field)
    chosen = list(equations) if outputs is None else _check_outputs(outputs, results, field)
    return tape.finish(inputs, [results[name] for name in chosen])


def compile_each(
    expressions: Mapping[str, str], outputs: Sequence[str], inputs: Sequence[str], *, field: str
) -> dict[str, Program]:
    """Compile named expressions that may read each other, each output to a program of its own.

    Parameters
    ----------
    expressions : mapping of str to str
        Named expressions; all are checked.
    outputs : sequence of str
        Names of those that are wanted.
    inputs, field
        As for `compile_equations`.

    Raises
    ------
    EquationError
        As for `compile_equations`; and if the programs together are longer than `MOST_INSTRUCTIONS`, since
        each holds all that it reads.
    """
    tape, results = _tape_of({}, inputs, field, expressions, field)
    names = tuple(inputs)
    programs: dict[str, Program] = {}
    total = 0
    for name in outputs:
        programs[name] = tape.finish(names, [results[name]])
        total += len(programs[name].code)
        if total > MOST_INSTRUCTIONS:
            mend = "Each expression is computed with all that it reads; leave some out."
            expected = f"expressions of at most {MOST_INSTRUCTIONS} operations altogether"
            raise EquationError(field, f"more than {MOST_INSTRUCTIONS} operations", expected, mend)
    return programs


def _tape_of(
    equations: Mapping[str, str],
    inputs: Sequence[str],
    field: str,
    auxiliaries: Mapping[str, str],
    auxiliary_field: str,
) -> tuple[Tape, dict[str, int]]:
    """Return a tape that holds all expressions, and the value of each by name."""
    _check_inputs(inputs, field)
    groups = [group for group in (equations, auxiliaries) if isinstance(group, Mapping)]  # others are named below
    texts = [text for group in groups for text in group.values() if isinstance(text, str)]
    length = sum(min(len(text), LONGEST_TEXT) for text in texts)  # one that is too long is named by itself
    if length > LONGEST_TEXTS:
        expected = f"expressions of at most {LONGEST_TEXTS} characters altogether"
        raise EquationError(field, f"{length} characters", expected)
    formulas = _parse_all(equations, field)
    named = _parse_all(auxiliaries, auxiliary_field)
    _check_auxiliaries(named, inputs, formulas, auxiliary_field)

    tape = Tape()
    values = {name: tape.load(index) for index, name in enumerate(inputs)}
    values["pi"] = tape.constant(math.pi)
    for name in _in_order(named, auxiliary_field):
        values[name] = lower(tape, named[name], values)
    results = {name: lower(tape, formula, values) for name, formula in formulas.items()}
    results.update({name: values[name] for name in named})
    return tape, results


def _check_inputs(inputs: Sequence[str], field: str) -> None:
    # A text is a sequence of its letters, which nobody means.
    if isinstance(inputs, str):
        raise EquationError(field, inputs, "a sequence of the names that equations may read", "Write a list.")
    seen: set[str] = set()
    for name in inputs:
        if not isinstance(name, str) or name != TIME:
            check_name(name, field)
        if name in seen:
            expected = "each state, input, disturbance and parameter under a name of its own"
            raise EquationError(field, name, expected, f"{name!r} is used twice; rename one of them.")
        seen.add(name)


def _parse_all(texts: Mapping[str, str], field: str) -> dict[str, Formula]:
    if not isinstance(texts, Mapping):
        raise EquationError(field, texts, "a mapping from names to expressions")
    for name in texts:
        if not isinstance(name, str):
            raise EquationError(field, name, "names written as text")
    return {name: parse(text, f"{field}[{shorten(name)}]") for name, text in texts.items()}


def _check_auxiliaries(
    named: Mapping[str, Formula], inputs: Sequence[str], equations: Mapping[str, Formula], field: str
) -> None:
    taken = set(inputs)
    for name in named:
        check_name(name, field)
        # Otherwise it would hide a state or parameter, or an output of that name would be ambiguous.
        if name in taken or name in equations:
            mend = f"{name!r} is already a state, input, parameter or equation; rename one of them."
            raise EquationError(field, name, "a name of its own for each named expression", mend)


def _check_outputs(outputs: Sequence[str], results: Mapping[str, int], field: str) -> Sequence[str]:
    if isinstance(outputs, str):
        raise EquationError(field, outputs, "a sequence of output names", "Write a list.")
    for name in outputs:
        if not isinstance(name, str) or name not in results:
            raise EquationError(field, name, "the name of an equation", suggestion(str(name), results))
    return outputs


def _in_order(named: Mapping[str, Formula], field: str) -> list[str]:
    """Order named expressions such that each follows those it reads."""
    graph = {name: [read for read in formula.names() if read in named] for name, formula in named.items()}
    try:
        return list(graphlib.TopologicalSorter(graph).static_order())
    except graphlib.CycleError as error:
        # The sorter reports read <- reader; people think of the reader first. Start at the first one written.
        circle = list(reversed(error.args[1]))[:-1]
        order = {name: position for position, name in enumerate(named)}
        start = min(range(len(circle)), key=lambda i: order[circle[i]])
        circle = circle[start:] + circle[:start]
        path = " -> ".join([*circle, circle[0]])
        expected = "named expressions that do not need each other in a circle"
        place = f"{field}[{shorten(circle[0])}]"
        raise EquationError(place, path, expected, "Write one of them out.") from None

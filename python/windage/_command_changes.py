"""`--set PATH=VALUE` and `--seed`: a study with some numbers changed, as if its file had been edited."""

from __future__ import annotations

import dataclasses
import re
from collections.abc import Iterator, Sequence
from typing import TYPE_CHECKING, Any

from ._errors import DescriptionError, suggestion
from ._loop import Loop

if TYPE_CHECKING:
    from ._study import Study

OPTION = "--set"
EXPECTED = "PATH=VALUE, for example controller.b0=0.1 or inertia={spread='uniform', low=1, high=2}"
#: What a study file has at its top.
TOP = ("seed", "title", "loop", "requirements", "measures", "table", "correlations")
#: "requirements[0]" or "requirements[late error]": a name and what is chosen of it.
_SEGMENT = re.compile(r"([^.\[\]]+)((?:\[[^\]]*\])*)")

Step = str | int


def changed(study: Study, changes: Sequence[str], seed: int | None = None) -> Study:
    """Return the study with values set at paths, and with another seed if one is given.

    Parameters
    ----------
    study : Study
        The study of the file.
    changes : sequence of str
        Each PATH=VALUE. A path is that of the study file or of the tool's own messages ("actuator.delay",
        "inertia", "requirements[0].at_most"); a value is written as in a study file.
    seed : int, optional
        Seed.

    Raises
    ------
    DescriptionError
        If there is no such path, or the value is not allowed there.
    """
    from ._study_text import from_data, to_data

    if changes:
        data = to_data(study)
        for change in changes:
            path, is_set, text = _parted(change)
            if not is_set or not path.strip():
                raise DescriptionError(OPTION, change, EXPECTED)
            _put(data, _located(path.strip(), data), _value(text, change), path.strip())
        study = from_data(data)
    return study if seed is None else study.with_(seed=seed)


def arguments_of(changes: Sequence[str], seed: int | None) -> list[str]:
    """Return the arguments of a command that makes the same changes again."""
    return [part for change in changes for part in (OPTION, change)] + ([] if seed is None else ["--seed", str(seed)])


def _parted(change: str) -> tuple[str, str, str]:
    """Part a change at its first "=" outside brackets, since names of requirements may hold one."""
    inside = re.match(r"(?:[^=\[]|\[[^\]]*\])*", change)
    assert inside is not None  # it matches at least nothing
    return change[: inside.end()], change[inside.end() : inside.end() + 1], change[inside.end() + 1 :]


def _value(text: str, change: str) -> Any:
    import tomllib

    try:
        read = tomllib.loads(f"value = {text}")
    except (tomllib.TOMLDecodeError, RecursionError, ValueError):
        # A bare word is a text: integrator=euler.
        if re.fullmatch(r"\s*[A-Za-z_][\w ]*", text):
            return text.strip()
        raise DescriptionError(OPTION, change, EXPECTED, "Write the value as in a study file.") from None
    if set(read) != {"value"}:
        raise DescriptionError(OPTION, change, EXPECTED, "One value at a time.")
    return read["value"]


def _located(path: str, data: dict[str, Any]) -> list[Step]:
    """Return the steps from the top of the file; a path may leave out `loop` and `plant.parameters`."""
    steps = _steps(path)
    first = steps[0]
    if first == "requirements":
        return _of_requirement(steps, path, data)
    if first in TOP:
        return steps
    parameters = data["loop"]["plant"].get("parameters", {})
    if first == "plant" and len(steps) > 1 and steps[1] in parameters:
        return ["loop", "plant", "parameters", *steps[1:]]
    if first in {field.name for field in dataclasses.fields(Loop)}:
        return ["loop", *steps]
    if first in parameters:
        return ["loop", "plant", "parameters", *steps]
    raise DescriptionError(OPTION, path, "the path of a number of the study", _known(path, data))


def _of_requirement(steps: list[Step], path: str, data: dict[str, Any]) -> list[Step]:
    """Return the steps in the file for a path of a drawn parameter, which names a limit and a measure apart."""
    if len(steps) < 3:
        return steps
    requirements = data.get("requirements", [])
    requirement = requirements[_key(requirements, steps[1], path, data)]
    if steps[2] == "limit":
        return [*steps[:2], "at_most" if "at_most" in requirement else "at_least", *steps[3:]]
    return [*steps[:2], *steps[3:]] if steps[2] == "measure" and len(steps) > 3 else steps


def _steps(path: str) -> list[Step]:
    steps: list[Step] = []
    place = 0
    while place < len(path):
        match = _SEGMENT.match(path, place)
        if match is None:
            raise DescriptionError(OPTION, path, "a path such as controller.b0 or requirements[0].at_most")
        steps.append(match[1])
        steps += [int(part) if part.isdecimal() else part for part in re.findall(r"\[([^\]]*)\]", match[2])]
        place = match.end()
        if path[place : place + 1] == ".":
            place += 1
    if not steps:
        raise DescriptionError(OPTION, path, "a path such as controller.b0 or requirements[0].at_most")
    return steps


def _put(data: dict[str, Any], steps: list[Step], value: Any, path: str) -> None:
    """Set a value; what the file left out on the way is begun, and judged when the study is made."""
    place: Any = data
    for step, following in zip(steps, [*steps[1:], None], strict=True):
        key = _key(place, step, path, data)
        if following is None:
            place[key] = value
        elif isinstance(place, dict):
            place = place.setdefault(key, {})
        else:
            place = place[key]


def _key(place: Any, step: Step, path: str, data: dict[str, Any]) -> Step:
    if isinstance(place, dict):
        return str(step)
    if isinstance(place, list):
        named = {str(item.get("name")): i for i, item in enumerate(place) if isinstance(item, dict) and "name" in item}
        if isinstance(step, str) and step in named:
            return named[step]
        if isinstance(step, int) and step < len(place):
            return step
    raise DescriptionError(OPTION, path, "the path of a number of the study", _known(path, data))


def _known(path: str, data: dict[str, Any]) -> str:
    short = [name.removeprefix("loop.").replace("plant.parameters.", "plant.") for name in _paths(data, "")]
    known = [*(name for name in short if name != "windage_study"), *data["loop"]["plant"].get("parameters", {})]
    last = path.rpartition(".")[2]
    same = [name for name in known if name.rpartition(".")[2] == last]
    return f"Did you mean {same[0]!r}?" if len(same) == 1 else suggestion(path, known)


def _paths(value: Any, path: str) -> Iterator[str]:
    """Walk over the paths of all values that the file holds."""
    if isinstance(value, dict):
        for key, part in value.items():
            yield from _paths(part, f"{path}.{key}" if path else key)
        if "spread" in value:
            yield path
    elif isinstance(value, list):
        for i, part in enumerate(value):
            yield from _paths(part, f"{path}[{i}]")
    else:
        yield path

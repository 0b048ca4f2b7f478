"""Studies as plain data and back, without a line for any single class.

Every object is a table whose key "kind" is the function or class that makes it, with the arguments of that
function by the same names. Spreads have the key "spread" instead (a column "column", a shared one "shared"
besides), requirements and measures the key "measure". Arguments that have their default are left out. Reading
calls the same public functions that a person would call, so every check is made; nothing is ever executed.
"""

from __future__ import annotations

import functools
import inspect
import math
from collections.abc import Callable, Mapping, Sized
from typing import TYPE_CHECKING, Any

from . import _measure_functions, _shared_numbers, _spreads
from ._controllers import ErrorADRC, OutputADRC
from ._descriptions import Description, FrozenMapping, arguments, kind_of, rebuilt
from ._distributions import Distribution, Tolerance
from ._errors import DescriptionError, StudyFileError, suggestion
from ._loop import Loop
from ._measures import COMBINATIONS, Measure, Requirement
from ._numbers import Spread, is_plain_number
from ._plants import Plant
from ._sensor_actuator import Actuator, Sensor
from ._shared_numbers import Column, Shared
from ._stock_plants import (
    DCDrive,
    FirstOrder,
    IntegratorChain,
    SecondOrder,
    StateSpace,
    TransferFunction,
    TwoMassDrive,
)
from ._study_checks import DRAWN, MOST_REQUIREMENTS
from ._time_functions import (
    Constant,
    Gust,
    JerkLimited,
    Pulse,
    Quintic,
    Ramp,
    Sine,
    Step,
    Sum,
    Table,
    WhiteNoise,
)

if TYPE_CHECKING:
    from ._study import Study

#: Version of the format of study files, and of the meaning of what they say.
FORMAT = 1
#: Most keys of one table of a study file.
MOST_KEYS = 10_000

Maker = Callable[..., Any]
SPREADS: Mapping[str, Maker] = {
    f.__name__: f
    for f in (
        _spreads.normal,
        _spreads.uniform,
        _spreads.triangular,
        _spreads.lognormal,
        _spreads.beta,
        _spreads.tolerance,
        _spreads.choice,
        _spreads.samples,
    )
}
MEASURES: Mapping[str, Maker] = {
    f.__name__: f
    for f in (
        _measure_functions.peak,
        _measure_functions.minimum,
        _measure_functions.maximum,
        _measure_functions.mean,
        _measure_functions.rms,
        _measure_functions.standard_deviation,
        _measure_functions.final,
        _measure_functions.integral_absolute,
        _measure_functions.integral_square,
        _measure_functions.integral_time_absolute,
        _measure_functions.total_variation,
        _measure_functions.rms_change,
        _measure_functions.time_outside,
        _measure_functions.peak_to_peak,
        _measure_functions.reversals,
        _measure_functions.time_of_peak,
        _measure_functions.difference,
        _measure_functions.ratio,
        _measure_functions.overshoot,
        _measure_functions.undershoot,
        _measure_functions.rise_time,
        _measure_functions.settling_time,
        _measure_functions.time_in_saturation,
        _measure_functions.ise,
        _measure_functions.iae,
        _measure_functions.itae,
    )
}
PLANTS: Mapping[str, Maker] = {
    c.__name__: c
    for c in (
        Plant,
        IntegratorChain,
        FirstOrder,
        SecondOrder,
        TransferFunction,
        StateSpace,
        DCDrive,
        TwoMassDrive,
    )
}
CONTROLLERS: Mapping[str, Maker] = {c.__name__: c for c in (OutputADRC, ErrorADRC)}
TIME_FUNCTIONS: Mapping[str, Maker] = {
    c.__name__: c for c in (Constant, Step, Ramp, Sine, Pulse, Quintic, JerkLimited, Table, Sum)
}
DISTURBANCES: Mapping[str, Maker] = {**TIME_FUNCTIONS, **{c.__name__: c for c in (Gust, WhiteNoise)}}

#: Parts that are made by one class only and need no kind.
_ONLY: Mapping[str, Maker] = {"loop": Loop, "sensor": Sensor, "actuator": Actuator}
_KINDS: Mapping[str, Mapping[str, Maker]] = {
    "plant": PLANTS,
    "controller": CONTROLLERS,
    "reference": TIME_FUNCTIONS,
}


#: Mappings from names to expressions.
_TEXTS = ("equations", "auxiliaries", "signals")


def to_data(study: Study) -> dict[str, Any]:
    """Return a study as nested dictionaries, lists, texts, numbers and truth values."""
    data: dict[str, Any] = {"windage_study": FORMAT, "title": study.title, "seed": study.seed}
    if study.correlations:
        pairs = sorted((*sorted(pair), rho) for pair, rho in study.correlations.items())
        data["correlations"] = [{"between": [a, b], "rank_correlation": rho} for a, b, rho in pairs]
    data["loop"] = _encoded(study.loop)
    data["requirements"] = [_encoded(requirement) for requirement in study.requirements]
    data["measures"] = [_encoded(measure) for measure in study.measures]
    if study.table is not None:
        data["table"] = {name: list(rows) for name, rows in study.table.items()}
    if study.table_rows != DRAWN:
        data["table_rows"] = study.table_rows
    return {key: value for key, value in data.items() if value not in ([], "")}


def digest_of(study: Study) -> str:
    """Return the SHA-256 of a study's data, with names in sorted order."""
    return _hashed({key: part for key, part in to_data(_without_nominal(study)).items() if key != "title"})


def claim_of(study: Study) -> str:
    """Return the same of what decides which trials pass: without further measures and without names of requirements."""
    data = to_data(_without_nominal(study))
    named = data.get("requirements", [])
    limits = [{key: part for key, part in requirement.items() if key != "name"} for requirement in named]
    return _hashed({key: data[key] for key in data if key not in ("title", "measures")} | {"requirements": limits})


def _hashed(data: dict[str, Any]) -> str:
    import hashlib  # both cost import time and are seldom needed
    import json

    text = json.dumps(data, sort_keys=True, separators=(",", ":"), allow_nan=False)
    return hashlib.sha256(text.encode()).hexdigest()


def _without_nominal(study: Study) -> Study:
    """Return the study without the nominal values that are stated; that of a tolerance is its middle."""

    def change(value: Any) -> Any:
        if isinstance(value, Distribution):
            return value if value.stated_nominal is None else value.with_(nominal=None)
        return value if isinstance(value, Tolerance) else None

    parts = {name: getattr(study, name) for name in ("loop", "requirements", "measures")}
    plain = {name: rebuilt(part, change) for name, part in parts.items()}
    return study if all(plain[name] is parts[name] for name in parts) else study.with_(**plain)


def _encoded(value: Any) -> Any:
    if isinstance(value, Shared):
        return {**_encoded(value.spread), "shared": value.name}
    if isinstance(value, Column):
        stated = value.stated_nominal
        return {"column": value.name} | ({} if stated is None else {"nominal": stated})
    if isinstance(value, Requirement):
        inside = {name: _encoded(part) for name, part in arguments(value).items() if name != "measure"}
        return {**_encoded(value.measure), **inside}
    if isinstance(value, Description):
        key = "spread" if isinstance(value, Spread) else "measure" if isinstance(value, Measure) else "kind"
        kind = {} if type(value) in _ONLY.values() else {key: kind_of(value)}
        return {**kind, **{name: _encoded(part) for name, part in _arguments(value).items()}}
    if isinstance(value, FrozenMapping):
        return {name: _encoded(part) for name, part in value.items()}
    return [_encoded(part) for part in value] if isinstance(value, tuple) else value


def _arguments(value: Description) -> dict[str, Any]:
    found = arguments(value)
    if isinstance(value, Measure):
        # Its signal is no argument of a function that has only one.
        if value.kind not in MEASURES:
            raise DescriptionError("measure.kind", value.kind, "a measure that a function makes")
        known, _ = _parameters(MEASURES[value.kind])
        found = {name: part for name, part in found.items() if name in known}
    return found


def from_data(data: Any) -> Study:
    """Return the study that nested dictionaries describe.

    Raises
    ------
    StudyFileError
        With the dotted path of what is wrong.
    """
    from ._study import Study

    _check_version(data)
    as_they_are = ("seed", "title", "table_rows")
    parts = ("windage_study", "loop", "requirements", "measures", "table", "correlations")
    _check_keys(data, [*parts, *as_they_are], ["loop"], "")
    lists = {key: _list(data.get(key, []), key) for key in ("requirements", "measures")}
    for key, items in lists.items():
        _check_count(items, key, MOST_REQUIREMENTS)
    made: dict[str, Any] = {"loop": _made_loop(_table(data["loop"], "loop"))}
    for key, decode in (("requirements", _requirement), ("measures", _measure)):
        made[key] = [decode(item, f"{key}[{i}]") for i, item in enumerate(lists[key])]
    made.update({key: data[key] for key in as_they_are if key in data})
    if "table" in data:
        made["table"] = _table(data["table"], "table")
    if "correlations" in data:
        made["correlations"] = _correlations(_list(data["correlations"], "correlations"))
    study: Study = _call(Study, made, "")
    return study


def _check_version(data: Mapping[str, Any]) -> None:
    if "windage_study" not in data:
        mend = f"Put windage_study = {FORMAT} into the first line."
        raise StudyFileError("windage_study", "nothing", "the version of the study format", mend)
    version = data["windage_study"]
    if isinstance(version, bool) or version != FORMAT:
        mend = "The file may come from another release of windage."
        raise StudyFileError("windage_study", version, f"the version {FORMAT}", mend)


def _made_loop(data: Mapping[str, Any]) -> Any:
    values: dict[str, Any] = {}
    for key, item in data.items():
        place = f"loop.{key}"
        if key in _KINDS:
            values[key] = _of_kind(item, _KINDS[key], place)
        elif key in ("sensor", "actuator"):
            values[key] = _made(_ONLY[key], _table(item, place), place)
        elif key == "disturbances":
            parts = _table(item, place)
            values[key] = {name: _of_kind(part, DISTURBANCES, f"{place}.{name}") for name, part in parts.items()}
        else:
            values[key] = item if key in _TEXTS else _value(item, place)
    return _call(Loop, values, "loop")


def _of_kind(item: Any, kinds: Mapping[str, Maker], place: str) -> Any:
    if is_plain_number(item) and kinds is not PLANTS and kinds is not CONTROLLERS:
        return item
    data = _table(item, place)
    kind = _word(data, "kind", kinds, place)
    inside = {key: part for key, part in data.items() if key != "kind"}
    if kinds[kind] is not Sum or "terms" not in inside:
        return _made(kinds[kind], inside, place)
    terms = _list(inside["terms"], f"{place}.terms")
    made = [_of_kind(term, DISTURBANCES, f"{place}.terms[{i}]") for i, term in enumerate(terms)]
    return _call(Sum, {**inside, "terms": made}, place)


def _made(maker: Maker, data: Mapping[str, Any], place: str) -> Any:
    values = {key: part if key in _TEXTS else _value(part, f"{place}.{key}") for key, part in data.items()}
    return _call(maker, values, place)


def _value(item: Any, place: str) -> Any:
    """Return a plain value, or the spread that a table describes."""
    if isinstance(item, list):
        return [_value(part, f"{place}[{i}]") for i, part in enumerate(item)]
    if isinstance(item, float) and not math.isfinite(item):
        raise StudyFileError(place, item, "a finite number", "Leave it out where nothing is limited.")
    if not isinstance(item, dict):
        return item
    _check_count(item, place, MOST_KEYS)
    # A parameter may be called "spread" or "column" itself; its value is no text.
    if isinstance(item.get("spread"), str) or isinstance(item.get("shared"), str):
        return _spread(item, place)
    if isinstance(item.get("column"), str):
        inside = {"name" if key == "column" else key: part for key, part in item.items()}
        return _call(_shared_numbers.column, inside, place)
    return {name: _value(part, f"{place}.{name}") for name, part in item.items()}


def _spread(item: Mapping[str, Any], place: str) -> Any:
    kind = _word(item, "spread", SPREADS, place)
    inside = {key: part for key, part in item.items() if key not in ("spread", "shared")}
    spread = _call(SPREADS[kind], {key: _value(part, f"{place}.{key}") for key, part in inside.items()}, place)
    if "shared" not in item:
        return spread
    return _call(Shared, {"name": item["shared"], "spread": spread}, place)


def _measure(item: Any, place: str) -> Any:
    data = _table(item, place)
    kind = _word(data, "measure", MEASURES, place)
    if kind in COMBINATIONS:
        inside = {key: part for key, part in data.items() if key != "measure"}
        operands = {k: _measure(x, f"{place}.{k}") if isinstance(x, dict) else x for k, x in inside.items()}
        return _call(MEASURES[kind], operands, place)
    return _made(MEASURES[kind], {key: part for key, part in data.items() if key != "measure"}, place)


def _requirement(item: Any, place: str) -> Any:
    data = _table(item, place)
    sides = ("at_most", "at_least", "name")
    measure = _measure({key: part for key, part in data.items() if key not in sides}, place)
    values = {key: _value(data[key], f"{place}.{key}") for key in sides if key in data}
    return _call(Requirement, {"measure": measure, **values}, place)


def _correlations(items: list[Any]) -> dict[tuple[Any, ...], Any]:
    pairs: dict[tuple[Any, ...], Any] = {}
    for i, item in enumerate(items):
        place = f"correlations[{i}]"
        data = _table(item, place)
        both = ["between", "rank_correlation"]
        _check_keys(data, both, both, place)
        pair = tuple(_list(data["between"], f"{place}.between"))
        if len(pair) != 2 or not all(isinstance(name, str) for name in pair):
            raise StudyFileError(f"{place}.between", list(pair), "two names of drawn parameters")
        if pair in pairs:
            raise StudyFileError(f"{place}.between", list(pair), "each pair of two parameters once")
        pairs[pair] = data["rank_correlation"]
    return pairs


def _call(maker: Maker, values: Mapping[str, Any], place: str) -> Any:
    """Call a public function or class, with errors that name the place in the file."""
    known, required = _parameters(maker)
    _check_keys(values, known, required, place)
    try:
        return maker(**values)
    except DescriptionError as error:
        raise _placed(error, place, maker.__name__) from error


@functools.cache
def _parameters(maker: Maker) -> tuple[list[str], list[str]]:
    """Return the names of all arguments of a function or class, and of those without a default."""
    parameters = inspect.signature(maker).parameters
    return list(parameters), [n for n, p in parameters.items() if p.default is inspect.Parameter.empty]


def _placed(error: DescriptionError, place: str, maker: str) -> StudyFileError:
    """Return the error with the dotted path of the file instead of the argument's own."""
    head, _, rest = error.field.partition(".")
    is_own = head in (place.split(".")[-1], maker, maker.lower())
    path = _at(place, rest if is_own else error.field)
    return StudyFileError(path, error.found, error.expected, error.mend)


def _at(place: str, key: str) -> str:
    return f"{place}.{key}" if place and key else place or key


def _check_keys(data: Mapping[str, Any], known: list[str], required: list[str], place: str) -> None:
    for key in data:
        if key not in known:
            mend = suggestion(str(key), known)
            raise StudyFileError(_at(place, str(key)), "an unknown key", "one of its keys", mend)
    for key in required:
        if key not in data:
            raise StudyFileError(_at(place, key), "nothing", f"the key {key!r}", "It has no default.")


def _word(data: Mapping[str, Any], key: str, known: Mapping[str, Maker], place: str) -> str:
    words = ", ".join(known)
    if key not in data:
        raise StudyFileError(f"{place}.{key}", "nothing", f"one of {words}")
    word = data[key]
    if not isinstance(word, str) or word not in known:
        mend = suggestion(word, known) if isinstance(word, str) else ""
        raise StudyFileError(f"{place}.{key}", word, f"one of {words}", mend)
    return word


def _table(value: Any, place: str) -> dict[str, Any]:
    if not isinstance(value, dict):
        raise StudyFileError(place, value, "a table")
    _check_count(value, place, MOST_KEYS)
    return value


def _check_count(items: Sized, place: str, most: int) -> None:
    """Refuse more items than any part may have, before anything is made of them."""
    if len(items) > most:
        raise StudyFileError(place, f"{len(items)} items", f"at most {most} items")


def _list(value: Any, place: str) -> list[Any]:
    if not isinstance(value, list):
        raise StudyFileError(place, value, "a list")
    return value

"""The root of all objects that describe a study, and mappings that cannot be changed.

Every description is a frozen dataclass whose fields are the arguments of its constructor. That is what makes
study files, copies with changes, comparison and `repr` generic: none of them knows a class by name.
"""

from __future__ import annotations

import dataclasses
import math
from collections.abc import Callable, Iterator, Mapping
from contextlib import suppress
from typing import Any, ClassVar, NoReturn, Self, TypeVar

from ._arguments import ExplainedCalls, unknown_name
from ._errors import DescriptionError

Value = TypeVar("Value")


class Description(metaclass=ExplainedCalls):
    """Root of the frozen dataclasses that describe plants, loops, spreads, measures and studies."""

    __slots__ = ()
    #: NumPy numbers leave comparisons with a description to the description.
    __array_ufunc__: ClassVar[None] = None

    def __repr__(self) -> str:
        inside = ", ".join(f"{name}={value!r}" for name, value in arguments(self).items())
        return f"{kind_of(self)}({inside})"

    def __getstate__(self) -> dict[str, Any]:
        # Without what was worked out and kept: compiled programs, campaigns.
        return {f.name: getattr(self, f.name) for f in dataclasses.fields(self)}  # type: ignore[arg-type]

    def with_(self, **changes: Any) -> Self:
        """Return a copy with some arguments changed.

        Raises
        ------
        DescriptionError
            If there is no such argument, or a new value is not allowed.
        """
        known = {argument_of(f): f.name for f in dataclasses.fields(self)}  # type: ignore[arg-type]
        for name in changes:
            if name not in known:
                raise unknown_name(kind_of(self), name, list(known))
        return dataclasses.replace(self, **{known[name]: value for name, value in changes.items()})  # type: ignore[type-var]


class FrozenMapping(dict[str, Value]):
    """A dictionary that cannot be changed; equal to any dictionary with the same items."""

    def __hash__(self) -> int:  # type: ignore[override]
        return hash(frozenset(self.items()))

    def __reduce__(self) -> tuple[Any, ...]:
        return FrozenMapping, (dict(self),)

    def _refuse(self, *_: Any, **__: Any) -> NoReturn:
        raise TypeError("a description cannot be changed; make a copy with .with_(...)")

    __setitem__ = __delitem__ = update = pop = clear = setdefault = popitem = __ior__ = _refuse


def kind_of(description: object) -> str:
    """Return the public name that makes a description: a class or a function."""
    return str(getattr(description, "_kind", None) or type(description).__name__)


def argument_of(f: dataclasses.Field[Any]) -> str:
    """Return what a field is called as an argument: its own name, unless that is taken by what is made of it."""
    return str(f.metadata.get("argument", f.name))


def arguments(description: Any) -> dict[str, Any]:
    """Return the arguments that make a description, without those that have their default."""
    found: dict[str, Any] = {}
    for f in dataclasses.fields(description):
        if not f.init or f.metadata.get("is_kind"):
            continue
        value = getattr(description, f.name)
        if f.default is not dataclasses.MISSING:
            default = f.default
        elif f.default_factory is not dataclasses.MISSING:
            default = f.default_factory()
        else:
            default = dataclasses.MISSING
        if default is dataclasses.MISSING or not _is_default(value, default):
            found[argument_of(f)] = value
    return found


def _is_default(value: Any, default: Any) -> bool:
    # Bounds that were left out are stored as infinities.
    if default is None and isinstance(value, float) and math.isinf(value):
        return True
    return (type(value) is type(default) and bool(value == default)) or (value is default)


def frozen(value: object, place: str, expected: str) -> FrozenMapping[Any]:
    """Return a mapping with text keys as a frozen copy."""
    copy = copied(value, place, expected)
    for key in copy:
        if not isinstance(key, str):
            raise DescriptionError(place, key, "names written as text")
    return copy


def copied(value: object, place: str, expected: str) -> FrozenMapping[Any]:
    """Return a mapping as a frozen copy."""
    if isinstance(value, Mapping):
        with suppress(Exception):  # whatever a foreign mapping raises
            return FrozenMapping({key: value[key] for key in value})
    raise DescriptionError(place, value, expected)


def parts(description: Any) -> Iterator[tuple[dataclasses.Field[Any], Any]]:
    """Walk over the fields of a description."""
    for f in dataclasses.fields(description):
        yield f, getattr(description, f.name)


def rebuilt(value: Any, change: Callable[[Any], Any]) -> Any:
    """Return a description with its innermost parts exchanged, all checks run anew.

    Parameters
    ----------
    value : Description, sequence, mapping or plain value
        What to walk through.
    change : callable
        Called with every description before its parts are visited; what it returns takes the place, and None
        means: go on inside.
    """
    if isinstance(value, Description):
        changed = change(value)
        if changed is not None:
            return changed
        inside = {f.name: rebuilt(part, change) for f, part in parts(value) if f.init}
        if all(inside[name] is getattr(value, name) for name in inside):
            return value
        return dataclasses.replace(value, **inside)  # type: ignore[type-var]
    if isinstance(value, tuple):
        items = tuple(rebuilt(item, change) for item in value)
        return value if all(a is b for a, b in zip(items, value, strict=True)) else items
    if isinstance(value, FrozenMapping):
        pairs = {key: rebuilt(item, change) for key, item in value.items()}
        return value if all(pairs[key] is value[key] for key in pairs) else FrozenMapping(pairs)
    return value

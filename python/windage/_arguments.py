"""Calls that do not fit: an unknown, missing or surplus argument is an error that says how to mend it.

Python's own `TypeError` names neither the field meant nor the closest one. Classes get the better message from
their metaclass, functions from a decorator; signatures, help and static types stay those of the class or
function.
"""

from __future__ import annotations

import functools
import inspect
from abc import ABCMeta
from collections.abc import Callable, Iterable, Mapping
from typing import Any, ParamSpec, TypeVar

from ._errors import DescriptionError, suggestion

P = ParamSpec("P")
R = TypeVar("R")

#: What is called otherwise elsewhere, under the name it has here; the first that is an argument is meant.
_ELSEWHERE: Mapping[str, str] = {
    "controller_bandwidth": "wc w_c omega_c wcl omega_cl",
    "observer_bandwidth": "wo w_o omega_o weso omega_eso",
    "sample_period": "Ts ts T_s dt h sampling_time sample_time",
    "order": "n N degree",
    "b0": "b b_0 critical_gain",
    "controller_gains": "k kp",
    "observer_gains": "l L",
    "duration": "t_end tf t_final T horizon stop_time",
    "reference": "ref r setpoint",
    "sd": "sigma std stdev",
    "noise": "sigma std",
    "intensity": "sigma std",
    "mean": "mu loc",
    "low": "min lower",
    "high": "max upper",
    "gain": "K k",
    "time_constant": "tau T lag",
    "correlation_time": "tau T",
    "damping": "zeta D",
    "numerator": "num",
    "denominator": "den",
    "delay": "dead_time transport_delay latency",
    "dead_time": "delay transport_delay",
    "limits": "saturation u_max umax bounds",
    "resolution": "quantisation quantization lsb",
    "after": "start t0",
    "before": "stop end t1",
    "seed": "random_seed random_state rng",
    "requirements": "specs constraints",
}


class ExplainedCalls(ABCMeta):
    """Metaclass of classes whose constructors explain a call that does not fit."""

    def __call__(cls: type[R], *given: Any, **named: Any) -> R:
        try:
            made: R = super().__call__(*given, **named)  # type: ignore[misc]
        except TypeError:
            # Most often a call that does not fit; one that fits has an error of its own.
            explain(cls.__name__, inspect.signature(cls), given, named)
            raise
        return made

    @property
    def __signature__(cls) -> inspect.Signature:
        """The signature of the constructor, where `help` would find that of the call above."""
        own = inspect.signature(cls.__init__)  # type: ignore[misc]
        return own.replace(parameters=list(own.parameters.values())[1:], return_annotation=own.empty)


def explained(function: Callable[P, R]) -> Callable[P, R]:
    """Decorate a function or method so that it explains a call that does not fit."""

    @functools.wraps(function)
    def called(*given: P.args, **named: P.kwargs) -> R:
        try:
            return function(*given, **named)
        except TypeError:
            explain(function.__qualname__, inspect.signature(function), given, named)
            raise

    return called


def explain(place: str, signature: inspect.Signature, given: tuple[Any, ...], named: Mapping[str, Any]) -> None:
    """Raise an error that says what does not fit in a call; return if all of it fits.

    Parameters
    ----------
    place : str
        Public name of the class, function or method.
    signature : inspect.Signature
        Its signature.
    given, named : tuple and mapping
        Arguments of the call.
    """
    taken = list(signature.parameters.values())
    if taken and taken[0].name == "self":
        taken, given = taken[1:], given[1:]
    if any(p.kind in (p.VAR_KEYWORD, p.VAR_POSITIONAL) for p in taken):
        return
    names = [p.name for p in taken]
    for name in named:
        if name not in names:
            raise unknown_name(place, name, names) from None
    by_place = [p.name for p in taken if p.kind is not p.KEYWORD_ONLY]
    if len(given) > len(by_place):
        few = f"at most {len(by_place)}" + (f" ({', '.join(by_place)})" if by_place else "")
        rest = [f"{name}=..." for name in names if name not in by_place][:3]
        mend = f"Write the others with their names: {', '.join(rest)}." if rest else ""
        raise DescriptionError(place, f"{len(given)} arguments without a name", few, mend) from None
    filled = by_place[: len(given)]
    for name in named:
        if name in filled:
            raise DescriptionError(f"{place}.{name}", "given twice", "once, by its place or by its name") from None
    for parameter in taken:
        if parameter.default is parameter.empty and parameter.name not in (*filled, *named):
            field = f"{place}.{parameter.name}"
            raise DescriptionError(field, "nothing", f"a value for {parameter.name}", "It has no default.") from None


def unknown_name(place: str, name: str, known: Iterable[str]) -> DescriptionError:
    """Describe an argument or key that does not exist, with the one that was probably meant."""
    known = list(known)
    meant = next((here for here, words in _ELSEWHERE.items() if here in known and name in words.split()), None)
    mend = suggestion(name, known) if meant is None else f"It is called {meant!r} here."
    return DescriptionError(place, name, "one of its arguments", mend)

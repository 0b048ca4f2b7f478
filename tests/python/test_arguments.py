"""Calls that do not fit: an unknown, missing or surplus argument is explained; signatures stay what they are."""

from __future__ import annotations

import copy
import inspect
import pickle
import pydoc
from collections.abc import Callable
from typing import Any

import pytest

import windage as wd
from windage._descriptions import Description

ADRC = {"order": 1, "b0": 1.0, "controller_bandwidth": 4.0, "observer_bandwidth": 40.0}


@pytest.mark.parametrize(
    ("call", "field", "mend"),
    [
        (lambda: wd.ErrorADRC(2, b0=1.0, wc=8), "ErrorADRC: found 'wc'", "'controller_bandwidth'"),
        (lambda: wd.OutputADRC(2, b0=1.0, wo=8), "OutputADRC: found 'wo'", "'observer_bandwidth'"),
        (lambda: wd.OutputADRC(n=2, b0=1.0), "OutputADRC: found 'n'", "'order'"),
        (lambda: wd.OutputADRC(2, b=1.0), "OutputADRC: found 'b'", "'b0'"),
        (lambda: wd.Loop(Ts=0.1), "Loop: found 'Ts'", "'sample_period'"),  # type: ignore[call-arg]
        (lambda: wd.ErrorADRC(2, b0=1.0, observer_bandwith=1), "found 'observer_bandwith'", "'observer_bandwidth'"),
        (lambda: wd.normal(mu=1.0, sd=1.0), "normal: found 'mu'", "'mean'"),  # type: ignore[call-arg]
        (lambda: wd.normal(1.0, sigma=1.0), "normal: found 'sigma'", "'sd'"),  # type: ignore[call-arg]
        (lambda: wd.uniform(min=1.0, max=2.0), "uniform: found 'min'", "'low'"),  # type: ignore[call-arg]
        (lambda: wd.peak("error", start=1.0), "peak: found 'start'", "'after'"),  # type: ignore[call-arg]
        (lambda: wd.FirstOrder(K=1.0, time_constant=1.0), "FirstOrder: found 'K'", "'gain'"),  # type: ignore[call-arg]
        (lambda: wd.FirstOrder(1.0, tau=1.0), "FirstOrder: found 'tau'", "'time_constant'"),  # type: ignore[call-arg]
        (lambda: wd.Actuator(saturation=(-1, 1)), "Actuator: found 'saturation'", "'limits'"),  # type: ignore[call-arg]
        (lambda: wd.Actuator(dead_time=1.0), "Actuator: found 'dead_time'", "'delay'"),  # type: ignore[call-arg]
        (lambda: wd.Gust(sigma=1.0, correlation_time=1.0), "Gust: found 'sigma'", "'intensity'"),  # type: ignore[call-arg]
        (lambda: wd.shared("m", wd.uniform(0, 1), nam=1), "shared: found 'nam'", "'name'"),  # type: ignore[call-arg]
        (lambda: wd.Study(None, random_seed=1), "Study: found 'random_seed'", "'seed'"),  # type: ignore[call-arg]
    ],
)
def test_an_unknown_argument_is_explained(call: Callable[[], object], field: str, mend: str) -> None:
    with pytest.raises(wd.DescriptionError) as caught:
        call()
    assert field in str(caught.value)
    assert mend in caught.value.mend
    assert caught.value.__suppress_context__


@pytest.mark.parametrize(
    ("call", "words"),
    [
        (lambda: wd.ErrorADRC(2), "ErrorADRC.b0: found 'nothing'; expected a value for b0. It has no default."),  # type: ignore[call-arg]
        (lambda: wd.Loop(), "Loop.plant: found 'nothing'"),  # type: ignore[call-arg]
        (lambda: wd.normal(1.0), "normal.sd: found 'nothing'"),  # type: ignore[call-arg]
        (lambda: wd.ErrorADRC(2, 1.0), "at most 1 (order). Write the others with their names: b0=..."),  # type: ignore[misc]
        (lambda: wd.uniform(1.0, 2.0, 3.0), "at most 2 (low, high). Write the others with their names: name=..."),  # type: ignore[call-arg,misc]
        (lambda: wd.uniform(1.0, low=2.0, high=3.0), "uniform.low: found 'given twice'"),  # type: ignore[misc]
    ],
)
def test_missing_surplus_and_double_arguments_are_explained(call: Callable[[], object], words: str) -> None:
    with pytest.raises(wd.DescriptionError) as caught:
        call()
    assert words in str(caught.value)


@pytest.mark.parametrize(
    ("owner", "method"),
    [
        (wd.Study, "run batches count replay"),
        (wd.Outcome, "verdict verdicts audit extend failed save plot"),
        (wd.Tally, "verdict verdicts audit"),
        (wd.Replay, "plot"),
        (wd, "save load load_outcome trials_needed pass_probability_bounds tolerance_bound"),
    ],
    ids=lambda value: getattr(value, "__name__", "methods"),
)
def test_methods_and_functions_explain_their_calls_too(owner: Any, method: str) -> None:
    for name in method.split():
        function = getattr(owner, name)
        known = [p for p in inspect.signature(function).parameters if p != "self"]
        object_itself = [] if owner is wd else [None]
        with pytest.raises(wd.DescriptionError) as caught:
            function(*object_itself, **{known[0] + "s_": 1})
        assert caught.value.field == function.__qualname__
        assert repr(known[0]) in caught.value.mend


def test_a_whole_number_written_with_a_point_is_told_how_to_be_written() -> None:
    loop = wd.Loop(wd.FirstOrder(1.0, 1.0), wd.ErrorADRC(**ADRC), 0.1, 1.0, 1.0)  # type: ignore[arg-type]
    study = wd.Study(loop, [wd.peak("error") <= 1.0])
    for wrong, mend in ((1e4, "Write 10000, without point and exponent."), (1.5, ""), (1e30, ""), (float("nan"), "")):
        with pytest.raises(wd.DescriptionError, match="whole number") as caught:
            study.run(wrong)  # type: ignore[arg-type]
        assert caught.value.mend == mend


def test_a_synonym_in_with_is_explained_too() -> None:
    controller = wd.ErrorADRC(**ADRC)  # type: ignore[arg-type]
    with pytest.raises(wd.DescriptionError, match="It is called 'controller_bandwidth' here"):
        controller.with_(wc=3.0)


def test_a_type_error_of_its_own_stays_one() -> None:
    class Odd(Description):
        def __init__(self, number: int) -> None:
            self.number = number + "text"  # type: ignore[operator]

    with pytest.raises(TypeError, match="unsupported operand"):
        Odd(1)


PUBLIC = [value for name in wd.__all__ if callable(value := getattr(wd, name))]
DESCRIBING = [
    value
    for value in PUBLIC
    if (isinstance(value, type) and issubclass(value, Description))
    or (not isinstance(value, type) and value.__module__ in ("windage._measure_functions", "windage._spreads"))
]


@pytest.mark.parametrize("maker", DESCRIBING, ids=lambda maker: maker.__name__)
def test_every_public_class_and_function_that_describes_explains_its_calls(maker: Any) -> None:
    assert len(DESCRIBING) > 50
    with pytest.raises(wd.DescriptionError, match="no_such_argument"):
        maker(no_such_argument=1)


@pytest.mark.parametrize("maker", DESCRIBING, ids=lambda maker: maker.__name__)
def test_signatures_and_help_are_those_of_the_arguments(maker: Any) -> None:
    names = list(inspect.signature(maker).parameters)
    assert "self" not in names
    assert not {"given", "named", "args", "kwargs"} & set(names)
    if isinstance(maker, type):
        assert names == [name for name in inspect.signature(maker.__init__).parameters if name != "self"]
    written = pydoc.render_doc(maker, renderer=pydoc.plaintext)
    line = next(line for line in written.splitlines() if f"{maker.__name__}(" in line and "class" not in line)
    assert all(name in line for name in names)


def test_objects_still_copy_and_pickle() -> None:
    controller = wd.ErrorADRC(**ADRC)  # type: ignore[arg-type]
    for again in (copy.copy(controller), copy.deepcopy(controller), pickle.loads(pickle.dumps(controller))):
        assert again == controller
        assert type(again) is wd.ErrorADRC

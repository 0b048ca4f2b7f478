"""Whatever is given to a public function or class: it works, or one short windage error says what is wrong."""

from __future__ import annotations

import datetime
import decimal
import fractions
import inspect
import math
import random
import time
import warnings
from collections.abc import Callable, Iterator, Mapping
from pathlib import Path
from typing import Any

import numpy as np
import pytest

import windage as wd
from windage._shown_text import hidden_character

LONGEST_MESSAGE = 2_000


class Evil:
    """An object whose every question raises."""

    def _raise(self, *_: object) -> Any:
        raise RuntimeError("asked")

    __repr__ = __str__ = __float__ = __len__ = __bool__ = __iter__ = __eq__ = __lt__ = __le__ = _raise
    __gt__ = __ge__ = __index__ = __getitem__ = __contains__ = __format__ = _raise
    __hash__ = object.__hash__


class Wrong:
    """An object that answers every question with the wrong kind of thing."""

    def __repr__(self) -> str:
        return "\x1b[2K" * 1_000_000

    def __float__(self) -> float:
        return "1.0"  # type: ignore[return-value]

    def __index__(self) -> int:
        return 1.0  # type: ignore[return-value]

    def __len__(self) -> int:
        return -1

    def __array__(self, dtype: object = None, copy: object = None) -> Any:
        return "array"


class Endless:
    """A sequence without an end."""

    def __len__(self) -> int:
        return 1 << 62

    def __getitem__(self, index: object) -> float:
        return 1.0


class EvilText(str):
    """A text that does not tell what it is."""

    def __repr__(self) -> str:
        raise RuntimeError("asked")


class EvilMapping(dict[str, float]):
    """A mapping that does not tell what it holds."""

    def items(self) -> Any:
        raise RuntimeError("asked")

    def __iter__(self) -> Iterator[str]:
        raise RuntimeError("asked")


def recursive() -> list[Any]:
    """A list that holds itself."""
    made: list[Any] = [1.0]
    made.append(made)
    return made


def deep() -> list[Any]:
    """Lists in lists, ten thousand times."""
    made: list[Any] = []
    for _ in range(10_000):
        made = [made]
    return made


#: Makers, since some values are used up.
NASTY: dict[str, Callable[[], Any]] = {
    "None": lambda: None,
    "true": lambda: True,
    "zero": lambda: 0,
    "negative": lambda: -1.0,
    "not a number": lambda: math.nan,
    "infinite": lambda: math.inf,
    "minus infinite": lambda: -math.inf,
    "tiny": lambda: 5e-324,
    "huge": lambda: 1.7e308,
    "huge whole": lambda: 10**400,
    "huge whole, too long to write": lambda: 10**10_000,
    "complex": lambda: 1j,
    "decimal": lambda: decimal.Decimal("sNaN"),
    "fraction": lambda: fractions.Fraction(1, 3),
    "huge fraction": lambda: fractions.Fraction(10**400, 3),
    "empty text": lambda: "",
    "word": lambda: "word",
    "text of a number": lambda: "1.0",
    "nothing seen": lambda: "\x1b[2K\u202e\u2066\ud800",
    "nul": lambda: "\0",
    "long text": lambda: "x" * 100_000,
    "evil text": lambda: EvilText("word"),
    "bytes": lambda: b"\x1b",
    "date": lambda: datetime.datetime(2026, 1, 1),
    "empty list": list,
    "list": lambda: [1.0, "x", None, math.nan],
    "recursive list": recursive,
    "deep list": deep,
    "range": lambda: range(10**15),
    "set": lambda: {1.0, 2.0},
    "generator": lambda: (x for x in (1.0, 2.0)),
    "mapping": lambda: {"a": 1.0},
    "mapping of numbers": lambda: {1: 2, None: 3},
    "evil mapping": lambda: EvilMapping(a=1.0),
    "array of texts": lambda: np.array(["x", "\x1b"]),
    "array of objects": lambda: np.array([None, Evil()], dtype=object),
    "array of complex": lambda: np.array([1j]),
    "array of times": lambda: np.array(["2026-01-01"], dtype="datetime64[s]"),
    "array of two axes": lambda: np.ones((2, 2)),
    "array without axes": lambda: np.array(1.0),
    "structured": lambda: np.zeros(2, dtype=[("a", float)]),
    "masked": lambda: np.ma.masked,
    "type": lambda: int,
    "function": lambda: len,
    "module": lambda: math,
    "slice": lambda: slice(0),
    "not implemented": lambda: NotImplemented,
    "evil": Evil,
    "wrong": Wrong,
    "endless": Endless,
    "spread": lambda: wd.uniform(-1.0, 1.0),
    "normal": lambda: wd.normal(0.0, 1.0),
    "column": lambda: wd.column("c"),
    "measure": lambda: wd.peak("error"),
    "requirement": lambda: wd.peak("error") <= 1.0,
    "plant": lambda: wd.FirstOrder(1.0, 1.0),
    "step": lambda: wd.Step(1.0),
    "gust": lambda: wd.Gust(1.0, 1.0),
    "class of ours": lambda: wd.Step,
}

PLANT = wd.Plant({"x": 0.0}, {"x": "u + w"}, "u", "x", ["w"], {"p": 1.0}, {"a": "x"})
CONTROLLER: dict[str, Any] = {"order": 1, "b0": 1.0, "controller_bandwidth": 3.0, "observer_bandwidth": 9.0}
LOOP: dict[str, Any] = {
    "plant": PLANT,
    "controller": wd.ErrorADRC(**CONTROLLER),
    "sample_period": 0.01,
    "duration": 0.1,
    "reference": 1.0,
    "disturbances": {"w": 0.0},
    "steps_per_sample": 1,
}
REQUIREMENT = wd.peak("error") <= 1.0
STUDY = wd.Study(wd.Loop(**LOOP), [REQUIREMENT])
OUTCOME = STUDY.run(8, progress=False)

#: Arguments that work, of everything public that does not start a run of trials.
CALLS: dict[Callable[..., Any], dict[str, Any]] = {
    wd.normal: {"mean": 1.0, "sd": 0.1, "low": None, "high": None, "sigmas": 3, "name": "n"},
    wd.uniform: {"low": 0.0, "high": 1.0, "name": "n"},
    wd.triangular: {"low": 0.0, "mode": 0.5, "high": 1.0, "name": "n"},
    wd.lognormal: {"median": 1.0, "sd_log": 0.1, "name": "n"},
    wd.beta: {"a": 1.0, "b": 2.0, "low": 0.0, "high": 1.0, "name": "n"},
    wd.tolerance: {"nominal": 1.0, "percent": 5.0, "shape": "uniform", "name": "n"},
    wd.choice: {"values": [1.0, 2.0], "probabilities": [0.5, 0.5], "name": "n"},
    wd.samples: {"values": [1.0, 2.0], "name": "n"},
    wd.shared: {"name": "s", "spread": wd.uniform(0.0, 1.0)},
    wd.column: {"name": "c"},
    wd.Plant: {
        "states": {"x": 0.0},
        "equations": {"x": "u + w"},
        "input": "u",
        "output": "x",
        "disturbances": ["w"],
        "parameters": {"p": 1.0},
        "auxiliaries": {"a": "x"},
    },
    wd.IntegratorChain: {"order": 2, "gain": 1.0, "initial": [0.0, 1.0]},
    wd.FirstOrder: {"gain": 1.0, "time_constant": 1.0, "dead_time": 0.0, "initial": 0.0},
    wd.SecondOrder: {"gain": 1.0, "time_constant": 1.0, "damping": 1.0, "dead_time": 0.0, "initial": 0.0},
    wd.TransferFunction: {"numerator": [1.0], "denominator": [1.0, 1.0], "dead_time": 0.0},
    wd.StateSpace: {"a": [[1.0]], "b": [1.0], "c": [1.0], "e": [[1.0]], "initial": [0.0]},
    wd.OutputADRC: {
        **CONTROLLER,
        "controller_gains": None,
        "observer_gains": None,
        "controller_gain_factor": 1.0,
        "observer_gain_factor": 1.0,
        "discretisation": "euler",
        "observer_input": "limited",
        "observer_start": "zero",
        "cancel_disturbance": True,
        "reference_derivatives": 1,
    },
    wd.ErrorADRC: CONTROLLER,
    wd.Sensor: {"gain": 1.0, "bias": 0.0, "noise": 0.0, "filter_frequency": 0.0, "resolution": 0.0, "range": (-1, 1)},
    wd.Actuator: {"limits": (-1, 1), "rate_limit": 1.0, "resolution": 0.0, "delay": 0.0, "time_constant": 0.0},
    wd.Constant: {"value": 1.0},
    wd.Step: {"amplitude": 1.0, "at": 0.0, "initial": 0.0},
    wd.Sum: {"terms": [wd.Step(1.0), 2.0]},
    wd.Ramp: {"slope": 1.0, "start": 0.0, "stop": 1.0, "initial": 0.0},
    wd.Sine: {"amplitude": 1.0, "period": 1.0, "phase": 0.0, "offset": 0.0, "start": 0.0},
    wd.Pulse: {"amplitude": 1.0, "start": 0.0, "width": 1.0},
    wd.Quintic: {"amplitude": 1.0, "start": 0.0, "duration": 1.0, "initial": 0.0},
    wd.JerkLimited: {"amplitude": 1.0, "start": 0.0, "speed": 1.0, "acceleration": 1.0, "jerk": 1.0},
    wd.Table: {"times": [0.0, 1.0], "values": [0.0, 1.0], "interpolation": "linear"},
    wd.Gust: {"intensity": 1.0, "correlation_time": 1.0},
    wd.WhiteNoise: {"density": 1.0},
    wd.peak: {"signal": "error", "after": 0.0, "before": 1.0},
    wd.time_outside: {"signal": "error", "low": -1.0, "high": 1.0, "after": 0.0, "before": 1.0},
    wd.overshoot: {"signal": "output", "after": 0.0, "before": 1.0},
    wd.rise_time: {"low": 0.1, "high": 0.9, "signal": "output", "after": 0.0, "before": 1.0},
    wd.settling_time: {"band": 0.02, "signal": "output", "after": 0.0, "before": 1.0},
    wd.time_in_saturation: {"after": 0.0, "before": 1.0},
    wd.difference: {"first": wd.peak("error"), "second": wd.peak("error")},
    wd.ratio: {"first": wd.peak("error"), "second": wd.peak("error")},
    wd.reversals: {"signal": "error", "dead_band": 0.1},
    wd.Measure: {"kind": "peak", "signal": "error", "after": 0.0, "low": None, "band": None},
    wd.Requirement: {"measure": wd.peak("error"), "at_most": 1.0, "at_least": None, "name": "r"},
    wd.Loop: {**LOOP, "sensor": wd.Sensor(), "actuator": wd.Actuator(), "integrator": "rk4", "signals": {"s": "error"}},
    wd.Study: {
        "loop": wd.Loop(**LOOP),
        "requirements": [REQUIREMENT],
        "seed": 1,
        "measures": [wd.rms("error")],
        "table": None,
        "correlations": None,
    },
    STUDY.with_: {"seed": 1, "sample_period": 0.01},
    STUDY.run: {"trials": 1, "threads": 1, "progress": False},
    STUDY.count: {"trials": 1, "keep_failures": 1, "size": 1, "threads": 1, "progress": False},
    STUDY.replay: {"trial": 0},
    OUTCOME.verdict: {"at_least": 0.9, "confidence": 0.9},
    wd.load: {"path": "nowhere.toml"},
    wd.save: {"study": STUDY, "path": "/nowhere/study.toml"},
    wd.trials_needed: {"at_least": 0.9, "confidence": 0.9},
    wd.pass_probability_bounds: {"failures": 1, "trials": 10, "confidence": 0.9, "method": "clopper-pearson"},
}
#: Calls that do not work as they stand, for want of a file or folder.
FAILING = (wd.load, wd.save)
#: Public names that are made and not called, and functions that take no argument.
UNCALLED = {"Audit", "Outcome", "Replay", "Tally", "Verdict", "show_config"}


@pytest.fixture(autouse=True)
def _in_a_folder_of_its_own(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)


def check(make: Callable[..., Any], arguments: Mapping[str, Any], what: str) -> bool:
    """Make something; tell whether it worked. Any error must be one of windage, short and quick."""
    start = time.process_time()
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")  # NumPy's, for values that are refused
            make(**arguments)
    except wd.WindageError as error:
        message = str(error)
        assert len(message) < LONGEST_MESSAGE, what
        assert all(hidden_character(line) is None for line in message.split("\n")), what
        return False
    except Exception as error:
        raise AssertionError(f"{what}: {type(error).__name__}: {str(error)[:300]}") from error
    finally:
        assert time.process_time() - start < 5.0, what
    return True


def inside(value: Any, nasty: Any) -> Iterator[Any]:
    """Yield copies of a list or mapping in which one item is exchanged."""
    if isinstance(value, dict):
        for key in value:
            yield {**value, key: nasty}
    if isinstance(value, list | tuple):
        for i in range(len(value)):
            yield [*value[:i], nasty, *value[i + 1 :]]


@pytest.mark.parametrize("make", CALLS, ids=lambda make: str(getattr(make, "__name__", make)))
def test_any_value_of_any_argument_works_or_is_a_short_windage_error(make: Callable[..., Any]) -> None:
    arguments = CALLS[make]
    assert check(make, arguments, "as it stands") is (make not in FAILING)
    assert set(arguments) <= set(inspect.signature(make).parameters) or make == STUDY.with_
    for name, value in arguments.items():
        if name in ("path", "progress", "trials") and make in (STUDY.run, STUDY.count):
            nasties = {k: v for k, v in NASTY.items() if k not in ("function", "type", "class of ours")}
        else:
            nasties = NASTY
        for kind, nasty in nasties.items():
            what = f"{getattr(make, '__name__', make)}({name}: {kind})"
            check(make, {**arguments, name: nasty()}, what)
            for changed in inside(value, nasty()):
                check(make, {**arguments, name: changed}, f"{what}, inside")


def test_no_public_name_is_left_out() -> None:
    measures = {name for name in wd.__all__ if isinstance(getattr(wd, name), type(wd.peak)) and name in MEASURE_NAMES}
    covered = {getattr(make, "__name__", "") for make in CALLS} | UNCALLED | measures
    errors = {name for name in wd.__all__ if name.endswith("Error")}
    missing = set(wd.__all__) - covered - errors
    assert missing <= LIKE_OTHERS, missing


#: Measures with the arguments of `peak`, and drives whose numbers are checked by the same rules as other plants'.
MEASURE_NAMES = {
    name
    for name, make in vars(wd).items()
    if inspect.isfunction(make) and set(inspect.signature(make).parameters) <= {"signal", "after", "before"}
}
LIKE_OTHERS = {"DCDrive", "TwoMassDrive", "tolerance_bound", "load_outcome", "FileError"}


def test_two_bad_arguments_at_once_are_one_error() -> None:
    dice = random.Random(20261201)
    makers = [make for make in CALLS if make not in (STUDY.run, STUDY.count, STUDY.replay, *FAILING)]
    for _ in range(1_500):
        make = dice.choice(makers)
        names = dice.sample(list(CALLS[make]), min(2, len(CALLS[make])))
        kinds = dice.choices(list(NASTY), k=len(names))
        changed = {name: NASTY[kind]() for name, kind in zip(names, kinds, strict=True)}
        check(
            make,
            {**CALLS[make], **changed},
            f"{getattr(make, '__name__', make)}({dict(zip(names, kinds, strict=True))})",
        )

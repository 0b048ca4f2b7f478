"""Wherever a number can be drawn and trials run, the nominal unit runs too: every place with every spread."""

from __future__ import annotations

import dataclasses
import math
from collections.abc import Callable, Iterator
from typing import Any

import numpy as np
import pytest

import windage as wd
from windage._descriptions import Description, FrozenMapping
from windage._numbers import Spread

ROWS = 3


def loop(**parts: Any) -> wd.Loop:
    settings: dict[str, Any] = {
        "plant": wd.FirstOrder(gain=1.0, time_constant=1.0),
        "controller": wd.ErrorADRC(order=1, controller_bandwidth=1.0, observer_bandwidth=5.0, b0=1.0),
        "sample_period": 0.1,
        "duration": 2.0,
        "reference": wd.Step(1.0),
        "steps_per_sample": 1,
    }
    settings["disturbances"] = {"load": 0.0} if "plant" not in parts else {}
    return wd.Loop(**{**settings, **parts})


def study(**parts: Any) -> wd.Study:
    return wd.Study(loop(**parts), requirements=[wd.peak("error", after=0.5, before=1.5) <= 1.0], seed=3)


def own_plant() -> wd.Plant:
    return wd.Plant(
        states={"angle": 0.1, "speed": 0.0},
        equations={"angle": "speed", "speed": "(u - drag*speed) / inertia"},
        input="u",
        output="angle",
        parameters={"inertia": 1.0, "drag": 0.5},
        auxiliaries={"power": "u*speed"},
    )


OUTPUT_FORM = {"order": 1, "b0": 1.0}
PARTS: dict[str, Callable[[], wd.Study]] = {
    "first order": lambda: study(
        plant=wd.FirstOrder(1.0, 1.0, dead_time=0.03, initial=0.1), disturbances={"load": 0.1}
    ),
    "second order": lambda: study(
        plant=wd.SecondOrder(1.0, 1.0, damping=0.7, dead_time=0.03, initial=0.1), disturbances={"load": 0.1}
    ),
    "integrators": lambda: study(plant=wd.IntegratorChain(2, gain=1.0, initial=0.1), disturbances={"load": 0.1}),
    "transfer function": lambda: study(
        plant=wd.TransferFunction([1.0, 2.0], [1.0, 2.0, 3.0], dead_time=0.03), disturbances={"load": 0.1}
    ),
    "state space": lambda: study(plant=wd.StateSpace([[0.1, 1.0], [-1.0, -2.0]], [0.5, 1.0], [1.0, 0.2])),
    "drive": lambda: study(plant=wd.DCDrive(1.0, 0.1, 0.5, 0.2, 0.1, 0.05), disturbances={"load": 0.1}),
    "two masses": lambda: study(
        plant=wd.TwoMassDrive(0.1, 0.2, 50.0, 0.5, 0.05, 0.06), disturbances={"load": 0.1}, sample_period=0.01
    ),
    "own plant": lambda: study(plant=own_plant()),
    "output form": lambda: study(
        controller=wd.OutputADRC(**OUTPUT_FORM, controller_gains=[1.0], observer_gains=[0.5, 0.3])
    ),
    "factors": lambda: study(
        controller=wd.OutputADRC(
            **OUTPUT_FORM,
            controller_bandwidth=1.0,
            observer_bandwidth=4.0,
            controller_gain_factor=1.1,
            observer_gain_factor=0.9,
        )
    ),
    "sensor": lambda: study(
        sensor=wd.Sensor(gain=1.1, bias=0.1, noise=0.01, filter_frequency=3.0, resolution=0.01, range=(-2.0, 3.0))
    ),
    "actuator": lambda: study(
        actuator=wd.Actuator(
            limits=(-2.0, 3.0), rate_limit=5.0, resolution=0.01, delay=0.03, time_constant=0.1, initial=0.1
        )
    ),
    **{
        f"reference {type(f).__name__}": lambda f=f: study(reference=f)
        for f in (
            wd.Constant(1.0),
            wd.Step(1.0, at=0.25, initial=0.1),
            wd.Ramp(1.0, start=0.25, stop=1.0, initial=0.1),
            wd.Sine(1.0, period=1.0, phase=0.2, offset=0.1, start=0.15),
            wd.Pulse(1.0, start=0.25, width=0.55),
            wd.Quintic(1.0, start=0.25, duration=1.0, initial=0.1),
            wd.JerkLimited(1.0, start=0.25, speed=2.0, acceleration=8.0, jerk=40.0, initial=0.1),
            wd.Table([0.5, 1.0, 1.7], [0.1, 1.0, 0.3]),
        )
    },
    "gust": lambda: study(disturbances={"load": wd.Gust(0.1, correlation_time=0.5)}),
    "noise": lambda: study(disturbances={"load": wd.WhiteNoise(0.1)}),
    "measures": lambda: wd.Study(
        loop(actuator=wd.Actuator(limits=(-2.0, 3.0))),
        requirements=[
            wd.overshoot(after=0.2) <= 0.5,
            wd.settling_time(band=0.05) <= 1.5,
            wd.time_outside("output", -1.0, 2.0) <= 0.5,
            wd.rise_time() <= 2.0,
        ],
        measures=[wd.time_in_saturation(), wd.rms("error", after=0.3), wd.final("output")],
        seed=3,
    ),
}


def spreads_around(value: float) -> dict[str, Spread]:
    """Every spread, near a value and on its side of 0."""
    width = 0.05 * abs(value) or 0.01
    low, high = (value, value + width) if value >= 0.0 else (value - width, value)
    values = [low, high, 0.5 * (low + high)]
    found = {
        "normal": wd.normal(value, width / 4.0, low=low, high=high),
        "uniform": wd.uniform(low, high),
        "triangular": wd.triangular(low, value, high),
        "beta": wd.beta(2.0, 3.0, low, high),
        "choice": wd.choice(values, probabilities=[0.3, 0.6, 0.1]),
        "samples": wd.samples(values),
        "shared": wd.shared("common", wd.uniform(low, high)),
        "column": wd.column("rows"),
    }
    if value > 0.0:
        found["lognormal"] = wd.lognormal(value, 0.01)
    if value != 0.0:
        found["tolerance"] = wd.tolerance(value, percent=2.0, shape="normal")
    return found


def places(part: Any, path: tuple[Any, ...] = ()) -> Iterator[tuple[tuple[Any, ...], float]]:
    """Walk over the plain numbers of a description."""
    if isinstance(part, float) and math.isfinite(part):
        yield path, part
    elif isinstance(part, Description):
        for field in dataclasses.fields(part):
            if field.init:
                yield from places(getattr(part, field.name), (*path, field.name))
    elif isinstance(part, FrozenMapping):
        for name, inner in part.items():
            yield from places(inner, (*path, name))
    elif isinstance(part, tuple):
        for i, inner in enumerate(part):
            yield from places(inner, (*path, i))


def with_number(part: Any, path: tuple[Any, ...], number: Any) -> Any:
    """A description with another number at a place."""
    if not path:
        return number
    first, rest = path[0], path[1:]
    if isinstance(part, FrozenMapping):
        return {**part, first: with_number(part[first], rest, number)}
    if isinstance(part, tuple):
        return tuple(with_number(inner, rest, number) if i == first else inner for i, inner in enumerate(part))
    return dataclasses.replace(part, **{first: with_number(getattr(part, first), rest, number)})


def own_places(kind: str) -> list[tuple[tuple[Any, ...], float]]:
    """The places in those parts that the first kind of study has otherwise or not."""
    plain, first = PARTS[kind](), PARTS[next(iter(PARTS))]()

    def is_own(path: tuple[Any, ...]) -> bool:
        parts = [(study.loop, path[1]) if path[0] == "loop" else (study, path[0]) for study in (plain, first)]
        return bool(getattr(*parts[0]) != getattr(*parts[1]))

    return [(path, value) for path, value in places(plain) if kind == next(iter(PARTS)) or is_own(path)]


@pytest.mark.parametrize("kind", PARTS)
def test_nominal_works_wherever_run_works(kind: str) -> None:
    plain = PARTS[kind]()
    tried = refused = 0
    for path, value in own_places(kind):
        uniform = spreads_around(value)["uniform"]
        table = {"rows": np.linspace(uniform.low, uniform.high, ROWS)}
        for name, spread in spreads_around(value).items():
            try:
                changed = dataclasses.replace(with_number(plain, path, spread), table=table)
            except wd.DescriptionError:
                refused += 1
                continue
            assert changed.run(ROWS, threads=1, progress=False).trials == ROWS
            replay = changed.nominal()
            assert replay.trial is None, (path, name)
            assert len(replay.time) > 1
            tried += 1
    assert tried > refused

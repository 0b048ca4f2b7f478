"""Bad input: each mistake gives an error at once that names the field and shows the value."""

from __future__ import annotations

import math
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest

import windage as wd
from windage._study_file import LARGEST_FILE, from_toml, to_toml

NAN, INFINITY = math.nan, math.inf
TUNING: dict[str, Any] = {"b0": 2.0, "controller_bandwidth": 3.0, "observer_bandwidth": 9.0}
CONTROLLER = wd.ErrorADRC(1, **TUNING)
PLANT = wd.Plant(
    states={"level": 0.0},
    equations={"level": "gain*flow - drain*level + leak"},
    input="flow",
    output="level",
    disturbances=["leak"],
    parameters={"gain": wd.uniform(1.0, 2.0), "drain": 0.1},
    auxiliaries={"loss": "drain*level"},
)


def plant(**changes: Any) -> wd.Plant:
    return PLANT.with_(**changes)


def loop(**changes: Any) -> wd.Loop:
    settings: dict[str, Any] = {
        "plant": PLANT,
        "controller": CONTROLLER,
        "sample_period": 0.01,
        "duration": 2.0,
        "reference": 1.0,
        "disturbances": {"leak": 0.0},
    }
    return wd.Loop(**{**settings, **changes})


def study(*requirements: Any, **changes: Any) -> wd.Study:
    loop_changes = {key: changes.pop(key) for key in list(changes) if key in wd.Loop.__dataclass_fields__}
    return wd.Study(loop(**loop_changes), list(requirements) or [wd.peak("error") <= 1.0], **changes)


Case = tuple[Callable[[], object], str, str]

# What is done, the field that the error names, and a part of the message.
SPREADS: list[Case] = [
    (lambda: wd.normal(NAN, 1.0), "normal.mean", "nan"),
    (lambda: wd.normal(0.0, INFINITY), "normal.sd", "inf"),
    (lambda: wd.normal(0.0, -1.0), "normal.sd", "-1.0"),
    (
        lambda: wd.normal(0.0, 1.0, low=2.0, high=1.0),
        "normal.low",
        "2.0; expected a number below high = 1. Swap",
    ),
    (lambda: wd.normal(0.0, 1.0, low=1.0, high=1.0), "normal.low", "instead of a spread"),
    (lambda: wd.normal(0.0, 1.0, low=40.0, high=41.0), "normal.low", "leave some of the distribution"),
    (lambda: wd.normal(0.0, 1.0, low=0.0, sigmas=3), "normal.sigmas", "Give sigmas, or low and high"),
    (lambda: wd.normal(0.0, 1.0, sigmas=0), "normal.sigmas", "0"),
    (lambda: wd.normal("4200", 1.0), "normal.mean", "'4200'"),  # type: ignore[arg-type]
    (lambda: wd.normal(True, 1.0), "normal.mean", "True"),
    (lambda: wd.normal(1j, 1.0), "normal.mean", "1j"),  # type: ignore[arg-type]
    (lambda: wd.normal(wd.uniform(0.0, 1.0), 1.0), "normal.mean", "uniform"),  # type: ignore[arg-type]
    (lambda: wd.normal(0.0, 1.0, name="a b"), "normal.name", "'a b'"),
    (lambda: wd.uniform(2.0, 1.0), "uniform.low", "2.0; expected a number not above high = 1. Swap"),
    (lambda: wd.uniform(-1.7e308, 1.7e308), "uniform.high", "1.7e+308"),
    (lambda: wd.uniform(10**400, 1.0), "uniform.low", "infinite"),
    (lambda: wd.triangular(1.0, 3.0, 2.0), "triangular.mode", "3.0"),
    (lambda: wd.lognormal(0.0, 0.1), "lognormal.median", "0.0"),
    (lambda: wd.lognormal(1.0, -0.1), "lognormal.sd_log", "-0.1"),
    (lambda: wd.beta(0.0, 1.0), "beta.a", "0.0"),
    (lambda: wd.beta(1.0, 1.0, low=2.0, high=1.0), "beta.low", "Swap"),
    (lambda: wd.tolerance(310.0, percent=-4), "tolerance.percent", "-4"),
    (lambda: wd.tolerance(0.0, percent=4), "tolerance.nominal", "Write uniform"),
    (lambda: wd.tolerance(1.0, 4, shape="gaussian"), "tolerance.shape", "'gaussian'"),
    (lambda: wd.choice([]), "choice.values", "empty"),
    (lambda: wd.choice(3.0), "choice.values", "3.0"),
    (lambda: wd.choice([1.0, "2"]), "choice.values[1]", "'2'"),
    (lambda: wd.choice([1.0, 2.0], [0.5]), "choice.probabilities", "1 numbers"),
    (lambda: wd.choice([1.0, 2.0], [0.5, 0.6]), "choice.probabilities", "1.1"),
    (lambda: wd.choice([1.0, 2.0], [1.5, -0.5]), "choice.probabilities[1]", "-0.5"),
    (lambda: wd.samples([1.0, NAN]), "samples.values[1]", "nan"),
    (lambda: wd.samples(np.float64(3.0)), "samples.values", "3.0"),
    (lambda: wd.samples("1 2 3"), "samples.values", "'1 2 3'"),
    (lambda: wd.shared("mass", 3.0), "shared.spread", "3.0"),
    (lambda: wd.shared("", wd.uniform(0.0, 1.0)), "shared.name", "''"),
    (lambda: wd.shared("m", wd.uniform(0.0, 1.0, name="n")), "shared.spread", "without a name"),
    (lambda: wd.shared("m", wd.column("n")), "shared.spread", "shared already"),
    (lambda: wd.column(3), "column.name", "3"),  # type: ignore[arg-type]
]
PLANTS: list[Case] = [
    (lambda: plant(states={}), "plant.states", "0 states"),
    (lambda: plant(states=["flux"]), "plant.equations", "'level'"),
    (lambda: plant(states={"level": "0"}), "plant.states.level", "without quotes"),
    (lambda: plant(states=3), "plant.states", "3"),
    (lambda: plant(states=["level", "level"]), "plant.states", "each name once"),
    (lambda: plant(equations={}), "plant.equations", "an equation for 'level'"),
    (lambda: plant(equations={"levl": "0", "level": "0"}), "plant.equations", "Did you mean 'level'?"),
    (lambda: plant(equations={"level": "gian*flow"}), "plant.equations['level']", "Did you mean 'gain'?"),
    (lambda: plant(equations={"level": "__import__('os')"}), "plant.equations['level']", "without quotes"),
    (lambda: plant(equations={"level": 0.0}), "plant.equations['level']", "0.0"),
    (lambda: plant(equations="flow"), "plant.equations", "'flow'"),
    (lambda: plant(input="level"), "plant.input", "in plant.states already"),
    (lambda: plant(input="error"), "plant.input", "signal of every loop"),
    (lambda: plant(input="estimate_3"), "plant.input", "signal of every loop"),
    (lambda: plant(input="2flow"), "plant.input", "'2flow'"),
    (lambda: plant(input=None), "plant.input", "None"),
    (lambda: plant(output="levle"), "plant.output['output']", "Did you mean 'level'?"),
    (lambda: plant(output="level + 0.1*flow"), "plant.output", "without 'flow'"),
    (lambda: plant(output=3), "plant.output", "3"),
    (lambda: plant(disturbances=["leak", "leak"]), "plant.disturbances", "each name once"),
    (lambda: plant(disturbances="leak"), "plant.disturbances", "'leak'; expected a list of names"),
    (lambda: plant(disturbances=["sin"]), "plant.disturbances", "function of the equation language"),
    (lambda: plant(parameters={"gain": NAN, "drain": 0.1}), "plant.parameters.gain", "nan"),
    (lambda: plant(parameters={"gain": None, "drain": 0.1}), "plant.parameters.gain", "None"),
    (lambda: plant(parameters={"gain": 1.0, "drain": 1.0, "t": 2.0}), "plant.parameters", "the time"),
    (
        lambda: plant(parameters={"gain": 1.0, "drain": 1.0, "level": 2.0}),
        "plant.parameters",
        "in plant.states",
    ),
    (lambda: plant(parameters=[1.0]), "plant.parameters", "[1.0]"),
    (lambda: plant(auxiliaries={"a": "b", "b": "a"}), "plant.auxiliaries['a']", "a -> b -> a"),
    (lambda: plant(size=3), "Plant", "'size'"),
    (lambda: wd.IntegratorChain(0, gain=1.0), "plant.order", "0"),
    (lambda: wd.IntegratorChain(2.5, gain=1.0), "plant.order", "2.5"),  # type: ignore[arg-type]
    (lambda: wd.IntegratorChain(True, gain=1.0), "plant.order", "True"),
    (lambda: wd.IntegratorChain(2, gain=0.0), "plant.gain", "other than 0"),
    (lambda: wd.IntegratorChain(2, gain=1.0, initial=[1.0]), "plant.initial", "[1.0]"),
    (lambda: wd.FirstOrder(1.0, 0.0), "plant.time_constant", "0.0"),
    (
        lambda: wd.FirstOrder(1.0, wd.normal(1.0, 0.1)),
        "plant.time_constant",
        "lower bound is -inf; truncate it",
    ),
    (lambda: wd.FirstOrder(1.0, 1.0, dead_time=-0.1), "plant.dead_time", "-0.1"),
    (lambda: wd.FirstOrder(1.0, 1.0, dead_time=wd.lognormal(0.1, 0.1)), "plant.dead_time", "finite bounds"),
    (lambda: wd.SecondOrder(1.0, 1.0, INFINITY), "plant.damping", "inf"),
    (lambda: wd.TransferFunction([1.0, 2.0], [1.0, 2.0]), "plant.numerator", "2 coefficients over 2"),
    (lambda: wd.TransferFunction([1.0], [0.0, 1.0]), "plant.denominator[0]", "0.0"),
    (lambda: wd.TransferFunction([0.0], [1.0, 1.0]), "plant.numerator", "other than 0"),
    (lambda: wd.TransferFunction([], [1.0, 1.0]), "plant.numerator", "empty"),
    (lambda: wd.StateSpace([[1.0, 2.0]], [1.0], [1.0]), "plant.a", "square"),
    (lambda: wd.StateSpace([[1.0, 2.0], [1.0]], [1.0, 1.0], [1.0, 1.0]), "plant.a", "same length"),
    (lambda: wd.StateSpace([[1.0]], [1.0, 2.0], [1.0]), "plant.b", "It has 2"),
    (lambda: wd.StateSpace([[1.0]], [1.0], [1.0], e=[[1.0], [2.0]]), "plant.e", "2 rows"),
    (lambda: wd.DCDrive(1.0, 1.0, 1.0, 0.0), "plant.inertia", "0.0"),
    (lambda: wd.DCDrive(1.0, 1.0, 1.0, 1.0, output="current"), "plant.output", "'current'"),
    (lambda: wd.TwoMassDrive(1.0, 1.0, 1.0, -1.0), "plant.damping", "-1.0"),
]
CONTROLLERS: list[Case] = [
    (lambda: wd.OutputADRC(0, **TUNING), "controller.order", "0"),
    (lambda: wd.OutputADRC(9, **TUNING), "controller.order", "9"),
    (lambda: wd.OutputADRC(1, **{**TUNING, "b0": 0}), "controller.b0", "0"),
    (lambda: wd.OutputADRC(1, **{**TUNING, "b0": wd.normal(1.0, 0.1)}), "controller.b0", "truncate it"),
    (
        lambda: wd.OutputADRC(1, **{**TUNING, "observer_bandwidth": -9.0}),
        "controller.observer_bandwidth",
        "-9.0",
    ),
    (
        lambda: wd.OutputADRC(1, **{**TUNING, "observer_bandwidth": None}),
        "controller.observer_bandwidth",
        "neither",
    ),
    (lambda: wd.OutputADRC(1, **TUNING, controller_gains=[1.0]), "controller.controller_bandwidth", "both"),
    (
        lambda: wd.OutputADRC(1, b0=1.0, controller_gains=[1.0, 2.0], observer_bandwidth=1.0),
        "controller.controller_gains",
        "It has 2",
    ),
    (lambda: wd.OutputADRC(1, **TUNING, discretisation="tustin"), "controller.discretisation", "'tustin'"),
    (
        lambda: wd.OutputADRC(1, **TUNING, observer_input="limit"),
        "controller.observer_input",
        "Did you mean 'limited'?",
    ),
    (lambda: wd.OutputADRC(1, **TUNING, reference_derivatives=2), "controller.reference_derivatives", "from 0 to 1"),
    (lambda: wd.OutputADRC(2, **TUNING, reference_derivatives=-1), "controller.reference_derivatives", "from 0 to 2"),
    (lambda: wd.OutputADRC(2, **TUNING, reference_derivatives=1.0), "controller.reference_derivatives", "1.0"),  # type: ignore[arg-type]
    (
        lambda: wd.OutputADRC(1, **TUNING, reference_derivatives=True),
        "controller.reference_derivatives",
        "Write 0",
    ),
    (
        lambda: wd.OutputADRC(1, **TUNING, reference_derivatives=False),
        "controller.reference_derivatives",
        "leave it",
    ),
    (lambda: wd.ErrorADRC(1, **TUNING, cancel_disturbance=None), "controller.cancel_disturbance", "None"),  # type: ignore[arg-type]
    (lambda: wd.ErrorADRC(1, **TUNING, observer_gain_factor=0.0), "controller.observer_gain_factor", "0.0"),
]
PARTS: list[Case] = [
    (lambda: wd.Sine(1.0, period=0.0), "Sine.period", "0.0"),
    (lambda: wd.Sine("1", period=1.0), "Sine.amplitude", "without quotes"),  # type: ignore[arg-type]
    (lambda: wd.Step(NAN), "Step.amplitude", "nan"),
    (lambda: wd.Ramp(1.0, start=2.0, stop=1.0), "Ramp.stop", "(2, 1)"),
    (lambda: wd.Ramp(INFINITY), "Ramp.slope", "inf"),
    (lambda: wd.Pulse(1.0, start=0.0, width=-1.0), "Pulse.width", "-1.0"),
    (lambda: wd.Quintic(1.0, start=0.0, duration=0.0), "Quintic.duration", "0.0"),
    (lambda: wd.JerkLimited(1.0, 0.0, speed=0.0, acceleration=1.0, jerk=1.0), "JerkLimited.speed", "0.0"),
    (lambda: wd.Table([], []), "Table.times", "empty"),
    (lambda: wd.Table([0.0, 1.0], [0.0]), "Table.values", "It has 1"),
    (lambda: wd.Table([1.0, 0.0], [0.0, 1.0]), "Table.times[1]", "at least 1, that of times[0]"),
    (lambda: wd.Table([0.0], [0.0], interpolation="cubic"), "Table.interpolation", "'cubic'"),
    (lambda: wd.Gust(-1.0, correlation_time=1.0), "Gust.intensity", "-1.0"),
    (lambda: wd.Gust(1.0, correlation_time=0.0), "Gust.correlation_time", "0.0"),
    (lambda: wd.WhiteNoise(-1.0), "WhiteNoise.density", "-1.0"),
    (lambda: wd.Sensor(gain=0.0), "sensor.gain", "0.0"),
    (lambda: wd.Sensor(noise=-1e-5), "sensor.noise", "-1e-05"),
    (lambda: wd.Sensor(noise=wd.normal(1e-5, 1e-6)), "sensor.noise", "truncate it"),
    (lambda: wd.Sensor(range=(1.0, -1.0)), "sensor.range", "(1, -1)"),
    (lambda: wd.Sensor(range=(1.0,)), "sensor.range", "It has 1"),
    (lambda: wd.Sensor(range=5.0), "sensor.range", "5.0"),  # type: ignore[arg-type]
    (
        lambda: wd.Actuator(limits=(60.0, -60.0)),
        "actuator.limits",
        "'(60, -60)'; expected a lower limit below",
    ),
    (
        lambda: wd.Actuator(limits=(wd.uniform(0.0, 2.0), wd.uniform(1.0, 3.0))),
        "actuator.limits",
        "truncate the spreads",
    ),
    (lambda: wd.Actuator(limits=(1.0, 2.0)), "actuator.initial", "Set actuator.initial"),
    (lambda: wd.Actuator(rate_limit=-1.0), "actuator.rate_limit", "-1.0"),
    (lambda: wd.Actuator(delay=-1e-3), "actuator.delay", "-0.001"),
    (lambda: wd.Actuator(delay=wd.normal(1e-3, 1e-4)), "actuator.delay", "lower bound is -inf"),
    (lambda: wd.Actuator(time_constant=wd.uniform(0.0, 1.0)), "actuator.time_constant", "lower bound is 0"),
    (lambda: wd.Actuator(delay="1 ms"), "actuator.delay", "'1 ms'"),  # type: ignore[arg-type]
]
LOOPS: list[Case] = [
    (lambda: loop(plant="dish"), "loop.plant", "'dish'"),
    (lambda: loop(controller=PLANT), "loop.controller", "Plant("),
    (lambda: loop(sensor=None), "loop.sensor", "None"),
    (lambda: loop(sample_period=0.0), "loop.sample_period", "0.0"),
    (lambda: loop(sample_period=-0.01), "loop.sample_period", "-0.01"),
    (lambda: loop(sample_period=wd.normal(0.01, 0.001)), "loop.sample_period", "truncate it"),
    (lambda: loop(sample_period=wd.uniform(0.0, 0.01)), "loop.sample_period", "lower bound is 0"),
    (lambda: loop(sample_period=3.0), "loop.duration", "at least one sample period"),
    (lambda: loop(duration=INFINITY), "loop.duration", "inf"),
    (lambda: loop(duration=1e9), "loop.duration", "1e+11"),
    (lambda: loop(duration=wd.lognormal(1.0, 0.1)), "loop.duration", "at least one sample period"),
    (lambda: loop(reference="step"), "loop.reference", "'step'"),
    (lambda: loop(reference=wd.Gust(1.0, 1.0)), "loop.reference", "a disturbance, not a reference"),
    (lambda: loop(reference=NAN), "loop.reference", "nan"),
    (lambda: loop(disturbances={}), "loop.disturbances", "Add 'leak'; if nothing acts there, as Constant(0)"),
    (lambda: loop(disturbances={"leek": 0.0, "leak": 0.0}), "loop.disturbances", "Did you mean 'leak'?"),
    (lambda: loop(disturbances={"leak": "gust"}), "loop.disturbances.leak", "'gust'"),
    (lambda: loop(disturbances=[0.0]), "loop.disturbances", "[0.0]"),
    (lambda: loop(plant=wd.StateSpace([[1.0]], [1.0], [1.0])), "loop.disturbances", "has no disturbance"),
    (lambda: loop(integrator="rk5"), "loop.integrator", "Did you mean 'rk4'?"),
    (lambda: loop(steps_per_sample="many"), "loop.steps_per_sample", "'many'"),
    (lambda: loop(steps_per_sample=0), "loop.steps_per_sample", "0"),
    (lambda: loop(steps_per_sample=True), "loop.steps_per_sample", "True"),
    (lambda: loop(steps_per_sample=10**6), "loop.steps_per_sample", "1000000"),
    (lambda: loop(actuator=wd.Actuator(delay=2000.0)), "actuator.delay", "2e+05 sample periods"),
    (lambda: loop(signals={"power": "flow*speed"}), "loop.signals['power']", "'speed'"),
    (lambda: loop(signals={"error": "flow"}), "loop.signals", "'error'"),
    (lambda: loop(signals={"gain": "flow"}), "loop.signals", "taken already"),
    (lambda: loop(signals={"a": "b", "b": "a"}), "loop.signals['a']", "a -> b -> a"),
    (lambda: loop(signals={"a": "1/0"}), "loop.signals['a']", "divisor"),
    (lambda: loop().with_(period=1.0), "Loop", "'period'"),
]
MEASURES: list[Case] = [
    (lambda: wd.peak(3), "peak.signal", "3"),  # type: ignore[arg-type]
    (lambda: wd.peak(""), "peak.signal", "''"),
    (lambda: wd.peak("error", after=-1.0), "peak.after", "-1.0"),
    (lambda: wd.peak("error", after=2.0, before=1.0), "peak.before", "(2, 1)"),
    (lambda: wd.peak("error", after=NAN), "peak.after", "nan"),
    (lambda: wd.peak("error", after=INFINITY), "peak.after", "inf"),
    (lambda: wd.time_outside("error", 1.0, -1.0), "time_outside.low", "(1, -1)"),
    (lambda: wd.rise_time(low=0.9, high=0.1), "rise_time.low", "(0.9, 0.1)"),
    (lambda: wd.rise_time(high=90), "rise_time.high", "90"),
    (lambda: wd.settling_time(band=0.0), "settling_time.band", "0.0"),
    (
        lambda: wd.settling_time(band=0.1, tolerance=0.1),
        "settling_time.tolerance",
        "either band or tolerance",
    ),
    (lambda: wd.peak("error") <= NAN, "requirement.at_most", "nan"),
    (lambda: wd.peak("error") <= INFINITY, "requirement.at_most", "inf"),
    (lambda: wd.peak("error") <= None, "requirement", "neither"),
    (lambda: wd.peak("error") >= "1", "requirement.at_least", "'1'"),
    (lambda: wd.peak("error") < 1.0, "requirement", "peak of error < 1"),
    (lambda: 0.1 <= wd.peak("error") <= 1.0, "requirement", "two requirements"),
    (lambda: (wd.peak("error") <= 1.0).named(" "), "requirement.name", "' '"),
]
STUDIES: list[Case] = [
    (lambda: wd.Study(PLANT), "study.loop", "Plant("),  # type: ignore[arg-type]
    (lambda: wd.Study(loop()), "study.requirements", "at least one requirement or measure"),
    (lambda: study(wd.peak("error")), "study.requirements[0]", "Compare it with a limit"),
    (lambda: study(3.0), "study.requirements[0]", "3.0"),
    (lambda: wd.Study(loop(), "peak"), "study.requirements", "'peak'"),  # type: ignore[arg-type]
    (lambda: study(measures=[wd.peak("error") <= 1.0]), "study.measures[0]", "Requirement"),
    (lambda: study(wd.peak("eror") <= 1.0), "study.requirements[0].signal", "Did you mean 'error'?"),
    (lambda: study(measures=[wd.rms("drain")]), "study.measures[0].signal", "'drain'"),
    (lambda: study(wd.peak("error", after=2.0) <= 1.0), "study.requirements[0].after", "2.0"),
    (lambda: study(wd.peak("error", before=25.0) <= 1.0), "study.requirements[0].before", "25.0"),
    (
        lambda: study(wd.peak("error", after=1.0, before=1.005) <= 1.0),
        "study.requirements[0].before",
        "Widen",
    ),
    (
        lambda: study(wd.peak("error", after=wd.uniform(0.0, 3.0)) <= 1.0),
        "study.requirements[0].after",
        "uniform",
    ),
    (lambda: study(wd.time_in_saturation() <= 1.0), "study.requirements[0]", "Add Actuator(limits"),
    (lambda: study(*[wd.peak("error") <= 1.0] * 2), "study.requirements[1]", "Number 0 reads the same"),
    (lambda: study(seed=-1), "study.seed", "-1"),
    (lambda: study(seed=2**64), "study.seed", "18446744073709551616"),
    (lambda: study(seed=1.0), "study.seed", "1.0"),
    (lambda: study(seed=True), "study.seed", "True"),
    (lambda: study(table={}), "study.table", "{}"),
    (lambda: study(table={"a": [1.0], "b": [1.0, 2.0]}), "study.table", "same length"),
    (lambda: study(table={"a": [1.0, NAN]}), "study.table.a[1]", "nan"),
    (lambda: study(table={"a": [[1.0]]}), "study.table.a[0]", "[1.0]"),
    (lambda: study(table={"a": []}), "study.table.a", "0 rows"),
    (lambda: study(sample_period=wd.column("dt")), "study.table", "'dt'"),
    (
        lambda: study(sample_period=wd.column("dt"), table={"dt": [0.1, 0.0]}),
        "loop.sample_period",
        "lower bound is 0",
    ),
    (lambda: study(correlations={("gain", "gain"): 0.5}), "study.correlations", "two parameters"),
    (lambda: study(correlations={("gain", "gian"): 0.5}), "study.correlations", "Did you mean 'gain'?"),
    (lambda: study(correlations={"gain": 0.5}), "study.correlations", "'gain'"),
    (
        lambda: study(correlations={("gain", "drain"): 1.0}),
        "study.correlations[('gain', 'drain')]",
        "use shared",
    ),
    (lambda: study(correlations={("gain", "drain"): NAN}), "study.correlations[('gain', 'drain')]", "nan"),
    (lambda: study(correlations=[0.5]), "study.correlations", "[0.5]"),
    (lambda: study().with_(plan=PLANT), "Study", "Did you mean 'plant'?"),
    (lambda: study().run(0), "trials", "0"),
    (lambda: study().run(1.5), "trials", "1.5"),  # type: ignore[arg-type]
    (lambda: study().run(10**12), "trials", "Use study.count"),
    (lambda: study().run(10, threads=-1), "threads", "-1"),
    (lambda: study().run(10, progress="bar"), "progress", "'bar'"),  # type: ignore[arg-type]
    (lambda: study().replay(-1), "trial", "-1"),
    (lambda: study().replay("3"), "trial", "'3'"),  # type: ignore[arg-type]
    (lambda: study().count(10, size=0), "size", "0"),
]
ALL = [*SPREADS, *PLANTS, *CONTROLLERS, *PARTS, *LOOPS, *MEASURES, *STUDIES]


@pytest.mark.parametrize(("make", "field", "shown"), ALL, ids=[f"{i}-{case[1]}" for i, case in enumerate(ALL)])
def test_mistakes_are_explained_at_once(make: Callable[[], object], field: str, shown: str) -> None:
    started = time.perf_counter()
    with pytest.raises(wd.DescriptionError) as caught:
        make()
    assert time.perf_counter() - started < 1.0
    message = str(caught.value)
    assert caught.value.field == field
    assert shown in message
    assert message.startswith(f"{field}: found ")
    assert "; expected " in message
    assert len(message) < 700


def changed(old: str, new: str, count: int = 1) -> str:
    text = to_toml(study(wd.peak("error", after=0.5) <= 1.0, sample_period=wd.uniform(0.01, 0.02)))
    assert old in text
    return text.replace(old, new, count)


FILES: list[tuple[Callable[[], str], str, str]] = [
    (lambda: "", "windage_study", "nothing"),
    (lambda: "seed = 1", "windage_study", "first line"),
    (lambda: "windage_study = 1", "loop", "no default"),
    (lambda: changed("windage_study = 1", "windage_study = 2"), "windage_study", "2"),
    (lambda: changed("windage_study = 1", "windage_study = true"), "windage_study", "True"),
    (lambda: changed("seed = 0", "seed = 0\nseed = 1"), "study file", "Cannot overwrite a value"),
    (lambda: changed("seed = 0", "seed = "), "study file", "Invalid value"),
    (lambda: changed("seed = 0", "seed = 0.5"), "seed", "0.5"),
    (lambda: changed("seed = 0", "seed = 99999999999999999999"), "seed", "99999999999999999999"),
    (lambda: changed("seed = 0", "sead = 0"), "sead", "Did you mean 'seed'?"),
    (lambda: changed("[loop]", "[lop]"), "lop", "Did you mean 'loop'?"),
    (lambda: "windage_study = 1\nloop = 3", "loop", "3"),
    (lambda: changed("duration = 2.0", ""), "loop.duration", "no default"),
    (lambda: changed("duration = 2.0", "duration = inf"), "loop.duration", "inf"),
    (lambda: changed("duration = 2.0", "duration = -2.0"), "loop.duration", "-2.0"),
    (lambda: changed("duration = 2.0", "duration = 2.0\nperiod = 1"), "loop.period", "unknown key"),
    (lambda: changed("duration = 2.0", 'duration = "2 s"'), "loop.duration", "'2 s'"),
    (lambda: changed("duration = 2.0", "duration = 2024-01-01"), "loop.duration", "2024"),
    (
        lambda: changed('spread = "uniform", ', 'spread = "unifrom", '),
        "loop.sample_period.spread",
        "'uniform'?",
    ),
    (lambda: changed('spread = "uniform", ', ""), "loop.sample_period", "'high': 0.02"),
    (lambda: changed("low = 0.01, high", "low = 0.03, high"), "loop.sample_period.low", "0.03"),
    (lambda: changed("low = 0.01, high", "low = nan, high"), "loop.sample_period.low", "nan"),
    (lambda: changed("low = 0.01, high", "lo = 0.01, high"), "loop.sample_period.lo", "Did you mean 'low'?"),
    (lambda: changed("low = 0.01, high", "high"), "loop.sample_period.low", "no default"),
    (lambda: changed('kind = "Plant"', 'kind = "Plan"'), "loop.plant.kind", "Did you mean 'Plant'?"),
    (lambda: changed('kind = "Plant"', "kind = 3"), "loop.plant.kind", "3"),
    (lambda: changed('kind = "Plant"', ""), "loop.plant.kind", "nothing"),
    (lambda: changed('input = "flow"', 'inputs = "flow"'), "loop.plant.inputs", "Did you mean 'input'?"),
    (lambda: changed('input = "flow"', 'input = "level"'), "loop.plant.input", "in plant.states already"),
    (lambda: changed('"gain*flow', '"gian*flow'), "loop.plant.equations['level']", "Did you mean 'gain'?"),
    (lambda: changed("order = 1", "order = 11"), "loop.controller.order", "11"),
    (lambda: changed("b0 = 2.0", "b0 = 0"), "loop.controller.b0", "0"),
    (lambda: changed("b0 = 2.0", "b0 = [1.0]"), "loop.controller.b0", "[1.0]"),
    (lambda: changed('kind = "Constant"', 'kind = "Gust"'), "loop.reference.kind", "'Gust'"),
    (lambda: changed("value = 1.0", ""), "loop.reference.value", "no default"),
    (lambda: changed("[loop.disturbances.leak]", "[loop.disturbances.leek]"), "loop.disturbances", "'leek'"),
    (
        lambda: changed('measure = "peak"', 'measure = "peek"'),
        "requirements[0].measure",
        "Did you mean 'peak'?",
    ),
    (lambda: changed('measure = "peak"', ""), "requirements[0].measure", "nothing"),
    (
        lambda: changed('signal = "error"', 'signal = "eror"'),
        "requirements[0].signal",
        "Did you mean 'error'?",
    ),
    (lambda: changed("after = 0.5", "after = 5.0"), "requirements[0].after", "5.0"),
    (lambda: changed("after = 0.5", "low = 0.5"), "requirements[0].low", "unknown key"),
    (lambda: changed("at_most = 1.0", "at_most = 1.0\nat_least = 0.0"), "requirements[0]", "both"),
    (lambda: changed("at_most = 1.0", ""), "requirements[0]", "neither"),
    (lambda: changed("[[requirements]]", "[requirements]"), "requirements", "a list"),
    (
        lambda: changed("seed = 0", 'correlations = [{between = ["a"], rank_correlation = 0.1}]'),
        "correlations[0].between",
        "['a']",
    ),
    (lambda: changed("seed = 0", "table = [1.0]"), "table", "[1.0]"),
    (lambda: "[" * 5000, "study file", "TOML"),
    (lambda: "x = " + "[" * 5000, "study file", "TOML"),
    (lambda: "a" * 1000, "study file", "TOML"),
]


@pytest.mark.parametrize(("text", "field", "shown"), FILES, ids=[f"{i}-{case[1]}" for i, case in enumerate(FILES)])
def test_malformed_files_are_explained_at_once(text: Callable[[], str], field: str, shown: str) -> None:
    content = text()
    started = time.perf_counter()
    with pytest.raises(wd.StudyFileError) as caught:
        from_toml(content)
    assert time.perf_counter() - started < 1.0
    message = str(caught.value)
    assert caught.value.field == field
    assert shown in message
    assert message.startswith(f"{field}: found ")


@pytest.mark.parametrize(
    ("content", "shown"),
    [
        (b"\xff\xfe", "text in UTF-8"),
        (b'seed = 1\nname = "caf\xe9"', "byte 0xe9 at position 20"),
        (b"# " + b"x" * LARGEST_FILE, f"at most {LARGEST_FILE} bytes"),
        (b"\x00", "TOML"),
    ],
    ids=["utf-16", "latin-1", "too large", "zero byte"],
)
def test_files_that_are_no_text_or_too_large_are_refused(content: bytes, shown: str, tmp_path: Path) -> None:
    path = tmp_path / "study.toml"
    path.write_bytes(content)
    with pytest.raises(wd.StudyFileError, match=shown):
        wd.load(path)


def test_files_that_are_not_there_are_refused(tmp_path: Path) -> None:
    for path in (tmp_path, tmp_path / "none.toml"):
        with pytest.raises(wd.StudyFileError, match="a file that can be read"):
            wd.load(path)


def test_only_studies_are_saved(tmp_path: Path) -> None:
    with pytest.raises(wd.DescriptionError, match="expected a Study"):
        wd.save(loop(), tmp_path / "study.toml")  # type: ignore[arg-type]


def test_questions_to_an_outcome_are_checked() -> None:
    outcome = study(steps_per_sample=1).run(4, progress=False)
    for ask in (
        lambda: outcome.failed("peak"),
        lambda: outcome.failed(1),
        lambda: outcome.verdict(at_least=95),
        lambda: outcome.verdict(at_least=0.9, confidence=0.05),
        lambda: outcome.extend(0),
        lambda: study().nominal()["eror"],
    ):
        with pytest.raises(wd.DescriptionError):
            ask()


def test_describing_needs_no_engine() -> None:
    # In a process of its own, since other tests load the engine.
    code = (
        "import sys, windage as wd\n"
        "plant = wd.FirstOrder(1.0, wd.uniform(1.0, 2.0))\n"
        "controller = wd.ErrorADRC(1, b0=1.0, controller_bandwidth=1.0, observer_bandwidth=5.0)\n"
        "loop = wd.Loop(plant, controller, 0.01, 1.0, 1.0, disturbances={'load': 0.0})\n"
        "study = wd.Study(loop, [wd.overshoot() <= 0.1])\n"
        "study.digest, study.warnings(), repr(study)\n"
        "found = [name for name in sys.modules if '_engine' in name or name in ('pyarrow', 'matplotlib')]\n"
        "assert not found, found\n"
    )
    subprocess.run([sys.executable, "-c", code], check=True, timeout=60)

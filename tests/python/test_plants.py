"""Plants: names, equations against stock plants, and what signals a plant brings along."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

import windage as wd
from windage._describe import Numbers

CONTROLLER = wd.OutputADRC(2, b0=2.0, controller_bandwidth=4.0, observer_bandwidth=20.0)


def loop_of(plant: Any, controller: Any = CONTROLLER, **options: Any) -> wd.Loop:
    loads = {name: wd.Constant(0.3) for name in plant.disturbance_names}
    settings: dict[str, Any] = {
        "plant": plant,
        "controller": controller,
        "sample_period": 0.01,
        "duration": 2.0,
        "reference": 1.0,
        "disturbances": loads,
        "steps_per_sample": 1,
    }
    return wd.Loop(**{**settings, **options})


def outputs(plant: Any, controller: Any = CONTROLLER, **options: Any) -> np.ndarray:
    study = wd.Study(loop_of(plant, controller, **options), [wd.peak("error") <= 1e9])
    replay = study.replay(0)
    assert not replay.diverged
    return replay["output"]


DOUBLE = wd.Plant(
    states={"position": 0.2, "speed": -0.1},
    equations={"position": "speed", "speed": "gain*u + load"},
    input="u",
    output="position",
    disturbances=["load"],
    parameters={"gain": 2.0},
)


def test_double_integrator_as_equations_equals_the_stock_plant() -> None:
    # Input and load are held between samples, and RK4 is exact for a parabola.
    stock = wd.IntegratorChain(2, gain=2.0, initial=[0.2, -0.1])
    np.testing.assert_allclose(outputs(DOUBLE), outputs(stock), rtol=0, atol=1e-12)


def test_first_order_lag_with_dead_time_equals_its_equation() -> None:
    controller = wd.OutputADRC(1, b0=3.0, controller_bandwidth=2.0, observer_bandwidth=8.0)
    lag = wd.Plant(
        states={"level": 0.0},
        equations={"level": "(3*(flow + load) - level)/0.7"},
        input="flow",
        output="level",
        disturbances=["load"],
    )
    stock = wd.FirstOrder(gain=3.0, time_constant=0.7, dead_time=0.037)
    delayed = outputs(lag, controller, actuator=wd.Actuator(delay=0.037), steps_per_sample=8)
    np.testing.assert_allclose(delayed, outputs(stock, controller), rtol=0, atol=1e-11)


def test_linear_stock_plants_of_one_transfer_function_agree() -> None:
    # 2 / (0.25 s^2 + 0.3 s + 1): T = 0.5 and damping 0.3; state space by hand, load added to the input.
    a, b, c = [[0.0, 1.0], [-4.0, -1.2]], [0.0, 8.0], [1.0, 0.0]
    second = outputs(wd.SecondOrder(gain=2.0, time_constant=0.5, damping=0.3))
    transfer = outputs(wd.TransferFunction([2.0], [0.25, 0.3, 1.0]))
    state = outputs(wd.StateSpace(a, b, c, e=[[0.0], [8.0]]))
    column = outputs(wd.StateSpace(np.array(a), np.array(b).reshape(2, 1), np.array(c).reshape(1, 2), e=[[0.0], [8.0]]))
    np.testing.assert_allclose(transfer, second, rtol=0, atol=1e-12)
    np.testing.assert_allclose(state, second, rtol=0, atol=1e-12)
    assert np.array_equal(column, state)


def test_dc_drive_equals_its_equations() -> None:
    numbers = {
        "resistance": 0.6,
        "inductance": 4e-3,
        "torque_constant": 0.05,
        "inertia": 2e-4,
        "viscous_friction": 1e-4,
        "coulomb_friction": 0.01,
        "friction_speed": 0.5,
    }
    written = wd.Plant(
        states={"angle": 0.0, "speed": 0.0, "current": 0.0},
        equations={
            "angle": "speed",
            "speed": "(torque_constant*current - viscous_friction*speed - friction - load)/inertia",
            "current": "(voltage - resistance*current - torque_constant*speed)/inductance",
        },
        auxiliaries={"friction": "coulomb_friction*tanh(speed/friction_speed)"},
        input="voltage",
        output="speed",
        disturbances=["load"],
        parameters=numbers,
    )
    controller = wd.OutputADRC(1, b0=400.0, controller_bandwidth=20.0, observer_bandwidth=100.0)
    options: dict[str, Any] = {
        "sample_period": 1e-3,
        "duration": 0.5,
        "reference": 30.0,
        "steps_per_sample": 4,
    }
    options["disturbances"] = {"load": wd.Constant(0.02)}
    stock = outputs(wd.DCDrive(**numbers, output="speed"), controller, **options)
    np.testing.assert_allclose(stock, outputs(written, controller, **options), rtol=0, atol=1e-8)
    assert np.ptp(stock) > 20.0


def test_two_mass_drive_equals_its_equations() -> None:
    numbers = {
        "motor_inertia": 0.01,
        "load_inertia": 0.04,
        "stiffness": 300.0,
        "damping": 0.1,
        "coulomb_friction": 0.05,
        "breakaway_friction": 0.08,
        "stribeck_speed": 0.4,
        "friction_speed": 0.1,
        "viscous_friction": 0.02,
    }
    written = wd.Plant(
        states={"motor_angle": 0.0, "motor_speed": 0.0, "load_angle": 0.0, "load_speed": 0.0},
        equations={
            "motor_angle": "motor_speed",
            "motor_speed": "(torque - shaft)/motor_inertia",
            "load_angle": "load_speed",
            "load_speed": "(shaft - friction - load)/load_inertia",
        },
        auxiliaries={
            "shaft": "stiffness*(motor_angle - load_angle) + damping*(motor_speed - load_speed)",
            "friction": "level*tanh(load_speed/friction_speed) + viscous_friction*load_speed",
            "level": "coulomb_friction + (breakaway_friction - coulomb_friction)*exp(-(load_speed/stribeck_speed)**2)",
        },
        input="torque",
        output="load_angle",
        disturbances=["load"],
        parameters=numbers,
    )
    controller = wd.ErrorADRC(2, b0=20.0, controller_bandwidth=6.0, observer_bandwidth=30.0)
    options: dict[str, Any] = {"sample_period": 2e-3, "duration": 1.0, "steps_per_sample": 8}
    stock = outputs(wd.TwoMassDrive(**numbers, output="load_angle"), controller, **options)
    np.testing.assert_allclose(stock, outputs(written, controller, **options), rtol=0, atol=1e-9)
    assert np.ptp(stock) > 0.5


def test_breakaway_friction_is_by_default_the_coulomb_friction_of_the_same_trial() -> None:
    friction = wd.uniform(0.01, 0.02)
    drive = wd.TwoMassDrive(0.01, 0.04, 300.0, 0.1, coulomb_friction=friction)
    numbers = Numbers()
    described = drive._describe(numbers)
    assert described["numbers"][4] == described["numbers"][5] == ("drawn", 0)
    assert len(numbers.columns()) == 1


def test_auxiliaries_parameters_and_output_are_signals() -> None:
    plant = wd.Plant(
        states={"x": 0.5},
        equations={"x": "-rate*x + u"},
        input="u",
        output="level",
        parameters={"rate": wd.uniform(1.0, 2.0)},
        auxiliaries={"level": "2*x", "loss": "rate*x + 0*t"},
    )
    controller = wd.OutputADRC(1, b0=2.0, controller_bandwidth=2.0, observer_bandwidth=10.0)
    signals = {"twice": "2*loss + level - error", "late": "twice + t"}
    loop = loop_of(plant, controller, signals=signals)
    study = wd.Study(loop, [wd.peak("late") <= 9.0, wd.final("loss") <= 9.0, wd.final("level") <= 9.0])
    replay = study.replay(3)
    rate = replay.parameters["rate"]
    np.testing.assert_allclose(replay["loss"], rate * replay["x"], rtol=1e-15)
    assert np.array_equal(replay["level"], replay["output"])
    np.testing.assert_allclose(replay["late"], 2 * replay["loss"] + replay["level"] - replay["error"] + replay.time)
    assert study.run(4, progress=False).measures["final of loss"][3] == replay["loss"][-1]


def test_output_may_be_an_expression_and_follow_a_disturbance() -> None:
    plant = wd.Plant({"x": 0.0}, {"x": "u"}, "u", "x + 0.5*bias", disturbances=["bias"])
    controller = wd.OutputADRC(1, b0=1.0, controller_bandwidth=2.0, observer_bandwidth=10.0)
    replay = wd.Study(loop_of(plant, controller), [wd.peak("error") <= 9.0]).replay(0)
    np.testing.assert_allclose(replay["output"], replay["x"] + 0.5 * replay["bias"], rtol=1e-15)


def test_initial_states_may_be_spread() -> None:
    plant = DOUBLE.with_(states={"position": wd.uniform(0.0, 1.0), "speed": 0.0})
    study = wd.Study(loop_of(plant), [wd.peak("error") <= 9.0])
    assert list(study.parameters) == ["plant.states.position"]
    replay = study.replay(2)
    assert replay["position"][0] == replay.parameters["plant.states.position"]


def test_unused_parameters_are_pointed_out() -> None:
    plant = DOUBLE.with_(parameters={"gain": 2.0, "mass": 1.0, "scale": 3.0})
    loop = loop_of(plant, signals={"scaled": "scale*error"})
    assert loop.warnings() == ["plant: no equation reads 'mass'"]


def test_plants_are_values() -> None:
    other = DOUBLE.with_(parameters={"gain": 2.0})
    assert other == DOUBLE
    assert hash(other) == hash(DOUBLE)
    with pytest.raises(TypeError, match="cannot be changed"):
        DOUBLE.parameters["gain"] = 3.0  # type: ignore[index]
    with pytest.raises(AttributeError):
        DOUBLE.input = "v"  # type: ignore[misc]


STOCK = [
    wd.IntegratorChain(2, gain=2.0),
    wd.FirstOrder(1.5, 0.4),
    wd.SecondOrder(1.5, 0.4, 0.6),
    wd.TransferFunction([1.0], [0.2, 1.0]),
    wd.StateSpace([[0.0, 1.0], [-4.0, -1.0]], [0.0, 2.0], [1.0, 0.0], e=[[0.0, 1.0], [1.0, 0.0]]),
    wd.DCDrive(2.0, 5e-3, 0.05, 3e-5, 1e-5, 2e-3, 0.5),
    wd.TwoMassDrive(4e-4, 6e-4, 150.0, 0.02, 0.02, 0.03, 0.5, 0.1, 1e-3),
]


@pytest.mark.parametrize("plant", STOCK, ids=lambda plant: type(plant).__name__)
def test_nothing_acts_on_a_stock_plant_whose_disturbance_is_not_described(plant: Any) -> None:
    options: dict[str, Any] = {"duration": 0.3, "sample_period": 0.01}
    silent, zero = (
        wd.Study(loop_of(plant, disturbances=loads, **options), [wd.peak("error") <= 1.0])
        for loads in ({}, dict.fromkeys(plant.disturbance_names, 0.0))
    )
    assert silent == zero
    assert silent.digest == zero.digest
    found, expected = silent.replay(0), zero.replay(0)
    assert found.signals == expected.signals
    for name in found.signals:
        np.testing.assert_array_equal(found[name], expected[name])
    for name in plant.disturbance_names:
        assert not found[name].any()


def test_disturbances_that_are_described_act_beside_those_that_are_not() -> None:
    names = STOCK[4].disturbance_names
    loop = loop_of(STOCK[4], disturbances={names[1]: wd.Step(0.5)})
    assert loop.disturbances == {names[0]: wd.Constant(0.0), names[1]: wd.Step(0.5)}
    assert wd.Loop(wd.FirstOrder(1.0, 0.3), CONTROLLER, 0.01, 1.0, 1.0).disturbances == {"load": wd.Constant(0.0)}


def test_a_signal_reads_the_number_that_the_plant_drew() -> None:
    plant = wd.FirstOrder(wd.uniform(0.5, 1.5), wd.uniform(0.5, 1.5), wd.uniform(0.0, 0.02), wd.uniform(0.0, 1.0))
    loop = wd.Loop(
        plant=plant,
        controller=wd.ErrorADRC(1, b0=1.0, controller_bandwidth=3.0, observer_bandwidth=9.0),
        sample_period=0.01,
        duration=0.1,
        reference=1.0,
        disturbances={"load": 0.0},
        signals={"start": "initial", "k": "gain", "T": "time_constant"},
    )
    study = wd.Study(loop, measures=[wd.final(name) for name in ("start", "k", "T")])
    outcome = study.run(5, progress=False)
    assert list(outcome.parameters) == ["plant.initial[0]", "gain", "time_constant", "dead_time"]
    for name, drawn in (("start", "plant.initial[0]"), ("k", "gain"), ("T", "time_constant")):
        assert outcome.measures[f"final of {name}"].tolist() == outcome.parameters[drawn].tolist()
    assert study.replay(3)["output"][0] == outcome.parameters["plant.initial[0]"][3]

"""Advice on the way from the input to the output: an open loop, a b0 of the wrong sign or far from the gain."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

import windage as wd
from windage._input_gain import input_gain


def loop(plant: Any, b0: Any = 1.0, order: int = 2, **options: Any) -> wd.Loop:
    return wd.Loop(
        plant=plant,
        controller=wd.ErrorADRC(order, controller_bandwidth=2.0, observer_bandwidth=10.0, b0=b0),
        sample_period=0.01,
        duration=0.1,
        reference=1.0,
        disturbances=dict.fromkeys(plant.disturbance_names, 0.0),
        **options,
    )


def cart(rate: str = "(gear*force - drag*speed)/mass", **options: Any) -> wd.Plant:
    settings: dict[str, Any] = {
        "states": {"position": 0.0, "speed": 0.0},
        "equations": {"position": "speed", "speed": rate},
        "input": "force",
        "output": "position",
        "parameters": {"mass": wd.uniform(2.0, 6.0), "drag": 0.3, "gear": wd.normal(8.0, 0.1)},
    }
    return wd.Plant(**{**settings, **options})


def of_input(found: list[str]) -> list[str]:
    return [line for line in found if "b0" in line or "loop is open" in line]


@pytest.mark.parametrize(
    "plant",
    [
        cart("-drag*speed/mass + gear*0.1"),
        # Read, but by a state that the output never sees.
        cart(
            "-drag*speed/mass",
            states={"position": 0.0, "speed": 0.0, "heat": 0.0},
            equations={"position": "speed", "speed": "-drag*speed/mass + gear", "heat": "force - heat"},
        ),
        # Read by an auxiliary that nothing reads.
        cart("-drag*speed/mass + gear", auxiliaries={"thrust": "gear*force"}),
    ],
)
def test_an_output_that_does_not_depend_on_the_input_is_said_to_be_an_open_loop(plant: wd.Plant) -> None:
    line = "plant: the output does not depend on the input 'force'; the loop is open"
    study = wd.Study(loop(plant), [wd.peak("error") <= 2.0])
    assert of_input(loop(plant).warnings()) == of_input(study.warnings()) == [line]
    verdict = study.run(20, progress=False).verdict(0.5)
    assert line in verdict.advice
    assert f"Advice: {line}." in " ".join(str(verdict).split())


def test_an_input_read_through_auxiliaries_and_states_closes_the_loop() -> None:
    plant = cart(
        "push/mass",
        states={"position": 0.0, "speed": 0.0, "current": 0.0},
        equations={"position": "speed", "speed": "push/mass", "current": "force - current"},
        auxiliaries={"push": "gear*amps", "amps": "2*current"},
    )
    assert of_input(loop(plant, b0=1.0).warnings()) == []
    found = input_gain(plant)
    assert found is not None
    assert (found.order, found.value) == (3, pytest.approx(4.0))


GAIN = 2.0  # gear / mass on the nominal unit


@pytest.mark.parametrize(
    ("b0", "words"),
    [
        (GAIN, None),
        (4.9 * GAIN, None),
        (GAIN / 4.9, None),
        (5.2 * GAIN, "5.2 times 2"),
        (GAIN / 5.2, "0.192 times 2"),
        (-GAIN, "has another sign than 2"),
        (wd.uniform(-3.0, -1.0), "has another sign"),
        (wd.uniform(-30.0, -1.0, nominal=-2.0), "has another sign"),
        (wd.uniform(1.0, 30.0, nominal=2.0), None),
    ],
)
def test_b0_is_compared_with_the_gain_that_it_stands_for(b0: Any, words: str | None) -> None:
    for plant in (
        cart(),
        wd.StateSpace([[0.0, 1.0], [0.0, -0.1]], [0.0, GAIN], [1.0, 0.0]),
        wd.IntegratorChain(2, gain=wd.uniform(1.0, 3.0)),
        wd.SecondOrder(gain=8.0, time_constant=2.0, damping=0.7),
        wd.TransferFunction([8.0], [4.0, 1.0, 1.0]),
    ):
        found = of_input(loop(plant, b0=b0).warnings())
        assert len(found) == (words is not None), (plant, found)
        if words is not None:
            assert words in found[0]
            assert "derivative 2 of the output" in found[0]


@pytest.mark.parametrize(
    ("plant", "order", "b0", "is_wrong"),
    [
        (wd.FirstOrder(gain=-2.0, time_constant=1.0), 1, -2.0, False),
        (wd.FirstOrder(gain=-2.0, time_constant=1.0), 1, 2.0, True),
        (wd.FirstOrder(gain=2.0, time_constant=1.0), 2, -2.0, True),  # an order more than the plant has
        (wd.FirstOrder(gain=2.0, time_constant=1.0), 2, 2000.0, False),
        # A zero in the right half plane: the first slope has the other sign than what the loop works with.
        (wd.TransferFunction([-0.1, 1.0], [1.0, 2.0, 1.0]), 1, 1.0, False),
        (wd.TransferFunction([-0.1, 1.0], [1.0, 2.0, 1.0]), 1, -0.1, False),
        (wd.DCDrive(2.0, 5e-3, 0.05, 3e-5), 2, 900.0, False),
        (wd.DCDrive(2.0, 5e-3, 0.05, 3e-5), 2, -900.0, True),
        (wd.DCDrive(2.0, 5e-3, 0.05, 3e-5, output="speed"), 1, -900.0, True),
        (wd.TwoMassDrive(4e-4, 6e-4, 150.0, 0.02, output="load_angle"), 2, 900.0, False),
        (wd.TwoMassDrive(4e-4, 6e-4, 150.0, 0.02, output="motor_speed"), 1, -2500.0, True),
    ],
)
def test_the_sign_is_judged_where_the_loop_works(plant: Any, order: int, b0: float, is_wrong: bool) -> None:
    assert bool(of_input(loop(plant, b0, order).warnings())) is is_wrong


@pytest.mark.parametrize(
    "rate",
    [
        "deadzone(force, 0.5)/mass",  # no gain at the start
        "force*abs(force)/mass",
        "0*force",
        "force/speed",  # no value at the start
        "sqrt(speed - 1)*force",
        "force*step(t - 5)",
        "round(force)",
    ],
)
def test_where_the_gain_is_not_known_nothing_is_said_of_b0(rate: str) -> None:
    assert input_gain(cart(rate)) is None
    assert of_input(loop(cart(rate), b0=-7.0).warnings()) == []


@pytest.mark.parametrize(
    "rate",
    [
        "gear*sin(0.3 + force)/mass + exp(speed)*tanh(position)",
        "clip(force, -3, 3)*sqrt(mass)*cos(drag) - log(gear)*speed**3",
        "max(force, -1)*atan2(mass, drag) + sinh(position)*abs(speed - 2) + min(force, drag)",
        "mod(force + 0.4, 0.3)*mass + floor(drag + force)",
        "(force + 0.1)**1.7*mass**drag - sign(speed)*asin(0.1*force)/acos(drag)",
    ],
)
def test_the_gain_is_the_slope_of_the_equations(rate: str) -> None:
    from windage._equation_reference import evaluate_reference

    plant = cart(rate)
    found = input_gain(plant)
    assert found is not None
    values = {"position": 0.0, "speed": 0.0, "mass": 4.0, "drag": 0.3, "gear": 8.0, "t": 0.0}
    moved = [evaluate_reference(plant._programs[0], {**values, "force": sign * 1e-5})[1] for sign in (1.0, -1.0)]
    assert found.order == 2
    assert found.value == pytest.approx(float(moved[0] - moved[1]) / 2e-5, rel=1e-6)


def test_the_linear_models_of_the_drives_are_those_of_the_engine() -> None:
    """The response of the output to a small step of the command, open loop: y = g u t^r / r! to first order."""
    for plant, order, value in (
        (wd.DCDrive(2.0, 5e-3, 0.05, 3e-5), 3, 0.05 / (3e-5 * 5e-3)),
        (wd.TwoMassDrive(4e-4, 6e-4, 150.0, 0.02, output="load_speed"), 2, 0.02 / (4e-4 * 6e-4)),
        (wd.TwoMassDrive(4e-4, 6e-4, 150.0, 0.0, output="load_angle"), 4, 150.0 / (4e-4 * 6e-4)),
    ):
        found = input_gain(plant)
        assert found is not None
        assert (found.order, found.value) == (order, pytest.approx(value, rel=1e-12))
        a, b, c = found.model
        assert found.at(3.0) == pytest.approx(float(c @ np.linalg.inv(3.0 * np.eye(len(a)) - a) @ b))

"""The nominal unit of a drawing: stated with any spread, used by `nominal()`, of no influence on trials."""

from __future__ import annotations

import copy
import pickle
from typing import Any

import numpy as np
import pytest

import windage as wd
from windage._study_file import from_toml, to_toml

SPREADS = {
    "normal": (wd.normal, (100.0, 5.0)),
    "uniform": (wd.uniform, (80.0, 120.0)),
    "triangular": (wd.triangular, (80.0, 90.0, 120.0)),
    "lognormal": (wd.lognormal, (100.0, 0.1)),
    "beta": (wd.beta, (2.0, 3.0, 80.0, 120.0)),
    "choice": (wd.choice, ([80.0, 120.0],)),
    "samples": (wd.samples, ([80.0, 85.0, 120.0],)),
    "column": (wd.column, ("mass",)),
}


def study(spread: Any) -> wd.Study:
    plant = wd.Plant(
        states={"v": 0.0}, equations={"v": "f/m"}, input="f", output="v", parameters={"m": spread, "spread": 2.0}
    )
    loop = wd.Loop(
        plant=plant,
        controller=wd.ErrorADRC(1, controller_bandwidth=1.0, observer_bandwidth=5.0, b0=0.01),
        sample_period=0.1,
        duration=0.3,
        reference=1.0,
        steps_per_sample=1,
    )
    return wd.Study(loop, [wd.peak("error") <= 2.0], table={"mass": [80.0, 90.0, 120.0]}, seed=4)


@pytest.mark.parametrize("kind", SPREADS)
def test_a_stated_nominal_value_is_that_of_the_nominal_unit_and_moves_no_trial(kind: str) -> None:
    maker, arguments = SPREADS[kind]
    plain, stated = study(maker(*arguments)), study(maker(*arguments, nominal=111.0))
    name = "mass" if kind == "column" else "m"
    assert stated.nominal().parameters == {} or stated.nominal().parameters[name] == 111.0
    assert stated.nominal()["v"][1] == pytest.approx(plain.nominal()["v"][1] * plain.parameters[name].nominal / 111.0)
    assert plain.digest == stated.digest
    assert plain != stated
    one, other = (s.run(40, progress=False) for s in (plain, stated))
    assert one.parameters[name].tobytes() == other.parameters[name].tobytes()
    assert all(np.array_equal(one.measures[key], other.measures[key]) for key in one.measures)


@pytest.mark.parametrize("kind", SPREADS)
def test_it_travels_by_repr_pickle_copy_study_file_and_change(kind: str) -> None:
    maker, arguments = SPREADS[kind]
    spread = maker(*arguments, nominal=111.0)
    calls = {maker.__name__: maker}
    assert eval(repr(spread), {"__builtins__": {}}, calls) == spread
    assert "nominal=111.0" in repr(spread)
    assert pickle.loads(pickle.dumps(spread)) == copy.deepcopy(spread) == spread
    assert spread != maker(*arguments)
    assert spread.with_(nominal=None) == maker(*arguments)
    assert maker(*arguments).with_(nominal=111.0) == spread
    again = from_toml(to_toml(study(spread)))
    assert again == study(spread)
    assert "nominal = 111.0" in to_toml(study(spread))
    assert next(iter(again.parameters.values())).nominal == 111.0


def test_a_shared_spread_has_the_nominal_value_of_what_is_shared() -> None:
    shared = wd.shared("mass", wd.uniform(80.0, 120.0, nominal=90.0))
    assert shared.nominal == 90.0
    assert from_toml(to_toml(study(shared))) == study(shared)


def test_without_one_the_distribution_suggests_it_after_a_change_too() -> None:
    assert wd.uniform(2.0, 3.0).with_(high=4.0).nominal == 3.0
    assert wd.uniform(2.0, 3.0, nominal=2.5).with_(high=4.0).nominal == 2.5
    assert "nominal" not in repr(wd.uniform(2.0, 3.0))


@pytest.mark.parametrize(
    ("call", "field"),
    [
        (lambda: wd.uniform(120.0, 260.0, nominal=300.0), "uniform.nominal"),
        (lambda: wd.uniform(120.0, 260.0, nominal="180"), "uniform.nominal"),
        (lambda: wd.uniform(120.0, 260.0, nominal=float("nan")), "uniform.nominal"),
        (lambda: wd.normal(1.0, 0.1, low=0.9, nominal=0.8), "normal.nominal"),
        (lambda: wd.lognormal(1.0, 0.1, nominal=0.0), "lognormal.nominal"),
        (lambda: wd.choice([1.0, 2.0], nominal=3.0), "choice.nominal"),
        (lambda: study(wd.column("mass", nominal=200.0)), "column.mass.nominal"),
        (lambda: wd.column("mass", nominal=True), "column.nominal"),
    ],
)
def test_a_nominal_value_outside_the_spread_is_refused(call: Any, field: str) -> None:
    with pytest.raises(wd.DescriptionError) as caught:
        call()
    assert caught.value.field == field


def test_a_study_file_says_where_a_nominal_value_is_wrong() -> None:
    text = to_toml(study(wd.uniform(80.0, 120.0, nominal=111.0))).replace("nominal = 111.0", "nominal = 411.0")
    with pytest.raises(wd.StudyFileError, match=r"loop\.plant\.parameters\.m\.nominal: found 411"):
        from_toml(text)


def test_parameters_called_spread_and_nominal_are_no_stated_value() -> None:
    def named(value: float) -> wd.Study:
        base = study(wd.uniform(80.0, 120.0))
        return base.with_(plant=base.loop.plant.with_(parameters={"m": 3.0, "spread": 2.0, "nominal": value}))

    assert named(1.0).digest != named(2.0).digest

"""Functions of time and noises that are added."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest

import windage as wd

PARTS: list[Any] = [
    wd.Step(1.0, at=0.305),
    wd.Sine(0.5, period=0.7, start=0.1),
    wd.Ramp(0.3, start=0.2, stop=0.6),
    wd.Table([0.1, 0.4, 0.9], [0.0, 1.0, -1.0]),
    wd.Quintic(0.4, start=0.1, duration=0.5),
    wd.JerkLimited(0.3, 0.05, 1.0, 10.0, 200.0),
    wd.Constant(0.25),
]


EQUATIONS = wd.Plant({"x": 0.0}, {"x": "u + w"}, "u", "x", ["w"])
EXACT = wd.StateSpace([[0.0]], [1.0], [1.0], e=[[1.0]])


def study(reference: Any = 0.0, load: Any = 0.0, plant: Any = EQUATIONS, **options: Any) -> wd.Study:
    """An integrator; the command is the second derivative of the reference and nothing else."""
    word = plant.disturbance_names[0]
    loop = wd.Loop(
        plant=plant,
        controller=wd.OutputADRC(
            order=2, controller_gains=[0.0, 0.0], observer_gains=[0.0] * 3, b0=1.0, cancel_disturbance=False
        ),
        sample_period=0.01,
        duration=1.0,
        reference=reference,
        disturbances={word: load},
        steps_per_sample=64,
        **options,
    )
    return wd.Study(loop, measures=[wd.final("output"), wd.peak(word)], seed=4)


def test_a_sum_and_its_derivatives_are_those_of_its_terms_added() -> None:
    together = study(reference=sum(PARTS), load=sum(PARTS)).replay(0)
    alone = [study(reference=part, load=part).replay(0) for part in PARTS]
    for name in ("reference", "w", "command"):
        added = alone[0][name]
        for replay in alone[1:]:
            added = added + replay[name]
        np.testing.assert_array_equal(together[name], added)


@pytest.mark.parametrize("delay", [0.0, 0.0037])
@pytest.mark.parametrize("plant", [EQUATIONS, EXACT], ids=["equations", "sampled exactly"])
def test_a_noise_may_be_added_to_a_function(plant: Any, delay: float) -> None:
    """The noise of a sum is the noise alone where its place bears the same name: each changes nothing of the other."""
    gust, white = wd.Gust(0.5, 0.2), wd.WhiteNoise(1e-3)
    options: Any = {"plant": plant, "actuator": wd.Actuator(delay=delay)}
    word = plant.disturbance_names[0]
    both = study(load=wd.Step(2.0, at=0.305) + gust + white, **options)
    noises = study(load=wd.Constant(0.0) + gust + white, **options)
    step = study(load=wd.Step(2.0, at=0.305), **options)
    for trial in range(3):
        sums = noises.replay(trial)[word] + step.replay(trial)[word]
        np.testing.assert_allclose(both.replay(trial)[word], sums, rtol=0, atol=1e-14)
        # x' = w: exact for the step between samples and for the noise held from sample to sample.
        np.testing.assert_allclose(
            both.replay(trial)["output"],
            noises.replay(trial)["output"] + step.replay(trial)["output"],
            rtol=0,
            atol=1e-12,
        )
        assert step.replay(trial)["output"][-1] == pytest.approx(2.0 * (1.0 - 0.305), abs=1e-12)
    noise = noises.replay(0)[word]
    assert np.std(noise) > 0.1
    assert not np.array_equal(noise, noises.replay(1)[word])


def test_a_sum_of_sines_and_tables_is_exact_on_linear_plants() -> None:
    """Each term moves in its own way between the samples; against equations at 64 steps a sample."""
    load = sum(PARTS) + wd.Sine(0.3, period=0.045) + wd.Gust(0.5, 0.2)
    linear = wd.StateSpace([[0.0, 1.0], [-400.0, -8.0]], [0.0, 1.0], [1.0, 0.0], e=[[0.0], [400.0]])
    equations = wd.Plant(["x", "v"], {"x": "v", "v": "-400*x - 8*v + u + 400*load"}, "u", "x", ["load"])
    found, expected = (
        study(load=load, plant=plant, sensor=wd.Sensor(delay=0.0237)).replay(0) for plant in (linear, equations)
    )
    assert np.max(np.abs(expected["output"])) > 0.5
    for name in ("output", "measured"):
        np.testing.assert_allclose(found[name], expected[name], rtol=0, atol=1e-10)


def test_holding_sums_hold() -> None:
    replay = study(load=wd.Step(1.0, at=0.2) + wd.Step(-1.0, at=0.5) + wd.Constant(3.0)).replay(0)
    expected = 3.0 + (replay.time > 0.199) - (replay.time > 0.499)
    np.testing.assert_array_equal(replay["w"], expected)


def test_sums_are_flat_equal_and_shown_as_they_are_written(tmp_path: Path) -> None:
    first, second, third = wd.Step(1.0), wd.Sine(wd.uniform(0.1, 0.2), period=2.0), wd.Gust(0.1, 0.5)
    whole = first + second + third + 2
    assert whole == first + (second + third) + 2 == wd.Sum([first, wd.Sum([second, third]), wd.Constant(2.0)])
    assert repr(whole) == f"{first!r} + {second!r} + {third!r} + Constant(value=2.0)"
    assert eval(repr(whole), dict(vars(wd))) == whole
    assert sum([first, second]) == first + second != second + first
    assert 2 + first == wd.Constant(2.0) + first
    made = study(reference=first + second, load=whole)
    wd.save(made, tmp_path / "sum.toml")
    assert wd.load(tmp_path / "sum.toml") == made
    assert "[[loop.disturbances.w.terms]]" in (tmp_path / "sum.toml").read_text()
    assert [*made.parameters] == ["reference.terms[1].amplitude", "disturbances.w.terms[1].amplitude"]


@pytest.mark.parametrize(
    ("make", "message"),
    [
        (lambda: wd.Sum([]), r"Sum\.terms: found '0 terms'; expected 1 to 100 terms"),
        (lambda: wd.Sum([wd.Step(1.0)] * 101), r"Sum\.terms: found '101 terms'"),
        (lambda: wd.Sum([wd.Step(1.0), "gust"]), r"Sum\.terms\[1\]: found 'gust'; expected a function of time"),
        (lambda: wd.Sum(wd.Step(1.0)), r"Sum\.terms: found Step"),
        (lambda: study(reference=wd.Step(1.0) + wd.Gust(1.0, 1.0)), r"loop\.reference: .* can be a disturbance"),
        (lambda: study(reference=wd.Sum([wd.WhiteNoise(1.0)])), r"loop\.reference: .* can be a disturbance"),
    ],
)
def test_mistakes_in_sums_are_explained(make: Any, message: str) -> None:
    with pytest.raises(wd.DescriptionError, match=message):
        make()


def test_a_wrong_term_of_a_file_is_named(tmp_path: Path) -> None:
    wd.save(study(load=wd.Step(1.0) + wd.Sine(1.0, period=2.0)), tmp_path / "sum.toml")
    text = (tmp_path / "sum.toml").read_text()
    for old, new, message in (
        ("period = 2.0", "period = -2.0", r"loop\.disturbances\.w\.terms\[1\]\.period"),
        ('kind = "Sine"', 'kind = "Sin"', r"loop\.disturbances\.w\.terms\[1\]\.kind"),
    ):
        (tmp_path / "wrong.toml").write_text(text.replace(old, new))
        with pytest.raises(wd.StudyFileError, match=message):
            wd.load(tmp_path / "wrong.toml")

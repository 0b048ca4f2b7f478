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


def study(reference: Any = 0.0, load: Any = 0.0, **options: Any) -> wd.Study:
    """A chain of two; the command is the second derivative of the reference and nothing else."""
    loop = wd.Loop(
        plant=wd.Plant({"x": 0.0}, {"x": "u + w"}, "u", "x", ["w"]),
        controller=wd.OutputADRC(
            order=2, controller_gains=[0.0, 0.0], observer_gains=[0.0] * 3, b0=1.0, cancel_disturbance=False
        ),
        sample_period=0.01,
        duration=1.0,
        reference=reference,
        disturbances={"w": load},
        steps_per_sample=1,
        **options,
    )
    return wd.Study(loop, measures=[wd.final("x"), wd.peak("w")], seed=4)


def test_a_sum_and_its_derivatives_are_those_of_its_terms_added() -> None:
    together = study(reference=sum(PARTS), load=sum(PARTS)).replay(0)
    alone = [study(reference=part, load=part).replay(0) for part in PARTS]
    for name in ("reference", "w", "command"):
        added = alone[0][name]
        for replay in alone[1:]:
            added = added + replay[name]
        np.testing.assert_array_equal(together[name], added)


@pytest.mark.parametrize("delay", [0.0, 0.0037])
def test_a_noise_may_be_added_to_a_function(delay: float) -> None:
    """The noise of a sum is the noise alone where its place bears the same name: each changes nothing of the other."""
    gust, white = wd.Gust(0.5, 0.2), wd.WhiteNoise(1e-3)
    actuator = wd.Actuator(delay=delay)
    both = study(load=wd.Step(2.0, at=0.305) + gust + white, actuator=actuator)
    noises = study(load=wd.Constant(0.0) + gust + white, actuator=actuator)
    step = study(load=wd.Step(2.0, at=0.305), actuator=actuator)
    for trial in range(3):
        sums = noises.replay(trial)["w"] + step.replay(trial)["w"]
        np.testing.assert_allclose(both.replay(trial)["w"], sums, rtol=0, atol=1e-14)
        # x' = w: exact for the step between samples and for the noise held from sample to sample.
        np.testing.assert_allclose(
            both.replay(trial)["x"], noises.replay(trial)["x"] + step.replay(trial)["x"], rtol=0, atol=1e-13
        )
        assert step.replay(trial)["x"][-1] == pytest.approx(2.0 * (1.0 - 0.305), abs=1e-13)
    noise = noises.replay(0)["w"]
    assert np.std(noise) > 0.1
    assert not np.array_equal(noise, noises.replay(1)["w"])


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

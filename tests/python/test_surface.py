"""The Python block of the README's section "The surface" runs as it stands and keeps its shape."""

from __future__ import annotations

import re
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow as pa
import pytest

import windage as wd
from windage._demo import demo_study
from windage._plot_style import StudyFigure

TRIALS = 20_000
README = Path(__file__).resolve().parents[2] / "README.md"
NUMBER = re.compile(r"(?<![\w.])\d[\d_]*(?:\.\d+)?(?:e-?\d+)?")

#: What the surface promises: these lines, with other numbers at most.
PROMISED = """
import windage as wd

dish = wd.Plant(                                    # azimuth drive of a dish antenna in gusting wind
    states={"azimuth": 0.0, "rate": 0.0},
    equations={
        "azimuth": "rate",
        "rate": "(gear*torque - drag*rate - coulomb*tanh(rate/0.002) + wind) / inertia",
    },
    input="torque", output="azimuth", disturbances=["wind"],
    parameters={
        "inertia": wd.normal(4200.0, 250.0),        # kg m^2
        "gear": wd.tolerance(310.0, percent=4),
        "drag": wd.uniform(150.0, 600.0),
        "coulomb": wd.triangular(20.0, 60.0, 140.0),
    },
)
loop = wd.Loop(
    plant=dish,
    controller=wd.ErrorADRC(order=2, controller_bandwidth=5.0, observer_bandwidth=30.0, b0=310 / 4200),
    sample_period=2e-3, duration=20.0,
    reference=wd.Sine(amplitude=0.05, period=25.0),
    sensor=wd.Sensor(noise=2e-5, resolution=1e-5),
    actuator=wd.Actuator(limits=(-60.0, 60.0), delay=wd.uniform(0.5e-3, 5e-3)),
    disturbances={"wind": wd.Gust(intensity=wd.uniform(100.0, 400.0), correlation_time=1.5)},
)
study = wd.Study(
    loop,
    requirements=[wd.peak("error", after=5.0) <= 5e-3, wd.rms("torque") <= 12.0],
    seed=2026,
)
outcome = study.run(trials=20_000)                  # progress bar; every core; Ctrl-C keeps what is done
print(outcome.verdict(at_least=0.95, confidence=0.95))   # pass / fail / inconclusive, with the exact bound
trial = outcome.failures[0]                         # index of a failing trial
replay = study.replay(trial)                        # the same trial, every signal, the same digits
replay.time, replay["error"]                        # NumPy arrays, one value a sample instant
outcome.slack                                       # array (trials, requirements), >= 0 where met
outcome.table()                                     # Arrow table
replay.plot(); outcome.plot()
wd.save(study, "dish.toml"); study = wd.load("dish.toml")
"""


def surface(language: str = "python") -> str:
    """The code of the section, or what it prints."""
    section = README.read_text(encoding="utf-8").split("## The surface", 1)[1].split("\n## ", 1)[0]
    (block,) = re.findall(rf"```{language}\n(.*?)```", section, flags=re.DOTALL)
    return str(block)


def shape(code: str) -> list[str]:
    """The lines without numbers and comments; blanks carry no meaning."""
    bare = [re.sub(r"\s+", " ", NUMBER.sub("#", line.split("  #")[0])).strip() for line in code.splitlines()]
    return [line for line in bare if line]


@pytest.fixture(scope="module")
def names(tmp_path_factory: pytest.TempPathFactory) -> dict[str, Any]:
    """What the block defines, run in an empty folder."""
    found: dict[str, Any] = {}
    with pytest.MonkeyPatch.context() as patch:
        patch.chdir(tmp_path_factory.mktemp("surface"))
        exec(compile(surface(), "README.md", "exec"), found)
        found["saved"] = Path("dish.toml").read_text(encoding="utf-8")
    return found


def test_the_lines_are_the_promised_ones() -> None:
    assert shape(surface()) == shape(PROMISED)


def test_it_is_the_study_of_the_demo(names: dict[str, Any]) -> None:
    assert names["study"] == demo_study()
    assert names["outcome"].trials == TRIALS


def test_the_verdict_is_a_pass_with_failures_to_look_at(names: dict[str, Any]) -> None:
    outcome = names["outcome"]
    assert outcome.verdict(at_least=0.95, confidence=0.95).decision == "pass"
    assert 0.015 < len(outcome.failures) / outcome.trials < 0.045
    assert not outcome.interrupted


def test_the_readme_shows_what_is_printed(names: dict[str, Any]) -> None:
    verdict = names["outcome"].verdict(at_least=0.95, confidence=0.95)
    assert str(verdict).startswith(surface("text"))
    assert names["study"].nominal().passed
    assert names["outcome"].verdict(at_least=0.99, confidence=0.95).decision == "fail"


def test_the_replay_has_the_digits_of_the_run(names: dict[str, Any]) -> None:
    outcome, replay, trial = names["outcome"], names["replay"], names["trial"]
    assert not replay.passed
    for name, values in outcome.parameters.items():
        assert replay.parameters[name] == values[trial]
    for name, values in outcome.measures.items():
        assert replay.measures[name] == values[trial]
    np.testing.assert_array_equal(replay.slack, outcome.slack[trial])
    # The measure, computed once more from the signal.
    late = replay.time >= 5.0
    assert np.abs(replay["error"][late]).max() == outcome.measures["peak of error after 5 s"][trial]


def test_arrays_and_table_have_the_promised_shapes(names: dict[str, Any]) -> None:
    outcome, replay = names["outcome"], names["replay"]
    assert outcome.slack.shape == (TRIALS, 2)
    assert replay.time.shape == replay["error"].shape == (10_001,)
    np.testing.assert_array_equal(outcome.passed, (outcome.slack >= 0.0).all(axis=1))
    table = outcome.table()
    assert isinstance(table, pa.Table)
    assert table.num_rows == TRIALS
    for name in ("trial", *outcome.parameters, *outcome.measures, "status"):
        assert name in table.column_names
    for label in outcome.requirements:
        assert f"slack of {label}" in table.column_names


def test_plots_and_study_file(names: dict[str, Any]) -> None:
    assert isinstance(names["replay"].plot(), StudyFigure)
    assert isinstance(names["outcome"].plot(), StudyFigure)
    assert "equations" in names["saved"]
    assert isinstance(names["study"], wd.Study)
    assert names["study"].digest == names["outcome"].study.digest


# --- the guides name what exists
# ------------------------------------------------------------------------------------------------


def guide(name: str) -> str:
    return README.with_name(name).read_text(encoding="utf-8")


def test_names_in_the_readme_exist() -> None:
    text = guide("README.md")
    for name in set(re.findall(r"\bwd\.([a-zA-Z_]+)", text)):
        assert hasattr(wd, name), name
    parts = text.split("## What each part means", 1)[1].split("\nA signal is", 1)[0]
    for name in re.findall(r"`([A-Z]\w+|[a-z]\w+)`", parts.split("| loop |", 1)[0]):
        known = [wd, wd.ErrorADRC(1, b0=1.0, controller_bandwidth=1.0, observer_bandwidth=3.0)]
        assert any(hasattr(owner, name) for owner in known), name
    for owner in (wd.Study, wd.Outcome):
        row = parts.split(f"`{owner.__name__}`: ", 1)[1].split(" |", 1)[0]
        names = re.findall(r"`(\w+)`", row)
        assert len(names) > 5
        for name in names:
            assert name in dir(owner), name


def test_every_public_name_is_in_the_readme() -> None:
    text = guide("README.md")
    results = {"Tally"}
    for name in set(wd.__all__) - results:
        assert re.search(rf"\b{name}\b", text), name


@pytest.mark.parametrize("name", ["README.md", "DEVELOPERS.md"])
def test_files_named_in_the_guides_exist(name: str) -> None:
    root = README.parent
    paths = re.findall(r"`((?:cpp|python|tests|benchmarks|notebooks-examples|\.ci)/[\w./*-]*)`", guide(name))
    assert paths
    for path in paths:
        assert list(root.glob(path.rstrip("/"))), path


def test_trial_counts_in_the_readme_are_those_of_the_package() -> None:
    rows = re.findall(r"\| ([\d.]+) % \| ([\d.]+) % \| ([\d ]+) \| ([\d ]+) \|", guide("README.md"))
    assert len(rows) == 5
    for at_least, confidence, none, two in rows:
        claim = (float(at_least) / 100.0, float(confidence) / 100.0)
        assert wd.trials_needed(*claim) == int(none.replace(" ", ""))
        assert wd.trials_needed(*claim, 2) == int(two.replace(" ", ""))

"""Study files: what is written reads back as the same study, and malformed files are explained."""

from __future__ import annotations

import inspect
import math
import tomllib
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import windage as wd
from windage._study_file import LARGEST_FILE, from_toml, to_toml
from windage._study_text import CONTROLLERS, DISTURBANCES, MEASURES, PLANTS, SPREADS
from windage._toml_text import toml_text

SPREAD = wd.normal(1.0, 0.1, low=0.5, high=2.0)
MASS = wd.shared("mass", wd.triangular(1.0, 2.0, 4.0))

EVERY_SPREAD = {
    "normal": wd.normal(5.0, 0.1),
    "truncated": wd.normal(5.0, 0.1, sigmas=3, name="cut"),
    "uniform": wd.uniform(1.0, 2.0),
    "triangular": wd.triangular(1.0, 1.25, 2.0),
    "lognormal": wd.lognormal(1.0, 0.1),
    "beta": wd.beta(2.0, 3.0, low=1.0, high=2.0),
    "tolerance": wd.tolerance(-3.0, 5.0, shape="normal"),
    "choice": wd.choice([1, 2.5], [0.25, 0.75]),
    "samples": wd.samples([1.0, 1.5, 1.25]),
    "shared": MASS,
    "column": wd.column("rows"),
    "spread": 1.0,
}
EVERY_PLANT = [
    wd.Plant(
        states={"x": wd.uniform(0.0, 1.0), "spread": 0.0},
        equations={
            "x": "u + " + " + ".join(EVERY_SPREAD.keys() - {"spread"}),
            "spread": "gust + aux + scale",
        },
        input="u",
        output="x",
        disturbances=["gust"],
        parameters={("scale" if name == "spread" else name): value for name, value in EVERY_SPREAD.items()},
        auxiliaries={"aux": "x if x < 1\n else 0.5*x", "unused": "pi"},
    ),
    wd.IntegratorChain(2, gain=SPREAD, initial=[1.0, SPREAD]),
    wd.IntegratorChain(1, gain=2.0, initial=0.5),
    wd.FirstOrder(2.0, SPREAD, dead_time=wd.uniform(0.0, 0.01)),
    wd.SecondOrder(2.0, 0.5, damping=SPREAD, initial=[0.0, 1.0]),
    wd.TransferFunction([1.0, SPREAD], [1.0, 2.0, 3.0]),
    wd.StateSpace([[0.0, 1.0], [-1.0, SPREAD]], [0.0, 1.0], [1.0, 0.0], e=[[0.0, 1.0], [1.0, 0.0]], initial=[1, 2]),
    wd.DCDrive(0.5, 1e-3, 0.05, 1e-4, coulomb_friction=SPREAD, output="speed"),
    wd.TwoMassDrive(0.01, 0.04, 300.0, 0.1, breakaway_friction=SPREAD, output="load_angle"),
]
EVERY_DISTURBANCE = [
    wd.Constant(1.0),
    wd.Step(SPREAD, at=wd.uniform(0.0, 1.0), initial=0.5),
    wd.Ramp(0.5, start=0.1, stop=0.7),
    wd.Ramp(0.5),
    wd.Sine(1.0, period=SPREAD, phase=0.1, offset=0.2, start=0.3),
    wd.Pulse(1.0, start=0.1, width=SPREAD),
    wd.Quintic(1.0, start=0.1, duration=0.5, initial=0.1),
    wd.JerkLimited(1.0, start=0.1, speed=2.0, acceleration=3.0, jerk=4.0),
    wd.Table([0.0, 0.5, SPREAD], [1.0, wd.uniform(0.0, 1.0), 2.0], interpolation="hold"),
    wd.Gust(SPREAD, correlation_time=0.5),
    wd.WhiteNoise(0.01),
    wd.Step(SPREAD) + wd.Sine(1.0, period=SPREAD) + wd.Gust(SPREAD, correlation_time=0.5) + 2.0,
]
EVERY_MEASURE = [
    *(make("error", after=0.1, before=0.9) for make in (wd.peak, wd.minimum, wd.maximum, wd.mean, wd.rms)),
    *(make("output") for make in (wd.standard_deviation, wd.final, wd.integral_absolute, wd.integral_square)),
    *(make("command") for make in (wd.integral_time_absolute, wd.total_variation, wd.rms_change)),
    wd.time_outside("output", -1.0, SPREAD),
    wd.overshoot(),
    wd.undershoot("measured", after=wd.uniform(0.1, 0.2)),
    wd.rise_time(low=0.2, high=0.8),
    wd.settling_time(),
    wd.settling_time(band=0.1, before=0.5),
    wd.settling_time(tolerance=SPREAD),
    wd.time_in_saturation(after=0.2),
    wd.ise(),
    wd.iae(after=0.5),
    wd.itae(),
    wd.peak_to_peak("command", after=0.1),
    wd.reversals("measured"),
    wd.time_of_peak("error", before=0.9),
    (wd.reversals("output", dead_band=SPREAD) - wd.peak("error", after=wd.uniform(0.1, 0.2))) / wd.time_in_saturation(),
    wd.peak("error", before=0.5) - wd.peak("error", after=0.5),
]
CONTROLLER = wd.OutputADRC(
    2,
    b0=wd.uniform(1.0, 2.0),
    controller_gains=[SPREAD, 2.0],
    observer_bandwidth=20.0,
    controller_gain_factor=0.5,
    discretisation="euler",
    observer_input="commanded",
    observer_start="measured",
    reference_derivatives=1,
    cancel_disturbance=False,
)


def study_of(plant: Any = EVERY_PLANT[1], disturbance: Any = 0.0, **options: Any) -> wd.Study:
    loop = wd.Loop(
        plant=plant,
        controller=options.pop("controller", wd.ErrorADRC(2, b0=2.0, controller_bandwidth=3.0, observer_bandwidth=9.0)),
        sample_period=options.pop("sample_period", 0.01),
        duration=1.0,
        reference=options.pop("reference", 1.0),
        disturbances=dict.fromkeys(plant.disturbance_names, disturbance),
        actuator=options.pop("actuator", wd.Actuator(limits=(-5.0, 5.0))),
        **{key: options.pop(key) for key in ("sensor", "integrator", "steps_per_sample", "signals") if key in options},
    )
    return wd.Study(loop, **{"requirements": [wd.peak("error") <= 1.0], **options})


EVERY_STUDY = [
    *(study_of(plant, table={"rows": [1.0, 2.0]}) for plant in EVERY_PLANT),
    *(study_of(disturbance=disturbance) for disturbance in EVERY_DISTURBANCE),
    study_of(measures=EVERY_MEASURE, requirements=[], seed=2**64 - 1),
    study_of(requirements=[m <= 1.0 for m in EVERY_MEASURE]),
    study_of(requirements=[(wd.peak("error") >= SPREAD).named('a "quoted" \\ name, größer')]),
    study_of(signals={"power": "error *\r\n\tcommand"}),
    study_of(
        controller=CONTROLLER,
        sample_period=wd.uniform(0.01, 0.02),
        reference=wd.Sine(1.0, 2.0),
        sensor=wd.Sensor(
            gain=1.1, bias=SPREAD, noise=0.1, filter_frequency=20.0, resolution=0.01, range=(-9, 9), delay=SPREAD
        ),
        actuator=wd.Actuator(
            (-1.0, SPREAD), rate_limit=9.0, resolution=0.1, delay=SPREAD, time_constant=1, initial=0.1
        ),
        integrator="cash_karp5",
        steps_per_sample=7,
        signals={"power": "error*command", "spread": "2*power"},
    ),
    study_of(
        EVERY_PLANT[0],
        table={"rows": [1.0, 2.0, 3.0]},
        correlations={("plant.uniform", "plant.beta"): 0.5, ("mass", "plant.uniform"): -0.25},
    ),
]


@pytest.mark.parametrize("study", EVERY_STUDY, ids=range(len(EVERY_STUDY)))
def test_round_trip(study: wd.Study, tmp_path: Path) -> None:
    path = tmp_path / "study.toml"
    wd.save(study, path)
    other = wd.load(path)
    assert other == study
    assert other.digest == study.digest
    assert other.loop == study.loop
    assert other.requirements == study.requirements
    assert to_toml(other) == path.read_text(encoding="utf-8")
    assert [p.name for p in tmp_path.iterdir()] == ["study.toml"]


def test_every_part_has_its_place_in_a_file() -> None:
    assert {type(plant).__name__ for plant in EVERY_PLANT} == set(PLANTS)
    assert {type(disturbance).__name__ for disturbance in EVERY_DISTURBANCE} == set(DISTURBANCES)
    assert {measure.kind for measure in EVERY_MEASURE} == set(MEASURES)
    spreads = {value._kind for value in EVERY_SPREAD.values() if not isinstance(value, float)}
    assert spreads == {*SPREADS, "shared", "column"}
    assert set(CONTROLLERS) == {"OutputADRC", "ErrorADRC"}
    for makers in (PLANTS, DISTURBANCES, MEASURES, SPREADS, CONTROLLERS):
        assert all(getattr(wd, name) is maker for name, maker in makers.items())


def test_file_reads_like_the_arguments() -> None:
    text = to_toml(study_of(wd.FirstOrder(2.0, wd.uniform(0.5, 1.0)), wd.Step(1.0, at=0.5), seed=7))
    assert (
        text
        == inspect.cleandoc(
            """
        windage_study = 1
        seed = 7

        [loop]
        sample_period = 0.01
        duration = 1.0

        [loop.plant]
        kind = "FirstOrder"
        gain = 2.0
        time_constant = { spread = "uniform", low = 0.5, high = 1.0 }

        [loop.controller]
        kind = "ErrorADRC"
        order = 2
        b0 = 2.0
        controller_bandwidth = 3.0
        observer_bandwidth = 9.0

        [loop.reference]
        kind = "Constant"
        value = 1.0

        [loop.actuator]
        limits = [-5.0, 5.0]

        [loop.disturbances.load]
        kind = "Step"
        amplitude = 1.0
        at = 0.5

        [[requirements]]
        measure = "peak"
        signal = "error"
        at_most = 1.0
        """
        )
        + "\n"
    )


def test_hand_written_file_may_use_any_toml_layout() -> None:
    text = """
    requirements = [{measure = "peak", signal = "error", at_most = 1}]
    windage_study = 1
    loop.sample_period = 0.01
    loop.duration = 1
    loop.reference = 1
    loop.plant = {kind = "FirstOrder", gain = 2, time_constant = {spread = "uniform", low = 0.5, high = 1}}
    loop.controller.kind = "ErrorADRC"
    loop.controller.order = 2
    loop.controller.b0 = 2
    loop.controller.observer_bandwidth = 9
    loop.controller.controller_bandwidth = 3
    loop.disturbances.load = {kind = "Step", amplitude = 1, at = 0.5}
    loop.actuator.limits = [-5, 5]
    """
    assert from_toml(text) == study_of(wd.FirstOrder(2.0, wd.uniform(0.5, 1.0)), wd.Step(1.0, at=0.5))


def test_interrupted_save_leaves_the_old_file(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = tmp_path / "study.toml"
    wd.save(EVERY_STUDY[1], path)
    before = path.read_bytes()

    def fail(*_: Any) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr(Path, "replace", fail)
    with pytest.raises(KeyboardInterrupt):
        wd.save(EVERY_STUDY[2], path)
    assert path.read_bytes() == before
    assert [p.name for p in tmp_path.iterdir()] == ["study.toml"]


def test_too_large_a_study_is_not_written(tmp_path: Path) -> None:
    study = EVERY_STUDY[0].with_(table={"rows": [0.1] * 1_100_000})
    with pytest.raises(wd.DescriptionError, match=f"at most {LARGEST_FILE} bytes"):
        wd.save(study, tmp_path / "study.toml")
    assert list(tmp_path.iterdir()) == []


plain = st.one_of(st.booleans(), st.integers(-(2**63), 2**63 - 1), st.text())
finite = st.floats(allow_nan=False, allow_infinity=False)
keys = st.text(min_size=0, max_size=12)
data = st.dictionaries(
    keys,
    st.recursive(
        st.one_of(plain, finite),
        lambda inner: st.one_of(st.lists(inner, max_size=4), st.dictionaries(keys, inner, max_size=4)),
        max_leaves=12,
    ),
    max_size=5,
)


@settings(max_examples=300, deadline=None)
@given(data)
def test_any_data_survives_as_toml(content: dict[str, Any]) -> None:
    assert tomllib.loads(toml_text(content)) == content


@pytest.mark.parametrize("value", [math.inf, -math.inf, math.nan])
def test_numbers_that_are_not_finite_are_never_written(value: float) -> None:
    with pytest.raises(ValueError, match="no place in a study file"):
        toml_text({"x": value})


@settings(max_examples=200, deadline=None)
@given(st.text(max_size=60), st.integers(0, 10_000))
def test_any_damage_gives_a_study_or_an_error(noise: str, place: int) -> None:
    text = to_toml(EVERY_STUDY[1])
    place %= len(text)
    try:
        study = from_toml(text[:place] + noise + text[place + len(noise) :])
    except wd.StudyFileError:
        return
    assert isinstance(study, wd.Study)

"""Peak to peak, reversals and time of the peak against NumPy; differences and ratios of measures."""

from __future__ import annotations

import functools
import math
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest

import windage as wd
from windage._loader import engine

PERIOD = 0.01
Values = np.ndarray


def turns(x: Values, dead_band: float) -> int:
    """Count turns in words: follow the extreme of the present direction until the signal leaves it."""
    count, direction, extreme = 0, 0, x[0]
    for k, value in enumerate(x):
        if direction == 0:
            past = x[: k + 1]
            if value - past.min() > dead_band or past.max() - value > dead_band:
                direction, extreme = (1 if value - past.min() > dead_band else -1), value
        elif direction * (extreme - value) > dead_band:
            count, direction, extreme = count + 1, -direction, value
        else:
            extreme = max(extreme, value) if direction > 0 else min(extreme, value)
    return count


def changes_of_sign(x: Values) -> int:
    """Turns without a dead band: changes of sign between the steps that are not zero."""
    steps = np.sign(np.diff(x))
    steps = steps[steps != 0.0]
    return int(np.sum(steps[1:] != steps[:-1]))


FORMULAS: dict[str, Callable[[Values, Values], float]] = {
    "peak_to_peak": lambda x, t: np.ptp(x),  # noqa: ARG005
    "reversals": lambda x, t: turns(x, 0.3),  # noqa: ARG005
    "time_of_peak": lambda x, t: t[np.argmax(np.abs(x))],
}
WINDOWS = [(0.0, math.inf), (1.0, math.inf), (0.0, 2.5), (1.23, 3.21), (0.005, 0.034), (2.004, 2.014)]


def measured(kind: str, x: Values, **options: Any) -> float:
    time = PERIOD * np.arange(len(x))
    value: float = engine().evaluate_measure({"kind": kind, **options}, time, x, 0.0, PERIOD)
    return value


@pytest.mark.parametrize(("after", "before"), WINDOWS)
@pytest.mark.parametrize("kind", FORMULAS)
def test_shape_measure_equals_its_numpy_formula(kind: str, after: float, before: float) -> None:
    rng = np.random.default_rng(11)
    time = PERIOD * np.arange(400)
    for offset in (0.0, -20.0):
        x = offset + np.clip(0.5 * rng.normal(size=400), -0.8, 0.5)  # with flat parts
        inside = (time >= after - 1e-9) & (time <= before + 1e-9)
        expected = FORMULAS[kind](x[inside], time[inside] - after)
        assert measured(kind, x, after=after, before=before, a=0.3) == pytest.approx(expected, abs=1e-12)


@pytest.mark.parametrize("seed", range(20))
def test_reversals_without_a_dead_band_are_changes_of_sign(seed: int) -> None:
    rng = np.random.default_rng(seed)
    x = np.round(np.cumsum(rng.normal(size=300)), 0 if seed % 2 else 6)
    assert measured("reversals", x) == changes_of_sign(x) == turns(x, 0.0) > 0
    for dead_band in (0.5, 1.0, 3.0):
        assert measured("reversals", x, a=dead_band) == turns(x, dead_band)


def test_noise_within_the_dead_band_is_no_reversal() -> None:
    """A sine of 5 periods has 10 extremes; noise of +-0.02 adds dozens of turns, but none above 0.05."""
    time = PERIOD * np.arange(500)
    x = np.sin(2.0 * np.pi * time) + np.random.default_rng(2).uniform(-0.02, 0.02, 500)
    assert measured("reversals", x, a=0.05) == 10.0
    assert measured("reversals", x) > 40.0


@pytest.mark.parametrize("kind", FORMULAS)
def test_a_window_of_one_sample_and_of_none(kind: str) -> None:
    x = np.linspace(-1.0, 2.0, 100)
    assert measured(kind, x, after=0.5, before=0.503) == 0.0
    assert math.isnan(measured(kind, x, after=0.503, before=0.507))


@pytest.mark.parametrize("kind", FORMULAS)
@pytest.mark.parametrize("where", [0, 50, 99])
@pytest.mark.parametrize("value", [math.nan, math.inf])
def test_a_sample_that_is_no_number_leaves_the_measure_undefined(kind: str, where: int, value: float) -> None:
    x = np.sin(np.arange(100.0))
    x[where] = value
    assert math.isnan(measured(kind, x))


@functools.cache
def loop() -> wd.Loop:
    return wd.Loop(
        plant=wd.SecondOrder(gain=wd.uniform(1.5, 2.5), time_constant=0.2, damping=0.2),
        controller=wd.OutputADRC(2, b0=40.0, controller_bandwidth=8.0, observer_bandwidth=30.0),
        sample_period=PERIOD,
        duration=2.0,
        reference=wd.Step(1.0, at=0.1),
        sensor=wd.Sensor(noise=1e-2),
        disturbances={"load": wd.Pulse(0.2, 1.0, 0.3)},
    )


@pytest.mark.parametrize("after", [0.25, wd.uniform(0.0, 1.0)], ids=["one window", "drawn windows"])
def test_shape_measures_of_a_study_are_those_of_the_replayed_signals(after: Any) -> None:
    start = wd.shared("start", after) if isinstance(after, wd.uniform(0.0, 1.0).__class__) else after
    measures = [
        wd.peak_to_peak("command", after=start),
        wd.reversals("measured", dead_band=0.01, after=start),
        wd.time_of_peak("command", after=start),
    ]
    study = wd.Study(loop(), measures=measures, seed=5)
    outcome = study.run(20, progress=False)
    for trial in (0, 7, 19):
        replay = study.replay(trial)
        begin = replay.parameters.get("start", after)
        inside = replay.time >= begin - 1e-6 * PERIOD
        command, t = replay["command"][inside], replay.time[inside] - begin
        expected = [np.ptp(command), turns(replay["measured"][inside], 0.01), t[np.argmax(np.abs(command))]]
        found = [values[trial] for values in outcome.measures.values()]
        assert found == list(replay.measures.values())
        assert found == expected


early_peak, late_peak = wd.peak("error", before=1.0), wd.peak("error", after=1.0)


def test_differences_and_ratios_are_those_of_the_two_measures() -> None:
    nested = (early_peak - late_peak) / wd.rms("error")
    requirements = [early_peak - late_peak <= 0.96, early_peak / late_peak >= wd.uniform(20.0, 40.0)]
    study = wd.Study(loop(), requirements, measures=[nested, early_peak, late_peak, wd.rms("error")])
    outcome = study.run(100, progress=False)
    apart, over, both, early, late, rms = outcome.measures.values()
    np.testing.assert_array_equal(apart, early - late)
    np.testing.assert_array_equal(over, early / late)
    np.testing.assert_array_equal(both, (early - late) / rms)
    limit = outcome.parameters["requirements[1].limit"]
    np.testing.assert_array_equal(outcome.slack, np.column_stack([0.96 - apart, over - limit]))
    assert 0 < len(outcome.failures) < 100
    assert "slack of peak of error before 1 s - peak of error after 1 s <= 0.96" in outcome.table().column_names
    assert study.replay(3).measures["peak of error before 1 s / peak of error after 1 s"] == over[3]


def test_zeros_have_no_sign_and_no_ratio_to_each_other() -> None:
    """0 / 0 is undefined and fails either way; x / 0 is infinite with the sign of x, also over a negative zero."""

    def ratio(first: dict[str, Any], second: dict[str, Any], x: Values) -> float:
        return measured("ratio", x, operands=[first, second])

    zero, falling, rising = np.zeros(10), np.linspace(0.0, -3.0, 10), np.linspace(0.0, 3.0, 10)
    rising[0] = -0.0
    peak, mean, least = ({"kind": kind, "before": 0.0} for kind in ("peak", "mean", "minimum"))
    assert math.isnan(ratio(peak, mean, zero))
    assert ratio({"kind": "peak"}, least, rising) == math.inf
    assert ratio({"kind": "minimum"}, {"kind": "minimum", "before": 0.0}, falling) == -math.inf
    still = wd.Study(
        loop().with_(reference=0.0, sensor=wd.Sensor(), disturbances={"load": 0.0}),
        [early_peak / late_peak <= 1.0, early_peak / late_peak >= 1.0, early_peak - late_peak <= 0.0],
    ).replay(0)
    assert still.slack.tolist() == [-math.inf, -math.inf, 0.0]


def test_an_undefined_or_diverged_part_leaves_nothing_to_meet() -> None:
    plant = wd.Plant(states={"h": 1.0}, equations={"h": "u - h"}, input="u", output="h")
    adrc = wd.OutputADRC(order=1, controller_bandwidth=2.0, observer_bandwidth=10.0, b0=1.0)
    options: dict[str, Any] = {"controller": adrc, "sample_period": 0.01, "duration": 3.0, "reference": -1.0}
    dry = wd.Loop(plant=plant, signals={"flow": "sqrt(h)"}, **options)
    flow = wd.peak("flow", after=2.0)
    alone = [wd.reversals("flow") <= 9, wd.time_of_peak("flow") <= 9, wd.peak_to_peak("flow") <= 9]
    requirements = [flow - flow <= 1.0, wd.peak("h") / flow >= 0.0, *alone]
    assert not wd.Study(dry, requirements).run(3, progress=False).met.any()
    runaway = wd.Plant(states={"x": 0.1}, equations={"x": "300*x**3 + 0*u"}, input="u", output="x")
    lost = wd.Study(
        wd.Loop(plant=runaway, steps_per_sample=1, **options),
        [early_peak - late_peak <= 1.0, wd.peak_to_peak("x") >= 0.0],
    ).run(3, progress=False)
    assert len(lost.diverged) == 3
    assert not lost.met.any()


def test_measures_of_two_are_written_and_read(tmp_path: Path) -> None:
    requirements = [
        ((early_peak - late_peak) / wd.reversals("command", dead_band=wd.uniform(0.1, 0.2)) <= 0.1).named("decay"),
        wd.peak_to_peak("output") <= 3.0,
        wd.time_of_peak("error", after=0.1) / wd.settling_time(tolerance=0.5) >= 0.0,
    ]
    study = wd.Study(loop(), requirements, measures=[wd.reversals("output"), late_peak - early_peak], seed=8)
    wd.save(study, tmp_path / "study.toml")
    again = wd.load(tmp_path / "study.toml")
    assert again == study
    assert again.requirements == study.requirements
    assert repr(again.requirements[0]) == repr(requirements[0])
    assert [r.words for r in requirements] == [
        "(peak of error before 1 s - peak of error after 1 s) / "
        "reversals (dead band uniform(low=0.1, high=0.2)) of command <= 0.1",
        "peak to peak of output <= 3",
        "time of peak of error after 0.1 s / settling time (tolerance 0.5) of error >= 0",
    ]
    assert list(study.parameters) == ["gain", "requirements[decay].measure.second.dead_band"]
    assert study.measures == (wd.reversals("output"), late_peak - early_peak)
    assert len({early_peak - late_peak, early_peak - late_peak, late_peak - early_peak, early_peak / late_peak}) == 3


def test_automatic_steps_allow_a_count_and_a_time_what_sampling_leaves() -> None:
    plant = wd.Plant(states={"x": 0.0}, equations={"x": "tanh(u) - x"}, input="u", output="x")
    adrc = wd.ErrorADRC(1, b0=1.0, controller_bandwidth=4.0, observer_bandwidth=20.0)
    case = wd.Loop(plant=plant, controller=adrc, sample_period=0.02, duration=2.0, reference=wd.Sine(0.5, 0.7))
    measures = [wd.reversals("x"), wd.time_of_peak("x"), wd.peak("x") / wd.peak("error"), wd.peak_to_peak("x")]
    assert 1 <= wd.Study(case, measures=measures).resolved_steps() <= 4


def test_pictures_of_measures_of_two(tmp_path: Path) -> None:
    study = wd.Study(loop(), [early_peak - late_peak <= 0.5, wd.peak_to_peak("output") <= 2.0])
    study.run(50, progress=False).plot().savefig(tmp_path / "outcome.png")
    study.replay(0).plot().savefig(tmp_path / "replay.png")
    assert (tmp_path / "replay.png").stat().st_size > 10_000


def nested(depth: int) -> wd.Measure:
    return wd.peak("error") if depth == 0 else nested(depth - 1) - wd.peak("error")


MISTAKES: list[tuple[Callable[[], object], str, str]] = [
    (lambda: early_peak - 1.0, "difference.second", "A number belongs to the limit"),
    (lambda: 1.0 / early_peak, "ratio.first", "A number belongs to the limit"),
    (lambda: early_peak - "peak", "difference.second", "a measure such as"),
    (lambda: early_peak / (late_peak <= 1.0), "ratio.second", "a measure such as"),
    (lambda: nested(9), "difference", "at most 8"),
    (lambda: wd.Measure("peak", "error", first=early_peak, second=late_peak), "measure.kind", "difference, ratio"),
    (lambda: wd.reversals("error", dead_band=-0.1), "reversals.dead_band", "at least 0"),
    (lambda: wd.Study(loop(), [early_peak - wd.peak("eror") <= 1]), "study.requirements[0].second.signal", "'error'"),
    (lambda: wd.Study(loop(), measures=[wd.time_in_saturation() / early_peak]), "study.measures[0].first", "limits"),
    (
        lambda: wd.Study(loop(), [early_peak / wd.rms("error", after=9) <= 1]),
        "study.requirements[0].second.after",
        "before",
    ),
]


@pytest.mark.parametrize(("make", "field", "words"), MISTAKES, ids=[field for _, field, _ in MISTAKES])
def test_mistakes_are_named(make: Callable[[], object], field: str, words: str) -> None:
    with pytest.raises(wd.DescriptionError) as caught:
        make()
    assert caught.value.field == field
    assert words in str(caught.value)


@pytest.mark.parametrize(
    ("text", "field"),
    [
        ('measure = "difference"\nfirst = { measure = "peak", signal = "error" }', "requirements[0].second"),
        ('measure = "ratio"\nfirst = 1.0\nsecond = { measure = "iae" }', "requirements[0].first"),
        (
            'measure = "ratio"\nfirst = { measure = "pek" }\nsecond = { measure = "iae" }',
            "requirements[0].first.measure",
        ),
        (
            'measure = "ratio"\nafter = 1.0\nfirst = { measure = "ise" }\nsecond = { measure = "iae" }',
            "requirements[0].after",
        ),
    ],
)
def test_mistakes_in_a_file_are_named(tmp_path: Path, text: str, field: str) -> None:
    wd.save(wd.Study(loop(), measures=[early_peak]), tmp_path / "study.toml")
    content = (tmp_path / "study.toml").read_text() + f"\n[[requirements]]\n{text}\nat_most = 1.0\n"
    (tmp_path / "study.toml").write_text(content)
    with pytest.raises(wd.StudyFileError) as caught:
        wd.load(tmp_path / "study.toml")
    assert caught.value.field == field


def test_operands_without_end_are_refused_by_the_engine() -> None:
    endless: dict[str, Any] = {"kind": "ratio"}
    endless["operands"] = [endless, {"kind": "peak"}]
    with pytest.raises(ValueError, match="without end"):
        engine().evaluate_measure(endless, np.arange(3.0), np.arange(3.0), 0.0, 1.0)
    with pytest.raises(ValueError, match="2 operands"):
        engine().evaluate_measure({"kind": "ratio"}, np.arange(3.0), np.arange(3.0), 0.0, 1.0)

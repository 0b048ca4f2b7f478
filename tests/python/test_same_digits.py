"""A trial is a function of (study, index): the same bits however the work is cut up."""

from __future__ import annotations

import itertools
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray

import windage as wd

TRIALS = 300
Result = tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.uint8]]


def equations(**loop: Any) -> wd.Study:
    """Equations, error form, everything drawn that usually is; steps chosen beforehand."""
    plant = wd.Plant(
        states={"x": wd.normal(0.1, 0.05), "v": 0.0},
        equations={"x": "v", "v": "(g*u - d*v - c*tanh(v/0.02) + w)/m"},
        input="u",
        output="x",
        disturbances=["w"],
        parameters={
            "m": wd.lognormal(2.0, 0.1),
            "g": wd.tolerance(3.0, percent=10),
            "d": wd.beta(2.0, 3.0, 0.2, 0.8),
            "c": wd.triangular(0.0, 0.1, 0.3),
        },
    )
    settings: dict[str, Any] = {
        "plant": plant,
        "controller": wd.ErrorADRC(order=2, controller_bandwidth=wd.uniform(4.0, 6.0), observer_bandwidth=30.0, b0=1.5),
        "sample_period": 5e-3,
        "duration": 2.0,
        "reference": wd.Sine(0.5, period=wd.uniform(1.0, 2.0)),
        "sensor": wd.Sensor(noise=1e-4, resolution=1e-5, filter_frequency=80.0),
        "actuator": wd.Actuator(limits=(-4.0, wd.uniform(2.0, 4.0)), delay=wd.uniform(0.0, 0.012)),
        "disturbances": {"w": wd.Gust(wd.uniform(0.1, 0.5), 0.3)},
        "integrator": "rk4",
        "steps_per_sample": 2,
    }
    return wd.Study(
        wd.Loop(**(settings | loop)),
        requirements=[wd.peak("error", after=0.5) <= 0.05, wd.rms("u") <= 2.0],
        measures=[
            wd.final("x"),
            wd.itae(),
            wd.total_variation("u"),
            wd.time_in_saturation(),
            wd.rms_change("w"),
        ],
        seed=99,
    )


def linear(
    measures: list[wd.Measure] | None = None, table: dict[str, list[float]] | None = None, **loop: Any
) -> wd.Study:
    """A linear stock plant, output form, moved step, delay of whole samples."""
    settings: dict[str, Any] = {
        "plant": wd.SecondOrder(wd.uniform(0.8, 1.2), wd.uniform(0.2, 0.4), 0.5, initial=[0.0, 0.1]),
        "controller": wd.OutputADRC(order=2, controller_bandwidth=8.0, observer_bandwidth=40.0, b0=12.0),
        "sample_period": 4e-3,
        "duration": 1.6,
        "reference": wd.Step(1.0, at=wd.uniform(0.0, 0.1)),
        "sensor": wd.Sensor(noise=1e-3),
        "actuator": wd.Actuator(delay=wd.choice([0.0, 4e-3, 8e-3]), time_constant=0.01, limits=(-3.0, 6.0)),
        "disturbances": {"load": wd.Sine(wd.uniform(0.0, 0.3), period=0.7)},
    }
    usual = [
        wd.overshoot(),
        wd.settling_time(band=0.05),
        wd.rise_time(),
        wd.undershoot(),
        wd.ise(after=0.2),
        wd.minimum("output", after=0.4),
        wd.standard_deviation("command", before=wd.uniform(0.8, 1.6)),
    ]
    return wd.Study(wd.Loop(**(settings | loop)), measures=measures or usual, table=table, seed=5)


def drive(**loop: Any) -> wd.Study:
    """A native drive; sample period and duration differ from trial to trial."""
    settings: dict[str, Any] = {
        "plant": wd.TwoMassDrive(
            motor_inertia=wd.tolerance(1.5e-3, percent=20),
            load_inertia=4e-3,
            stiffness=25.0,
            damping=0.02,
            coulomb_friction=wd.uniform(0.0, 0.05),
        ),
        "controller": wd.OutputADRC(order=2, controller_bandwidth=10.0, observer_bandwidth=60.0, b0=180.0),
        "sample_period": wd.uniform(1.5e-3, 2.5e-3),
        "duration": wd.uniform(0.5, 0.8),
        "reference": wd.Quintic(1.0, start=0.05, duration=wd.uniform(0.2, 0.3)),
        "disturbances": {"load": wd.WhiteNoise(wd.uniform(0.0, 1e-6))},
        "integrator": "cash_karp5",
        "steps_per_sample": 1,
    }
    return wd.Study(
        wd.Loop(**(settings | loop)),
        measures=[
            wd.peak("load_speed"),
            wd.iae(),
            wd.maximum("error"),
            wd.minimum("error"),
            wd.final("load_angle"),
        ],
        seed=2**63 + 17,
    )


def broken(**loop: Any) -> wd.Study:
    """Loads that jump and bend at drawn instants, beside one that is the same in every lane."""
    plant = wd.Plant(
        states={"x": wd.uniform(-0.1, 0.1), "v": 0.0},
        equations={"x": "v", "v": "2*u - v*abs(v) + w1 + w2 + w3"},
        input="u",
        output="x",
        disturbances=["w1", "w2", "w3"],
    )
    settings: dict[str, Any] = {
        "plant": plant,
        "controller": wd.OutputADRC(order=2, controller_bandwidth=5.0, observer_bandwidth=20.0, b0=2.0),
        "sample_period": 0.01,
        "duration": 1.0,
        "reference": wd.Step(1.0),
        "disturbances": {
            "w1": wd.Pulse(wd.uniform(-3.0, 3.0), start=wd.uniform(0.0, 0.8), width=wd.uniform(0.0, 0.05)),
            "w2": wd.Table([0.1, wd.uniform(0.3, 0.5), 0.7], [0.0, wd.uniform(0.5, 1.0), -1.0]),
            "w3": wd.Table([0.1234, 0.2471, 0.2477, 0.25, 0.6], [0.0, 1.0, -1.0, 0.0, 0.3]),
        },
        "steps_per_sample": 2,
    }
    measures = [wd.final("x"), wd.peak("v"), wd.minimum("w1"), wd.maximum("w3")]
    return wd.Study(wd.Loop(**(settings | loop)), measures=measures, seed=12)


STUDIES = {"equations": equations, "linear": linear, "drive": drive, "breaks": broken}


def run(study: wd.Study, first: int, count: int, threads: int = 1, block: int = 0) -> Result:
    parameters, measures, status, completed = study._campaign.run(first, count, threads, block)
    assert completed == count
    return parameters, measures, status


def assert_same_bits(found: Result, expected: Result) -> None:
    for a, b in zip(found, expected, strict=True):
        np.testing.assert_array_equal(a.view(np.uint8), b.view(np.uint8))


@pytest.fixture(scope="module", params=STUDIES)
def case(request: pytest.FixtureRequest) -> tuple[wd.Study, Result]:
    study = STUDIES[request.param]()
    expected = run(study, 0, TRIALS, 1, 128)
    assert len(np.unique(expected[1][0])) > TRIALS * 0.9  # the trials differ, so that mixing them up would show
    return study, expected


@pytest.mark.parametrize("threads", [1, 2, 5])
@pytest.mark.parametrize("block", [1, 16, 64, 100, 128, 256])
def test_threads_and_block_size_have_no_influence(case: tuple[wd.Study, Result], threads: int, block: int) -> None:
    study, expected = case
    assert_same_bits(run(study, 0, TRIALS, threads, block), expected)


def test_a_break_in_one_lane_leaves_the_digits_of_its_neighbours() -> None:
    """Trials whose pulse never comes are what they are without one."""
    late = wd.choice([0.5001, 50.0])
    pulses = broken().loop.disturbances | {"w1": wd.Pulse(1.0, start=late, width=0.0203)}
    with_pulse = run(broken(disturbances=pulses), 0, TRIALS, 1, 128)
    without = run(broken(disturbances=pulses | {"w1": wd.Constant(0.0)}), 0, TRIALS, 1, 128)
    never = with_pulse[0][0] == 50.0 if np.any(with_pulse[0][0] == 50.0) else with_pulse[0][1] == 50.0
    assert 0.3 * TRIALS < np.sum(never) < 0.7 * TRIALS
    same = with_pulse[1][:2] == without[1][:2]
    assert np.all(same[:, never])
    assert not np.any(same[0, ~never])


@pytest.mark.parametrize("cuts", [[0, 1, 2, 3, 17, 300], [0, 129, 131, 299, 300], [0, 64, 128, 300]])
def test_any_split_of_the_range_gives_the_same_trials(case: tuple[wd.Study, Result], cuts: list[int]) -> None:
    study, expected = case
    for first, last in itertools.pairwise(cuts):
        part = tuple(column[..., first:last] for column in expected)
        assert_same_bits(run(study, first, last - first, 2), tuple(np.ascontiguousarray(c) for c in part))  # type: ignore[arg-type]


def test_every_trial_alone(case: tuple[wd.Study, Result]) -> None:
    study, expected = case
    alone = [run(study, i, 1) for i in range(0, TRIALS, 7)]
    for column, whole in enumerate(expected):
        found = np.concatenate([each[column] for each in alone], axis=-1)
        wanted = np.ascontiguousarray(whole[..., ::7])
        np.testing.assert_array_equal(found.view(np.uint8), wanted.view(np.uint8))


def test_extending_equals_one_longer_run(case: tuple[wd.Study, Result]) -> None:
    study, expected = case
    outcome = study.run(101, threads=2, progress=False).extend(150, progress=False).extend(TRIALS - 251, progress=False)
    columns = outcome._columns
    assert_same_bits((columns.parameters, columns.measures, columns.status), expected)


def test_batches_are_parts_of_one_run(case: tuple[wd.Study, Result]) -> None:
    study, expected = case
    for batch in study.batches(TRIALS, size=77, progress=False):
        part = expected[1][:, batch.first : batch.first + batch.trials]
        np.testing.assert_array_equal(batch._columns.measures, part)


def test_replay_repeats_the_trial_of_the_campaign(case: tuple[wd.Study, Result]) -> None:
    """Measures that need no sum are computed from the replayed signals and agree to the last bit."""
    study, expected = case
    exact = {
        "peak": lambda x: np.max(np.abs(x)),
        "minimum": np.min,
        "maximum": np.max,
        "final": lambda x: x[-1],
    }
    compared = 0
    for trial in (0, 1, 15, 16, 127, 128, 299):
        replay = study.replay(trial)
        assert list(replay.parameters.values()) == expected[0][:, trial].tolist()
        np.testing.assert_array_equal(list(replay.measures.values()), expected[1][:, trial])
        for measure, value in zip(study._run_description.measures, expected[1][:, trial], strict=True):
            if measure.kind in exact:
                window = replay.time >= measure.after - 1e-9
                assert exact[measure.kind](replay[measure.signal][window]) == value
                compared += 1
    assert compared > 0


def test_replay_of_a_linear_trial_measures_its_own_signals() -> None:
    study = linear().with_(measures=[wd.peak("command"), wd.final("output"), wd.maximum("estimate_3")])
    outcome = study.run(130, progress=False)
    for trial in (0, 77, 129):
        replay = study.replay(trial)
        expected = [np.max(np.abs(replay["command"])), replay["output"][-1], np.max(replay["estimate_3"])]
        assert [values[trial] for values in outcome.measures.values()] == expected


def test_two_replays_of_a_trial_are_one(case: tuple[wd.Study, Result]) -> None:
    study, _ = case
    once, again = study.replay(42), study.replay(42)
    for name in once.signals:
        np.testing.assert_array_equal(once[name].view(np.uint64), again[name].view(np.uint64))


def test_a_new_study_object_has_the_same_digits(case: tuple[wd.Study, Result]) -> None:
    study, expected = case
    assert_same_bits(run(study.with_(seed=study.seed), 0, TRIALS), expected)


def test_another_seed_has_other_trials(case: tuple[wd.Study, Result]) -> None:
    study, expected = case
    other = run(study.with_(seed=study.seed + 1), 0, TRIALS)
    assert np.mean(other[0] == expected[0]) < 0.2  # a choice may come out the same
    assert np.mean(other[1][0] == expected[1][0]) < 0.05


@pytest.mark.parametrize("written", ["text", "stock"])
def test_a_diverging_trial_does_not_disturb_its_lane_mates(written: str) -> None:
    """Part of the trials have a gain beyond the stability limit; each is alone what it is among others."""
    gain = wd.uniform(4.0, 30.0)
    plant: Any = wd.IntegratorChain(2, gain=gain, initial=0.1)
    if written == "text":
        equations_ = {"x": "v", "v": "b*u + load + 0.1*x*x*x"}
        states = {"x": 0.1, "v": 0.0}
        plant = wd.Plant(states, equations_, "u", "x", ["load"], {"b": gain})
    loop = wd.Loop(
        plant=plant,
        controller=wd.OutputADRC(order=2, controller_bandwidth=8.0, observer_bandwidth=40.0, b0=3.0),
        sample_period=5e-3,
        duration=60.0,
        reference=wd.Step(1.0),
        disturbances={"load": wd.Gust(0.2, 0.5)},
        steps_per_sample=1,
    )
    study = wd.Study(loop, measures=[wd.peak("output"), wd.rms("command"), wd.final("error")], seed=8)
    together = run(study, 0, 96, 1, 96)
    diverged = together[2] == 1
    assert 10 < np.sum(diverged) < 86
    assert np.all(np.isnan(together[1][:, diverged]))
    assert np.all(np.isfinite(together[1][0, ~diverged]))
    for trial in range(96):
        part = tuple(np.ascontiguousarray(column[..., trial : trial + 1]) for column in together)
        assert_same_bits(run(study, trial, 1), part)  # type: ignore[arg-type]


@pytest.mark.parametrize("reference", [wd.Ramp(1.0), wd.Table([0, 1, 2], [0, 1, 0]), wd.Sine(1.0, period=4.0)])
@pytest.mark.parametrize("what", ["before", "duration"])
def test_targets_of_windows_that_end_at_drawn_times(reference: Any, what: str) -> None:
    """The final value of a response is the reference at each trial's own end of the window."""
    ends = wd.uniform(0.5, 1.5)
    window = {"before": wd.shared("end", ends)} if what == "before" else {}
    measures = [
        wd.overshoot(**window),
        wd.settling_time(band=0.1, **window),
        wd.rise_time(0.1, 0.5, **window),
    ]
    study = linear(measures, reference=reference, duration=ends if what == "duration" else 2.0)
    alone = [run(study, i, 1) for i in range(100)]
    together = run(study, 0, 100, 1, 100)
    joined = tuple(np.ascontiguousarray(np.concatenate([a[c] for a in alone], axis=-1)) for c in range(3))
    assert_same_bits(together, joined)  # type: ignore[arg-type]


def test_rows_of_a_table_do_not_depend_on_how_trials_are_cut() -> None:
    rng = np.random.default_rng(1)
    table = {"gain": rng.uniform(0.5, 1.5, 150).tolist()}
    study = linear(table=table, plant=wd.SecondOrder(wd.column("gain"), 0.3, 0.5))
    for rows in ("drawn", "in_order"):
        one = study.with_(table_rows=rows)
        expected = run(one, 0, 150, 1, 128)
        gains = expected[0][list(study.parameters).index("gain")]
        assert np.array_equal(gains, table["gain"]) is (rows == "in_order")
        part = tuple(np.ascontiguousarray(column[..., 70:150]) for column in expected)
        assert_same_bits(run(one, 70, 80, 2, 16), part)  # type: ignore[arg-type]

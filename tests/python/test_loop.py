"""The loop and the study around it: timing, signals, choice of steps, and the same digits on every way."""

from __future__ import annotations

import copy
import pickle
from typing import Any

import numpy as np
import pytest

import windage as wd

TUNING: dict[str, Any] = {"controller_bandwidth": 5.0, "observer_bandwidth": 30.0, "b0": 2.0}


def crane(**options: Any) -> wd.Loop:
    """A trolley with a swinging load under wind, of everything a little."""
    plant = wd.Plant(
        states={"position": 0.0, "speed": 0.0, "angle": 0.02, "rate": 0.0},
        equations={
            "position": "speed",
            "speed": "(force - drag*speed)/mass",
            "angle": "rate",
            "rate": "-(9.81*sin(angle) + pull*cos(angle))/rope - 0.1*rate + 0.01*wind",
        },
        input="force",
        output="position",
        disturbances=["wind"],
        parameters={
            "mass": wd.normal(0.5, 0.05, sigmas=3),
            "drag": wd.uniform(0.1, 0.4),
            "rope": wd.uniform(1.0, 3.0),
        },
        auxiliaries={"pull": "(force - drag*speed)/mass"},
    )
    settings: dict[str, Any] = {
        "plant": plant,
        "controller": wd.ErrorADRC(2, **TUNING),
        "sample_period": 0.01,
        "duration": 2.0,
        "reference": wd.Quintic(1.0, start=0.1, duration=1.0),
        "sensor": wd.Sensor(noise=wd.uniform(1e-4, 3e-4), resolution=1e-4),
        "actuator": wd.Actuator(limits=(-3.0, 3.0), delay=wd.uniform(0.0, 0.02), time_constant=0.01),
        "disturbances": {"wind": wd.Gust(wd.uniform(0.5, 2.0), correlation_time=0.5)},
        "steps_per_sample": 1,
    }
    return wd.Loop(**{**settings, **options})


def crane_study(**options: Any) -> wd.Study:
    requirements = [wd.peak("angle") <= 0.5, wd.overshoot() <= 0.06]
    return wd.Study(crane(**options), requirements, seed=99, measures=[wd.rms("command")])


def bits(outcome: wd.Outcome) -> list[bytes]:
    columns = [*outcome.parameters.values(), *outcome.measures.values(), outcome.slack, outcome.status]
    return [np.ascontiguousarray(column).tobytes() for column in columns]


def test_threads_batches_and_extension_change_no_digit() -> None:
    study = crane_study()
    whole = study.run(300, threads=1, progress=False)
    assert bits(study.run(300, threads=3, progress=False)) == bits(whole)
    extended = study.run(100, progress=False).extend(200, progress=False)
    assert (extended.trials, extended.requested) == (300, 300)
    assert bits(extended) == bits(whole)
    batches = list(study.batches(300, size=128, progress=False))
    assert [batch.first for batch in batches] == [0, 128, 256]
    assert np.concatenate([b.slack for b in batches]).tobytes() == np.ascontiguousarray(whole.slack).tobytes()
    assert np.array_equal(np.concatenate([b.failures for b in batches]), whole.failures)


def test_replay_repeats_the_trial_to_the_last_digit() -> None:
    study = crane_study()
    outcome = study.run(40, progress=False)
    for trial in (0, 17, 39):
        replay = study.replay(trial)
        assert replay.parameters == {name: values[trial] for name, values in outcome.parameters.items()}
        assert replay.measures == {name: values[trial] for name, values in outcome.measures.items()}
        assert np.array_equal(replay.slack, outcome.slack[trial])
        assert np.abs(replay["angle"]).max() == replay.measures["peak of angle"]
        assert set(replay.signals) == set(study.loop.signal_names)
        assert len(replay.time) == 201


def test_tally_counts_what_the_outcome_shows() -> None:
    study = crane_study()
    outcome, tally = (
        study.run(300, progress=False),
        study.count(300, keep_failures=5, size=77, progress=False),
    )
    assert tally.trials == 300
    assert tally.failures == len(outcome.failures)
    assert 5 < tally.failures < 300
    assert list(tally.requirement_failures.values()) == [len(outcome.failed(i)) for i in (0, 1)]
    assert np.array_equal(tally.first_failures, outcome.failures[:5])
    assert tally.verdict(0.5, 0.9) == outcome.verdict(0.5, 0.9)
    assert tally.verdicts(0.5, 0.9).to_dict() == outcome.verdicts(0.5, 0.9).to_dict()


def test_progress_is_reported_and_can_stop_the_run() -> None:
    study = crane_study()
    seen: list[tuple[int, int]] = []

    def report(done: int, total: int) -> bool:
        seen.append((done, total))
        return False

    outcome = study.run(200_000, progress=report)
    assert outcome.interrupted
    assert outcome.requested == 200_000
    assert 0 <= outcome.trials < 200_000
    assert seen[0][1] == 200_000
    assert np.array_equal(outcome.slack, study.run(max(outcome.trials, 1), progress=False).slack[: outcome.trials])
    assert "stopped; 200 000 asked for" in repr(outcome)


def test_progress_bar_writes_one_line(capsys: pytest.CaptureFixture[str]) -> None:
    crane_study().run(50, progress=True)
    assert capsys.readouterr().err.endswith("\n")
    crane_study().count(50, size=20, progress=True)
    assert capsys.readouterr().err.count("\n") == 1


def test_looks_count_numbers_of_trials_judged() -> None:
    outcome = crane_study().run(50, progress=False)
    assert outcome.verdict(0.5).looks == outcome.verdict(0.9, 0.99).looks == 1
    further = outcome.extend(50, progress=False)
    assert further.verdict(0.5).looks == 2
    assert outcome.verdict(0.5).looks == 2


def test_verdict_names_what_was_held_and_what_was_drawn() -> None:
    verdict = crane_study().run(20, progress=False).verdict(0.5)
    assert "sample_period" in verdict.not_varied
    assert "actuator.time_constant" in verdict.not_varied
    assert not any("mass" in name or name.startswith("controller") for name in verdict.not_varied)
    assert "mass: normal(mean=0.5, sd=0.05, low=0.35, high=0.65)" in verdict.spreads
    assert verdict.truncated == ("mass",)


def test_nominal_unit_has_every_spread_at_its_nominal_value() -> None:
    study = crane_study()
    nominal = study.nominal()
    assert nominal.trial is None
    assert nominal.parameters == {}
    parameters = {"mass": 0.5, "drag": 0.25, "rope": 2.0}
    by_hand = crane_study(
        plant=study.loop.plant.with_(parameters=parameters),
        sensor=wd.Sensor(noise=2e-4, resolution=1e-4),
        actuator=wd.Actuator(limits=(-3.0, 3.0), delay=0.01, time_constant=0.01),
        disturbances={"wind": wd.Gust(1.25, correlation_time=0.5)},
    ).replay(0)
    assert all(np.array_equal(nominal[name], by_hand[name]) for name in by_hand.signals)


def test_sensor_and_actuator_do_as_described() -> None:
    loop = crane(
        sensor=wd.Sensor(gain=1.1, bias=0.05, resolution=0.01, range=(0.0, 0.9)),
        actuator=wd.Actuator(limits=(-1.0, 0.5), rate_limit=25.0, resolution=0.125),
        disturbances={"wind": 0.0},
    )
    replay = wd.Study(loop, [wd.peak("error") <= 1.0]).replay(0)
    reading = np.clip(np.floor((1.1 * replay["output"] + 0.05) / 0.01 + 0.5) * 0.01, 0.0, 0.9)
    np.testing.assert_allclose(replay["measured"], reading, atol=1e-12)
    command = replay["command"]
    assert np.array_equal(command, np.round(command * 8) / 8)
    assert (command.min(), command.max()) == (-1.0, 0.5)
    assert np.abs(np.diff(np.concatenate([[0.0], command]))).max() <= 0.25


def test_whole_delays_need_no_split() -> None:
    def is_whole(delay: Any, **options: Any) -> bool:
        study = crane_study(actuator=wd.Actuator(delay=delay), **options)
        return bool(study._describe(1).study["loop"]["actuator"]["delay_is_whole"])

    assert is_whole(0.03)
    assert is_whole(wd.choice([0.0, 0.01, 0.03]))
    assert is_whole(wd.shared("lag", wd.samples([0.02, 0.03])))
    assert not is_whole(0.035)
    assert not is_whole(wd.choice([0.0, 0.015]))
    assert not is_whole(wd.uniform(0.0, 0.03))
    assert not is_whole(0.03, sample_period=wd.choice([0.01, 0.005]))


def test_whole_delays_split_or_not_give_the_same_trial() -> None:
    choice = wd.Actuator(delay=wd.choice([0.02, 0.02]))
    for actuator in (choice, wd.Actuator(delay=wd.uniform(0.02, 0.02))):
        other = crane_study(actuator=actuator, disturbances={"wind": 0.0}).replay(3)
        plain = crane_study(actuator=wd.Actuator(delay=0.02), disturbances={"wind": 0.0}).replay(3)
        np.testing.assert_allclose(other["output"], plain["output"], rtol=0, atol=1e-9)


def test_steps_are_chosen_by_comparison_with_the_reference() -> None:
    assert crane_study(steps_per_sample="auto").resolved_steps() in (1, 2, 4)
    # A valve with a time constant of a fifth of the sample period: RK4 with one step is unstable there.
    stiff = wd.Plant(
        states={"level": 0.0, "valve": 0.0},
        equations={"level": "valve - 0.2*level", "valve": "500*(command_in - valve)"},
        input="command_in",
        output="level",
    )
    controller = wd.OutputADRC(1, b0=1.0, controller_bandwidth=5.0, observer_bandwidth=20.0)
    loop = crane(plant=stiff, controller=controller, disturbances={}, steps_per_sample="auto")
    study = wd.Study(loop, [wd.peak("error") <= 2.0, wd.rms("error") <= 0.4])
    assert study.resolved_steps() in (2, 4, 8, 16)
    assert f"steps per sample auto ({study.resolved_steps()})" in repr(study)
    few, many = (study.with_(steps_per_sample=n).run(8, progress=False) for n in (study.resolved_steps(), 256))
    difference = np.abs(few.measures["rms of error"] - many.measures["rms of error"])
    assert difference.max() <= 0.4e-3
    assert wd.Study(loop.with_(steps_per_sample=3), [wd.peak("error") <= 2.0]).resolved_steps() == 3


def test_linear_plants_need_one_step() -> None:
    loop = crane(plant=wd.IntegratorChain(2, gain=2.0), disturbances={"load": 0.0}, steps_per_sample="auto")
    assert wd.Study(loop, [wd.peak("error") <= 1.0]).resolved_steps() == 1


def test_steps_that_never_suffice_are_an_error() -> None:
    # A jump inside a sample interval, which a method of order 1 meets to 1/256 of it at best.
    rough = wd.Plant({"x": 0.0, "v": 0.0}, {"x": "v", "v": "u + 5000*step(t - 0.50377)"}, input="u", output="x")
    loop = crane(plant=rough, disturbances={}, integrator="euler", steps_per_sample="auto")
    with pytest.raises(wd.DescriptionError, match=r"loop\.steps_per_sample: found 'auto'.*With 256 steps .*rk4"):
        wd.Study(loop, measures=[wd.rms("v")]).resolved_steps()


def test_friction_that_sticks_is_compared_at_fixed_steps() -> None:
    # Under dry friction the speed stays where its sign changes; step control would never get past that.
    plant = wd.Plant(
        {"x": 0.1, "v": 0.0}, {"x": "v", "v": "2*(u - 0.5*sign(v))"}, input="u", output="x", disturbances=[]
    )
    loop = crane(plant=plant, disturbances={}, reference=0.0, steps_per_sample="auto")
    study = wd.Study(loop, [wd.peak("error") <= 0.5])
    assert plant.may_jump
    assert not crane().plant.may_jump
    assert 1 <= study.resolved_steps() <= 256


def test_a_comparison_that_takes_too_long_is_given_up(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("windage._pilots.REFERENCE_SECONDS", 0.0)
    with pytest.raises(wd.DescriptionError, match=r"loop\.steps_per_sample: .*chatters"):
        crane_study(steps_per_sample="auto", duration=400.0).resolved_steps()


def test_diverged_trials_fail_every_requirement() -> None:
    loop = crane(actuator=wd.Actuator(delay=wd.choice([0.0, 0.15])), duration=60.0, sensor=wd.Sensor())
    loop = loop.with_(controller=wd.ErrorADRC(2, controller_bandwidth=20.0, observer_bandwidth=100.0, b0=2.0))
    outcome = wd.Study(loop, [wd.minimum("position") >= -1e300, wd.peak("error") <= 1e300]).run(32, progress=False)
    late = outcome.parameters["actuator.delay"] > 0.0
    assert 0 < late.sum() < 32
    assert np.array_equal(outcome.diverged, np.flatnonzero(late))
    assert np.array_equal(outcome.failures, outcome.diverged)
    assert np.all(outcome.slack[late] == -np.inf)
    assert np.isnan(outcome.measures["peak of error"][late]).all()
    assert outcome.table()["status"].to_pylist() == ["diverged" if x else "finished" for x in late]
    replay = wd.Study(loop, [wd.peak("error") <= 1.0]).replay(int(outcome.diverged[0]))
    assert replay.diverged
    assert not replay.passed


def test_table_shares_the_memory_of_the_outcome() -> None:
    outcome = crane_study().run(16, progress=False)
    table = outcome.table()
    names = ["trial", *outcome.parameters, *outcome.measures]
    assert table.column_names == [
        *names,
        *(f"slack of {name}" for name in outcome.requirements),
        "passed",
        "status",
    ]
    for name, values in (*outcome.parameters.items(), *outcome.measures.items()):
        assert table[name].chunk(0).buffers()[1].address == values.__array_interface__["data"][0]
    assert table["passed"].to_pylist() == outcome.passed.tolist()
    with pytest.raises(ValueError, match="read-only"):
        outcome.parameters["mass"][0] = 1.0


def test_total_disturbance_of_an_integrator_chain_is_exact() -> None:
    # y^(n) = b u + w, so f = w + (b - b0) u, averaged over n sample periods with the weights of a B-spline.
    # B-splines, integrated by hand over whole intervals and over 0.3 and 0.7 of one: the command
    # changes 0.3 of a period after the sample instant.
    whole = {1: [1 / 2, 1 / 2], 2: [1 / 2, 1 / 2], 3: [1 / 12, 5 / 12, 5 / 12, 1 / 12]}
    first = {1: [0.15, 0.15], 2: [0.045, 0.3 - 0.045]}
    for order in (1, 2, 3):
        loop = crane(
            plant=wd.IntegratorChain(order, gain=1.5),
            controller=wd.OutputADRC(order, **TUNING),
            sensor=wd.Sensor(noise=1e-4),
            disturbances={"load": 0.7},
            actuator=wd.Actuator(),
        )
        margin = (order + 1) // 2
        rounding = 1e-13 / 0.01**order
        for delay, weights, extra in ((0.02, whole[order], None), (0.013, whole[order], first.get(order))):
            if delay == 0.013 and extra is None:
                continue
            replay = wd.Study(loop.with_(actuator=wd.Actuator(delay=delay)), [wd.peak("error") <= 1.0]).replay(0)
            u, f = replay["input"], replay.total_disturbance
            expected = np.convolve(u[:-1], weights[::-1], mode="valid")
            if extra is not None:
                late = [w - e for w, e in zip(weights, extra, strict=True)]
                expected = np.convolve(u[:-1], extra[::-1], mode="valid")
                expected += np.convolve(u[1:], late[::-1], mode="valid")
            assert np.isnan(f[:margin]).all()
            assert np.isnan(f[-margin:]).all()
            np.testing.assert_allclose(f[margin:-margin], 0.7 - 0.5 * expected, rtol=0, atol=rounding)


@pytest.mark.parametrize("form", [wd.OutputADRC, wd.ErrorADRC])
def test_estimated_disturbance_approaches_the_true_one(form: Any) -> None:
    loop = crane(
        plant=wd.IntegratorChain(2, gain=2.0),
        controller=form(2, b0=2.0, controller_bandwidth=5.0, observer_bandwidth=60.0),
        sensor=wd.Sensor(),
        actuator=wd.Actuator(),
        disturbances={"load": wd.Step(0.7, at=0.5)},
        sample_period=0.001,
        duration=1.0,
        reference=wd.Sine(0.3, period=20.0),
    )
    replay = wd.Study(loop, [wd.peak("error") <= 1.0]).replay(0)
    late = slice(700, 990)
    np.testing.assert_allclose(replay.total_disturbance[late], 0.7, atol=1e-6)
    np.testing.assert_allclose(replay.estimated_disturbance[late], 0.7, atol=0.08)


def test_warnings_speak_of_the_loop() -> None:
    assert crane().warnings() == []
    fast = crane(controller=wd.ErrorADRC(2, b0=2.0, controller_bandwidth=200.0, observer_bandwidth=130.0)).warnings()
    assert [text.split(":")[0] for text in fast] == ["controller"] * 3
    assert "observer_bandwidth * sample_period = 1.3" in fast[0]
    assert "slower than the controller" in fast[1]
    assert "observer_bandwidth * delay = 2.6" in fast[2]


def test_digest_tells_studies_apart_and_ignores_order_without_meaning() -> None:
    study = crane_study()
    plant = study.loop.plant
    turned = plant.with_(parameters=dict(reversed(plant.parameters.items())))
    assert study.with_(plant=turned).digest == study.digest
    assert study.with_(plant=turned) == study
    assert len(study.digest) == 64
    changed = [
        study.with_(seed=98),
        study.with_(duration=2.5),
        study.with_controller(wd.OutputADRC(2, **TUNING)),
        study.with_(measures=[]),
        study.with_(steps_per_sample=2),
        study.with_(requirements=list(reversed(study.requirements))),
    ]
    assert len({study.digest, *(other.digest for other in changed)}) == 7


def test_studies_can_be_copied_and_sent() -> None:
    study = crane_study()
    study.run(2, progress=False)
    for other in (pickle.loads(pickle.dumps(study)), copy.deepcopy(study)):
        assert other == study
        assert np.array_equal(other.run(2, progress=False).slack, study.run(2, progress=False).slack)


def test_drivers_find_the_parameter_that_matters() -> None:
    loop = crane(
        plant=wd.IntegratorChain(2, gain=wd.uniform(1.9, 2.1)),
        sensor=wd.Sensor(noise=wd.uniform(1e-5, 2e-5)),
        reference=0.0,
        disturbances={"load": wd.Step(wd.uniform(0.2, 2.0), at=1.0)},
    )
    outcome = wd.Study(loop, [wd.peak("error", after=1.0) <= 0.01]).run(400, progress=False)
    drivers = outcome.drivers()
    first = drivers.of(outcome.requirements[0])[0]
    assert first.parameter == "disturbances.load.amplitude"
    assert first.correlation < -0.8
    assert first.low < first.correlation < first.high < 0.0
    assert drivers.note == ""
    assert drivers[0] is drivers.rows[0]
    assert drivers[-1] is drivers.rows[-1]
    assert drivers["gain"].parameter == "gain"
    assert [row.parameter for row in drivers] == [row.parameter for row in drivers.rows]
    with pytest.raises(wd.DescriptionError, match=r"Did you mean 'peak of error after 1 s <= 0\.01'"):
        drivers.of("peak of error after 1 s")
    with pytest.raises(wd.DescriptionError, match="Did you mean 'gain'"):
        drivers["gian"]
    with pytest.raises(wd.DescriptionError, match=f"from -{len(drivers)} to {len(drivers) - 1}"):
        drivers[len(drivers)]
    few = wd.Study(loop, [wd.peak("error", after=1.0) <= 50.0]).run(50, progress=False).drivers()
    assert few.note.startswith("Too few failures (0)")
    assert few.of("failing") == ()


def test_trials_of_another_tuning_meet_the_same_units() -> None:
    study = crane_study()
    slower = study.with_controller(wd.OutputADRC(2, b0=2.0, controller_bandwidth=3.0, observer_bandwidth=15.0))
    a, b = study.run(10, progress=False), slower.run(10, progress=False)
    assert all(np.array_equal(a.parameters[name], b.parameters[name]) for name in a.parameters)
    assert np.array_equal(study.replay(4)["wind"], slower.replay(4)["wind"])


@pytest.mark.parametrize("load", [0.3, wd.Step(0.3, at=0.4)], ids=["constant", "step"])
def test_a_drawn_sample_period_agrees_with_a_fixed_one(load: Any) -> None:
    def study(period: Any) -> wd.Study:
        plant = wd.Plant(
            states={"x": 0.0, "v": 0.0},
            equations={"x": "v", "v": "2*u - v + w"},
            input="u",
            output="x",
            disturbances=["w"],
        )
        loop = wd.Loop(
            plant=plant,
            controller=wd.ErrorADRC(order=2, controller_bandwidth=4.0, observer_bandwidth=25.0, b0=2.0),
            sample_period=period,
            duration=1.0,
            reference=wd.Step(1.0),
            disturbances={"w": load},
            steps_per_sample=2,
        )
        return wd.Study(loop, measures=[wd.peak("error", after=0.5), wd.final("output")], seed=1)

    # Only nearly: intervals of a drawn period are split where the delay ends, which takes one step more.
    drawn = study(wd.choice([0.01, 0.02], [0.5, 0.5])).run(60, progress=False)
    (periods,) = drawn.parameters.values()
    for period in (0.01, 0.02):
        fixed = study(period).run(1, progress=False)
        assert (periods == period).any()
        for name, values in drawn.measures.items():
            np.testing.assert_allclose(values[periods == period], fixed.measures[name][0], rtol=1e-8)

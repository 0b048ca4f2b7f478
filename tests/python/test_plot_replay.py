"""The plot of a replay: signals as they are, a mark for every kind of requirement, the nominal unit behind."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from matplotlib.axes import Axes

import windage as wd
from windage._plot_reading import first_missed, readings

sys.path.insert(0, str(Path(__file__).parent))
from plotted import TRIALS, assert_no_texts_overlap, legend_words, servo, texts, unstable_study


@pytest.fixture(scope="module")
def outcome() -> wd.Outcome:
    return servo().run(TRIALS, progress=False)


def drawn(axes: Axes) -> dict[str, Any]:
    return {str(line.get_label()): line for line in axes.lines}


EVERY_KIND = [
    wd.overshoot(before=1.9) <= 0.02,
    wd.undershoot(before=1.9) <= 0.01,
    wd.rise_time(before=1.9) <= 0.4,
    wd.settling_time(before=1.9) <= 0.7,
    wd.settling_time(tolerance=0.02, after=2) <= 0.5,
    wd.final("output") >= 0.99,
    wd.mean("output", after=3) >= 0.99,
    wd.ise(after=2) <= 0.03,
    wd.iae(after=2) <= 0.03,
    wd.itae(after=2) <= 0.03,
    wd.integral_absolute("command") <= 0.03,
    wd.integral_square("command") <= 0.03,
    wd.integral_time_absolute("command") <= 0.03,
    wd.peak("error", after=2) <= 0.05,
    wd.minimum("error", after=2) >= 0.05,
    wd.maximum("error", after=2) <= 0.05,
    wd.time_outside("error", -0.02, 0.02, after=2) <= 0.1,
    wd.rms("command", after=3) <= 1.0,
    wd.rms_change("command", after=3) <= 1.0,
    wd.standard_deviation("estimate_1", after=3) <= 0.001,
    wd.time_in_saturation() <= 0.02,
    wd.total_variation("command") <= 50,
    wd.reversals("command", dead_band=0.1) <= 5,
    wd.peak_to_peak("measured", after=3) <= 0.01,
    wd.time_of_peak("output", before=1.9) <= 0.6,
    wd.rms("error", after=3) / wd.rms("error", before=1) <= 0.001,
    wd.peak("error", after=3) - wd.rms("error", before=1) <= 0.001,
]


def loop_with(requirements: Any) -> wd.Study:
    loop = wd.Loop(
        plant=wd.SecondOrder(1.0, 0.2, 0.3),
        controller=wd.OutputADRC(2, controller_bandwidth=6.0, observer_bandwidth=30.0, b0=40.0),
        sample_period=0.005,
        duration=4.0,
        reference=wd.Step(1.0, at=0.2),
        sensor=wd.Sensor(noise=wd.uniform(1e-3, 3e-3)),
        actuator=wd.Actuator(limits=(-2, 2)),
        disturbances={"load": wd.Step(-0.5, at=2.0)},
    )
    return wd.Study(loop, requirements=requirements, seed=1)


def test_lines_of_a_replay_are_its_signals(outcome: wd.Outcome) -> None:
    replay = outcome.study.replay(7)
    *signals, facts = replay.plot().get_axes()
    lines = {name: line for axes in signals for name, line in drawn(axes).items()}
    expected = {
        "reference": replay["reference"],
        "output": replay["output"],
        "error = reference − output": replay["error"],
        "command": replay["command"],
        "input": replay["input"],
        "true": replay.total_disturbance,
        "estimated by the observer": replay.estimated_disturbance,
    }
    for label, values in expected.items():
        np.testing.assert_array_equal(lines[label].get_xdata(), replay.time)
        np.testing.assert_array_equal(lines[label].get_ydata(), values)
    written = texts(facts).replace("\n", " ")
    for name, value in replay.parameters.items():
        assert f"{name} = {value:.5g}" in written
    for requirement in replay.requirements:
        assert requirement.in_full in written


def test_the_nominal_unit_is_drawn_behind_unless_it_is_not_wanted(outcome: wd.Outcome) -> None:
    replay, nominal = outcome.study.replay(7), outcome.study.nominal()
    first, second, third = replay.plot().get_axes()[:3]
    for axes, signal in ((first, "output"), (second, "error"), (third, "command")):
        line = drawn(axes)["nominal unit"]
        np.testing.assert_array_equal(line.get_ydata(), nominal[signal])
        assert line.get_zorder() < min(other.get_zorder() for other in axes.lines if other is not line)
    for figure in (replay.plot(nominal=False), nominal.plot()):
        assert "nominal unit" not in legend_words(figure)


def test_a_nominal_unit_that_diverges_or_cannot_be_run_spoils_no_picture() -> None:
    study = unstable_study()
    wild = study.with_(plant=study.loop.plant.with_(parameters={"growth": wd.choice([0.1, 8.0], [0.3, 0.7])}))
    assert wild.nominal().diverged
    outcome = wild.run(40, progress=False)
    replay = wild.replay(int(np.flatnonzero(outcome.status == 0)[0]))
    low, high = replay.plot().get_axes()[0].get_ylim()
    assert -5.0 < low < high < 5.0

    def refused() -> wd.Replay:
        raise wd.EngineError("no such unit")

    replay._nominal = refused
    assert "nominal unit" not in legend_words(replay.plot())


def test_signals_that_requirements_read_have_panels_and_others_by_name() -> None:
    replay = loop_with([wd.standard_deviation("estimate_1", after=3) <= 0.1, wd.peak("output") <= 2.0]).replay(0)
    titles = [axes.get_ylabel() for axes in replay.plot().get_axes()[:-1]]
    assert titles == ["output", "error", "command, input", "total disturbance", "estimate_1"]
    more = replay.plot(signals=["load", "output", "measured"]).get_axes()[:-1]
    assert [axes.get_ylabel() for axes in more][5:] == ["load", "measured"]
    np.testing.assert_array_equal(drawn(more[5])["load"].get_ydata(), replay["load"])
    with pytest.raises(wd.DescriptionError, match="Did you mean 'measured'"):
        replay.plot(signals=["mesured"])
    with pytest.raises(wd.DescriptionError, match="signals"):
        replay.plot(signals="load")


@pytest.mark.parametrize("requirement", EVERY_KIND, ids=lambda r: r.measure.label)
def test_every_kind_of_requirement_leaves_a_mark_in_its_panel(requirement: wd.Requirement) -> None:
    replay = loop_with([requirement]).replay(0)
    bare = loop_with([wd.peak("reference") <= 9.0]).replay(0)
    figure = replay.plot(nominal=False)
    signals = [part.signal for part in requirement.measure.parts]
    names = {"output": 0, "error": 1, "command": 2}
    plain = bare.plot(nominal=False, signals=signals).get_axes()[:-1]
    for signal in signals:
        place = names.get(signal, len(plain) - 1)
        axes, before = figure.get_axes()[place], plain[place]
        # One artist more than the entry of the legend: a mark in the panel itself.
        marks = len(axes.lines) + len(axes.collections)
        without = len([line for line in before.lines if "reference:" not in str(line.get_label())])
        assert marks - (without if place else 2) >= 2
    word = "met" if replay.met[0] else "MISSED"
    assert f"{requirement.measure.label}: " in legend_words(figure)
    assert legend_words(figure).count(word) >= 1


def test_every_kind_there_is_is_among_those_that_are_tried() -> None:
    from windage._study_text import MEASURES

    tried = {part.kind for requirement in EVERY_KIND for part in requirement.measure.parts}
    tried |= {requirement.measure.kind for requirement in EVERY_KIND}
    assert set(MEASURES) == tried


def test_marks_are_at_the_samples_that_decide() -> None:
    kinds = [r for r in EVERY_KIND if not r.measure.kind.startswith(("diff", "ratio"))]
    replay = loop_with(kinds).replay(0)
    values = list(replay.measures.values())
    found = 0
    for place in range(len(kinds)):
        ((part, reading),) = readings(replay, place)
        value = values[replay._described.requirement_rows[place]]
        signal, time = replay[part.signal], replay.time
        points = signal[reading.points]
        if part.kind in ("peak", "maximum", "minimum", "final"):
            assert abs(points[0]) == pytest.approx(abs(value))
        elif part.kind in ("mean", "rms"):
            assert reading.measured[0] == pytest.approx(value)
        elif part.kind == "standard_deviation":
            assert np.ptp(reading.measured) == pytest.approx(2.0 * value)
        elif part.kind == "overshoot":
            assert max(points[0] - 1.0, 0.0) == pytest.approx(value, abs=5e-3)
            assert reading.levels == pytest.approx([1.02], abs=2e-3)
        elif part.kind == "rise_time":
            assert np.ptp(time[reading.points]) == pytest.approx(value, abs=0.011)
        elif part.kind == "settling_time":
            assert time[reading.points[0]] - part.after == pytest.approx(value, abs=0.011)
        elif part.kind == "time_outside":
            assert np.count_nonzero(reading.beyond) * 0.005 == pytest.approx(value, abs=0.011)
        elif part.kind == "peak_to_peak":
            assert np.ptp(points) == pytest.approx(value)
        elif part.kind == "time_of_peak":
            assert time[reading.points[0]] == pytest.approx(value, abs=0.011)
        else:
            continue
        found += 1
    assert found == 14


def test_limits_are_drawn_where_they_hold_and_the_worst_sample_is_marked(outcome: wd.Outcome) -> None:
    trial = int(outcome.failed(0)[0])
    replay = outcome.study.replay(trial)
    figure = replay.plot()
    title = figure.get_suptitle()
    for word in (f"Trial {trial} failed", outcome.study.digest[:12], f"seed {outcome.study.seed}"):
        assert word in title
    axes = figure.get_axes()[1]
    limits = [line for line in axes.lines if line.get_linestyle() == "--" and len(line.get_xdata())]
    assert sorted(float(line.get_ydata()[0]) for line in limits) == [-0.2, 0.2]
    for line in limits:
        np.testing.assert_allclose(line.get_xdata(), [0.5, 1.5], atol=1e-9)
    (mark,) = (line for line in axes.lines if line.get_marker() == "x" and len(line.get_xdata()))
    (peak,) = (value for name, value in replay.measures.items() if name.startswith("peak"))
    assert abs(float(mark.get_ydata()[0])) == peak
    assert "MISSED: peak of error" in texts(figure.get_axes()[-1])


def test_a_drawn_limit_is_that_of_the_trial() -> None:
    drawn_limit = wd.uniform(0.1, 0.3, name="strictness")
    study = servo(requirements=[wd.Requirement(wd.peak("error", after=0.5), at_most=drawn_limit)])
    replay = study.replay(4)
    axes = replay.plot().get_axes()[1]
    heights = {
        abs(float(line.get_ydata()[0])) for line in axes.lines if line.get_linestyle() == "--" and len(line.get_xdata())
    }
    assert heights == {replay.parameters["strictness"]}


def test_a_trial_that_meets_its_limits_has_no_cross(outcome: wd.Outcome) -> None:
    trial = int(np.flatnonzero(outcome.passed)[0])
    figure = outcome.study.replay(trial).plot()
    assert not any(line.get_marker() == "x" for axes in figure.get_axes() for line in axes.lines)
    assert "MISSED" not in texts(figure.get_axes()[-1])
    assert "MISSED" not in legend_words(figure)


def test_section_of_a_replay(outcome: wd.Outcome) -> None:
    replay = outcome.study.replay(7)
    axes = replay.plot(after=0.5, before=1.0).get_axes()[0]
    times = np.asarray(axes.lines[0].get_xdata())
    assert times[0] == pytest.approx(0.5)
    assert times[-1] == pytest.approx(1.0)
    assert axes.get_xlim() == (times[0], times[-1])
    for after, before in ((5.0, None), (1.0, 0.5), (float("nan"), None)):
        with pytest.raises(wd.DescriptionError, match="after"):
            replay.plot(after=after, before=before)


def test_onset_is_where_the_first_requirement_is_missed(outcome: wd.Outcome) -> None:
    replay = outcome.study.replay(int(outcome.failed(0)[0]))
    late = (replay.time >= 0.5) & (replay.time <= 1.5) & (np.abs(replay["error"]) > 0.2)
    instant = replay.time[late][0]
    assert first_missed(replay) == instant
    low, high = replay.plot(onset=True).get_axes()[0].get_xlim()
    assert low < instant < high
    assert high - low < 1.0
    passing = outcome.study.replay(int(np.flatnonzero(outcome.passed)[0]))
    with pytest.raises(wd.DescriptionError, match="a trial that misses a requirement"):
        passing.plot(onset=True)
    with pytest.raises(wd.DescriptionError, match="either onset or after and before"):
        replay.plot(onset=True, after=0.5)
    with pytest.raises(wd.DescriptionError, match="True or False"):
        replay.plot(onset=1)  # type: ignore[arg-type]


def test_a_root_mean_square_is_missed_where_its_sum_is_too_large(outcome: wd.Outcome) -> None:
    study = outcome.study.with_(requirements=[wd.rms("error", after=0.1) <= 0.05])
    replay = study.replay(0)
    assert not replay.passed
    places = np.flatnonzero(replay.time >= 0.1 - 1e-9)
    together = np.cumsum(replay["error"][places] ** 2) > 0.05**2 * len(places)
    instant = replay.time[places[together][0]]
    assert instant > replay.time[places[np.abs(replay["error"][places]) > 0.05][0]]
    assert first_missed(replay) == instant
    # One that is too small is so at the end only, and no sample shows it.
    assert first_missed(study.with_(requirements=[wd.rms("error") >= 9.0]).replay(0)) is None


def test_a_diverged_trial_is_shown_until_it_leaves_and_can_be_read() -> None:
    study = unstable_study()
    assert "Nominal unit" in study.nominal().plot().get_suptitle()
    replay = study.replay(int(study.run(400, progress=False).diverged[0]))
    figure = replay.plot()
    assert "diverged" in figure.get_suptitle()
    axes = figure.get_axes()[0]
    assert axes.get_xlim()[1] < replay.time[-1]
    assert axes.get_ylim()[1] < 0.5 * np.nanmax(replay["output"][np.isfinite(replay["output"])])
    assert "▲ up to" in texts(axes)
    assert first_missed(replay) == replay.time[np.flatnonzero(np.isfinite(replay["output"]))[-1]]
    assert_no_texts_overlap(figure)
    assert_no_texts_overlap(replay.plot(onset=True))


def test_one_spike_does_not_flatten_the_disturbance() -> None:
    study = loop_with([wd.peak("output") <= 2.0])
    smooth = study.with_(disturbances={"load": wd.Sine(0.2, 1.0)}, sensor=wd.Sensor())
    spiked = smooth.with_(disturbances={"load": wd.Table([0, 1, 1, 1.01, 1.01, 4], [0, 0.2, 80, 80, 0.2, -0.2])})
    axes = spiked.replay(0).plot().get_axes()[3]
    truth = spiked.replay(0).total_disturbance
    largest = np.nanmax(np.abs(truth))
    assert np.ptp(axes.get_ylim()) < 0.5 * largest
    assert "beyond" not in texts(axes)
    assert f"{np.nanmax(truth):.3g}" in texts(axes)
    assert not texts(smooth.replay(0).plot().get_axes()[3])


def test_no_texts_overlap(outcome: wd.Outcome) -> None:
    assert_no_texts_overlap(outcome.study.replay(3).plot())
    assert_no_texts_overlap(loop_with(EVERY_KIND).replay(0).plot(signals=["load"]))
    long = [
        requirement.named("a $name$ with _marks_ " + "and many words " * 9 + str(i))
        for i, requirement in enumerate(EVERY_KIND[:6])
    ]
    assert_no_texts_overlap(loop_with(long).replay(0).plot())


def test_long_and_short_labels_of_a_legend_share_its_room(outcome: wd.Outcome) -> None:
    # Four labels in three columns: the long last one has a column of its own.
    requirements = [wd.itae() <= 1e-6, wd.peak("error", after=1.0) - wd.rms("v") >= 123456.0]
    study = outcome.study.with_(requirements=requirements, signals={"v": "2*output"})
    assert_no_texts_overlap(study.replay(0).plot())
    drawn_window = wd.peak("v") / wd.rms("command", before=wd.uniform(1.0, 1.4)) <= 1e-6
    assert_no_texts_overlap(study.with_(requirements=[drawn_window]).run(50, progress=False).plot(parameters=0))


def test_a_limit_far_outside_does_not_flatten_the_signals(outcome: wd.Outcome) -> None:
    def height(limit: float) -> float:
        figure = outcome.study.with_(requirements=[wd.peak("error") <= limit]).replay(0).plot()
        assert f"<= {limit:g} met" in legend_words(figure)
        low, high = next(axes for axes in figure.get_axes() if axes.get_ylabel() == "error").get_ylim()
        return high - low

    assert height(4.0) == pytest.approx(8.0, rel=0.2)
    assert height(1e4) < 3.0

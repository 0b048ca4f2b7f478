"""Plots: what is drawn is what was computed, it can be read, and nothing of Matplotlib's state is touched."""

from __future__ import annotations

import itertools
import subprocess
import sys
from collections.abc import Iterator
from typing import Any

import matplotlib as mpl
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra import numpy as arrays
from matplotlib.axes import Axes
from matplotlib.collections import PathCollection
from matplotlib.figure import Figure
from scipy import stats

import windage as wd
from windage import _plots
from windage._plot_outcome import MOST_DOTS, MOST_MARKS
from windage._plot_style import MOST_POINTS, StudyFigure, thinned, wrapped
from windage._runner import Columns

TRIALS = 1_500


def servo(**changes: Any) -> wd.Study:
    """A loop whose peak grows with the gain, and whose effort grows with the step."""
    loop = wd.Loop(
        plant=wd.FirstOrder(gain=wd.uniform(0.6, 1.4), time_constant=wd.normal(1.0, 0.05, sigmas=3)),
        controller=wd.OutputADRC(order=1, controller_bandwidth=4.0, observer_bandwidth=40.0, b0=1.0),
        sample_period=0.01,
        duration=2.0,
        reference=wd.Step(wd.uniform(0.5, 1.5, name="height")),
        actuator=wd.Actuator(limits=(-5.0, 5.0)),
        disturbances={"load": 0.0},
    )
    requirements = [
        wd.peak("error", after=0.5, before=1.5) <= 0.2,
        (wd.maximum("command") <= 5.0).named("effort"),
        wd.minimum("output", after=1.0) >= 0.2,
    ]
    return wd.Study(loop, requirements=requirements, seed=5).with_(**changes)


@pytest.fixture(scope="module")
def outcome() -> wd.Outcome:
    return servo().run(TRIALS, progress=False)


@pytest.fixture(scope="module")
def unstable() -> wd.Study:
    """A study of which a part diverges."""
    plant = wd.Plant(
        states={"x": 0.0},
        equations={"x": "growth*x*x*x + u"},
        input="u",
        output="x",
        parameters={"growth": wd.uniform(0.0, 8.0)},
    )
    loop = wd.Loop(
        plant=plant,
        controller=wd.OutputADRC(order=1, controller_bandwidth=3.0, observer_bandwidth=20.0, b0=1.0),
        sample_period=0.02,
        duration=3.0,
        reference=wd.Step(1.0),
        actuator=wd.Actuator(limits=(-5.0, 5.0)),
        steps_per_sample=2,
    )
    return wd.Study(loop, requirements=[wd.overshoot() <= 0.3], seed=3)


def panels(figure: Figure, rows: int) -> list[list[Axes]]:
    """The axes of a figure, row by row."""
    axes = figure.get_axes()
    assert len(axes) % rows == 0
    width = len(axes) // rows
    return [axes[i * width : (i + 1) * width] for i in range(rows)]


def texts(axes: Axes) -> str:
    return "\n".join(text.get_text() for text in axes.texts)


# --- outcome
# ------------------------------------------------------------------------------------------------


def test_a_row_for_each_requirement_with_its_strongest_parameters(outcome: wd.Outcome) -> None:
    figure = outcome.plot(parameters=2)
    for label, row in zip(outcome.requirements, panels(figure, 3), strict=True):
        assert len(row) == 3
        assert row[0].get_title(loc="left").replace("\n", " ") == label
        strongest = outcome.drivers().of(label)[:2]
        assert [axes.get_xlabel() for axes in row[1:]] == [driver.parameter for driver in strongest]
    failed, study = len(outcome.failures), outcome.study
    title = figure.get_suptitle()
    for word in (f"{failed:,} of {TRIALS:,} trials failed", study.digest[:12], f"seed {study.seed}"):
        assert word in title


def test_the_curve_is_the_distribution_and_the_band_that_of_clopper_and_pearson(outcome: wd.Outcome) -> None:
    confidence = 0.9
    figure = outcome.plot(requirements=[0], parameters=0, confidence=confidence)
    (axes,) = figure.get_axes()
    slack = outcome.slack[:, 0]
    x, y = (np.asarray(data) for data in axes.lines[0].get_data())
    inside = x > axes.get_xlim()[0]
    for at, fraction in zip(x[inside], y[inside], strict=True):
        assert np.count_nonzero(slack <= at) == round(fraction * TRIALS)
    # Clopper & Pearson 1934, Biometrika 26:404-413, by the beta quantiles of SciPy.
    ranks = np.rint(y * TRIALS)
    tail = (1.0 - confidence) / 2.0
    lower = stats.beta.ppf(tail, ranks, TRIALS - ranks + 1.0)
    upper = np.where(ranks == TRIALS, 1.0, stats.beta.ppf(1.0 - tail, ranks + 1.0, TRIALS - ranks))
    (band,) = axes.collections
    drawn = band.get_paths()[0].vertices[:, 1]
    for bound in (np.maximum(lower, 0.5 / TRIALS), upper):
        for value in bound:
            assert np.min(np.abs(drawn - value)) < 1e-9


def test_missed_trials_are_counted_and_marked_by_shape(outcome: wd.Outcome) -> None:
    row = panels(outcome.plot(requirements=[0], parameters=1), 1)[0]
    missed = outcome.failed(0)
    assert 0 < len(missed) <= MOST_MARKS
    assert f"{len(missed):,} missed" in texts(row[0])
    passing, elsewhere, crosses = (c for c in row[1].collections if isinstance(c, PathCollection))
    assert len(crosses.get_offsets()) == len(missed)
    assert len(elsewhere.get_offsets()) == len(np.setdiff1d(outcome.failures, missed))
    assert len(passing.get_offsets()) == min(MOST_DOTS, TRIALS - len(outcome.failures))
    # Colour is not the only difference: the marks have other outlines, those of others are hollow.
    assert len(crosses.get_paths()[0].vertices) != len(passing.get_paths()[0].vertices)
    assert len(elsewhere.get_facecolors()) == 0


def test_limit_is_at_zero_slack(outcome: wd.Outcome) -> None:
    for row in panels(outcome.plot(), 3):
        assert any(list(line.get_xdata()) == [0.0, 0.0] for line in row[0].lines)
        for axes in row[1:]:
            assert any(list(line.get_ydata()) == [0.0, 0.0] for line in axes.lines)


def test_trials_without_a_value_are_counted_and_kept_in_the_picture(unstable: wd.Study) -> None:
    outcome = unstable.run(400, progress=False)
    assert 0 < len(outcome.diverged) < 400
    row = panels(outcome.plot(), 1)[0]
    assert f"{len(outcome.diverged):,} without a value" in texts(row[0])
    y = np.asarray(row[0].lines[0].get_ydata())
    assert y[-1] == 1.0
    crosses = [c for c in row[1].collections if isinstance(c, PathCollection)][-1]
    assert len(crosses.get_offsets()) == len(outcome.failed(0))
    heights = np.asarray(crosses.get_offsets())[:, 1]
    assert np.count_nonzero(heights == row[1].get_ylim()[0]) == len(outcome.diverged)


def test_an_outlier_does_not_squeeze_the_others(outcome: wd.Outcome) -> None:
    class Wild:
        """An outcome with one absurd slack."""

        def __getattr__(self, name: str) -> Any:
            return getattr(outcome, name)

        @property
        def slack(self) -> Any:
            changed = outcome.slack.copy()
            changed[3, 0] = -1e12
            return changed

    wild: Any = Wild()
    (axes,) = _plots.plot_outcome(wild, requirements=[0], parameters=0).get_axes()
    assert axes.get_xlim()[0] > -100.0


def test_many_requirements_show_those_missed_most(outcome: wd.Outcome) -> None:
    limits = np.linspace(0.05, 0.5, 9)
    study = servo(requirements=[wd.peak("error", after=0.5) <= float(limit) for limit in limits])
    figure = study.run(200, progress=False).plot(parameters=0)
    shown = [axes.get_title(loc="left") for axes in figure.get_axes()]
    assert shown == [requirement.label for requirement in study.requirements[:6]]
    assert len(outcome.requirements) == 3


def readable(axes: Axes, renderer: Any) -> Iterator[tuple[str, Any]]:
    """The texts of some axes that are drawn, with the boxes they take."""
    words = list(axes.texts)
    if axes.axison:
        words += [axes.title, axes._left_title, axes.xaxis.label, axes.yaxis.label]
        inside = axes.get_window_extent(renderer).padded(1.0)
        ticks = axes.get_yticklabels()
        if axes.xaxis.get_tick_params()["labelbottom"]:
            ticks += axes.get_xticklabels()
        for tick in ticks:
            # Matplotlib keeps labels beyond the ends of an axis, which it does not draw.
            box = tick.get_window_extent(renderer)
            x, y = (box.x0 + box.x1) / 2.0, (box.y0 + box.y1) / 2.0
            if inside.x0 <= x <= inside.x1 or inside.y0 <= y <= inside.y1:
                words.append(tick)
    for word in words:
        if word.get_visible() and word.get_text().strip():
            yield word.get_text(), word.get_window_extent(renderer)


def test_no_texts_overlap(outcome: wd.Outcome) -> None:
    for figure in (outcome.plot(), outcome.study.replay(3).plot()):
        figure.draw_without_rendering()
        renderer = figure.canvas.get_renderer()
        boxes = [entry for axes in figure.get_axes() for entry in readable(axes, renderer)]
        assert len(boxes) > 40
        width, height = figure.canvas.get_width_height()
        for text, box in boxes:
            assert min(box.x0, box.y0) >= 0.0, text
            assert box.x1 <= width, text
            assert box.y1 <= height, text
        for (first, a), (second, b) in itertools.combinations(boxes, 2):
            across = min(a.x1, b.x1) - max(a.x0, b.x0)
            along = min(a.y1, b.y1) - max(a.y0, b.y0)
            assert across <= 1.0 or along <= 1.0, f"{first!r} and {second!r}"


@pytest.mark.parametrize(
    ("options", "words"),
    [
        ({"parameters": 7}, "parameters"),
        ({"parameters": -1}, "parameters"),
        ({"confidence": 1.0}, "confidence"),
        ({"requirements": [3]}, "requirement"),
        ({"requirements": ["eff"]}, "effort"),
    ],
)
def test_wrong_options_of_an_outcome_plot(outcome: wd.Outcome, options: dict[str, Any], words: str) -> None:
    with pytest.raises(wd.DescriptionError, match=words):
        outcome.plot(**options)


def test_nothing_to_plot_is_said(outcome: wd.Outcome) -> None:
    without = servo(requirements=(), measures=[wd.ise()]).run(10, progress=False)
    with pytest.raises(wd.DescriptionError, match=r"study\.requirements: found 'none'"):
        without.plot()
    study = outcome.study
    nothing = Columns(np.empty((3, 0)), np.empty((3, 0)), np.empty(0, dtype=np.uint8), requested=TRIALS)
    stopped = wd.Outcome(study, study._run_description, nothing)
    with pytest.raises(wd.DescriptionError, match="at least 1 trial"):
        stopped.plot()


# --- replay
# ------------------------------------------------------------------------------------------------


def test_lines_of_a_replay_are_its_signals(outcome: wd.Outcome) -> None:
    replay = outcome.study.replay(7)
    *signals, facts = replay.plot().get_axes()
    drawn = {str(line.get_label()): line for axes in signals for line in axes.lines}
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
        np.testing.assert_array_equal(drawn[label].get_xdata(), replay.time)
        np.testing.assert_array_equal(drawn[label].get_ydata(), values)
    written = texts(facts).replace("\n", " ")
    for name, value in replay.parameters.items():
        assert f"{name} = {value:.5g}" in written
    for requirement in replay.requirements:
        assert requirement.label in written


def test_limits_are_drawn_where_they_hold_and_the_worst_sample_is_marked(outcome: wd.Outcome) -> None:
    trial = int(outcome.failed(0)[0])
    replay = outcome.study.replay(trial)
    figure = replay.plot()
    title = figure.get_suptitle()
    for word in (f"Trial {trial:,} failed", outcome.study.digest[:12], f"seed {outcome.study.seed}"):
        assert word in title
    axes = figure.get_axes()[1]
    limits = [line for line in axes.lines if "limit" in str(line.get_label())]
    assert sorted(float(line.get_ydata()[0]) for line in limits) == [-0.2, 0.2]
    for line in limits:
        np.testing.assert_allclose(line.get_xdata(), [0.5, 1.5], atol=1e-9)
    (mark,) = (line for line in axes.lines if line.get_marker() == "x")
    (peak,) = (value for name, value in replay.measures.items() if name.startswith("peak"))
    assert abs(float(mark.get_ydata()[0])) == peak
    assert "MISSED: peak of error" in texts(figure.get_axes()[-1])


def test_a_trial_that_meets_its_limits_has_no_mark(outcome: wd.Outcome) -> None:
    trial = int(np.flatnonzero(outcome.passed)[0])
    figure = outcome.study.replay(trial).plot()
    assert not any(line.get_marker() == "x" for axes in figure.get_axes() for line in axes.lines)
    assert "MISSED" not in texts(figure.get_axes()[-1])


def test_section_of_a_replay(outcome: wd.Outcome) -> None:
    replay = outcome.study.replay(7)
    line = replay.plot(after=0.5, before=1.0).get_axes()[0].lines[0]
    times = np.asarray(line.get_xdata())
    assert times[0] == pytest.approx(0.5)
    assert times[-1] == pytest.approx(1.0)
    for after, before in ((5.0, None), (1.0, 0.5), (float("nan"), None)):
        with pytest.raises(wd.DescriptionError, match="after"):
            replay.plot(after=after, before=before)


def test_nominal_unit_and_diverged_trial_can_be_drawn(unstable: wd.Study) -> None:
    assert "Nominal unit" in unstable.nominal().plot().get_suptitle()
    diverged = int(unstable.run(400, progress=False).diverged[0])
    assert "diverged" in unstable.replay(diverged).plot().get_suptitle()


# --- pieces and promises
# ------------------------------------------------------------------------------------------------


@given(
    arrays.arrays(
        np.float64,
        st.integers(1, 6 * MOST_POINTS),
        elements=st.floats(-1e6, 1e6, width=32),
        fill=st.floats(-1.0, 1.0, width=32),
    )
)
def test_thinning_keeps_every_extreme(values: Any) -> None:
    time = np.arange(float(len(values)))
    x, y = thinned(time, values)
    assert len(y) <= MOST_POINTS
    assert y.min() == values.min()
    assert y.max() == values.max()
    assert np.all(np.diff(x) > 0.0)
    np.testing.assert_array_equal(values[x.astype(int)], y)


@pytest.mark.parametrize("text", ["disturbances.wind.intensity", "rms of torque <= 12.5", "a.b.c.d of x"])
@pytest.mark.parametrize("width", [8, 12, 40])
def test_wrapping_breaks_between_parts_only(text: str, width: int) -> None:
    lines = wrapped(text, width).split("\n")
    assert "".join(lines).replace(" ", "") == text.replace(" ", "")
    for before, after in itertools.pairwise(lines):
        assert before.endswith(".") is after[0].isalpha() or not before.endswith(".")
        assert not before[-2:-1].isdigit() or not before.endswith(".")


def test_a_notebook_gets_a_picture(outcome: wd.Outcome) -> None:
    figure = outcome.plot(parameters=0)
    assert isinstance(figure, StudyFigure)
    assert figure._repr_png_().startswith(b"\x89PNG")


def test_same_outcome_same_picture(outcome: wd.Outcome) -> None:
    assert outcome.plot()._repr_png_() == outcome.plot()._repr_png_()


def test_settings_of_matplotlib_are_left_alone(outcome: wd.Outcome) -> None:
    before = dict(mpl.rcParams)
    outcome.plot()
    outcome.study.replay(0).plot()
    assert dict(mpl.rcParams) == before


def test_pyplot_is_never_imported() -> None:
    code = (
        "import sys, windage as wd\n"
        "from windage._demo import demo_study\n"
        "study = demo_study().with_(duration=6.0)\n"
        "study.run(32, progress=False).plot()._repr_png_()\n"
        "study.nominal().plot()._repr_png_()\n"
        "print('matplotlib.pyplot' in sys.modules)\n"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout == "False\n"


def test_without_matplotlib_the_error_says_how_to_get_it(outcome: wd.Outcome, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(_plots, "has_matplotlib", lambda: False)
    for plotted in (outcome, outcome.study.nominal()):
        with pytest.raises(wd.WindageError, match=r"pip install 'windage\[plots\]'"):
            plotted.plot()

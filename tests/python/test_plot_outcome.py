"""The plot of an outcome: what is drawn is what was computed, and it can be read whatever came out."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from matplotlib.collections import PathCollection, QuadMesh
from scipy import stats

import windage as wd
from windage import _plots
from windage._plot_dependence import MOST_DOTS, MOST_MARKS
from windage._plot_ticks import tick_labels
from windage._runner import Columns

sys.path.insert(0, str(Path(__file__).parent))
from plotted import (
    TRIALS,
    assert_no_texts_overlap,
    legend_words,
    many_parameters,
    panels,
    servo,
    texts,
    unstable_study,
)


@pytest.fixture(scope="module")
def outcome() -> wd.Outcome:
    return servo().run(TRIALS, progress=False)


def test_a_row_for_each_requirement_with_its_strongest_parameters(outcome: wd.Outcome) -> None:
    figure = outcome.plot(parameters=2)
    for requirement, label, row in zip(
        outcome.study.requirements, outcome.requirements, panels(figure, 3), strict=True
    ):
        assert len(row) == 3
        # A name of its own does not hide measure and limit.
        assert row[0].get_title(loc="left").replace("\n", " ") == requirement.in_full
        for words in (row[0].get_xlabel(), row[1].get_ylabel()):
            assert words.replace("\n", " ") == requirement.measure.label
        strongest = outcome.drivers().of(label)[:2]
        assert [axes.get_xlabel() for axes in row[1:]] == [driver.parameter for driver in strongest]
        for axes, driver in zip(row[1:], strongest, strict=True):
            correlation = f"{driver.correlation:+z.2f}".replace("-", "−")
            assert axes.get_title(loc="left") == f"slack: rank correlation {correlation}"
    failed, study = len(outcome.failures), outcome.study
    title = figure.get_suptitle()
    for word in (f"{failed} of 1 500 trials failed", study.digest[:12], f"seed {study.seed}"):
        assert word in title


def test_the_text_on_missed_trials_lies_beside_the_curve_and_the_limit(outcome: wd.Outcome) -> None:
    for requirement in outcome.study.requirements:
        # From nearly none to nearly all: the limit moves over the whole axis.
        values = np.sort(outcome.measures[requirement.measure.label])
        for share in (0.003, 0.1, 0.5, 0.9):
            limit = float(np.quantile(values, 1.0 - share if requirement.at_most is not None else share))
            moved = wd.Requirement(requirement.measure, **{"at_most" if requirement.at_most else "at_least": limit})
            study = outcome.study.with_(requirements=[moved])
            figure = study.run(300, progress=False).plot(parameters=0)
            figure.canvas.draw()  # type: ignore[attr-defined]
            axes = figure.axes[0]
            box = next(t for t in axes.texts if "missed" in t.get_text()).get_window_extent()
            curve = next(line for line in axes.lines if len(line.get_xdata()) > 2)  # type: ignore[arg-type]
            at = axes.transData.transform(np.column_stack([curve.get_xdata(), curve.get_ydata()]))
            inside = (at[:, 0] > box.x0) & (at[:, 0] < box.x1) & (at[:, 1] > box.y0) & (at[:, 1] < box.y1)
            assert not inside.any(), (requirement.label, share)
            place = float(axes.transData.transform((limit, 1.0))[0])
            assert not box.x0 < place < box.x1


def test_a_single_trial_can_be_seen() -> None:
    figure = servo().run(1, progress=False).plot(parameters=1)
    for distribution, dependence in panels(figure, 3):
        curve = distribution.lines[0]
        assert curve.get_marker() == "o"
        assert len(curve.get_xdata()) == 1
        dots = [c for c in dependence.collections if isinstance(c, PathCollection) and len(c.get_offsets())]
        assert max(float(c.get_sizes()[0]) for c in dots) >= 20.0


def test_what_is_no_verdict_heads_no_picture(outcome: wd.Outcome) -> None:
    with pytest.raises(wd.DescriptionError, match="verdict: found True; expected a verdict of this outcome"):
        outcome.plot(verdict=True)  # type: ignore[arg-type]


def test_a_verdict_of_other_trials_heads_no_picture(outcome: wd.Outcome) -> None:
    single = outcome.verdicts(0.5)[0]
    assert outcome.plot(parameters=0, verdict=single).get_suptitle().replace("\n", " ").startswith(single.headline)
    failing = outcome.study.with_(requirements=[wd.peak("error") <= 0.0])
    for other in (outcome.extend(1, progress=False), failing.run(TRIALS, progress=False)):
        with pytest.raises(wd.DescriptionError, match="expected a verdict of this outcome"):
            outcome.plot(verdict=other.verdict(0.5, audit=False))


@pytest.mark.parametrize("requirements", [[], 0, "peak of error"])
def test_what_is_no_list_of_requirements_is_refused(outcome: wd.Outcome, requirements: Any) -> None:
    with pytest.raises(wd.DescriptionError, match=r"requirements: found .* a list of requirements by place or name"):
        outcome.plot(requirements=requirements)


def test_claim_and_verdict_head_the_picture(outcome: wd.Outcome) -> None:
    verdict = outcome.verdict(0.5)
    lines = outcome.plot(parameters=1, verdict=verdict).get_suptitle().split("\n")
    assert lines[0] == verdict.headline == "PASS: at least 50 % of all trials pass, at confidence 95 %."
    assert "trials failed" in lines[1]
    titled = servo(title="Servo of the $3 kind").run(50, progress=False)
    assert titled.plot(parameters=0).get_suptitle().replace("\n", " ").endswith(r", seed 5: Servo of the \$3 kind")


@pytest.mark.parametrize("place", [0, 2])
def test_the_curve_is_the_distribution_and_the_band_that_of_clopper_and_pearson(
    outcome: wd.Outcome, place: int
) -> None:
    confidence = 0.9
    (axes,) = outcome.plot(requirements=[place], parameters=0, confidence=confidence).get_axes()
    values = outcome.measures[outcome.study.requirements[place].measure.label]
    x, y = (np.asarray(data) for data in axes.lines[0].get_data())
    low, high = axes.get_xlim()
    is_upper = place == 0
    inside = (x > low) & (x < high)
    assert np.count_nonzero(inside) > 200
    for at, fraction in zip(x[inside], y[inside], strict=True):
        beyond = values >= at if is_upper else values <= at
        assert np.count_nonzero(beyond) == round(fraction * TRIALS)
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


def test_limit_and_slack_are_read_off_the_same_axis(outcome: wd.Outcome) -> None:
    for requirement, row in zip(outcome.study.requirements, panels(outcome.plot(), 3), strict=True):
        limit = requirement.limit
        assert any(list(line.get_xdata()) == [limit, limit] for line in row[0].lines)
        for axes in row[1:]:
            assert any(list(line.get_ydata()) == [limit, limit] for line in axes.lines)
        (above,) = row[0].child_axes
        row[0].figure.draw_without_rendering()
        sign = 1.0 if requirement.at_most is not None else -1.0
        for value in (limit, *row[0].get_xlim()):
            place = row[0].transData.transform((value, 1.0))[0]
            assert above.transData.transform((sign * (limit - value), 0.0))[0] == pytest.approx(place)
        assert above.get_xlabel() == "slack"


def test_a_drawn_limit_takes_the_slack_for_its_axis() -> None:
    drawn = wd.uniform(0.15, 0.25, name="strictness")
    outcome = servo(requirements=[wd.Requirement(wd.peak("error", after=0.5), at_most=drawn)]).run(300, progress=False)
    (axes,) = outcome.plot(parameters=0).get_axes()
    assert axes.get_xlabel() == "slack of peak of error after 0.5 s"
    assert not axes.child_axes
    x, y = (np.asarray(data) for data in axes.lines[0].get_data())
    slack = outcome.slack[:, 0]
    for at, fraction in zip(x, y, strict=True):
        if at > axes.get_xlim()[0]:
            assert np.count_nonzero(slack <= at) == round(fraction * 300)


def test_missed_trials_are_counted_and_marked_by_shape(outcome: wd.Outcome) -> None:
    figure = outcome.plot(requirements=[0], parameters=1)
    row = panels(figure, 1)[0]
    missed, failed = outcome.failed(0), outcome.failures
    every = -(-len(failed) // MOST_MARKS)
    assert len(missed) > 0
    assert f"{len(missed)} missed" in texts(row[0])
    passing, elsewhere, crosses = (c for c in row[1].collections if isinstance(c, PathCollection))
    # Both kinds of failing trials are thinned alike, and the legend says so.
    assert len(crosses.get_offsets()) == -(-len(missed) // every)
    assert len(elsewhere.get_offsets()) == -(-len(np.setdiff1d(failed, missed)) // every)
    assert len(passing.get_offsets()) == TRIALS - len(failed)
    assert f"missed this limit{'' if every == 1 else f' (1 in {every})'}" in legend_words(figure)
    # Colour is not the only difference: the marks have other outlines, those of others are hollow.
    assert len(crosses.get_paths()[0].vertices) != len(passing.get_paths()[0].vertices)
    assert len(elsewhere.get_facecolors()) == 0


def test_many_trials_are_shown_by_a_density_of_all_of_them(outcome: wd.Outcome) -> None:
    more = outcome.extend(3 * MOST_DOTS - TRIALS, progress=False)
    assert more.trials > MOST_DOTS
    figure = more.plot(requirements=[0], parameters=1)
    axes = panels(figure, 1)[0][1]
    (mesh,) = (c for c in axes.collections if isinstance(c, QuadMesh))
    counts = np.ma.filled(mesh.get_array(), 0.0)
    assert counts.sum() == more.trials
    # The same part of failing and of passing trials is in it: cells below the limit hold those that meet it.
    heights = np.linspace(*axes.get_ylim(), counts.shape[0] + 1)
    above = counts[heights[:-1] >= 0.2].sum()
    values = more.measures["peak of error after 0.5 s before 1.5 s"]
    assert above == np.count_nonzero(values >= heights[:-1][heights[:-1] >= 0.2][0])
    marks = [len(c.get_offsets()) for c in axes.collections if isinstance(c, PathCollection)]
    assert sum(marks) <= MOST_MARKS + 2
    assert "all trials; darker where more" in legend_words(figure)


def test_trials_without_a_value_are_counted_and_kept_in_the_picture() -> None:
    outcome = unstable_study().run(400, progress=False)
    assert 0 < len(outcome.diverged) < 400
    row = panels(outcome.plot(), 1)[0]
    assert f"{len(outcome.diverged)} without a value" in texts(row[0])
    y = np.asarray(row[0].lines[0].get_ydata())
    assert y[-1] == 1.0
    crosses = [c for c in row[1].collections if isinstance(c, PathCollection)][-1]
    heights = np.asarray(crosses.get_offsets())[:, 1]
    assert np.count_nonzero(heights == row[1].get_ylim()[1]) == len(outcome.diverged)


def test_an_outlier_does_not_squeeze_the_others(outcome: wd.Outcome) -> None:
    columns = outcome._columns
    measures = columns.measures.copy()
    measures[0, 3] = 1e12
    wild = wd.Outcome(
        outcome.study, outcome._described, Columns(columns.parameters.copy(), measures, columns.status.copy(), TRIALS)
    )
    (axes,) = wild.plot(requirements=[0], parameters=0).get_axes()
    assert axes.get_xlim()[1] < 100.0


def test_many_requirements_show_those_missed_most() -> None:
    limits = np.linspace(0.05, 0.5, 9)
    study = servo(requirements=[wd.peak("error", after=0.5) <= float(limit) for limit in limits])
    figure = study.run(200, progress=False).plot(parameters=0)
    shown = [axes.get_title(loc="left") for axes in figure.get_axes()]
    assert shown == [requirement.label for requirement in study.requirements[:6]]


@pytest.mark.parametrize(
    ("parameters", "share"), [(0, 0.5), (0, 1.0), (1, 0.0), (1, 0.5), (6, 0.01), (6, 1.0), (12, 0.0), (12, 0.5)]
)
def test_no_texts_overlap(parameters: int, share: float) -> None:
    study = many_parameters(parameters, 1.0)
    values = study.run(400, progress=False).measures["peak of error after 0.5 s"]
    limit = float(np.quantile(values, 1.0 - share)) if 0.0 < share < 1.0 else (0.5 if share == 0.0 else 0.01)
    study = many_parameters(parameters, limit, "a name_with $odd$ characters {and} many ^words in it", "A $title$")
    outcome = study.run(400, progress=False)
    missed = len(outcome.failed(0)) / 400
    assert abs(missed - share) < 0.01
    assert_no_texts_overlap(outcome.plot(parameters=min(parameters, 6), verdict=outcome.verdict(0.95)))


def test_no_texts_overlap_where_every_trial_diverged_and_with_ten_million() -> None:
    unstable = unstable_study()
    plant = unstable.loop.plant.with_(parameters={"growth": wd.uniform(50.0, 60.0)})
    assert_no_texts_overlap(unstable.with_(plant=plant).run(20, progress=False).plot())
    outcome = unstable.run(50, progress=False)
    columns = outcome._columns
    many = [np.tile(column, 20_000) for column in (columns.parameters, columns.measures, columns.status)]
    large = wd.Outcome(outcome.study, outcome._described, Columns(*many, 1_000_000))
    assert_no_texts_overlap(large.plot())


def test_names_are_shown_as_they_are() -> None:
    study = many_parameters(2, 0.1, "a $x_1$ of _it_")
    figure = study.run(50, progress=False).plot(parameters=1)
    figure.draw_without_rendering()
    row = panels(figure, 2)[0]
    heading = row[0]._left_title  # type: ignore[attr-defined]
    assert heading.get_text().startswith(r"a \$x_1\$ of _it_: peak")
    assert not heading._preprocess_math(heading.get_text())[1]
    # Nothing was set as mathematics: the dollars are shown.
    assert heading._preprocess_math(heading.get_text())[0].startswith("a $x_1$ of _it_")


@pytest.mark.parametrize(
    ("ticks", "labels"),
    [
        ([0.0, 0.001, 0.002], ["0", "0.001", "0.002"]),
        ([-1000.0, 0.0, 1000.0], ["−1000", "0", "1000"]),
        ([300.0001, 300.0002], ["300.0001", "300.0002"]),
        ([1e-9, 2e-9], ["1e−9", "2e−9"]),
        ([0.0, 1e12], ["0", "1e12"]),
        ([7.0], ["7"]),
    ],
)
def test_tick_labels_tell_the_ticks_apart_with_few_digits(ticks: list[float], labels: list[str]) -> None:
    assert tick_labels(ticks) == labels


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
        _plots.plot_outcome(stopped)

"""Studies that the tests of plots draw, and what can be read off a figure."""

from __future__ import annotations

import itertools
from collections.abc import Iterator
from typing import Any

from matplotlib.axes import Axes
from matplotlib.figure import Figure

import windage as wd

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


def unstable_study() -> wd.Study:
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


def many_parameters(count: int, limit: float, name: str | None = None, title: str = "") -> wd.Study:
    """A study with a number of drawn parameters whose names are long and, if drawn, all matter."""
    names = [f"a_rather_long_name_of_a_parameter_{i}" for i in range(12)]
    total = " + ".join(names)
    plant = wd.Plant(
        states={"x": 0.0},
        equations={"x": f"({total})/12*u - x"},
        input="u",
        output="x",
        parameters={name: wd.uniform(0.5, 1.5) if i < count else 1.0 for i, name in enumerate(names)},
    )
    loop = wd.Loop(
        plant=plant,
        controller=wd.OutputADRC(order=1, controller_bandwidth=4.0, observer_bandwidth=40.0, b0=1.0),
        sample_period=0.02,
        duration=1.0,
        reference=wd.Step(1.0),
        sensor=wd.Sensor(noise=1e-3),
        steps_per_sample=1,
    )
    requirements = [
        wd.Requirement(wd.peak("error", after=0.5), at_most=limit, name=name),
        wd.maximum("command") <= 9.0,
    ]
    return wd.Study(loop, requirements=requirements, seed=7, title=title)


def panels(figure: Figure, rows: int) -> list[list[Axes]]:
    """The axes of a figure of an outcome, row by row; those of the slack belong to their axes."""
    axes = figure.get_axes()
    assert len(axes) % rows == 0
    width = len(axes) // rows
    return [axes[i * width : (i + 1) * width] for i in range(rows)]


def texts(axes: Axes) -> str:
    """What is written inside some axes."""
    return "\n".join(text.get_text() for text in axes.texts)


def legend_words(figure: Figure) -> str:
    """What the legends of a figure say."""
    legends = [*figure.legends, *(legend for axes in figure.get_axes() if (legend := axes.get_legend()))]
    return "\n".join(text.get_text() for legend in legends for text in legend.get_texts())


def _readable(axes: Axes, renderer: Any) -> Iterator[tuple[str, Any]]:
    """The texts of some axes that are drawn, with the boxes they take."""
    words = list(axes.texts)
    if axes.axison:
        words += [axes.title, axes._left_title, axes.xaxis.label, axes.yaxis.label]  # type: ignore[attr-defined]
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
    for above in axes.child_axes:
        ticks = above.get_xticklabels()
        words += [*ticks, above.xaxis.label]
    if (legend := axes.get_legend()) is not None:
        words += legend.get_texts()
    for word in words:
        if word.get_visible() and word.get_text().strip():
            yield word.get_text(), word.get_window_extent(renderer)


def assert_no_texts_overlap(figure: Figure) -> None:
    """Every text lies within the figure, and none upon another."""
    figure.draw_without_rendering()
    renderer = figure.canvas.get_renderer()  # type: ignore[attr-defined]
    boxes = [entry for axes in figure.get_axes() for entry in _readable(axes, renderer)]
    boxes += [(text.get_text(), text.get_window_extent(renderer)) for text in figure.texts]
    boxes += [(text.get_text(), text.get_window_extent(renderer)) for box in figure.legends for text in box.get_texts()]
    assert len(boxes) > 10
    width, height = figure.canvas.get_width_height()
    for text, box in boxes:
        assert min(box.x0, box.y0) >= -1.0, text
        assert box.x1 <= width + 1.0, text
        assert box.y1 <= height + 1.0, text
    for (first, a), (second, b) in itertools.combinations(boxes, 2):
        across = min(a.x1, b.x1) - max(a.x0, b.x0)
        along = min(a.y1, b.y1) - max(a.y0, b.y0)
        assert across <= 1.0 or along <= 1.0, f"{first!r} and {second!r}"

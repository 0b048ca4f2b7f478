"""The plot of a replay: what one trial did, signal by signal."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from matplotlib.axes import Axes
from numpy.typing import NDArray

from ._errors import DescriptionError
from ._measures import Requirement
from ._numbers import Spread, plain_number
from ._plot_style import (
    BLUE,
    GREEN,
    GREY,
    INK,
    SKY,
    VERMILLION,
    StudyFigure,
    Values,
    dress,
    thinned,
    title_lines,
    wrapped,
)

if TYPE_CHECKING:
    from ._replay import Replay

#: Measures whose limit is a limit of the signal itself, with the signs of the signal that it bounds.
LIMITED = {"peak": (1.0, -1.0), "maximum": (1.0,), "minimum": (1.0,)}
MOST_FACTS = 14

Flags = NDArray[np.bool_]


@dataclass(frozen=True)
class _Line:
    """A signal to draw; `signals` are the names that a requirement may use for it."""

    label: str
    values: Values
    color: str
    signals: tuple[str, ...] = ()
    style: str = "-"
    width: float = 1.2


def draw_replay(replay: Replay, after: float, before: float | None) -> StudyFigure:
    """Draw the figure; see `windage._plots.plot_replay`."""
    shown = _section(replay, after, before)
    with np.errstate(invalid="ignore"):  # of a trial that left the finite range
        panels = list(_panels(replay))
    figure = StudyFigure(11.0, 2.3 * len(panels) + 0.8)
    grid = figure.add_gridspec(len(panels), 2, width_ratios=[1.0, 0.36])
    first: Axes | None = None
    for i, (title, lines) in enumerate(panels):
        axes = figure.add_subplot(grid[i, 0], sharex=first)
        first = first or axes
        is_last = i == len(panels) - 1
        dress(axes, "time, s" if is_last else "", title)
        axes.tick_params(labelbottom=is_last)
        for line in lines:
            _draw_line(axes, replay.time[shown], line, shown)
            _draw_limits(axes, replay, line, shown)
        if "command" in title:
            _draw_actuator_limits(axes, replay)
        axes.legend(fontsize=8, loc="lower left", bbox_to_anchor=(0.0, 1.0), ncols=4, frameon=False, borderpad=0)
        axes.margins(x=0.01)
    figure.align_ylabels()
    _write_facts(figure.add_subplot(grid[:, 1]), replay)
    name = "Nominal unit" if replay.trial is None else f"Trial {replay.trial:,}"
    title_lines(figure, f"{name} {_fate(replay)}", f"study {replay.digest[:12]}, seed {replay.seed}")
    return figure


def _section(replay: Replay, after: float, before: float | None) -> Flags:
    start = plain_number(after, "after", "a time in s")
    stop = math.inf if before is None else plain_number(before, "before", "a time in s")
    shown: Flags = (replay.time >= start) & (replay.time <= stop)
    if np.count_nonzero(shown) < 2:
        expected = f"two samples or more; the trial ends at {float(replay.time[-1]):g} s"
        raise DescriptionError("after, before", f"{start:g} s, {stop:g} s", expected)
    return shown


def _panels(replay: Replay) -> Iterator[tuple[str, list[_Line]]]:
    """Yield title and lines of each panel. Units are the user's own: signals go by their names."""
    plant = replay._loop.plant
    output, drive = _output_word(replay), plant.input_name
    yield (
        output,
        [
            _Line("reference", replay["reference"], INK, ("reference",), "--"),
            _Line("output", replay["output"], BLUE, ("output", output)),
        ],
    )
    yield "error", [_Line("error = reference − output", replay["error"], BLUE, ("error",))]
    yield (
        "command, input",
        [
            _Line("command", replay["command"], SKY, ("command",), width=2.2),
            _Line(f"input{'' if drive == 'input' else f' ({drive})'}", replay["input"], INK, ("input", drive)),
        ],
    )
    yield (
        "total disturbance",
        [
            _Line("estimated by the observer", replay.estimated_disturbance, GREEN, width=2.2),
            _Line("true", replay.total_disturbance, INK),
        ],
    )


def _output_word(replay: Replay) -> str:
    """Return the plant's own word for its output, if it is a word."""
    word = str(getattr(replay._loop.plant, "output", ""))
    return word if word.isidentifier() else "output"


def _draw_line(axes: Axes, time: Values, line: _Line, shown: Flags) -> None:
    x, y = thinned(time, line.values[shown])
    axes.plot(x, y, color=line.color, linestyle=line.style, linewidth=line.width, label=line.label)


def _draw_limits(axes: Axes, replay: Replay, line: _Line, shown: Flags) -> None:
    """Draw the limits of the requirements on a signal, and mark where they are missed."""
    for requirement in replay.requirements:
        measure = requirement.measure
        if measure.signal not in line.signals or measure.kind not in LIMITED:
            continue
        limit = _limit(replay, requirement)
        if isinstance(measure.after, Spread) or isinstance(measure.before, Spread) or not math.isfinite(limit):
            continue
        inside = shown & (replay.time >= measure.after) & (replay.time <= measure.before)
        if not inside.any():
            continue
        ends = replay.time[inside][[0, -1]]
        dashed = {"color": VERMILLION, "linestyle": "--", "linewidth": 1.2}
        for sign in LIMITED[measure.kind]:
            # Those whose label begins with an underscore are left out of the legend.
            label = "_limit" if any(drawn.get_label() == "limit" for drawn in axes.lines) else "limit"
            axes.plot(ends, [sign * limit] * 2, label=label, **dashed)  # type: ignore[arg-type]
        _mark_missed(axes, replay.time[inside], line.values[inside], requirement, limit)


def _mark_missed(axes: Axes, time: Values, values: Values, requirement: Requirement, limit: float) -> None:
    """Draw over what lies beyond the limit, and mark the worst sample."""
    sizes = np.abs(values) if requirement.measure.kind == "peak" else values
    excess = sizes - limit if requirement.at_most is not None else limit - sizes
    # A lower limit of a maximum or peak is met by a single sample: all others may lie below.
    if requirement.measure.kind != "minimum" and requirement.at_most is None:
        return
    beyond = excess > 0.0
    if beyond.any():
        axes.plot(time, np.where(beyond, values, np.nan), color=VERMILLION, linewidth=2.0)
        worst = int(np.argmax(np.where(beyond, excess, -np.inf)))
        axes.plot(time[worst], values[worst], marker="x", color=VERMILLION, markersize=8, mew=2.0)


def _limit(replay: Replay, requirement: Requirement) -> float:
    """Return the limit of this trial, which may be drawn."""
    if isinstance(requirement.limit, float):
        return requirement.limit
    slack = float(replay.slack[replay.requirements.index(requirement)])
    value = float(replay.measures[requirement.measure.label])
    return value + slack if requirement.at_most is not None else value - slack


def _draw_actuator_limits(axes: Axes, replay: Replay) -> None:
    limits = replay._loop.actuator.limits
    if limits is None:
        return
    low, high = axes.get_ylim()
    near = max(abs(low), abs(high))
    for i, limit in enumerate(limits):
        value = replay._value(limit, f"actuator.limits[{i}]")
        # Limits far outside would squeeze the signals into a line.
        if abs(value) <= 1.5 * near:
            label = "limits of the actuator" if i == 0 else None
            axes.axhline(value, color=INK, linestyle=":", linewidth=1.2, label=label)


def _write_facts(axes: Axes, replay: Replay) -> None:
    """Write beside the panels what was met, and what was drawn from which spread."""
    axes.set_axis_off()
    pen = _Pen(axes)
    if replay.requirements:
        pen.write("Requirements", weight="bold")
    for requirement, slack in zip(replay.requirements, replay.slack.tolist(), strict=True):
        is_met = slack >= 0.0
        pen.write(f"{'met' if is_met else 'MISSED'}: {requirement.label}", INK if is_met else VERMILLION)
        pen.write(f"slack {slack:.4g}", GREY, after=0.5)
    columns = replay._described.columns
    nominal = "Every spread at its nominal value" if replay.trial is None else "No drawn parameters"
    pen.write("Drawn parameters" if columns else nominal, weight="bold", before=1.0)
    for column in columns[:MOST_FACTS]:
        pen.write(f"{column.name} = {replay.parameters[column.name]:.5g}")
        pen.write(repr(column.spread), GREY, after=0.5)
    if len(columns) > MOST_FACTS:
        pen.write(f"and {len(columns) - MOST_FACTS} more")


class _Pen:
    """Writes line below line into axes that show nothing else."""

    LINE = 0.019  # of the height of the axes

    def __init__(self, axes: Axes) -> None:
        self._axes = axes
        self._y = 1.0

    def write(
        self, text: str, color: str = INK, *, weight: str = "normal", before: float = 0.0, after: float = 0.0
    ) -> None:
        broken = wrapped(text, 42)
        size = 8.5 if color != GREY else 8.0
        self._y -= self.LINE * before
        self._axes.text(
            0.0,
            self._y,
            broken,
            fontsize=size,
            weight=weight,
            color=color,
            va="top",
            transform=self._axes.transAxes,
        )
        self._y -= self.LINE * (1.0 + after + 0.85 * broken.count("\n"))


def _fate(replay: Replay) -> str:
    if replay.diverged:
        return "diverged"
    if not replay.requirements:
        return "finished"
    return "passed" if replay.passed else "failed"

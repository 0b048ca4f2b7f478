"""Marks in the panels of a replay: limits of requirements, the samples that decide, spikes, actuator limits."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np
from matplotlib.axes import Axes
from numpy.typing import NDArray

from ._plot_reading import Reading, readings
from ._plot_style import BLUE, INK, VERMILLION, Values, thinned
from ._requirement_table import number_beside, requirement_limit
from ._shown_text import plot_text

if TYPE_CHECKING:
    from ._replay import Replay

#: Samples that may leave a panel whose scale is that of the others: this part of them, and at least so many.
SPIKES, FEWEST_SPIKES = 0.005, 3
#: How far outside the signals of a panel a limit is drawn, in multiples of their size.
FURTHEST_LIMIT = 4.0
#: Characters of a label in a legend.
LONGEST_LABEL = 96

Flags = NDArray[np.bool_]


def room_for_limits(axes: Axes) -> tuple[float, float]:
    """Return between which values a limit is drawn: far outside it would squeeze the signals into a line."""
    low, high = axes.get_ylim()
    reach = FURTHEST_LIMIT * max(abs(low), abs(high), high - low)
    return low - reach, high + reach


def draw_marks(
    axes: Axes, replay: Replay, place: int, names: Sequence[str], shown: Flags, room: tuple[float, float]
) -> None:
    """Draw what a requirement reads off the signals of a panel; every kind of measure leaves a mark."""
    is_met = bool(replay.met[place])
    color = INK if is_met else VERMILLION
    for part, reading in readings(replay, place):
        if part.signal not in names or not (reading.inside & shown).any():
            continue
        values = replay[part.signal]
        before = len(axes.lines) + len(axes.collections)
        _draw_levels(axes, replay.time, reading, shown, color, room)
        _draw_samples(axes, replay.time, values, reading, shown, is_met)
        if len(axes.lines) + len(axes.collections) == before:
            # Nothing that has a place of its own: the course in the window is what counts.
            course = np.where(reading.inside & shown, values, np.nan)
            axes.plot(*thinned(replay.time, course), color=color, linewidth=5.0, alpha=0.18)
        label = plot_text(_label(replay, place))
        if label not in (line.get_label() for line in axes.lines):
            axes.plot([], [], color=color, linestyle="--", marker="o" if is_met else "x", mfc="none", label=label)


def _label(replay: Replay, place: int) -> str:
    requirement = replay.requirements[place]
    words, limit = requirement_limit(replay, place)
    value = list(replay.measures.values())[replay._described.requirement_rows[place]]
    name = requirement.name or requirement.measure.label
    read = f"{number_beside(value, (limit,))}, {words} {'met' if replay.met[place] else 'MISSED'}"
    room = LONGEST_LABEL - len(read)
    return f"{name if len(name) <= room else name[: room - 3] + '...'}: {read}"


def _draw_levels(
    axes: Axes, time: Values, reading: Reading, shown: Flags, color: str, room: tuple[float, float]
) -> None:
    ends = time[reading.inside & shown][[0, -1]]
    for level in (level for level in reading.levels if room[0] <= level <= room[1]):
        axes.plot(ends, [level, level], color=color, linestyle="--", linewidth=1.2)
    for level in reading.measured:
        axes.plot(ends, [level, level], color=color, linestyle="-", linewidth=0.9)
    for instant in reading.limit_times:
        if time[shown][0] <= instant <= time[shown][-1]:
            axes.axvline(instant, color=color, linestyle="--", linewidth=1.2)


def _draw_samples(axes: Axes, time: Values, values: Values, reading: Reading, shown: Flags, is_met: bool) -> None:
    beyond = reading.beyond & shown
    color = INK if is_met else VERMILLION
    if beyond.any() and reading.shows_beyond:
        axes.plot(*thinned(time, np.where(beyond, values, np.nan)), color=color, linewidth=2.0)
    if reading.base is not None:
        inside = reading.inside & shown
        x, y = thinned(time[inside], values[inside])
        axes.fill_between(x, y, reading.base, color=color, alpha=0.15, linewidth=0)
    for place in reading.points:
        if shown[place]:
            axes.plot(time[place], values[place], marker="o" if is_met else "x", color=color, mfc="none", ms=8, mew=2.0)


def draw_actuator_limits(axes: Axes, replay: Replay) -> None:
    """Draw the limits of the actuator; far outside they would squeeze the signals into a line."""
    limits = replay._loop.actuator.limits
    if limits is None:
        return
    low, high = axes.get_ylim()
    near = max(abs(low), abs(high))
    label: str | None = "limits of the actuator"
    for i, limit in enumerate(limits):
        value = replay._value(limit, f"actuator.limits[{i}]")
        if abs(value) <= 1.5 * near:
            axes.axhline(value, color=INK, linestyle=":", linewidth=1.2, label=label)
            label = None


def hold_spikes(axes: Axes, courses: Sequence[Values]) -> None:
    """Keep a few samples far outside from flattening the rest, and say how far they go."""
    finite = np.concatenate([course[np.isfinite(course)] for course in courses])
    few = max(FEWEST_SPIKES * len(courses), int(SPIKES * len(finite)))
    if len(finite) < 4 * few:
        return
    ordered = np.sort(finite)
    bottom, top = float(ordered[few]), float(ordered[-1 - few])
    span = top - bottom
    if span <= 0.0:
        return
    least, most = float(ordered[0]), float(ordered[-1])
    words = []
    if is_high := most > top + span:
        words.append(f"\u25b2 up to {most:.3g}")
    if is_low := least < bottom - span:
        words.append(f"\u25bc down to {least:.3g}")
    if words:
        low = bottom - 0.25 * span if is_low else least - 0.05 * span
        axes.set_ylim(low, top + 0.25 * span if is_high else most + 0.05 * span)
        box = {"facecolor": "white", "edgecolor": "none", "alpha": 0.85, "pad": 1.5}
        axes.text(
            0.995,
            0.97,
            ", ".join(words),
            transform=axes.transAxes,
            ha="right",
            va="top",
            fontsize=8,
            color=BLUE,
            bbox=box,
        )

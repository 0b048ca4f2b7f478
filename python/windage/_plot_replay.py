"""The plot of a replay: what one trial did, signal by signal, before the nominal unit."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from matplotlib.axes import Axes
from numpy.typing import NDArray

from ._errors import DescriptionError, WindageError
from ._numbers import checked_flag, checked_sequence, plain_number
from ._plot_facts import Fact, facts, facts_height, write_facts
from ._plot_marks import draw_actuator_limits, draw_marks, hold_spikes, room_for_limits
from ._plot_reading import first_missed
from ._plot_style import (
    BLUE,
    GREEN,
    INK,
    PALE,
    SKY,
    StudyFigure,
    Values,
    dress,
    legend_above,
    source_line,
    thinned,
    title_lines,
    wrapped,
)
from ._plot_ticks import set_ticks
from ._shown_text import plot_text
from ._text_table import plainly_grouped

if TYPE_CHECKING:
    from ._replay import Replay

#: Inches: the figure, panels and what is between them.
WIDTH, PANEL_WIDTH, PANEL_HEIGHT, LEFT, GAP, FOOT = 11.0, 6.7, 1.75, 1.05, 0.12, 0.6
TITLE_LINE, LEGEND_ROW = 0.2, 0.17
#: Characters of tick labels that fit below a panel.
TIME_ROOM = 90.0
#: Around the instant at which a requirement is first missed: parts of the trial before and after it, and the
#: fewest samples on either side.
BEFORE_ONSET, AFTER_ONSET, FEWEST_SAMPLES = 0.03, 0.07, 40

Flags = NDArray[np.bool_]


@dataclass(frozen=True)
class _Line:
    """A signal to draw."""

    label: str
    values: Values
    color: str
    style: str = "-"
    width: float = 1.2


@dataclass(frozen=True)
class _Panel:
    """Signals that share axes; `names` are those that a requirement may use for the one that it reads there."""

    title: str
    lines: list[_Line]
    names: tuple[str, ...] = ()
    nominal: Values | None = None
    is_drive: bool = False
    has_spikes: bool = False


def draw_replay(
    replay: Replay,
    after: float,
    before: float | None,
    onset: bool,
    signals: Sequence[str],
    nominal: bool,
) -> StudyFigure:
    """Draw the figure; see `Replay.plot`."""
    if checked_flag(onset, "onset"):
        after, before = onset_window(replay, after, before)
    shown = _section(replay, after, before)
    unit = _nominal_unit(replay) if checked_flag(nominal, "nominal") else None
    with np.errstate(invalid="ignore"):  # of a trial that left the finite range
        panels = list(_panels(replay, unit, _wanted(replay, signals)))
    figure = StudyFigure(WIDTH, 1.0, is_constrained=False)
    rows: list[int] = []
    for panel in panels:
        first = figure.get_axes()[0] if rows else None
        axes = figure.add_axes((0.0, 0.0, 1.0, 1.0), sharex=first, label=panel.title)
        rows.append(_draw_panel(axes, replay, panel, shown, unit))
    name = "Nominal unit" if replay.trial is None else f"Trial {plainly_grouped(replay.trial)}"
    source = source_line(replay.digest, replay.seed, replay.title)
    titles = title_lines(figure, [f"{name} {_fate(replay)}"], source)
    _lay_out(figure, rows, titles, facts(replay))
    _set_time_axis(figure.get_axes()[: len(panels)], replay.time[shown])
    return figure


def _lay_out(figure: StudyFigure, rows: Sequence[int], titles: int, told: list[Fact]) -> None:
    """Place the panels under their legends, and the facts beside them; all in inches."""
    tops = [TITLE_LINE * titles + 0.2]
    for count in rows:
        tops.append(tops[-1] + LEGEND_ROW * count + 0.1 + PANEL_HEIGHT + GAP)
    height = max(tops[-1] - GAP, tops[0] + LEGEND_ROW + facts_height(told)) + FOOT
    figure.set_size_inches(WIDTH, height)
    for axes, count, top in zip(list(figure.get_axes()), rows, tops, strict=False):
        bottom = top + LEGEND_ROW * count + 0.1 + PANEL_HEIGHT
        axes.set_position((LEFT / WIDTH, 1.0 - bottom / height, PANEL_WIDTH / WIDTH, PANEL_HEIGHT / height))
        axes.yaxis.set_label_coords(-0.68 * LEFT / PANEL_WIDTH, 0.5)
    start = tops[0] + LEGEND_ROW
    left = LEFT + PANEL_WIDTH + 0.25
    beside = figure.add_axes((left / WIDTH, FOOT / height, 1.0 - left / WIDTH, 1.0 - (start + FOOT) / height))
    write_facts(beside, told, height - start - FOOT)
    title = figure._suptitle  # type: ignore[attr-defined]
    title.set_y(1.0 - 0.1 / height)


def _set_time_axis(panels: Sequence[Axes], time: Values) -> None:
    first, last = float(time[0]), float(time[-1])
    panels[0].set_xlim(first, last)
    set_ticks(panels[0].xaxis, first, last, TIME_ROOM)
    for axes in panels:
        axes.tick_params(labelbottom=axes is panels[-1])
    panels[-1].set_xlabel("time, s", fontsize=9)


def onset_window(replay: Replay, after: float, before: float | None) -> tuple[float, float]:
    """Return the section around the instant at which a requirement is first missed."""
    if after != 0.0 or before is not None:
        raise DescriptionError("onset", True, "either onset or after and before")
    instant = first_missed(replay)
    if replay.passed or instant is None:
        expected = "a trial that misses a requirement at some instant"
        raise DescriptionError("onset", True, expected, "Choose the section by after and before.")
    time = replay.time
    period, duration = float(time[1] - time[0]), float(time[-1] - time[0])
    fewest = FEWEST_SAMPLES * period
    start = instant - max(BEFORE_ONSET * duration, fewest)
    stop = instant + max(AFTER_ONSET * duration, fewest)
    return max(start, float(time[0])), min(stop, float(time[-1]))


def _nominal_unit(replay: Replay) -> Replay | None:
    """Return the nominal unit to draw behind; none where it is the trial itself or cannot be run."""
    if replay.trial is None:
        return None
    try:
        return replay._nominal()
    except WindageError:
        return None


def _section(replay: Replay, after: float, before: float | None) -> Flags:
    start = plain_number(after, "after", "a time in s")
    stop = _end(replay) if before is None else plain_number(before, "before", "a time in s")
    shown: Flags = (replay.time >= start) & (replay.time <= stop)
    if np.count_nonzero(shown) < 2:
        expected = f"two samples or more; the trial ends at {float(replay.time[-1]):g} s"
        raise DescriptionError("after, before", f"{start:g} s, {stop:g} s", expected)
    return shown


def _end(replay: Replay) -> float:
    """Return where the picture ends by itself: with the trial, or soon after it has diverged."""
    finite = np.flatnonzero(np.isfinite(replay["output"]))
    if not replay.diverged or not finite.size:
        return math.inf
    return float(replay.time[min(int(1.15 * finite[-1]) + 2, len(replay.time) - 1)])


def _wanted(replay: Replay, signals: Sequence[str]) -> list[str]:
    """Return the signals that need a panel if they have none: those that requirements read, and those asked for."""
    asked = checked_sequence(signals, "signals", "a list of names of signals")
    for name in asked:
        _ = replay[name]
    read = [part.signal for requirement in replay.requirements for part in requirement.measure.parts]
    return list(dict.fromkeys([*read, *asked]))


def _panels(replay: Replay, unit: Replay | None, wanted: Sequence[str]) -> Iterator[_Panel]:
    """Yield the panels. Units are the user's own: signals go by their names."""
    plant = replay._loop.plant
    output, drive = _output_word(replay), plant.input_name
    standard = [
        _Panel(
            output,
            [_Line("reference", replay["reference"], INK, "--"), _Line("output", replay["output"], BLUE)],
            ("output", output, "reference"),
            None if unit is None else unit["output"],
        ),
        _Panel(
            "error",
            [_Line("error = reference \u2212 output", replay["error"], BLUE)],
            ("error",),
            None if unit is None else unit["error"],
        ),
        _Panel(
            "command, input",
            [
                _Line("command", replay["command"], SKY, width=2.2),
                _Line(f"input{'' if drive == 'input' else f' ({drive})'}", replay["input"], INK),
            ],
            ("command", "input", drive),
            None if unit is None else unit["command"],
            is_drive=True,
        ),
        _Panel(
            "total disturbance",
            [
                _Line("estimated by the observer", replay.estimated_disturbance, GREEN, width=2.2),
                _Line("true", replay.total_disturbance, INK),
            ],
            has_spikes=True,
        ),
    ]
    yield from standard
    known = {name for panel in standard for name in panel.names}
    for name in wanted:
        if name not in known:
            nominal = None if unit is None else unit[name]
            yield _Panel(name, [_Line(name, replay[name], BLUE)], (name,), nominal)


def _output_word(replay: Replay) -> str:
    """Return the plant's own word for its output, if it is a word."""
    word = str(getattr(replay._loop.plant, "output", ""))
    return word if word.isidentifier() else "output"


def _draw_panel(axes: Axes, replay: Replay, panel: _Panel, shown: Flags, unit: Replay | None) -> int:
    """Draw a panel; return the rows of its legend."""
    dress(axes, "", plot_text(wrapped(panel.title, 22)))
    time = replay.time[shown]
    for line in panel.lines:
        x, y = thinned(time, line.values[shown])
        axes.plot(x, y, color=line.color, linestyle=line.style, linewidth=line.width, label=plot_text(line.label))
    if panel.has_spikes or replay.diverged:
        hold_spikes(axes, [line.values[shown] for line in panel.lines])
    if unit is not None and panel.nominal is not None:
        _draw_nominal(axes, unit.time, panel.nominal, time)
    room = room_for_limits(axes)
    for place in range(len(replay.requirements)):
        draw_marks(axes, replay, place, panel.names, shown, room)
    if panel.is_drive:
        draw_actuator_limits(axes, replay)
    low, high = axes.get_ylim()
    axes.set_ylim(low, high)
    set_ticks(axes.yaxis, low, high)
    return legend_above(axes)


def _draw_nominal(axes: Axes, time: Values, values: Values, shown: Values) -> None:
    """Draw the nominal unit behind; where it leaves the range of the trial by far, it does not set the scale."""
    low, high = axes.get_ylim()
    span = (time >= shown[0]) & (time <= shown[-1])
    near = (values >= low - (high - low)) & (values <= high + (high - low))
    x, y = thinned(time[span], np.where(near, values, np.nan)[span])
    axes.plot(x, y, color=PALE, linewidth=2.6, label="nominal unit", zorder=1.5)


def _fate(replay: Replay) -> str:
    if replay.diverged:
        return "diverged"
    if not replay.requirements:
        return "finished"
    return "passed" if replay.passed else "failed"

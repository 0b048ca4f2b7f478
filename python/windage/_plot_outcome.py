"""The plot of an outcome: distribution of slack, and slack over the strongest parameters."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from matplotlib.axes import Axes
from matplotlib.lines import Line2D
from matplotlib.patches import Patch
from matplotlib.ticker import FuncFormatter, MaxNLocator
from numpy.typing import NDArray

from windage import _statistics

from ._errors import DescriptionError
from ._evidence import checked_probability
from ._numbers import checked_integer
from ._plot_style import (
    BLUE,
    INK,
    SKY,
    VERMILLION,
    StudyFigure,
    Values,
    dress,
    title_lines,
    wrapped,
)

if TYPE_CHECKING:
    from ._outcome import Outcome

MOST_ROWS = 6
MOST_PARAMETERS = 6
#: Points drawn of those that passed and of those that failed.
MOST_DOTS, MOST_MARKS = 3_000, 600
#: Points of the distribution's curve.
CURVE = 300
BINS = 16

Flags = NDArray[np.bool_]


@dataclass(frozen=True)
class _Row:
    """One requirement: its slack in each trial and the range of slack that is shown."""

    label: str
    words: str
    slack: Values
    low: float
    high: float

    @property
    def missed(self) -> Flags:
        """Which trials missed it."""
        return ~(self.slack >= 0.0)

    @property
    def shown(self) -> Values:
        """The slack, moved to the edge where it lies outside the range."""
        return np.clip(np.nan_to_num(self.slack, nan=-np.inf), self.low, self.high)


def draw_outcome(
    outcome: Outcome, requirements: Sequence[int | str] | None, parameters: int, confidence: float
) -> StudyFigure:
    """Draw the figure; see `windage._plots.plot_outcome`."""
    parameters = checked_integer(parameters, "parameters", 0, MOST_PARAMETERS)
    confidence = checked_probability("confidence", confidence)
    if not outcome.trials:
        raise DescriptionError("outcome", "0 trials", "at least 1 trial to plot")
    rows = [_row(outcome, place) for place in _places(outcome, requirements)]
    columns = 1 + min(parameters, len(outcome.parameters))
    figure = StudyFigure(4.2 + 2.9 * (columns - 1), 1.5 + 3.0 * len(rows))
    grid = figure.add_gridspec(len(rows), columns, width_ratios=[1.35] + [1.0] * (columns - 1))
    for i, row in enumerate(rows):
        curve = figure.add_subplot(grid[i, 0])
        _draw_distribution(curve, row, confidence)
        drivers = outcome.drivers().of(row.label)[: columns - 1]
        for j, driver in enumerate(drivers):
            axes = figure.add_subplot(grid[i, j + 1])
            _draw_dependence(axes, row, outcome.parameters[driver.parameter], ~outcome.passed)
            dress(axes, wrapped(driver.parameter, 34), "slack" if j == 0 else "")
            correlation = f"rank correlation {driver.correlation:+z.2f}".replace("-", "−")
            axes.set_title(correlation, fontsize=9, loc="left", color=INK)
    figure.legend(
        handles=_legend(confidence, columns > 1), loc="outside lower left", ncols=4, fontsize=8, frameon=False
    )
    failed = len(outcome.failures)
    share = f"{failed:,} of {outcome.trials:,} trials failed ({100.0 * failed / outcome.trials:.3g} %)"
    if outcome.interrupted:
        share += f", interim: {outcome.requested:,} asked for"
    title_lines(figure, share, f"study {outcome.study.digest[:12]}, seed {outcome.study.seed}")
    return figure


def _places(outcome: Outcome, requirements: Sequence[int | str] | None) -> list[int]:
    if not outcome.requirements:
        raise DescriptionError("study.requirements", "none", "at least one requirement to plot")
    if requirements is not None:
        return [outcome._place(requirement) for requirement in requirements]
    missed = (~outcome.met).sum(axis=0)
    most_missed = np.argsort(-missed, kind="stable")[:MOST_ROWS]
    return sorted(int(place) for place in most_missed)


def _row(outcome: Outcome, place: int) -> _Row:
    slack, label = outcome.slack[:, place], outcome.requirements[place]
    words = outcome.study.requirements[place].words
    finite = slack[np.isfinite(slack)]
    if not finite.size:
        return _Row(label, words, slack, -1.0, 1.0)
    # A few wild trials must not squeeze all others into a line; they are drawn at the edge.
    first, low, high, last = np.quantile(finite, [0.005, 0.05, 0.95, 0.995])
    scale = (high - low) or abs(high) or 1.0
    bottom = max(float(finite.min()), min(float(first), 0.0) - 3.0 * scale)
    top = min(float(finite.max()), float(last) + 3.0 * scale)
    bottom, top = min(bottom, 0.0), max(top, 0.0)
    margin = 0.04 * (top - bottom)
    return _Row(label, words, slack, bottom - margin, top + margin)


def _draw_distribution(axes: Axes, row: _Row, confidence: float) -> None:
    trials = len(row.slack)
    ordered = np.sort(np.nan_to_num(row.slack, nan=-np.inf))
    ranks = _curve_ranks(trials)
    bounds = [_statistics.clopper_pearson_interval(int(rank), trials, confidence) for rank in ranks]
    lower, upper = np.array(bounds).T
    # The pass probability's bounds are those of "not among the ranks": turned round, of being among them.
    lower, upper = 1.0 - upper, 1.0 - lower
    at = np.clip(ordered[ranks - 1], row.low, row.high)
    floor = 0.5 / trials
    axes.fill_between(at, np.maximum(lower, floor), upper, step="post", color=SKY, alpha=0.35, linewidth=0)
    axes.step(at, ranks / trials, where="post", color=BLUE, linewidth=1.6)
    _mark_limit(axes, row, vertical=True)
    axes.set_yscale("log")
    axes.set_ylim(floor, 1.6)
    axes.set_xlim(row.low, row.high)
    axes.yaxis.set_major_formatter(FuncFormatter(lambda share, _: f"{100.0 * share:g} %"))
    axes.xaxis.set_major_locator(MaxNLocator(5, steps=[1, 2, 5, 10]))
    # A requirement with a name of its own still has to say what it asks for.
    named = row.label != row.words
    x_label = wrapped(f"slack of {row.words}", 52) if named else "slack (unit of the measure)"
    dress(axes, x_label, "trials with at most this slack")
    axes.set_title(wrapped(row.label, 46), fontsize=10, loc="left", color=INK, weight="bold")
    _write_missed(axes, row, trials, confidence)


def _curve_ranks(trials: int) -> NDArray[np.int64]:
    """Return ranks that are dense where a logarithmic axis shows single trials, and at the other end."""
    tail = np.geomspace(1, trials, CURVE)
    body = np.linspace(1, trials, CURVE)
    return np.unique(np.rint(np.concatenate([tail, body])).astype(np.int64))


def _mark_limit(axes: Axes, row: _Row, *, vertical: bool) -> None:
    span, line = (axes.axvspan, axes.axvline) if vertical else (axes.axhspan, axes.axhline)
    span(row.low, 0.0, facecolor=VERMILLION, alpha=0.07, hatch="//", edgecolor=VERMILLION, linewidth=0)
    line(0.0, color=INK, linewidth=1.2, linestyle="--")


def _write_missed(axes: Axes, row: _Row, trials: int, confidence: float) -> None:
    missed = int(np.count_nonzero(row.missed))
    low, high = _statistics.clopper_pearson_interval(missed, trials, confidence)
    lines = [f"{missed:,} missed", f"{100 * (1 - high):.2g} to {100 * (1 - low):.2g} %"]
    undefined = int(np.count_nonzero(~np.isfinite(row.slack)))
    if undefined:
        lines.append(f"{undefined:,} without a value")
    # Where the curve is not: it rises to the right, and lies at the top where most trials miss.
    is_low = np.count_nonzero(row.shown < row.low + 0.5 * (row.high - row.low)) < 0.2 * trials
    x, y, across, down = (0.03, 0.96, "left", "top") if is_low else (0.97, 0.05, "right", "bottom")
    box = {"facecolor": "white", "edgecolor": "none", "alpha": 0.9, "pad": 2.5}
    axes.text(x, y, "\n".join(lines), transform=axes.transAxes, ha=across, va=down, fontsize=9, bbox=box)


def _draw_dependence(axes: Axes, row: _Row, values: Values, failed: Flags) -> None:
    shown, missed = row.shown, row.missed
    elsewhere = failed & ~missed
    for chosen, most, style in (
        (~failed, MOST_DOTS, {"s": 5, "marker": "o", "color": SKY, "alpha": 0.45, "linewidths": 0}),
        (elsewhere, MOST_MARKS, {"s": 18, "marker": "o", "facecolors": "none", "edgecolors": INK}),
        (missed, MOST_MARKS, {"s": 20, "marker": "x", "color": VERMILLION}),
    ):
        places = _some(chosen, most)
        style.setdefault("linewidths", 0.9)
        axes.scatter(values[places], shown[places], rasterized=True, **style)  # type: ignore[arg-type]
    _draw_trend(axes, values, shown)
    _mark_limit(axes, row, vertical=False)
    axes.set_ylim(row.low, row.high)


def _some(chosen: Flags, most: int) -> NDArray[np.int64]:
    """Return the places of some of the chosen trials, the same in every plot of the outcome."""
    places = np.flatnonzero(chosen)
    return places if len(places) <= most else places[:: -(-len(places) // most)]


def _draw_trend(axes: Axes, values: Values, slack: Values) -> None:
    """Draw the median and the 5 % quantile of slack in bins of equally many trials."""
    if len(values) < 20 * BINS or len(np.unique(values)) < BINS:
        return
    order = np.argsort(values, kind="stable")
    groups = np.array_split(order, BINS)
    middle = [float(np.median(values[group])) for group in groups]
    for quantile, style in ((0.5, "-"), (0.05, ":")):
        course = [float(np.quantile(slack[group], quantile)) for group in groups]
        axes.plot(middle, course, color=INK, linewidth=1.3, linestyle=style)


def _legend(confidence: float, with_parameters: bool) -> list[Line2D | Patch]:
    handles: list[Line2D | Patch] = [
        Line2D([], [], color=BLUE, linewidth=1.6, label="observed fraction"),
        Patch(
            facecolor=SKY,
            alpha=0.35,
            label=f"{100 * confidence:g} % Clopper-Pearson band, each point by itself",
        ),
        Line2D([], [], color=INK, linestyle="--", label="limit (slack 0)"),
        Patch(facecolor=VERMILLION, alpha=0.25, hatch="//", edgecolor=VERMILLION, label="missed"),
    ]
    if with_parameters:
        dot = {"linestyle": "none", "markersize": 5}
        handles += [
            Line2D([], [], marker="o", color=SKY, label="passing trial (some of them)", **dot),  # type: ignore[arg-type]
            Line2D([], [], marker="x", color=VERMILLION, label="trial that missed this limit", **dot),  # type: ignore[arg-type]
            Line2D([], [], marker="o", color=INK, mfc="none", label="trial that missed another", **dot),  # type: ignore[arg-type]
            Line2D([], [], color=INK, linestyle="-", label="median, and dotted 5 % quantile, of slack"),
        ]
    return handles

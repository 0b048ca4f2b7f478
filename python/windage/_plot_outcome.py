"""The plot of an outcome: distribution of each measure, and the measure over the strongest parameters."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np
from matplotlib.axes import Axes
from matplotlib.lines import Line2D
from matplotlib.patches import Patch
from matplotlib.ticker import FuncFormatter, NullFormatter
from numpy.typing import NDArray

from windage import _statistics

from ._basis import SAMPLE
from ._cautions import percent_above, percent_below
from ._drivers import Driver
from ._errors import DescriptionError
from ._evidence import checked_probability
from ._numbers import checked_integer
from ._outcome import joint_requirement
from ._plot_dependence import Dependence
from ._plot_row import Row, row_of
from ._plot_style import (
    BLUE,
    GREY,
    INK,
    SKY,
    VERMILLION,
    StudyFigure,
    dress,
    panel_title,
    source_line,
    title_lines,
    wrapped,
)
from ._plot_ticks import set_ticks
from ._shown_text import plot_text
from ._text_table import plainly_grouped
from ._verdict import Verdict

if TYPE_CHECKING:
    from ._outcome import Outcome

MOST_ROWS = 6
MOST_PARAMETERS = 6
#: Points of the distribution's curve.
CURVE = 300
#: Inches of a panel, and characters of its tick labels that fit side by side.
CURVE_WIDTH, CURVE_ROOM = 4.2, 46.0
#: Part of the panel that the text on the missed trials takes, across and up.
TEXT = (0.45, 0.24)
PANEL_WIDTH, PANEL_ROOM = 2.9, 30.0


def draw_outcome(
    outcome: Outcome,
    requirements: Sequence[int | str] | None,
    parameters: int,
    confidence: float,
    verdict: Verdict | None,
) -> StudyFigure:
    """Draw the figure; see `windage._plots.plot_outcome`."""
    parameters = checked_integer(parameters, "parameters", 0, MOST_PARAMETERS)
    confidence = checked_probability("confidence", confidence)
    if verdict is not None and not (isinstance(verdict, Verdict) and _is_of(outcome, verdict)):
        raise DescriptionError("verdict", verdict, "a verdict of this outcome", "Give outcome.verdict(at_least=...).")
    if not outcome.trials:
        raise DescriptionError("outcome", "0 trials", "at least 1 trial to plot")
    rows = [row_of(outcome, place) for place in _places(outcome, requirements)]
    # What is no sample, or was stopped, has no bounds.
    sure = confidence if outcome._cautions()["basis"] == SAMPLE else None
    columns = 1 + min(parameters, len(outcome.parameters))
    figure = StudyFigure(CURVE_WIDTH + PANEL_WIDTH * (columns - 1), 1.7 + 3.2 * len(rows))
    grid = figure.add_gridspec(len(rows), columns, width_ratios=[1.35] + [1.0] * (columns - 1))
    drivers = outcome.drivers() if columns > 1 else None
    kinds: dict[str, Line2D | Patch] = {}
    for i, row in enumerate(rows):
        _draw_distribution(figure.add_subplot(grid[i, 0]), row, sure)
        if drivers is None:
            continue
        dependence = Dependence(row, ~outcome.passed)
        for j, (name, driver) in enumerate(_strongest(outcome, drivers.of(row.label), columns - 1)):
            axes = figure.add_subplot(grid[i, j + 1])
            values = outcome.parameters[name]
            dependence.draw(axes, values)
            set_ticks(axes.xaxis, *axes.get_xlim(), PANEL_ROOM)
            set_ticks(axes.yaxis, row.low, row.high)
            dress(axes, plot_text(wrapped(name, 27)), plot_text(wrapped(row.axis_words, 34)) if j == 0 else "")
            panel_title(axes, _correlation_words(driver))
        kinds |= dependence.legend()
    handles = [*_curve_legend(sure), *kinds.values()]
    across = max(1, int(figure.get_figwidth() / 3.4))
    figure.legend(handles=handles, loc="outside lower left", ncols=across, fontsize=8, frameon=False)
    _write_title(figure, outcome, verdict)
    return figure


def _write_title(figure: StudyFigure, outcome: Outcome, verdict: Verdict | None) -> None:
    """Write claim and verdict if there is one, the counts, and what was run."""
    failed, run = len(outcome.failures), outcome.trials
    counts = f"{plainly_grouped(failed)} of {plainly_grouped(run)} trials failed ({_percent(failed / run)})"
    if outcome.interrupted:
        counts += f", interim: {plainly_grouped(outcome.requested)} asked for"
    study = outcome.study
    lines = [counts] if verdict is None else [verdict.headline, counts]
    title_lines(figure, lines, source_line(study.digest, study.seed, study.title))


def _is_of(outcome: Outcome, verdict: Verdict) -> bool:
    """Tell whether a verdict may head the picture of an outcome: it has its trials and its failures."""
    missed = dict(zip(outcome.requirements, (~outcome.met).sum(axis=0).tolist(), strict=True))
    failed = missed | {joint_requirement(outcome.study.requirements): len(outcome.failures)}
    seen = (verdict.trials, verdict.failures - verdict.numerics.hidden, verdict.diverged)
    return seen == (outcome.trials, failed.get(verdict.requirement), len(outcome.diverged))


def _places(outcome: Outcome, requirements: Sequence[int | str] | None) -> list[int]:
    if not outcome.requirements:
        raise DescriptionError("study.requirements", "none", "at least one requirement to plot")
    if requirements is not None:
        if isinstance(requirements, str) or not isinstance(requirements, Sequence) or not requirements:
            mend = "Write [0] or ['...'] for a single one."
            raise DescriptionError("requirements", requirements, "a list of requirements by place or name", mend)
        return [outcome._place(requirement) for requirement in requirements]
    missed = (~outcome.met).sum(axis=0)
    most_missed = np.argsort(-missed, kind="stable")[:MOST_ROWS]
    return sorted(int(place) for place in most_missed)


def _strongest(outcome: Outcome, drivers: Sequence[Driver], count: int) -> list[tuple[str, Driver | None]]:
    """Return the parameters to show: those with a correlation first, then the others in their order."""
    known: dict[str, Driver | None] = {driver.parameter: driver for driver in drivers}
    return list({**known, **{name: known.get(name) for name in outcome.parameters}}.items())[:count]


def _correlation_words(driver: Driver | None) -> str:
    if driver is None:
        return "slack: no rank correlation"
    return f"slack: rank correlation {driver.correlation:+z.2f}".replace("-", "\u2212")


def _draw_distribution(axes: Axes, row: Row, confidence: float | None) -> None:
    trials = row.trials
    ordered = row.worst_first()
    ranks = _curve_ranks(trials)
    at = np.clip(ordered[ranks - 1], row.low, row.high)
    floor = 0.5 / trials
    if confidence is not None:
        bounds = [_statistics.clopper_pearson_interval(int(rank), trials, confidence) for rank in ranks]
        lower, upper = np.array(bounds).T
        # The pass probability's bounds are those of "not among the ranks": turned round, of being among them.
        lower, upper = 1.0 - upper, 1.0 - lower
        axes.fill_between(at, np.maximum(lower, floor), upper, step="post", color=SKY, alpha=0.35, linewidth=0)
    # A step has no length where there is one trial only.
    axes.step(at, ranks / trials, where="post", color=BLUE, linewidth=1.6, marker="o" if trials == 1 else None)
    row.mark_limit(axes, vertical=True)
    axes.set_yscale("log")
    axes.set_ylim(floor, 1.6)
    axes.set_xlim(row.low, row.high)
    axes.yaxis.set_major_formatter(FuncFormatter(lambda share, _: _percent(share)))
    axes.yaxis.set_minor_formatter(NullFormatter())
    set_ticks(axes.xaxis, row.low, row.high, CURVE_ROOM)
    dress(axes, plot_text(wrapped(row.axis_words, 44)), row.share_words)
    if not row.is_slack:
        _add_slack_axis(axes, row)
    panel_title(axes, plot_text(wrapped(row.words, 42)), is_heading=True)
    _write_missed(axes, row, confidence)


def _add_slack_axis(axes: Axes, row: Row) -> None:
    """Show the slack as a second reading of the same axis, above it."""
    above = axes.secondary_xaxis("top", functions=(row.slack_at, row.value_at))
    set_ticks(above.xaxis, row.slack_at(row.low), row.slack_at(row.high), CURVE_ROOM)
    above.tick_params(labelsize=7, colors=GREY)
    above.spines["top"].set_color(GREY)
    above.set_xlabel("slack", fontsize=7, color=GREY, labelpad=3.0)


def _curve_ranks(trials: int) -> NDArray[np.int64]:
    """Return ranks that are dense where a logarithmic axis shows single trials, and at the other end."""
    tail = np.geomspace(1, trials, CURVE)
    body = np.linspace(1, trials, CURVE)
    return np.unique(np.rint(np.concatenate([tail, body])).astype(np.int64))


def _write_missed(axes: Axes, row: Row, confidence: float | None) -> None:
    lines = [f"{plainly_grouped(row.missed)} missed"]
    if confidence is not None:
        low, high = _statistics.clopper_pearson_interval(row.missed, row.trials, confidence)
        lines.append(f"{percent_below(1.0 - high)} to {percent_above(1.0 - low)}".replace("\u00a0%", " %"))
    if row.undefined:
        lines.append(f"{plainly_grouped(row.undefined)} without a value")
    x, across, y, down = _free_corner(row)
    box = {"facecolor": "white", "edgecolor": "none", "alpha": 0.9, "pad": 2.5}
    axes.text(x, y, "\n".join(lines), transform=axes.transAxes, ha=across, va=down, fontsize=9, bbox=box)


def _free_corner(row: Row) -> tuple[float, str, float, str]:
    """Return where a text covers least of the curve: x and the side that is there, y and the side that is there."""
    width, height = TEXT
    ranks = _curve_ranks(row.trials)
    along = (np.clip(row.worst_first()[ranks - 1], row.low, row.high) - row.low) / (row.high - row.low)
    floor, top = np.log(0.5 / row.trials), np.log(1.6)
    up = (np.log(ranks / row.trials) - floor) / (top - floor)
    limit = (row.limit - row.low) / (row.high - row.low)
    # Beside the limit, not upon it.
    right = 0.97 if limit < 0.97 - width else min(limit - 0.03, 0.97)
    left = 0.03 if limit > 0.03 + width else max(limit + 0.03, 0.03)
    covered = {}
    for low, at in ((right - width, (right, "right")), (left, (left, "left"))):
        for bottom, height_at in ((0.96 - height, (0.96, "top")), (0.05, (0.05, "bottom"))):
            is_hit = (along >= low) & (along <= low + width) & (up >= bottom) & (up <= bottom + height)
            covered[(*at, *height_at)] = int(np.count_nonzero(is_hit))
    return min(covered, key=lambda corner: covered[corner])


def _percent(share: float) -> str:
    return f"{100.0 * share:.3g} %" if share >= 1e-6 or not share else f"{100.0 * share:.0e} %"


def _curve_legend(confidence: float | None) -> list[Line2D | Patch]:
    observed = Line2D([], [], color=BLUE, linewidth=1.6, label="observed fraction")
    limit = Line2D([], [], color=INK, linestyle="--", label="limit")
    missed = Patch(facecolor=VERMILLION, alpha=0.25, hatch="//", edgecolor=VERMILLION, label="missed")
    if confidence is None:
        return [observed, limit, missed]
    band = f"{100 * confidence:g} % Clopper-Pearson band, pointwise"
    return [observed, Patch(facecolor=SKY, alpha=0.35, label=band), limit, missed]

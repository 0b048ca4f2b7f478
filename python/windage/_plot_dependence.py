"""The measure of a requirement over one drawn parameter: every trial, or their density, and those that failed."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes
from matplotlib.colors import LinearSegmentedColormap, PowerNorm
from matplotlib.lines import Line2D
from matplotlib.patches import Patch
from numpy.typing import NDArray

from ._plot_row import Flags, Row
from ._plot_style import GREY, INK, SKY, VERMILLION, Values

#: Up to so many trials each is a dot; beyond, the density of all of them is drawn.
MOST_DOTS = 3_000
#: Marks of failing trials: all, or every n-th of either kind, so that none looks more frequent than it is.
MOST_MARKS = 300
#: As many marks, or fewer, are drawn large.
FEW = 100
#: Trials that medians and quantiles are taken from, and groups of them.
MOST_SORTED, BINS = 200_000, 16
CELLS = 64
_DENSITY = LinearSegmentedColormap.from_list("density", ["#DCEEF9", SKY, "#0B4F7D"])


class Dependence:
    """Draws the values of a row over parameters: the same trials in every panel."""

    def __init__(self, row: Row, failed: Flags) -> None:
        self._row = row
        self._is_dense = row.trials > MOST_DOTS
        self._every = every_nth(int(np.count_nonzero(failed)), MOST_MARKS)
        self._missed = np.flatnonzero(row.is_missed)[:: self._every]
        self._elsewhere = np.flatnonzero(failed & ~row.is_missed)[:: self._every]
        self._passing = np.flatnonzero(~failed) if not self._is_dense else np.empty(0, dtype=np.int64)
        self._is_sorted = row.trials >= 20 * BINS

    def draw(self, axes: Axes, parameter: Values) -> None:
        """Draw the trials over a parameter, shape (trials,)."""
        row = self._row
        if self._is_dense:
            _draw_density(axes, row, parameter)
        else:
            size = 5 if len(self._passing) > FEW else 20
            self._scatter(axes, parameter, self._passing, s=size, marker="o", color=SKY, alpha=0.6, linewidths=0)
        # Rings are small, grey and thin: where many trials miss another limit, the others stay visible.
        ring = {"facecolors": "none", "edgecolors": GREY, "linewidths": 0.6, "alpha": 0.8}
        self._scatter(axes, parameter, self._elsewhere, s=9, marker="o", **ring)
        size = 9 if len(self._missed) > FEW else 20
        self._scatter(axes, parameter, self._missed, s=size, marker="x", color=VERMILLION, linewidths=0.8)
        if self._is_sorted:
            _draw_trend(axes, row, parameter)
        row.mark_limit(axes, vertical=False)
        axes.set_ylim(row.low, row.high)

    def legend(self) -> dict[str, Line2D | Patch]:
        """Return what the legend says of the marks that were drawn, by kind."""
        some = "" if self._every == 1 else f" (1 in {self._every})"
        dot = {"linestyle": "none", "markersize": 5}
        kinds: dict[str, Line2D | Patch] = {}
        if self._is_dense:
            kinds["density"] = Patch(facecolor=SKY, label="all trials; darker where more")
        elif len(self._passing):
            kinds["passing"] = Line2D([], [], marker="o", color=SKY, label="passing trial", **dot)  # type: ignore[arg-type]
        if len(self._missed):
            label = f"trial that missed this limit{some}"
            kinds["missed"] = Line2D([], [], marker="x", color=VERMILLION, label=label, **dot)  # type: ignore[arg-type]
        if len(self._elsewhere):
            label = f"trial that missed another{some}"
            kinds["other"] = Line2D([], [], marker="o", color=GREY, mfc="none", label=label, **dot)  # type: ignore[arg-type]
        if self._is_sorted:
            kinds["trend"] = Line2D([], [], color=INK, linestyle="-", label="median; dotted: 5 % are worse")
        return kinds

    def _scatter(self, axes: Axes, parameter: Values, places: NDArray[np.int64], **style: object) -> None:
        axes.scatter(parameter[places], self._row.shown(places), rasterized=True, **style)  # type: ignore[arg-type]


def every_nth(count: int, most: int) -> int:
    """Return n such that every n-th of `count` things are at most `most`."""
    return max(1, -(-count // most))


def _draw_density(axes: Axes, row: Row, parameter: Values) -> None:
    """Draw how many of all trials lie in each cell of a grid."""
    x = np.linspace(*_ends(parameter), CELLS + 1)
    y = np.linspace(row.low, row.high, CELLS + 1)
    counts = np.zeros((CELLS, CELLS))
    # In pieces: the clipped copy of ten million values would be as large as they are.
    for start in range(0, row.trials, 1 << 20):
        places = np.arange(start, min(start + (1 << 20), row.trials))
        counts += np.histogram2d(parameter[places], row.shown(places), bins=[x, y])[0]
    shown = np.ma.masked_equal(counts.T, 0.0)
    axes.pcolormesh(x, y, shown, cmap=_DENSITY, norm=PowerNorm(0.4, vmin=0.0), rasterized=True)


def _ends(parameter: Values) -> tuple[float, float]:
    low, high = float(parameter.min()), float(parameter.max())
    return (low, high) if high > low else (low - (abs(low) or 1.0) * 0.5, low + (abs(low) or 1.0) * 0.5)


def _draw_trend(axes: Axes, row: Row, parameter: Values) -> None:
    """Draw the median and the worst 5 % in groups of equally many trials."""
    places = np.arange(0, row.trials, every_nth(row.trials, MOST_SORTED))
    values, shown = parameter[places], row.shown(places)
    if len(np.unique(values)) < BINS:
        return
    groups = np.array_split(np.argsort(values, kind="stable"), BINS)
    middle = [float(np.median(values[group])) for group in groups]
    for quantile, style in ((0.5, "-"), (0.95 if row.missed_side > 0 else 0.05, ":")):
        course = [float(np.quantile(shown[group], quantile)) for group in groups]
        axes.plot(middle, course, color=INK, linewidth=1.3, linestyle=style)

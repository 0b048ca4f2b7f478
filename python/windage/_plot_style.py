"""What all plots share: the figure, the colours and small pieces of text. Imports Matplotlib.

Figures belong to the caller: nothing is registered with pyplot, no setting of Matplotlib is changed. Colours
are those of Okabe & Ito 2008, "Color universal design"; whatever a colour says, a shape, a line style or a
word says as well.
"""

from __future__ import annotations

import io
import re
import textwrap
from collections.abc import Sequence

import numpy as np
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.layout_engine import ConstrainedLayoutEngine
from numpy.typing import NDArray

from ._shown_text import plot_text

BLUE, VERMILLION, GREEN = "#0072B2", "#D55E00", "#009E73"
SKY, INK, GREY, PALE = "#56B4E9", "#222222", "#6B6B6B", "#C9C9C9"
#: Characters of legends side by side above a panel of a replay.
LEGEND_ROOM = 106
#: Most samples of a line that are worth drawing; beyond, each bin shows its extremes.
MOST_POINTS = 8_000
#: A dot inside a path such as "actuator.delay", not that of a number.
PATH_DOT = re.compile(r"\.(?=[A-Za-z_])")

Values = NDArray[np.float64]


class StudyFigure(Figure):
    """A Matplotlib figure that notebooks show by themselves. `savefig(path)` writes it to a file."""

    def __init__(self, width: float, height: float, *, is_constrained: bool = True) -> None:
        layout = ConstrainedLayoutEngine(w_pad=0.08, h_pad=0.08, wspace=0.03, hspace=0.05)
        super().__init__(figsize=(width, height), layout=layout if is_constrained else None)
        FigureCanvasAgg(self)

    def _repr_png_(self) -> bytes:
        buffer = io.BytesIO()
        self.savefig(buffer, format="png", dpi=100)
        return buffer.getvalue()


def dress(axes: Axes, x_label: str, y_label: str) -> None:
    """Label the axes and clear away what carries no meaning."""
    axes.set_xlabel(x_label, fontsize=9)
    axes.set_ylabel(y_label, fontsize=9)
    axes.tick_params(labelsize=8)
    axes.spines[["top", "right"]].set_visible(False)
    axes.grid(True, color="#E4E4E4", linewidth=0.6)
    axes.set_axisbelow(True)


def title_lines(figure: Figure, lines: Sequence[str], source: str) -> int:
    """Set the title: what it is, and where it comes from. Returns how many lines it has."""
    width = int(11.0 * figure.get_figwidth())
    text = plot_text("\n".join(wrapped(line, width) for line in [*lines, source]))
    figure.suptitle(text, fontsize=11, x=0.01, ha="left")
    return text.count("\n") + 1


def source_line(digest: str, seed: int, title: str) -> str:
    """Return what a picture was made of. The study's title comes last: no word of it can pass for a verdict."""
    return f"study {digest[:12]}, seed {seed}" + (f": {title}" if title else "")


def panel_title(axes: Axes, text: str, *, is_heading: bool = False) -> None:
    """Set the title of a panel at its left."""
    size, weight = (10, "bold") if is_heading else (9, "normal")
    axes.set_title(text, fontsize=size, loc="left", color=INK, weight=weight)


def legend_above(axes: Axes) -> int:
    """Put the legend above its axes, in as many columns as its words allow. Returns how many rows it has."""
    _, labels = axes.get_legend_handles_labels()
    wide = [len(label) + 8 for label in labels]
    columns = len(wide) or 1
    # Filled column by column, evenly; as many as fit beside each other.
    while columns > 1 and sum(max(column) for column in np.array_split(wide, columns)) > LEGEND_ROOM:
        columns -= 1
    axes.legend(
        fontsize=8,
        loc="lower left",
        bbox_to_anchor=(0.0, 1.0),
        ncols=columns,
        frameon=False,
        borderpad=0,
        labelspacing=0.4,
    )
    return -(-len(wide) // columns)


def wrapped(text: str, width: int) -> str:
    """Break a text into lines at blanks and between the parts of a path or of a long name, so that it fits."""
    parted = PATH_DOT.sub(".\x00 ", text)
    if any(len(word) > width for word in parted.split()):
        parted = parted.replace("_", "_\x00 ")
    lines = textwrap.wrap(parted, width, break_on_hyphens=False)
    return "\n".join(line.replace("\x00 ", "").replace("\x00", "") for line in lines)


def thinned(time: Values, values: Values) -> tuple[Values, Values]:
    """Return a course with at most `MOST_POINTS` samples; extremes are kept, so that no peak is lost."""
    if len(values) <= MOST_POINTS:
        return time, values
    size = -(-len(values) // (MOST_POINTS // 2))
    padding = np.full(-len(values) % size, np.nan)
    bins = np.concatenate([values, padding]).reshape(-1, size)
    starts = size * np.arange(len(bins))
    lowest = starts + np.argmin(np.where(np.isnan(bins), np.inf, bins), axis=1)
    highest = starts + np.argmax(np.where(np.isnan(bins), -np.inf, bins), axis=1)
    chosen = np.unique(np.concatenate([lowest, highest]))
    return time[chosen], values[chosen]

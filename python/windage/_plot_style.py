"""What all plots share: the figure, the colours and small pieces of text. Imports Matplotlib.

Figures belong to the caller: nothing is registered with pyplot, no setting of Matplotlib is changed. Colours
are those of Okabe & Ito 2008, "Color universal design"; whatever a colour says, a shape, a line style or a
word says as well.
"""

from __future__ import annotations

import io
import re
import textwrap

import numpy as np
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.layout_engine import ConstrainedLayoutEngine
from numpy.typing import NDArray

BLUE, VERMILLION, GREEN = "#0072B2", "#D55E00", "#009E73"
SKY, INK, GREY = "#56B4E9", "#222222", "#6B6B6B"
#: Most samples of a line that are worth drawing; beyond, each bin shows its extremes.
MOST_POINTS = 8_000
#: A dot inside a path such as "actuator.delay", not that of a number.
PATH_DOT = re.compile(r"\.(?=[A-Za-z_])")

Values = NDArray[np.float64]


class StudyFigure(Figure):
    """A Matplotlib figure that notebooks show by themselves. `savefig(path)` writes it to a file."""

    def __init__(self, width: float, height: float) -> None:
        layout = ConstrainedLayoutEngine(w_pad=0.08, h_pad=0.08, wspace=0.03, hspace=0.05)
        super().__init__(figsize=(width, height), layout=layout)
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


def title_lines(figure: Figure, first: str, second: str) -> None:
    """Set a title of two lines: what it is, and where it comes from."""
    figure.suptitle(f"{first}\n{second}", fontsize=11, x=0.01, ha="left")


def wrapped(text: str, width: int) -> str:
    """Break a text into lines at blanks and between the parts of a path, so that long names fit."""
    lines = textwrap.wrap(PATH_DOT.sub(".\x00 ", text), width, break_on_hyphens=False)
    return "\n".join(line.replace(".\x00 ", ".").replace("\x00", "") for line in lines)


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

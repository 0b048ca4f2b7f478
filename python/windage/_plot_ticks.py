"""Ticks whose labels never run into each other, however large, small or close together the numbers are."""

from __future__ import annotations

import itertools
import math
from collections.abc import Sequence

from matplotlib.axis import Axis
from matplotlib.ticker import FixedFormatter, FixedLocator, MaxNLocator

#: Ticks tried, the most first.
COUNTS = (5, 4, 3, 2, 1)
#: Blanks between two labels, in characters.
GAP = 2


def set_ticks(axis: Axis, low: float, high: float, room: float = math.inf) -> None:
    """Set the ticks of a linear axis.

    Parameters
    ----------
    axis : Axis
        Of Axes whose limits are set to `low` and `high` already.
    low, high : float
        Ends of the axis.
    room : float
        Characters that fit side by side along it; infinite for an axis whose labels stand one above the other.
    """
    first, last = min(low, high), max(low, high)
    ticks: list[float] = []
    for count in COUNTS:
        found = MaxNLocator(count, steps=[1, 2, 2.5, 5, 10]).tick_values(first, last)
        ticks = [float(tick) for tick in found if first <= tick <= last]
        labels = tick_labels(ticks)
        if math.isinf(room) or sum(len(label) + GAP for label in labels) <= room:
            break
    axis.set_major_locator(FixedLocator(ticks))
    axis.set_major_formatter(FixedFormatter(tick_labels(ticks)))


def tick_labels(ticks: Sequence[float]) -> list[str]:
    """Write numbers with as few digits as tell them apart and err by less than a hundredth of their distance."""
    step = min((b - a for a, b in itertools.pairwise(ticks)), default=math.inf)
    labels: list[str] = []
    for digits in range(1, 18):
        labels = [f"{tick:.{digits}g}" for tick in ticks]
        exact = all(abs(float(label) - tick) <= 0.01 * step for label, tick in zip(labels, ticks, strict=True))
        if exact and len(set(labels)) == len(labels):
            break
    return [_plain(label).replace("-", "\u2212") for label in labels]


def _plain(label: str) -> str:
    """Write 1e+03 as 1000 and 0 without a sign; longer ones keep their exponent, without its zeros."""
    value = float(label)
    if value == 0.0:
        return "0"
    if 1e-4 <= abs(value) < 1e6:
        return f"{value:.15f}".rstrip("0").rstrip(".") if "e" in label else label
    mantissa, _, exponent = label.partition("e")
    return f"{mantissa}e{int(exponent)}" if exponent else label

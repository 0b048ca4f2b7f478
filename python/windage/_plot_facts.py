"""What stands beside the panels of a replay: what was met, and what was drawn from which spread."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from matplotlib.axes import Axes

from ._plot_style import GREY, INK, VERMILLION, wrapped
from ._requirement_table import number_beside, requirement_limit
from ._shown_text import plot_text

if TYPE_CHECKING:
    from ._replay import Replay

MOST_FACTS = 14
#: Characters of a line, and its height in inches.
WIDTH, LINE = 42, 0.165


@dataclass(frozen=True)
class Fact:
    """Some lines of text, with the space before and after them in lines."""

    text: str
    color: str = INK
    weight: str = "normal"
    before: float = 0.0
    after: float = 0.0

    @property
    def lines(self) -> float:
        """Height in lines."""
        return self.before + 1.0 + 0.95 * self.text.count("\n") + self.after


def facts(replay: Replay) -> list[Fact]:
    """Return what is to be written, from above."""
    told = [Fact("Requirements", weight="bold")] if replay.requirements else []
    for place, requirement in enumerate(replay.requirements):
        is_met = bool(replay.met[place])
        words, limit = requirement_limit(replay, place)
        name = f"{requirement.name}: " if requirement.name else ""
        text = f"{'met' if is_met else 'MISSED'}: {name}{requirement.measure.label} {words}"
        told.append(Fact(wrapped(text, WIDTH), INK if is_met else VERMILLION))
        value = list(replay.measures.values())[replay._described.requirement_rows[place]]
        told.append(Fact(f"value {number_beside(value, (limit,))}, slack {replay.slack[place]:.4g}", GREY, after=0.5))
    columns = replay._described.columns
    nominal = "Every spread at its nominal value" if replay.trial is None else "No drawn parameters"
    told.append(Fact("Drawn parameters" if columns else nominal, weight="bold", before=1.0))
    for column in columns[:MOST_FACTS]:
        told.append(Fact(wrapped(f"{column.name} = {replay.parameters[column.name]:.5g}", WIDTH)))
        told.append(Fact(wrapped(repr(column.spread)[:160], WIDTH), GREY, after=0.5))
    if len(columns) > MOST_FACTS:
        told.append(Fact(f"and {len(columns) - MOST_FACTS} more"))
    return told


def facts_height(told: list[Fact]) -> float:
    """Return the height that they need, inches."""
    return LINE * sum(fact.lines for fact in told)


def write_facts(axes: Axes, told: list[Fact], height: float) -> None:
    """Write them into axes of a height in inches that show nothing else."""
    axes.set_axis_off()
    y = 1.0
    for fact in told:
        y -= LINE / height * fact.before
        size = 8.0 if fact.color == GREY else 8.5
        options = {"fontsize": size, "weight": fact.weight, "color": fact.color, "va": "top"}
        axes.text(0.0, y, plot_text(fact.text), transform=axes.transAxes, **options)  # type: ignore[arg-type]
        y -= LINE / height * (fact.lines - fact.before)

"""Plots of outcomes and replays. Matplotlib is an optional extra and is imported on use."""

from __future__ import annotations

import importlib.util
from collections.abc import Sequence
from typing import TYPE_CHECKING

from ._errors import WindageError

if TYPE_CHECKING:
    from ._outcome import Outcome
    from ._plot_style import StudyFigure
    from ._replay import Replay

HOW_TO_INSTALL = "Plots need Matplotlib, which is not installed here. Install it with: pip install 'windage[plots]'"


def has_matplotlib() -> bool:
    """Tell whether plots can be drawn."""
    return importlib.util.find_spec("matplotlib") is not None


def plot_outcome(
    outcome: Outcome,
    *,
    requirements: Sequence[int | str] | None = None,
    parameters: int = 3,
    confidence: float = 0.95,
) -> StudyFigure:
    """Plot how much slack the trials have, and which spreads it depends on.

    Each requirement has a row. On the left: the fraction of trials with at most so much slack, on a
    logarithmic axis because it is the tail that decides; where the curve crosses 0 the missed fraction is
    read. The band holds the true fraction, at each point by itself. On the right: slack over the drawn
    parameters with the largest rank correlation.

    Parameters
    ----------
    outcome : Outcome
        At least one trial of a study with requirements.
    requirements : sequence of int or str, optional
        Which requirements to show, by place or name; by default all, or the six missed most often.
    parameters : int
        Panels a requirement, 0 to 6.
    confidence : float
        Of the band: two-sided Clopper-Pearson, point by point.

    Returns
    -------
    matplotlib.figure.Figure
        Belongs to the caller; notebooks show it, `savefig` writes it.

    Raises
    ------
    WindageError
        If Matplotlib is not installed.
    DescriptionError
        If there is no trial or no requirement, or an argument is out of range.
    """
    _need_matplotlib()
    from ._plot_outcome import draw_outcome

    return draw_outcome(outcome, requirements, parameters, confidence)


def plot_replay(replay: Replay, *, after: float = 0.0, before: float | None = None) -> StudyFigure:
    """Plot one trial: reference and output, error, command and input, estimated and true total disturbance.

    Limits of requirements are drawn where they limit the peak, minimum or maximum of a plotted signal, over
    the window in which they hold.

    Parameters
    ----------
    replay : Replay
        From `Study.replay` or `Study.nominal`.
    after, before : float, s
        Section of the trial to show; by default all of it.

    Returns
    -------
    matplotlib.figure.Figure
        Belongs to the caller; notebooks show it, `savefig` writes it.

    Raises
    ------
    WindageError
        If Matplotlib is not installed.
    DescriptionError
        If the section holds fewer than two samples.
    """
    _need_matplotlib()
    from ._plot_replay import draw_replay

    return draw_replay(replay, after, before)


def _need_matplotlib() -> None:
    if not has_matplotlib():
        raise WindageError(HOW_TO_INSTALL)

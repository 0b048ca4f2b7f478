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
    from ._verdict import Verdict

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
    verdict: Verdict | None = None,
) -> StudyFigure:
    """Plot an outcome; the arguments are those of `Outcome.plot`.

    Raises
    ------
    WindageError
        If Matplotlib is not installed.
    DescriptionError
        If there is no trial or no requirement, or an argument is out of range.
    """
    _need_matplotlib()
    from ._plot_outcome import draw_outcome

    return draw_outcome(outcome, requirements, parameters, confidence, verdict)


def plot_replay(
    replay: Replay,
    *,
    after: float = 0.0,
    before: float | None = None,
    onset: bool = False,
    signals: Sequence[str] = (),
    nominal: bool = True,
) -> StudyFigure:
    """Plot one trial; the arguments are those of `Replay.plot`.

    Raises
    ------
    WindageError
        If Matplotlib is not installed.
    DescriptionError
        If the section holds fewer than two samples, a signal does not exist, or nothing is missed at an onset.
    """
    _need_matplotlib()
    from ._plot_replay import draw_replay

    return draw_replay(replay, after, before, onset, signals, nominal)


def _need_matplotlib() -> None:
    if not has_matplotlib():
        raise WindageError(HOW_TO_INSTALL)

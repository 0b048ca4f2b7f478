"""One trial again, with every signal: the same digits as in the run it comes from."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from ._arguments import explained
from ._describe import Described
from ._errors import DescriptionError, suggestion
from ._measures import Requirement
from ._numbers import Number, Spread
from ._portable import Portable, freeze
from ._shared_numbers import Column, Shared
from ._slack import slack_of
from ._text_table import WIDTH, html_table, plainly_grouped

if TYPE_CHECKING:
    from ._loop import Loop
    from ._plot_style import StudyFigure
    from ._study import Study

Values = NDArray[np.float64]


class Replay(Portable):
    """Every signal of one trial, one value a sample instant.

    `replay["error"]` is the array of a signal. Made by `Study.replay` and `Study.nominal`.

    Attributes
    ----------
    trial : int or None
        Index of the trial; None for the nominal unit.
    time : ndarray, shape (samples,)
        Sample instants, s.
    parameters, measures : mapping of str to float
        Drawn parameters and measures of this trial.
    slack : ndarray, shape (requirements,)
        Distance to each limit, at least 0 where met, -infinity if the trial diverged.
    met : ndarray of bool, shape (requirements,)
        Which requirements are met.
    diverged : bool
        Whether a state of the plant left the finite range.
    seed : int
        Of the study.
    digest, title : str
        Of the study; see `Study.digest`.
    """

    def __init__(
        self,
        study: Study,
        loop: Loop,
        described: Described,
        run: tuple[Values, Values, NDArray[np.uint8]],
        signals: Mapping[str, Values],
        trial: int | None,
    ) -> None:
        parameters, measures, status = run
        self.trial = trial
        self.requirements: tuple[Requirement, ...] = tuple(study.requirements)
        self.seed, self.digest, self.title = study.seed, study.digest, study.title
        self._loop = loop
        self._nominal: Callable[[], Replay] = study.nominal
        self._signals = dict(signals)
        self._described = described
        self.parameters = {c.name: float(v) for c, v in zip(described.columns, parameters[:, 0], strict=True)}
        self.measures = dict(zip(described.measure_names, measures[:, 0].tolist(), strict=True))
        self.slack: Values = slack_of(described, self.requirements, parameters, measures, status)[0]
        self.met: NDArray[np.bool_] = self.slack >= 0.0
        self.diverged = bool(status[0])
        freeze(self.slack, self.met, *self._signals.values())

    @property
    def time(self) -> Values:
        """Sample instants, s."""
        return self._signals["time"]

    @property
    def signals(self) -> tuple[str, ...]:
        """Names of the signals."""
        return tuple(self._signals)

    @property
    def passed(self) -> bool:
        """Whether the trial finished and met every requirement."""
        return not self.diverged and bool(self.met.all())

    def __getitem__(self, signal: str) -> Values:
        if signal not in self._signals:
            mend = suggestion(str(signal), self._signals)
            raise DescriptionError("replay", signal, "the name of a signal", mend)
        return self._signals[signal]

    def __iter__(self) -> Any:
        return iter(self._signals)

    def __len__(self) -> int:
        return len(self._signals)

    @property
    def total_disturbance(self) -> Values:
        """The true total disturbance f = y^(n) - b0 u, shape (samples,).

        Notes
        -----
        y^(n) is the n-th central difference of the true output at the sample instants, which is the mean of
        the n-th derivative over n sample periods (n + 1 for odd n), weighted by a B-spline (Peano kernel; de
        Boor 1978, A Practical Guide to Splines, chapter IX, from memory). The same weights are applied to the
        input u, held between its changes, so that for an integrator chain f is exact to rounding. With a lag
        in the actuator the input is not held, and the straight line between its samples is used. Where the
        difference would reach beyond the trial the value is NaN.
        """
        n = self._loop.controller.order
        period, b0 = self._value(self._loop.sample_period, "sample_period"), self._b0()
        derivative = central_difference(self["output"], n, period)
        return derivative - b0 * self._mean_input(n, period)

    @property
    def estimated_disturbance(self) -> Values:
        """The controller's estimate of the total disturbance, in the sense of `total_disturbance`.

        Notes
        -----
        The observer of the output form estimates f itself. The one of the error form follows e = r - y with
        e^(n) = r^(n) - f - b0 u, so its last estimate is that of r^(n) - f, and the estimate of f is r^(n)
        minus it; r^(n) is taken as a central difference like y^(n).
        """
        n = self._loop.controller.order
        last = self[f"estimate_{n + 1}"]
        if self._loop.controller.form == "output":
            return last
        period = self._value(self._loop.sample_period, "sample_period")
        return central_difference(self["reference"], n, period) - last

    @explained
    def plot(
        self,
        *,
        after: float = 0.0,
        before: float | None = None,
        onset: bool = False,
        signals: Sequence[str] = (),
        nominal: bool = True,
    ) -> StudyFigure:
        """Plot reference and output, error, command and input, estimated and true total disturbance.

        Further signals that requirements read have panels of their own. Each requirement is marked where it is read
        off: its limit over its window, and the samples that decide. A few samples of the disturbance far outside the
        others do not set the scale; how far they go is written.

        Parameters
        ----------
        after, before : float, s
            Section of the trial to show; by default all of it.
        onset : bool
            Show instead the section around the instant at which a requirement is first seen to be missed.
        signals : sequence of str
            Further signals to show.
        nominal : bool
            Draw the nominal unit behind, which is run for that.

        Returns
        -------
        matplotlib.figure.Figure
            Belongs to the caller; notebooks show it, `replay.plot().savefig("trial.png")` writes it.

        Raises
        ------
        WindageError
            If Matplotlib is not installed.
        DescriptionError
            If the section holds fewer than two samples, a signal does not exist, or nothing is missed at an onset.
        """
        from ._plots import plot_replay

        return plot_replay(self, after=after, before=before, onset=onset, signals=signals, nominal=nominal)

    def __repr__(self) -> str:
        return self._text()

    def _repr_html_(self) -> str:
        import html  # costs import time and is seldom needed

        from ._requirement_table import REPLAY_HEADER, replay_cells

        table = html_table(REPLAY_HEADER, replay_cells(self))
        title = f"<p>{html.escape(self.title)}</p>" if self.title else ""
        return f"{title}<p><strong>{html.escape(self._headline())}</strong></p>{table}"

    def _text(self, width: int = WIDTH) -> str:
        """Return what became of the trial, and limit, value and slack of each requirement."""
        from ._requirement_table import replay_text

        title = [f"Study: {self.title}"] if self.title else []
        return "\n".join([*title, self._headline(), *replay_text(self, width)])

    def _headline(self) -> str:
        name = "nominal unit" if self.trial is None else f"trial {plainly_grouped(self.trial)}"
        samples = plainly_grouped(len(self.time))
        fate = "diverged" if self.diverged else ("passed" if self.passed else "failed")
        if not self.requirements and not self.diverged:
            fate = "finished"
        return f"Replay of {name}: {fate}, {samples} samples of {len(self._signals)} signals"

    def _b0(self) -> float:
        return self._value(self._loop.controller.b0, "controller.b0")

    def _value(self, number: Number, path: str) -> float:
        """Return the value that a number has in this trial."""
        if not isinstance(number, Spread):
            return number
        for column in self._described.columns:
            is_shared = isinstance(number, Shared | Column) and column.spread == number
            if column.path == path or is_shared:
                return self.parameters[column.name]
        raise KeyError(path)

    def _mean_input(self, order: int, period: float) -> Values:
        """Return the mean of the plant's input with the weights of a central difference."""
        u = self["input"]
        if self._loop.actuator.time_constant != 0.0:
            # Straight lines between the samples: half of each end.
            return spline_mean(0.5 * (u[:-1] + u[1:]), 0.5 * (u[:-1] + u[1:]), order, 0.0)
        delay = self._value(self._loop.actuator.delay, "actuator.delay")
        samples = (delay + self._value(self._loop.plant.dead_time, "plant.dead_time")) / period
        # As the engine: the command changes this part of a period after the sample instant. Before the change
        # it is that seen at the sample, after it that seen at the next one.
        part = 0.0 if abs(samples - round(samples)) <= 1e-9 else samples - math.floor(samples)
        return spline_mean(u[:-1], u[1:] if part > 0.0 else u[:-1], order, part)


def central_difference(values: Values, order: int, period: float) -> Values:
    """Return the central difference quotient of an order, NaN where it would reach beyond the ends.

    For odd orders it is the mean of the two differences that lie half a period to either side.
    """
    with np.errstate(invalid="ignore", over="ignore"):  # a diverged trial
        differences: Values = np.diff(values, n=order) / period**order
    return _centred(differences, order, len(values))


def spline_mean(before: Values, after: Values, order: int, part: float) -> Values:
    """Return the B-spline mean that a central difference takes of a derivative.

    Parameters
    ----------
    before, after : ndarray, shape (intervals,)
        The derivative in the first `part` of each interval and in the rest of it.
    order : int
        Order of the difference.
    part : float
        0 up to but not including 1.

    Returns
    -------
    ndarray, shape (intervals + 1,)
        At each sample, NaN where the spline would reach beyond the ends.
    """
    if len(before) < order:
        return np.full(len(before) + 1, np.nan)
    ends = [spline_integral(order, j) for j in range(order + 1)]
    change = [spline_integral(order, j + part) for j in range(order)]
    first = np.array([change[j] - ends[j] for j in range(order)])
    second = np.array([ends[j + 1] - change[j] for j in range(order)])
    # A convolution turns the weights round.
    means = np.convolve(before, first[::-1], mode="valid") + np.convolve(after, second[::-1], mode="valid")
    return _centred(means, order, len(before) + 1)


def spline_integral(order: int, x: float) -> float:
    """Return the integral of the cardinal B-spline on [0, order] from 0 to x (truncated powers)."""
    terms = (
        (-1) ** i * math.comb(order, i) * max(x - i, 0.0) ** order / math.factorial(order) for i in range(order + 1)
    )
    return math.fsum(terms)


def _centred(differences: Values, order: int, samples: int) -> Values:
    """Put values that span `order` periods at the sample in their middle."""
    result = np.full(samples, np.nan)
    if order % 2:
        differences = 0.5 * (differences[1:] + differences[:-1]) if len(differences) > 1 else np.empty(0)
    margin = (order + 1) // 2
    if len(differences):
        result[margin : margin + len(differences)] = differences
    return result

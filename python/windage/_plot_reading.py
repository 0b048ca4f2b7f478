"""How a requirement is read off a signal: limits, the samples that decide, and when it is first missed."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from ._describe import requirement_path
from ._numbers import Number, Spread
from ._requirement_table import limit_in

if TYPE_CHECKING:
    from ._measures import Measure
    from ._replay import Replay

Values = NDArray[np.float64]
Flags = NDArray[np.bool_]
#: Measures that add up over the window: what each sample adds (times the period, where it is an integral).
_ADDING = ("ise", "iae", "itae", "integral_square", "integral_absolute", "integral_time_absolute")


@dataclass
class Reading:
    """What a picture shows of one requirement on one signal.

    Attributes
    ----------
    inside : ndarray of bool, shape (samples,)
        The window.
    levels, measured : list of float
        Heights of the limit, and of what was measured.
    points : list of int
        Samples that decide.
    beyond : ndarray of bool, shape (samples,)
        Samples beyond the limit.
    times, limit_times : list of float
        Instants measured, and their limits.
    shows_beyond : bool
        Whether those samples by themselves decide, so that they are drawn over.
    base : float or None
        Where the area between it and the signal is what counts.
    """

    inside: Flags
    beyond: Flags
    levels: list[float] = field(default_factory=list)
    measured: list[float] = field(default_factory=list)
    points: list[int] = field(default_factory=list)
    times: list[float] = field(default_factory=list)
    limit_times: list[float] = field(default_factory=list)
    shows_beyond: bool = True
    base: float | None = None


def readings(replay: Replay, place: int) -> list[tuple[Measure, Reading]]:
    """Return a reading for each measure of a signal that a requirement is made of."""
    requirement = replay.requirements[place]
    path = f"{requirement_path(place, requirement)}.measure"
    parts = requirement.measure._placed_parts(path)
    is_single = len(parts) == 1
    return [(part, _Reader(replay, place, part, where, is_single).read()) for where, part in parts]


def first_missed(replay: Replay) -> float | None:
    """Return the instant at which the first of the missed requirements is seen to be missed, s."""
    time = replay.time
    if replay.diverged:
        finite = np.flatnonzero(np.isfinite(replay["output"]))
        return float(time[finite[-1]]) if finite.size else None
    instants = []
    for place in np.flatnonzero(~replay.met).tolist():
        for _, reading in readings(replay, place):
            beyond = np.flatnonzero(reading.beyond)
            found = beyond[0] if beyond.size else next(iter(reading.points), None)
            instants += [] if found is None else [float(time[found])]
    return min(instants, default=None)


class _Reader:
    """Reads one measure off its signal in one trial."""

    def __init__(self, replay: Replay, place: int, part: Measure, path: str, is_single: bool) -> None:
        self._replay, self._part, self._path = replay, part, path
        self._requirement = replay.requirements[place]
        self._values, self._time = replay[part.signal], replay.time
        # What a difference or ratio is made of has no limit of its own.
        self._limit = limit_in(replay, place) if is_single else np.inf
        self._is_upper = not is_single or self._requirement.at_most is not None
        after, before = self._number(part.after, "after"), self._number(part.before, "before")
        slip = 1e-6 * float(self._time[1] - self._time[0]) if len(self._time) > 1 else 0.0
        inside = (self._time >= after - slip) & (self._time <= before + slip)
        self._after = after
        self._reading = Reading(inside, np.zeros(len(self._time), dtype=bool))
        self._places = np.flatnonzero(inside & np.isfinite(self._values))

    def read(self) -> Reading:
        """Return the reading; of a window without a sample it is an empty one."""
        if self._places.size:
            with np.errstate(over="ignore", invalid="ignore"):
                getattr(self, f"_read_{self._part.kind}", self._read_adding)()
        return self._reading

    def _number(self, number: Number | None, name: str) -> float:
        assert number is not None
        try:
            return self._replay._value(number, f"{self._path}.{name}")
        except KeyError:
            # Drawn under another path, that of an equal measure.
            return float(number.nominal) if isinstance(number, Spread) else number

    def _pick(self, sizes: Values, largest: bool) -> None:
        """Mark the sample of the largest or smallest size, and those beyond the limit."""
        shown = sizes[self._places]
        self._reading.points = [int(self._places[np.argmax(shown) if largest else np.argmin(shown)])]
        # A lower limit of a peak or maximum is met by a single sample: all others may lie below.
        if self._is_upper == largest:
            beyond = shown > self._limit if self._is_upper else shown < self._limit
            self._reading.beyond[self._places[beyond]] = True

    def _put_levels(self, *levels: float) -> None:
        self._reading.levels = [float(level) for level in levels if np.isfinite(level)]

    def _read_peak(self) -> None:
        self._put_levels(self._limit, -self._limit)
        self._pick(np.abs(self._values), largest=True)

    def _read_maximum(self) -> None:
        self._put_levels(self._limit)
        self._pick(self._values, largest=True)

    def _read_minimum(self) -> None:
        self._put_levels(self._limit)
        self._pick(self._values, largest=False)

    def _read_final(self) -> None:
        self._put_levels(self._limit)
        self._reading.points = [int(self._places[-1])]

    def _read_mean(self) -> None:
        self._put_levels(self._limit)
        self._reading.measured = [float(self._values[self._places].mean())]

    def _read_rms(self, centre: float = 0.0) -> None:
        size = float(np.sqrt(np.mean((self._values[self._places] - centre) ** 2)))
        self._put_levels(centre + self._limit, centre - self._limit)
        self._reading.measured = [centre + size, centre - size]
        # A missed limit is seen where what has come together exceeds it, whatever follows; a missed lower one is not.
        added = np.where(self._reading.inside, (self._values - centre) ** 2, 0.0)
        together = np.sqrt(np.cumsum(added) / len(self._places))
        self._reading.beyond = self._reading.inside & self._is_upper & (together > self._limit)
        self._reading.shows_beyond = False

    def _read_standard_deviation(self) -> None:
        self._read_rms(float(self._values[self._places].mean()))

    def _change(self) -> tuple[float, float]:
        """Return where the response starts, and the change that it is to make."""
        start = float(self._values[self._places[0]])
        return start, float(self._replay["reference"][self._places[-1]]) - start

    def _read_overshoot(self) -> None:
        start, change = self._change()
        if change:
            self._put_levels(start + change * (1.0 + self._limit))
            self._pick((self._values - start) / change - 1.0, largest=True)

    def _read_undershoot(self) -> None:
        start, change = self._change()
        if change:
            self._put_levels(start - change * self._limit)
            self._pick((start - self._values) / change, largest=True)

    def _read_rise_time(self) -> None:
        start, change = self._change()
        done = (self._values[self._places] - start) / change if change else np.zeros(len(self._places))
        low, high = self._number(self._part.low, "low"), self._number(self._part.high, "high")
        for fraction in (low, high):
            reached = np.flatnonzero(done >= fraction)
            self._reading.points += [int(self._places[reached[0]])] if reached.size else []
        if self._reading.points and np.isfinite(self._limit):
            self._reading.limit_times = [float(self._time[self._reading.points[0]]) + self._limit]

    def _read_settling_time(self) -> None:
        start, change = self._change()
        if self._part.tolerance is not None:
            target, half = 0.0, self._number(self._part.tolerance, "tolerance")
        else:
            target, half = start + change, abs(change) * self._number(self._part.band, "band")
        self._reading.measured = [target + half, target - half]
        outside = self._places[np.abs(self._values[self._places] - target) > half]
        if outside.size:
            self._reading.points = [int(outside[-1])]
        if np.isfinite(self._limit):
            self._reading.limit_times = [self._after + self._limit]
            self._reading.beyond[outside[self._time[outside] > self._after + self._limit]] = True

    def _read_time_outside(self) -> None:
        low, high = self._number(self._part.low, "low"), self._number(self._part.high, "high")
        self._put_levels(low, high)
        self._reading.beyond = self._reading.inside & ((self._values < low) | (self._values > high))

    def _read_time_in_saturation(self) -> None:
        limits = self._replay._loop.actuator.limits or (-np.inf, np.inf)
        low, high = (self._replay._value(limit, f"actuator.limits[{i}]") for i, limit in enumerate(limits))
        self._reading.beyond = self._reading.inside & ((self._values <= low) | (self._values >= high))

    def _read_peak_to_peak(self) -> None:
        shown = self._values[self._places]
        self._reading.points = [int(self._places[np.argmax(shown)]), int(self._places[np.argmin(shown)])]
        self._reading.measured = [float(shown.max()), float(shown.min())]

    def _read_time_of_peak(self) -> None:
        self._pick(np.abs(self._values), largest=True)
        self._reading.beyond[:] = False
        if np.isfinite(self._limit):
            self._reading.limit_times = [self._after + self._limit]

    def _read_adding(self) -> None:
        """Read a measure that all samples of the window add to."""
        if self._part.kind in _ADDING:
            self._reading.base = 0.0

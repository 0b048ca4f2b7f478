"""Which trials of a run are worth running again: near a limit, extreme in a spread, failing, and a sample of all.

While very many trials stream by, `Watch` keeps those few and counts how near to its limits everything else lies.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Values = NDArray[np.float64]
Flags = NDArray[np.bool_]
Places = NDArray[np.int64]

#: What is kept of a stream for each limit, and for each end of a spread.
KEPT_NEAREST, KEPT_EXTREMES = 256, 16
#: Trials that the scale of a limit of zero is taken from.
SCALE_TRIALS = 128
#: Powers of two of nearness by which trials that are not kept are counted.
NEAR_BINS = 40


@dataclass(frozen=True)
class Sizes:
    """How many trials are run again.

    Attributes
    ----------
    nearest : int
        In the first round those nearest to each limit, shared out among the limits.
    extremes : int
        The most extreme in each spread, both ends, at most so many in all.
    passing, failing : int
        Drawn by hash from those that pass and those that fail.
    least, one_of : int
        In all rounds at most so many, or one of so many of the run's trials.
    """

    nearest: int
    extremes: int
    passing: int
    failing: int
    least: int
    one_of: int

    def budget(self, trials: int) -> int:
        """Return how many of a run's trials may be run again."""
        return max(self.least, trials // self.one_of)


USUAL = Sizes(nearest=32, extremes=32, passing=32, failing=16, least=160, one_of=125)
#: Where each trial is run again by itself, with step control.
ONE_BY_ONE = Sizes(nearest=2, extremes=2, passing=1, failing=1, least=12, one_of=4000)


@dataclass(frozen=True)
class Rows:
    """Some trials of a run with all that is known of them.

    Attributes
    ----------
    trials : ndarray of uint64, shape (rows,)
    parameters, slack : ndarray, shape (parameters, rows) and (requirements, rows)
    status : ndarray of uint8, shape (rows,)
    """

    trials: NDArray[np.uint64]
    parameters: Values
    slack: Values
    status: NDArray[np.uint8]

    @property
    def passed(self) -> Flags:
        """Which trials finished and met every requirement."""
        passed: Flags = (self.status == 0) & (self.slack >= 0.0).all(axis=0)
        return passed

    def at(self, places: Places) -> Rows:
        """Return some of the rows."""
        return Rows(self.trials[places], self.parameters[:, places], self.slack[:, places], self.status[places])

    def joined(self, other: Rows) -> Rows:
        """Return the rows of both."""
        return Rows(
            np.concatenate([self.trials, other.trials]),
            np.concatenate([self.parameters, other.parameters], axis=1),
            np.concatenate([self.slack, other.slack], axis=1),
            np.concatenate([self.status, other.status]),
        )


def nearness(slack: Values, scales: Values) -> Values:
    """Return the slack as a share of itself and its scale: 0 on the limit, 1 far away, infinite where there is none."""
    near = np.abs(slack)
    # Limit by limit: all of a large run at once would need its memory several times over.
    for row, scale in zip(near, scales, strict=True):
        is_finite = np.isfinite(row)
        np.divide(row, row + scale, out=row, where=is_finite)
        row[~is_finite] = np.inf
    return near


def scattered(trials: NDArray[np.uint64]) -> NDArray[np.uint64]:
    """Return a hash of each index, so that a sample depends on indices alone (splitmix64, Vigna; from memory)."""
    z = trials + np.uint64(0x9E3779B97F4A7C15)
    z = (z ^ (z >> np.uint64(30))) * np.uint64(0xBF58476D1CE4E5B9)
    z = (z ^ (z >> np.uint64(27))) * np.uint64(0x94D049BB133111EB)
    return z ^ (z >> np.uint64(31))


def smallest(keys: NDArray[np.generic], count: int, among: Flags | None = None) -> Places:
    """Return the places of the smallest keys, smallest first, equal ones in order of place: the same everywhere."""
    places = np.arange(len(keys)) if among is None else np.flatnonzero(among)
    chosen = keys[places]
    if 0 < count < len(places):
        last = np.partition(chosen, count - 1)[count - 1]
        less, equal = np.flatnonzero(chosen < last), np.flatnonzero(chosen == last)
        places = places[np.sort(np.concatenate([less, equal[: count - len(less)]]))]
        chosen = keys[places]
    return places[np.argsort(chosen, kind="stable")[:count]].astype(np.int64)


def nearest(near: Values, count: int) -> Places:
    """Return the rows nearest to each limit, `count` a limit."""
    return _joined([smallest(row, count) for row in near])


def extremes(rows: Rows, count: int, most: int) -> Places:
    """Return the rows most extreme in each spread, `count` an end, for as many spreads as `most` rows allow."""
    drawn = len(rows.parameters)
    spreads = np.linspace(0, drawn - 1, min(drawn, max(1, most // (2 * count)))).astype(int)
    ends = [rows.parameters[i] for i in spreads]
    return _joined([smallest(end, count) for values in ends for end in (values, -values)])


def sample(rows: Rows, passing: int, failing: int) -> tuple[Places, Places]:
    """Return rows drawn by hash from those that pass and from those that fail."""
    keys = scattered(rows.trials)
    return smallest(keys, passing, rows.passed), smallest(keys, failing, ~rows.passed)


def scales_of(limits: Values, measured: Values) -> Values:
    """Return a scale for each limit: its own size, or that of its measure where the limit is zero.

    Parameters
    ----------
    limits, measured : ndarray, shape (requirements, trials)
        Limit and measure in a few trials.
    """
    scales = np.ones(len(limits))
    for i, candidates in enumerate(zip(limits, measured, strict=True)):
        for values in candidates:
            sizes = np.abs(values[np.isfinite(values)])
            if sizes.size and np.median(sizes) > 0.0:
                scales[i] = float(np.median(sizes))
                break
    return scales


def _joined(parts: list[Places]) -> Places:
    return np.unique(np.concatenate(parts)) if parts else np.empty(0, dtype=np.int64)


class Watch:
    """What an audit needs of trials that stream by."""

    def __init__(self) -> None:
        empty = np.empty((0, 0))
        self.rows = Rows(np.empty(0, dtype=np.uint64), empty, empty, np.empty(0, dtype=np.uint8))
        self.scales: Values = np.empty(0)
        self._counts: NDArray[np.int64] = np.zeros((), dtype=np.int64)

    def joined(self, rows: Rows, scales: Values) -> Watch:
        """Return what is known after further trials; `scales` are those of the first ones."""
        watch, is_first = Watch(), not len(self.scales)
        watch.scales = scales if is_first else self.scales
        watch._counts = self._counts + watch._counted(rows)
        watch.rows = watch._kept(rows if is_first else self.rows.joined(rows))
        return watch

    def unseen(self, limit: int, fails: int, misses: int) -> tuple[Values, NDArray[np.int64]]:
        """Return how many trials are not kept, by nearness to a limit.

        Parameters
        ----------
        limit, fails, misses : int
            Of which limit; whether the trials fail altogether and whether they miss it, 0 or 1.

        Returns
        -------
        ndarray, ndarray
            Lower ends of ranges of nearness, and the trials in each.
        """
        counts = self._counts - self._counted(self.rows)
        unseen: NDArray[np.int64] = counts[limit, fails, misses]
        return np.exp2(-np.arange(NEAR_BINS, dtype=np.float64)), unseen

    def _counted(self, rows: Rows) -> NDArray[np.int64]:
        """Count trials over powers of two of their nearness, shape (limits, 2, 2, bins)."""
        near = np.clip(nearness(rows.slack, self.scales), 0.5**NEAR_BINS, 1.0)
        bins = np.clip(-np.floor(np.log2(near)), 0, NEAR_BINS - 1).astype(np.int64)
        sides = 2 * (~rows.passed)[None, :] + ~(rows.slack >= 0.0)
        counts = [np.bincount(s * NEAR_BINS + b, minlength=4 * NEAR_BINS) for s, b in zip(sides, bins, strict=True)]
        return np.array(counts, dtype=np.int64).reshape(len(counts), 2, 2, NEAR_BINS)

    def _kept(self, rows: Rows) -> Rows:
        near = nearest(nearness(rows.slack, self.scales), KEPT_NEAREST)
        ends = extremes(rows, KEPT_EXTREMES, USUAL.extremes * KEPT_EXTREMES)
        drawn = sample(rows, 2 * USUAL.passing, 2 * USUAL.failing)
        return rows.at(_joined([near, ends, *drawn]))

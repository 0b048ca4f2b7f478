"""Runs the trials that matter again with tighter integration and counts what numerical error can have changed.

First round: the trials nearest to each limit, the extremes of each spread, and a sample drawn by hash. How far their
slacks move, relative to slack and scale of the limit, tells how near to a limit a trial has to be for its fate to be
in question. Such trials are run again too, in further rounds, the most questionable first, until hardly any is left
or the budget is spent. Where the change goes along with a drawn parameter, the trials with the largest changes to be
expected are followed until none stands out any more.

The chance that the fate of a trial that is not run again is another one is taken to be the share of comparable trials
whose change, with a factor of safety, would have reached as far as its limit is away.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from math import ceil

import numpy as np
from numpy.typing import NDArray

from ._audit_trials import (
    USUAL,
    Flags,
    Places,
    Rows,
    Sizes,
    Values,
    Watch,
    extremes,
    nearest,
    nearness,
    sample,
    smallest,
)

#: By how much changes of trials that are not run again may exceed the largest one seen.
SAFETY = 4.0
#: What is left of a change when the tighter run is itself compared with the truth, where that was confirmed.
REST = 1.0 / 8.0
#: Trials nearer to a limit than this are on it: rounding alone could have decided, wherever anything moves.
LEAST_BOUND = 1e-9
#: Rounds after the first, and the share of the run's trials that may be left in question after them.
ROUNDS, LEFT_OVER = 4, 1e-4
#: Trials of one look along the tail, and how clear a rank correlation has to be for the look.
TAIL, CLEAR_CORRELATION = 32, 0.3
#: A change of less than this share of slack and scale does not stand out, however small the typical ones are.
UNREMARKABLE = 1e-4

RunAgain = Callable[[Rows], Rows]


def changes(before: Values, after: Values) -> Values:
    """Return by how much slacks differ: 0 where they are the same, infinite where only one is finite."""
    with np.errstate(invalid="ignore"):
        change = np.where(before == after, 0.0, np.abs(after - before))
    return np.where(np.isnan(change), np.inf, change)


def shares(change: Values, slack: Values, scales: Values) -> Values:
    """Return changes as shares of slack and scale; infinite ones stay so."""
    with np.errstate(invalid="ignore"):
        share = change / (np.abs(slack) + scales[:, None])
    return np.where(np.isfinite(change), np.nan_to_num(share, nan=0.0), np.inf)


@dataclass(frozen=True)
class Run:
    """What is audited: the trials of a run as far as they are kept, and what is known of the others.

    Attributes
    ----------
    rows : Rows
        Trials that are kept; all of them, or what a `Watch` keeps.
    scales : ndarray, shape (requirements,)
    trials : int
        Trials that were run.
    failures : int
        Those that failed.
    missed : sequence of int
        Trials that missed each requirement.
    watch : Watch, optional
        Counts the trials that are not kept.
    """

    rows: Rows
    scales: Values
    trials: int
    failures: int
    missed: Sequence[int]
    watch: Watch | None = None

    def population(self, which: Sequence[int]) -> tuple[int, int]:
        """Return how many trials pass and fail the claim made of some requirements, one of them or all."""
        failing = self.failures if len(which) == len(self.scales) else self.missed[which[0]]
        return self.trials - failing, failing


@dataclass(frozen=True)
class Counts:
    """What numerical error can have changed, for one claim.

    Attributes
    ----------
    lost, won : ndarray of uint64
        Trials that pass in the run and fail when run again, and the reverse.
    undecided_passing, undecided_failing : int
        Trials of either kind that are nearer to a limit than their error, known or assumed.
    """

    lost: NDArray[np.uint64]
    won: NDArray[np.uint64]
    undecided_passing: int
    undecided_failing: int


class Examination:
    """The trials of a run of which enough is known, and those of them that were run again.

    Trials are compared with their like: of two kinds in all, those that pass and those that fail, which may move
    irregularly; and for each limit of two sides, met and missed.
    """

    def __init__(self, run: Run, again: RunAgain, sizes: Sizes = USUAL) -> None:
        self.run, self.rows, self.scales, self.rest = run, run.rows, run.scales, REST
        self._again, self._sizes, self._budget = again, sizes, sizes.budget(run.trials)
        self._near = nearness(self.rows.slack, self.scales)
        self._done = np.zeros(len(self.rows.trials), dtype=bool)
        self.places: Places = np.empty(0, dtype=np.int64)
        self.tight = self.rows.at(self.places)
        self._typical: Places = self.places  # trials whose changes stand for those of all others

    def first_round(self) -> None:
        """Run the trials of the first round again."""
        count = max(1, self._sizes.nearest // len(self.scales))
        passing, failing = sample(self.rows, self._sizes.passing, self._sizes.failing)
        self._typical = np.unique(np.concatenate([nearest(self._near, count), passing, failing]))
        self._run(np.unique(np.concatenate([self._typical, extremes(self.rows, 1, self._sizes.extremes)])))

    def further_rounds(self) -> None:
        """Follow the largest changes to be expected, then run the trials again whose fate is in question."""
        self._follow_tail()
        for _ in range(ROUNDS):
            chance = np.where(self._done, 0.0, self._chances(range(len(self.scales))))
            wanted = int(np.sum(chance > 0.0))
            room = min(wanted, self._budget - len(self.places))
            if room <= 0 or np.sum(chance) <= LEFT_OVER * self.run.trials:
                break
            self._run(np.sort(smallest(-chance, room)))

    @property
    def change(self) -> Values:
        """By how much the slacks of the trials run again moved, shape (requirements, trials run again)."""
        return changes(self.rows.slack[:, self.places], self.tight.slack)

    @property
    def share(self) -> Values:
        """The same as shares of slack and scale."""
        return shares(self.change, self.rows.slack[:, self.places], self.scales)

    def count(self, which: Sequence[int]) -> Counts:
        """Count what can have changed in the claim that some of the requirements are met in the same trial."""
        before = _passes(self.rows.at(self.places), which)
        after = _passes(self.tight, which)
        own = self.rest * self.change[list(which)]
        slack = self.tight.slack[list(which)]
        with np.errstate(invalid="ignore"):
            unsafe = np.abs(slack) < own
        unsure = np.where(after, unsafe.any(axis=0), (unsafe | (slack >= 0.0)).all(axis=0))
        trials = self.tight.trials
        passing, failing = self._left(which)
        return Counts(
            trials[before & ~after],
            trials[~before & after],
            int(np.sum(before & after & unsure)) + passing,
            int(np.sum(~before & ~after & unsure)) + failing,
        )

    def _run(self, places: Places) -> None:
        places = places[~self._done[places]]
        if not places.size:
            return
        tight = self._again(self.rows.at(places))
        self._done[places] = True
        self.places = np.concatenate([self.places, places])
        self.tight = self.tight.joined(tight)

    def _alike(self, limit: int, fails: int, misses: int) -> Values:
        """Return how far the changes of the typical trials of one kind and side reach, in order."""
        typical = self.rows.at(self.places)
        alike = np.isin(self.places, self._typical)
        alike &= (~typical.passed == fails) & (~(typical.slack[limit] >= 0.0) == misses)
        return np.sort(SAFETY * self.share[limit, alike])

    def _chance(self, limit: int, fails: int, misses: int, near: Values) -> Values:
        """Return the chance that a change reaches a limit, for trials of one kind and side by their nearness."""
        reached = self._alike(limit, fails, misses)
        count = len(reached) - np.searchsorted(reached, near)
        chance = np.where(count > 0, np.minimum((count + 1.0) / max(1, len(reached)), 1.0), 0.0)
        return np.where(near <= LEAST_BOUND, self._chance_on(limit, fails, misses), chance)

    def _chance_on(self, limit: int, fails: int, misses: int) -> float:
        """Return the chance that trials on a limit move at all: a count, a time or a saturated command mostly stays.

        They are compared with those on the limit that were run again; without any, all are in question.
        """
        again = self.rows.at(self.places)
        on_it = (~again.passed == fails) & (~(again.slack[limit] >= 0.0) == misses)
        on_it &= self._near[limit, self.places] <= LEAST_BOUND
        moved = int(np.sum(self.share[limit, on_it] > 0.0))
        return min(1.0, (moved + 1.0) / max(1, int(np.sum(on_it)))) if moved or not on_it.any() else 0.0

    def _chances(self, which: Sequence[int]) -> Values:
        """Return the chance that the fate of each kept trial is another one, for a claim of some requirements."""
        fails = ~self.rows.passed
        met = self.rows.slack >= 0.0
        passes = _passes(self.rows, which)
        other, chance = np.where(passes, 0.0, 1.0), np.empty(len(fails))
        for limit in which:
            for kind, side in np.ndindex(2, 2):
                alike = (fails == kind) & (~met[limit] == side)
                chance[alike] = self._chance(limit, kind, side, self._near[limit, alike])
            np.maximum(other, chance, out=other, where=passes)  # one limit is enough to fail
            np.minimum(other, chance, out=other, where=~passes & ~met[limit])  # every limit missed has to be reached
        return other

    def _left(self, which: Sequence[int]) -> tuple[int, int]:
        """Count the trials, by chance, that are not run again and whose fate may be another one."""
        chance = np.where(self._done, 0.0, self._chances(which))
        passes = _passes(self.rows, which)
        left = np.array([np.sum(chance[passes]), np.sum(chance[~passes])]) + self._unseen(which)
        known = passes[self._done]  # a trial run again is counted by itself, and no trial twice
        room = np.subtract(self.run.population(which), (np.sum(known), np.sum(~known)))
        return min(int(room[0]), ceil(left[0])), min(int(room[1]), ceil(left[1]))

    def _unseen(self, which: Sequence[int]) -> Values:
        """Count the same of trials that are not kept, of which is known only how many lie how near to each limit."""
        if self.run.watch is None:
            return np.zeros(2)
        there, reached = np.zeros((2, 2, len(which)))
        for row, limit in enumerate(which):
            for fails, misses in np.ndindex(2, 2):
                if len(which) == 1 or fails == misses:
                    near, unseen = self.run.watch.unseen(limit, fails, misses)
                    there[misses, row] += np.sum(unseen)
                    reached[misses, row] += np.sum(unseen * self._chance(limit, fails, misses, near))
        lost, won = np.sum(reached, axis=1)
        # Every limit missed has to be reached: beyond those that reach one there are those at most that do not miss it.
        failing = self.run.population(which)[1] - np.sum(~_passes(self.rows, which))
        return np.array([lost, min(won, np.min(reached[1] + failing - there[1]))])

    def _follow_tail(self) -> None:
        score = self._expected()
        if score is None:
            return
        stands_out = True
        while stands_out and len(self.places) < self._budget and not self._done.all():
            known = len(self.places)
            self._run(np.sort(smallest(-score, TAIL, ~self._done)))
            stands_out = self._stands_out(known)
        if stands_out:
            self._typical = self.places  # what is still to come along the tail is like what was seen there

    def _stands_out(self, known: int) -> bool:
        """Return whether a trial run again after the first `known` changed by more than all typical ones allow."""
        latest, share = self.rows.at(self.places[known:]), self.share[:, known:]
        for limit, slack in enumerate(latest.slack):
            for fails, misses in np.ndindex(2, 2):
                alike = (~latest.passed == fails) & (~(slack >= 0.0) == misses)
                reached = np.max(self._alike(limit, fails, misses), initial=UNREMARKABLE)
                if np.any(share[limit, alike] > reached):
                    return True
        return False

    def _expected(self) -> Values | None:
        """Return a score by which changes grow over the drawn parameters; None if they do not clearly."""
        largest = np.max(self.share, axis=0, initial=0.0)
        if len(largest) < TAIL or np.all(largest == largest[0]):
            return None
        grades = _grades(largest)
        score, is_clear = np.zeros(len(self.rows.trials)), False
        for values in self.rows.parameters:
            seen = values[self.places]
            if np.all(seen == seen[0]):
                continue
            correlation = float(np.corrcoef(_grades(seen), grades)[0, 1])
            if abs(correlation) >= CLEAR_CORRELATION:
                ordered = np.sort(seen)
                score += correlation * np.interp(values, ordered, np.linspace(0.0, 1.0, len(ordered)))
                is_clear = True
        return score if is_clear else None


def _passes(rows: Rows, which: Sequence[int]) -> Flags:
    passes: Flags = (rows.status == 0) & (rows.slack[list(which)] >= 0.0).all(axis=0)
    return passes


def _grades(values: Values) -> Values:
    """Return ranks from 0 on, equal values sharing the lowest."""
    ordered = np.sort(values)
    return np.searchsorted(ordered, values).astype(np.float64)

"""Which trials are run again and what is concluded, on made-up trials whose change by tighter integration is known."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray

from windage import _audit_run as audit_run
from windage import _audit_trials as audit_trials
from windage._audit_run import Examination, Run
from windage._audit_trials import Rows, Watch

Values = NDArray[np.float64]


def rows_of(slack: Values, parameters: Values | None = None, first: int = 0) -> Rows:
    count = slack.shape[1]
    drawn = np.empty((0, count)) if parameters is None else parameters
    status = np.isneginf(slack).all(axis=0).astype(np.uint8)
    return Rows(np.arange(first, first + count, dtype=np.uint64), drawn, slack, status)


class Made:
    """An examination of made-up trials; `after` holds the slack of each under tighter integration."""

    def __init__(self, before: Values, after: Values, parameters: Values | None = None, watch: int = 0) -> None:
        rows = rows_of(before, parameters)
        self.asked: list[int] = []
        self.after = after
        scales = np.ones(len(before))
        known = None
        if watch:
            known = Watch()
            for start in range(0, before.shape[1], watch):
                part = slice(start, start + watch)
                drawn = None if parameters is None else parameters[:, part]
                known = known.joined(rows_of(before[:, part], drawn, start), scales)
        missed = (~(before >= 0.0)).sum(axis=1).tolist()
        kept = known.rows if known else rows
        run = Run(kept, scales, before.shape[1], int(np.sum(~rows.passed)), missed, known)
        self.examination = Examination(run, self._again)
        self.examination.first_round()
        self.first = set(self.asked)

    def _again(self, rows: Rows) -> Rows:
        assert not set(rows.trials.tolist()) & set(self.asked)  # none twice
        self.asked += rows.trials.tolist()
        again = rows_of(self.after[:, rows.trials.astype(np.int64)], rows.parameters)
        return Rows(rows.trials, rows.parameters, again.slack, again.status)

    def counts(self, *which: int) -> audit_run.Counts:
        self.examination.further_rounds()
        return self.examination.count(which or range(len(self.examination.scales)))


def passing(count: int = 5000, seed: int = 1) -> Values:
    return np.random.default_rng(seed).uniform(0.0, 1.0, (1, count))


def share_of(slack: Values, share: float) -> Values:
    """Return changes that are this share of slack and scale."""
    return share * (np.abs(slack) + 1.0)


def test_the_first_round_takes_nearest_extremes_and_samples() -> None:
    random = np.random.default_rng(2)
    slack = random.normal(0.7, 0.5, (2, 3000))
    parameters = random.normal(size=(3, 3000))
    made = Made(slack, slack, parameters)
    expected: set[int] = set()
    for row in slack:
        expected |= set(np.argsort(np.abs(row))[:16].tolist())
    for values in parameters:
        expected |= {int(np.argmin(values)), int(np.argmax(values))}
    hashes = audit_trials.scattered(np.arange(3000, dtype=np.uint64))
    passed = (slack >= 0.0).all(axis=0)
    for side, size in ((passed, 32), (~passed, 16)):
        expected |= set(np.flatnonzero(side)[np.argsort(hashes[side])[:size]].tolist())
    assert made.first == expected
    assert made.counts().undecided_passing == 0
    assert set(made.asked) == expected  # nothing changed, so nothing else is looked at


def test_of_equal_keys_the_first_are_taken() -> None:
    keys = np.repeat([3.0, 1.0, 2.0], 1000)
    assert audit_trials.smallest(keys, 5).tolist() == [1000, 1001, 1002, 1003, 1004]
    assert audit_trials.smallest(keys, 1002)[-2:].tolist() == [2000, 2001]
    assert audit_trials.smallest(keys, 3, keys > 1.0).tolist() == [2000, 2001, 2002]
    assert audit_trials.smallest(keys, 0).tolist() == []
    assert len(audit_trials.smallest(keys, 9000)) == 3000


def test_many_spreads_share_the_extremes() -> None:
    slack = np.ones((1, 2000))
    parameters = np.random.default_rng(3).normal(size=(100, 2000))
    ends = set(audit_trials.extremes(rows_of(slack, parameters), 1, audit_trials.USUAL.extremes).tolist())
    assert 28 <= len(ends) <= 32
    assert {int(np.argmin(parameters[0])), int(np.argmax(parameters[-1]))} <= ends


def test_every_trial_that_the_changes_seen_could_reach_is_run_again() -> None:
    slack = passing()
    made = Made(slack, slack - share_of(slack, 0.003))
    counts = made.counts()
    assert set(counts.lost.tolist()) == set(np.flatnonzero(slack[0] - 0.003 * (slack[0] + 1.0) < 0.0).tolist())
    unsure = np.abs(slack - share_of(slack, 0.003)) < share_of(slack, 0.003) / 8
    assert counts.undecided_passing == np.sum(unsure & (slack >= share_of(slack, 0.003)))
    assert len(counts.lost) < len(made.asked) <= audit_trials.USUAL.least


def test_a_change_three_times_as_large_as_any_seen_is_found_near_a_limit() -> None:
    slack = passing(10_000)
    after = slack - share_of(slack, 0.002)
    first = Made(slack, after).first
    near = slack[0] / (slack[0] + 1.0)
    large = [i for i in np.flatnonzero((near > 0.0055) & (near < 0.006)).tolist() if i not in first]
    assert len(large) >= 2
    after[0, large] = slack[0, large] - share_of(slack, 0.0065)[0, large]
    assert set(large) <= set(Made(slack, after).counts().lost.tolist())


def test_rounding_alone_puts_a_trial_on_a_limit_in_question_where_such_trials_move() -> None:
    slack = np.ones((1, 5000))
    slack[0, 100:160] = 5e-10  # more than the nearest that are always taken
    after = slack.copy()
    after[0, 110] -= 1e-16
    made = Made(slack, after)
    assert made.counts().undecided_passing == 0
    assert set(range(100, 160)) <= set(made.asked)
    slack[0, 100:160] = after[0, 100:160] = 5e-9
    after[0, 110] -= 1e-16
    made = Made(slack, after)
    assert made.counts().undecided_passing == 0
    assert not set(range(100, 160)) <= set(made.asked)


@pytest.mark.parametrize("watch", [0, 7000])
def test_trials_on_a_limit_that_do_not_move_are_decided(watch: int) -> None:
    slack = np.zeros((1, 20_000))
    assert Made(slack, slack, watch=watch).counts().undecided_passing == 0
    after = slack.copy()
    after[0, ::16] = -1e-12
    counts = Made(slack, after, watch=watch).counts()
    assert 1250 <= len(counts.lost) + counts.undecided_passing <= 5000


@pytest.mark.parametrize("watch", [0, 7000])
def test_what_the_budget_leaves_counts_as_undecided(watch: int) -> None:
    slack = passing(60_000)
    after = slack - share_of(slack, 0.02)
    made = Made(slack, after, watch=watch)
    counts = made.counts()
    truly = int(np.sum(after < 0.0))
    assert audit_trials.USUAL.budget(60_000) == 480
    assert len(made.asked) <= 480
    assert truly > 1100
    assert truly <= len(counts.lost) + counts.undecided_passing <= 8 * truly


def test_gross_changes_in_the_sample_stand_for_the_others() -> None:
    slack = np.full((1, 20_000), 0.9)
    after = slack.copy()
    after[0, ::4] = -1.0
    counts = Made(slack, after).counts()
    assert 5000 <= len(counts.lost) + counts.undecided_passing <= 8000
    diverged = np.full((1, 20_000), -np.inf)
    counts = Made(diverged, np.ones((1, 20_000))).counts()
    assert len(counts.won) + counts.undecided_failing == 20_000
    assert counts.undecided_passing == 0


@pytest.mark.parametrize("limits", [1, 2])
def test_no_trial_counts_twice_in_a_stream(limits: int) -> None:
    lost = Made(np.full((limits, 2000), 0.9), np.full((limits, 2000), -1.0), watch=500).counts()
    assert len(lost.lost) + lost.undecided_passing == 2000
    won = Made(np.full((limits, 2000), -np.inf), np.ones((limits, 2000)), watch=500).counts()
    assert len(won.won) + won.undecided_failing == 2000


def test_of_a_stream_a_trial_that_misses_one_limit_for_certain_fails() -> None:
    slack = np.vstack([np.full(2000, -0.1), np.full(2000, -0.5)])
    after = np.vstack([np.full(2000, 0.1), np.full(2000, -0.5)])
    streamed, whole = Made(slack, after, watch=500), Made(slack, after)
    for which, doubtful in ((0,), 2000), ((1,), 0), ((), 0):
        for counts in (streamed.counts(*which), whole.counts(*which)):
            assert len(counts.won) + counts.undecided_failing == doubtful


def test_failing_trials_that_move_irregularly_say_nothing_about_passing_ones() -> None:
    random = np.random.default_rng(4)
    slack = passing(4000)
    slack[0, :1000] = random.uniform(-3.0, 0.0, 1000)
    after = slack.copy()
    after[0, :1000] += random.normal(0.0, 0.05, 1000)
    counts = Made(slack, after).counts()
    assert counts.undecided_passing == 0
    assert len(counts.lost) == 0
    truly = int(np.sum(after[0, :1000] >= 0.0))
    assert truly <= len(counts.won) + counts.undecided_failing <= 10 * truly


def test_changes_that_grow_over_a_parameter_are_followed_to_where_they_end() -> None:
    # Six stiff trials in a thousand pass though they should not; nothing else tells of it.
    random = np.random.default_rng(11)
    parameters = random.uniform(0.0, 1.0, (2, 10_000))
    slack = np.full((1, 10_000), 0.5)
    stiff = parameters[1] > 0.994
    change = 1e-9 * 1e3 ** parameters[1] * 1e3 ** random.uniform(-0.6, 0.6, 10_000)  # seen through much else
    after = slack - np.where(stiff, 1.0, change)
    made = Made(slack, after, parameters)
    counts = made.counts()
    assert np.sum(stiff[sorted(made.first)]) == 1  # the extreme one alone
    assert set(counts.lost.tolist()) == set(np.flatnonzero(stiff).tolist())


def test_a_tail_of_changes_too_small_to_matter_is_not_followed() -> None:
    parameters = np.linspace(0.0, 1.0, 10_000)[None, :]
    slack = np.full((1, 10_000), 0.5)
    for largest, is_followed in ((5e-5, False), (2e-4, True)):
        change = share_of(slack, largest) * np.where(parameters > 0.997, 1.0, 1e-6 * parameters)
        made = Made(slack, slack - change, parameters)
        made.counts()
        assert (len(made.asked) - len(made.first) > 32) == is_followed


def test_a_changed_trial_is_decided_where_its_rest_of_error_does_not_reach() -> None:
    slack = np.array([[0.01, 0.01, -0.01, -0.01]])
    after = np.array([[0.07, 0.0084, -0.07, -0.0011]])
    made = Made(slack, after)
    assert made.counts().undecided_passing == 0  # 0.07 > 0.06 / 8, 0.0084 > 0.0016 / 8
    assert made.counts().undecided_failing == 1  # 0.0011 < 0.0089 / 8
    made.examination.rest = 1.0
    assert made.counts().undecided_passing == 0
    assert made.counts().undecided_failing == 1
    flipping = Made(np.array([[1e-3]]), np.array([[1e-5]]))
    assert flipping.counts().undecided_passing == 1


def test_the_claim_of_one_requirement_is_counted_by_itself() -> None:
    slack = np.array([[0.5, 0.5, -0.5], [0.5, 0.001, 0.5]])
    after = np.array([[0.5, 0.5, -0.5], [0.5, -0.001, 0.5]])
    made = Made(slack, after)
    assert made.counts(0).lost.tolist() == []
    assert made.counts(1).lost.tolist() == [1]
    assert made.counts().lost.tolist() == [1]


def test_a_stream_keeps_what_a_whole_outcome_would_choose() -> None:
    random = np.random.default_rng(6)
    slack = random.normal(0.7, 0.5, (2, 9000))
    parameters = random.normal(size=(4, 9000))
    after = slack + random.normal(0.0, 1e-4, slack.shape)
    whole = Made(slack, after, parameters)
    streamed = Made(slack, after, parameters, watch=1000)
    assert streamed.first == whole.first
    assert len(streamed.examination.rows.trials) < 2 * (256 + 16 * 8 + 96)
    for which in ((), (0,), (1,)):
        one, other = whole.counts(*which), streamed.counts(*which)
        assert set(one.lost.tolist()) == set(other.lost.tolist())
        assert set(one.won.tolist()) == set(other.won.tolist())
        assert other.undecided_passing >= one.undecided_passing


def test_scales_are_limits_or_where_these_are_zero_measures() -> None:
    limits = np.array([[2.0, 2.0, 2.0], [0.0, 0.0, 0.0], [0.0, 0.0, 0.0]])
    measured = np.array([[9.0, 9.0, 9.0], [-3.0, np.nan, 5.0], [0.0, 0.0, np.inf]])
    assert audit_trials.scales_of(limits, measured).tolist() == [2.0, 4.0, 1.0]


def test_changes_are_zero_for_equal_and_infinite_for_other_fates() -> None:
    inf: Any = np.inf
    before, after = np.array([[1.0, -inf, -inf, 1.0]]), np.array([[1.5, -inf, 2.0, -inf]])
    change = audit_run.changes(before, after)
    assert change.tolist() == [[0.5, 0.0, inf, inf]]
    assert audit_run.shares(change, before, np.ones(1)).tolist() == [[0.25, 0.0, inf, inf]]

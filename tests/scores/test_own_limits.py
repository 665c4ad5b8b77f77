"""The tolerated level from each draw's own limit."""

from __future__ import annotations

from math import inf, nan

import numpy as np
import pytest
from scipy import stats

from rigbench.scores.intervals import wilson
from rigbench.scores.own_limits import FoundLevel, OwnLimits, own_limits, tolerated_of_limits
from rigbench.scores.results import Tolerated


def exactly(limits: np.ndarray, width: float = 0.0) -> OwnLimits:
    """Brackets of this width, whose low ends are the limits."""
    return OwnLimits(limits, limits + width, np.zeros(len(limits), dtype=bool))


def test_a_bracket_is_the_last_kept_level_below_the_first_missed_one() -> None:
    """In any order of levels; what was not run is NaN; open where nothing kept or nothing missed."""
    levels = np.array([[2.0, 1.0, 1.5, nan], [2.0, 1.0, nan, nan], [0.0, 1.0, nan, nan], [nan] * 4])
    kept = np.array([[0, 1, 0, 1], [1, 1, 0, 0], [0, 0, 0, 0], [1, 0, 1, 0]], dtype=bool)
    found = own_limits(levels, kept)
    assert found.low.tolist() == [1.0, 2.0, -inf, -inf]
    assert found.high.tolist() == [1.5, inf, 0.0, inf]
    assert not np.any(found.keeps_again)


def test_draws_that_keep_again_are_counted_and_end_at_their_first_miss() -> None:
    """Kept at 0.5, missed at 1, kept at 2."""
    found = own_limits(np.array([[2.0, 0.5, 1.0], [0.5, 1.0, 2.0]]), np.array([[1, 1, 0], [1, 1, 0]], bool))
    assert (found.low.tolist(), found.high.tolist()) == ([0.5, 1.0], [1.0, 2.0])
    assert found.keeps_again.tolist() == [True, False]
    assert tolerated_of_limits(found, 0.95).keep_again == 1


@pytest.mark.parametrize("draws", [10, 73, 100, 128, 500])
@pytest.mark.parametrize("share", [0.5, 0.8, 0.95])
def test_it_agrees_with_the_verdicts_of_pass_shares(draws: int, share: float) -> None:
    """At its low end the Wilson interval of the draws that keep there reaches the share, at its high end

    it lies below. The value is the largest level that the share of these draws bears.
    """
    limits = np.random.default_rng(draws).exponential(size=draws)
    found = tolerated_of_limits(exactly(limits), share).tolerated

    def passing(level: float) -> int:
        return int(np.sum(limits >= level))

    if found.low > 0.0:
        assert wilson(passing(found.low), draws)[0] >= share
    assert np.isfinite(found.high)
    assert wilson(int(np.sum(limits > found.high)), draws)[1] < share
    assert found.value is not None
    assert passing(found.value) >= share * draws - 1e-9
    assert passing(np.nextafter(found.value, inf)) < share * draws


@pytest.mark.parametrize("draws", [73, 90, 256])
def test_the_ends_are_scipys_order_statistics(draws: int) -> None:
    """scipy.stats.quantile_test at 1 - share; of 256 limits the 6th and the 21st by binomial sums."""
    limits = np.arange(1.0, draws + 1)
    ends = stats.quantile_test(limits, q=0.0, p=0.05).confidence_interval(0.95)
    found = tolerated_of_limits(exactly(limits), 0.95).tolerated
    assert (found.low, found.high) == (np.nan_to_num(ends.low, nan=0.0), ends.high)


def test_the_conservative_end_of_each_bracket_counts() -> None:
    """Wider brackets move the low end down and the high end up by their width; the value stays in the middle."""
    limits = np.random.default_rng(1).exponential(size=200)
    sharp = tolerated_of_limits(exactly(limits), 0.9).tolerated
    blunt = tolerated_of_limits(exactly(limits - 0.01, 0.02), 0.9).tolerated
    assert (blunt.low, blunt.high) == pytest.approx((sharp.low - 0.01, sharp.high + 0.01))
    assert blunt.value == pytest.approx(sharp.value)


def test_limits_beyond_the_largest_level_leave_the_end_open() -> None:
    """All keep the largest: shown there, no upper end, no value. Too few draws show nothing."""
    beyond = OwnLimits(np.full(100, 2.0), np.full(100, inf), np.zeros(100, bool))
    assert tolerated_of_limits(beyond, 0.95) == FoundLevel(Tolerated(None, 2.0, inf), 100, 100, 0)
    few = OwnLimits(np.full(72, 2.0), np.full(72, inf), np.zeros(72, bool))
    assert tolerated_of_limits(few, 0.95).tolerated == Tolerated(None, 0.0, inf)
    none = OwnLimits(np.empty(0), np.empty(0), np.empty(0, bool))
    assert tolerated_of_limits(none, 0.95) == FoundLevel(Tolerated(None, 0.0, inf), 0, 0, 0)


def test_a_law_that_misses_at_level_0_tolerates_nothing() -> None:
    """All draws miss there; or, with noise, more of them than may."""
    never = OwnLimits(np.full(100, -inf), np.zeros(100), np.zeros(100, bool))
    assert tolerated_of_limits(never, 0.95).tolerated == Tolerated(0.0, 0.0, 0.0)
    half = np.arange(100) < 50
    some = OwnLimits(np.where(half, -inf, 1.0), np.where(half, 0.0, inf), np.zeros(100, bool))
    assert tolerated_of_limits(some, 0.95).tolerated == Tolerated(0.0, 0.0, 0.0)


def test_a_required_share_of_one_is_never_shown() -> None:
    """But its miss is: one draw that misses is proof."""
    found = tolerated_of_limits(exactly(np.linspace(1, 2, 50), 0.1), 1.0).tolerated
    assert (found.low, found.high) == (0.0, pytest.approx(1.1))

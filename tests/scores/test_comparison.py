"""Paired comparisons."""

from __future__ import annotations

from math import inf

import numpy as np
import pytest

from rigbench.scores.cell import CountedDraws
from rigbench.scores.comparison import Comparison, compare_by_difference, paired_ratio
from rigbench.scores.pairs import better


def test_the_median_difference_shows_through_the_spread_of_the_draws() -> None:
    """A shift by a hundredth, a spread of one: the pairs cancel what the draws share."""
    spread = np.random.default_rng(1).uniform(1, 2, size=40)
    found = compare_by_difference(spread + 0.01, spread)
    assert found is not None
    assert (found.value, found.low, found.high) == pytest.approx((0.01, 0.01, 0.01))
    assert (found.draws, found.tie) == (40, False)


def test_a_tie_is_said_to_be_one() -> None:
    """Equal, equal to rounding, or with an interval that holds no difference; and five draws show nothing."""
    values = np.arange(1.0, 21.0)
    assert compare_by_difference(values, values) == Comparison(0.0, 0.0, 0.0, 20, tie=True)
    assert compare_by_difference(values * (1 + 1e-12), values) == Comparison(0.0, 0.0, 0.0, 20, tie=True)
    found = compare_by_difference(values + np.tile([1.0, -1.0], 10), values)
    assert found == Comparison(-1.0, -1.0, 1.0, 20, tie=True)
    assert compare_by_difference(values[:5] + 1, values[:5]) == Comparison(1.0, -inf, inf, 5, tie=True)


def test_runs_that_did_not_finish_take_part() -> None:
    """An infinite error is worse than any other, and equal to another one."""
    one, other = np.array([1.0] * 8 + [inf] * 2), np.array([2.0] * 7 + [inf] * 3)
    assert compare_by_difference(one, other) == Comparison(-1.0, -1.0, 0.0, 10, tie=True)
    assert compare_by_difference(one[:8], np.full(8, inf)) == Comparison(-inf, -inf, -inf, 8, tie=False)
    assert compare_by_difference(np.full(8, inf), one[:8]) == Comparison(inf, inf, inf, 8, tie=False)


def test_ratios_have_their_limits() -> None:
    """x / 0 is infinite, 0 / x is 0, like by like is 1."""
    one, other = np.array([0.0, 1.0, 0.0, inf, inf, 1.0, 3.0]), np.array([0.0, 0.0, 1.0, inf, 1.0, inf, 2.0])
    assert paired_ratio(one, other).tolist() == [1.0, inf, 0.0, 1.0, inf, 0.0, 1.5]


def test_no_draw_no_comparison() -> None:
    """None, not a number."""
    nothing = np.empty(0)
    assert compare_by_difference(nothing, nothing) is None


@pytest.mark.parametrize(("other", "tie"), [(1.0, True), (1.005, True), (1.02, False), (inf, False)])
def test_an_exact_pair_has_no_interval(other: float, tie: bool) -> None:
    """Within one percent it is a tie, either way."""
    for one, two in ((1.0, other), (other, 1.0)):
        found = compare_by_difference(np.array([one]), np.array([two]), random=False)
        assert found is not None
        assert (found.low, found.high, found.draws, found.tie) == (found.value, found.value, 1, tie)


def test_what_is_no_tie_decides_between_laws() -> None:
    """On equal passes, a law is better exactly when the comparison is no tie in its favour."""
    random = np.random.default_rng(4)
    verdicts = set()
    for _ in range(300):
        one, other = random.uniform(1, 2, size=(2, 12)) + np.array([[0.0], [random.uniform(0, 1)]])
        cells = [
            CountedDraws(np.arange(12), np.ones(12, bool), np.ones(12, bool), values[:, None])
            for values in (one, other)
        ]
        found = compare_by_difference(one, other)
        assert found is not None
        verdicts.add(found.tie)
        assert better(*cells, 0, random=True) == (not found.tie and found.value < 0.0)
    assert verdicts == {True, False}


@pytest.mark.parametrize("draws", [8, 31, 128])
def test_the_interval_covers_at_least_95_percent(draws: int) -> None:
    """An order-statistic interval: 2000 campaigns, three standard errors (1.5 %) below at most."""
    random, hits = np.random.default_rng(draws), 0
    for _ in range(2000):
        shared = np.exp(random.normal(size=draws))
        found = compare_by_difference(shared + 0.3 * random.standard_t(2, size=draws) + 0.1, shared)
        assert found is not None
        hits += found.low <= 0.1 <= found.high
    assert hits / 2000 >= 0.95 - 0.015

"""Laws compared on the same draws."""

from __future__ import annotations

from collections.abc import Sequence
from math import inf

import numpy as np
import pytest
from scipy import stats

from rigbench.scores.cell import CountedDraws
from rigbench.scores.pairs import best_law, better, paired_difference


def draws_of(peaks: Sequence[float] | np.ndarray, limit: float = inf, first: int = 0) -> CountedDraws:
    """Draws with these values of the one score; a draw passes up to the limit, if it is finite."""
    values = np.asarray(peaks, float)
    finished = np.isfinite(values)
    return CountedDraws(
        np.arange(first, first + len(values)), finished, finished & (values <= limit), values[:, None]
    )


def test_a_difference_of_rounding_is_none() -> None:
    """Nor is one of two infinities; one infinity alone decides."""
    one, other = np.array([1.0, 1.0 + 1e-12, 0.0, inf, inf, 2.0]), np.array([1.0, 1.0, 0.0, inf, 1.0, inf])
    assert paired_difference(one, other).tolist() == [0.0, 0.0, 0.0, 0.0, inf, -inf]


def test_more_passes_beyond_chance_are_better_even_with_a_larger_error() -> None:
    """Six draws pass under one law alone: the sign test's first clear case. Five are not enough."""
    one = draws_of([2.9] * 20, limit=3.0)
    for missed, clear in ((6, True), (5, False)):
        other = draws_of([3.1] * missed + [1.0] * (20 - missed), limit=3.0)
        assert better(one, other, 0, random=True) == clear
        assert not better(other, one, 0, random=True)


def test_a_lower_score_does_not_make_up_for_fewer_passes() -> None:
    """Not even where the difference in passes is within chance: then neither law is better."""
    one, other = draws_of([1.0] * 19 + [9.0], limit=3.0), draws_of([2.0] * 20, limit=3.0)
    assert not better(one, other, 0, random=True)
    assert not better(other, one, 0, random=True)


def test_with_equal_passes_the_paired_median_decides() -> None:
    """A small shift on every draw shows through a spread a hundred times as large, as laws share draws."""
    spread = np.random.default_rng(1).uniform(1, 2, size=40)
    one, other = draws_of(spread), draws_of(spread + 0.01)
    assert better(one, other, 0, random=True)
    assert not better(other, one, 0, random=True)


def test_only_draws_that_count_for_both_are_compared() -> None:
    """Of ten and ten draws five are shared, too few to bound a median; without any there is no verdict."""
    assert better(draws_of([1.0] * 10), draws_of([2.0] * 10), 0, random=True)
    assert not better(draws_of([1.0] * 10), draws_of([2.0] * 10, first=5), 0, random=True)
    assert not better(draws_of([1.0] * 10), draws_of([2.0] * 10, first=50), 0, random=True)
    assert not better(draws_of([]), draws_of([]), 0, random=False)


@pytest.mark.parametrize(
    ("one", "other", "limit", "clear"),
    [
        (1.0, 1.02, inf, True),
        (1.0, 1.005, inf, False),
        (1.0, 1.0, inf, False),
        (2.9, 3.1, 3.0, True),
        (4.0, 5.0, 3.0, True),
        (1.0, inf, 3.0, True),
        (inf, inf, 3.0, False),
        (0.0, 0.0, inf, False),
    ],
)
def test_an_exact_run_is_better_by_its_verdict_or_by_one_percent(
    one: float, other: float, limit: float, clear: bool
) -> None:
    """And never the other way round as well."""
    here, there = draws_of([one], limit), draws_of([other], limit)
    assert better(here, there, 0, random=False) == clear
    assert not better(there, here, 0, random=False)


def test_the_best_law_is_better_than_every_other_one() -> None:
    """Not merely than most; a lone law has nothing to be better than; an unknown rival forbids the mark."""
    spread = np.random.default_rng(1).uniform(1, 2, size=40)
    low, same, high = draws_of(spread), draws_of(spread), draws_of(spread + 0.01)
    assert best_law({"high": high, "low": low}, 0, random=True) == "low"
    assert best_law({"high": high, "low": low, "same": same}, 0, random=True) is None
    assert best_law({"low": low}, 0, random=True) is None
    assert best_law({"low": low, "silent": draws_of([])}, 0, random=True) is None


@pytest.mark.evidence
def test_equal_laws_are_seldom_told_apart() -> None:
    """Two laws of the same distribution: one is called better in 2.5 % of the campaigns at most, each way.

    For the score as for the passes; five standard errors of 4000 campaigns allow 1.3 % more.
    """
    random = np.random.default_rng(6)
    for limit in (inf, 1.5):
        wrong = 0
        for _ in range(4000):
            one, other = (draws_of(random.uniform(1, 2, size=64), limit) for _ in range(2))
            wrong += better(one, other, 0, random=True)
        assert wrong / 4000 <= 0.025 + 5 * np.sqrt(0.025 / 4000)


def test_the_exact_median_test_is_a_sign_test() -> None:
    """The interval of the paired median excludes 0 exactly when scipy's binomial test says so at 0.025."""
    for lower in range(21):
        one = draws_of([1.0] * lower + [3.0] * (20 - lower))
        other = draws_of([2.0] * 20)
        exact = stats.binomtest(lower, 20, 0.5, alternative="greater").pvalue <= 0.025
        assert better(one, other, 0, random=True) == exact, lower

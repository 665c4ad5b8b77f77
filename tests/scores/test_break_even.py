"""The break-even level of two laws."""

from __future__ import annotations

from collections.abc import Sequence
from math import inf

import numpy as np
import pytest

from rigbench.scores.break_even import BreakEven, Crossing, break_even_levels, crossing_level
from rigbench.scores.cell import CountedDraws
from rigbench.scores.results import Column

EXACT = Column("nominal", None, random=False, ladder=True)


def draws_of(peaks: Sequence[float] | np.ndarray) -> CountedDraws:
    """Draws with these values of the one score."""
    values = np.asarray(peaks, float)
    finished = np.isfinite(values)
    return CountedDraws(np.arange(len(values)), finished, finished, values[:, None])


def ladder_of(table: dict[float, Sequence[float] | np.ndarray]) -> list[tuple[Column, CountedDraws]]:
    """Level to scores; level 0 is exact."""
    return [
        (EXACT if level == 0 else Column(f"level {level}", level, True, True), draws_of(scores))
        for level, scores in table.items()
    ]


def break_even(one: dict[float, Sequence[float]], other: dict[float, Sequence[float]]) -> list[BreakEven]:
    return list(break_even_levels({"one": ladder_of(one), "other": ladder_of(other)}, 0))


def test_the_break_even_level_is_where_the_paired_median_changes_sign() -> None:
    """Linear: the differences -1 at level 0 and +3 at level 2 cross at 0.5, on every draw alike."""
    found = break_even({0: [1.0], 2: [8.0] * 9}, {0: [2.0], 2: [5.0] * 9})
    assert found == [BreakEven(("one", "other"), 0.5, 0.5, 0.5, below="one")]


def test_the_order_of_the_laws_changes_only_their_order() -> None:
    """Level and interval are those of the pair."""
    random = np.random.default_rng(2)
    draws = random.uniform(0, 1, size=50)
    one, other = (
        {0: [1.0], 1: 1 + draws, 2: 1 + 3 * draws},
        {0: [1.4], 1: 1.4 + draws / 5, 2: 1.4 + draws / 4},
    )
    (forth,), (back,) = break_even(one, other), break_even(other, one)
    assert (forth.below, back.below) == ("one", "other")
    assert (forth.value, forth.low, forth.high) == pytest.approx((back.value, back.low, back.high))
    assert forth.low < forth.value < forth.high


def test_pairs_that_never_change_places_have_no_break_even() -> None:
    """Nor have equal ones, those with one level, or those without a draw."""
    assert not break_even({0: [1.0], 1: [2.0] * 9}, {0: [2.0], 1: [3.0] * 9})
    assert not break_even({0: [1.0], 1: [2.0] * 9}, {0: [1.0], 1: [2.0] * 9})
    assert not break_even({0: [1.0]}, {0: [2.0]})
    assert not break_even({}, {})
    assert not break_even({0: [1.0], 1: []}, {0: [2.0], 1: [1.0] * 9})


def test_a_law_that_diverges_breaks_even_somewhere_before() -> None:
    """Between the last level where it was better and the one where it didn't finish: midway, open to both."""
    (found,) = break_even({0: [1.0], 1: [2.0] * 9, 3: [inf] * 9}, {0: [2.0], 1: [3.0] * 9, 3: [4.0] * 9})
    assert (found.value, found.low, found.high) == (2.0, 1.0, 3.0)


def test_a_difference_of_zero_on_a_level_crosses_there() -> None:
    """And one that was zero before either law led has no crossing."""
    (found,) = break_even({0: [1.0], 1: [2.0] * 9, 2: [4.0] * 9}, {0: [2.0], 1: [2.0] * 9, 2: [3.0] * 9})
    assert found.value == 1.0
    assert not break_even({0: [1.0], 1: [2.0] * 9}, {0: [1.0], 1: [3.0] * 9})


def test_a_change_too_weak_to_be_sure_of_reaches_down_to_the_lowest_level() -> None:
    """Equal at level 0; at 1 seven draws of 13 favour one law, at 2 all the other: often, 1 shows no lead."""
    one = {0: [1.0], 1: [1.0] * 7 + [3.0] * 6, 2: [3.0] * 13}
    (found,) = break_even(one, {0: [1.0], 1: [2.0] * 13, 2: [2.0] * 13})
    assert (found.value, found.low, found.high, found.below) == (1.5, 0.0, 1.5, "one")


def test_a_change_too_weak_to_be_sure_of_has_no_upper_end() -> None:
    """At the highest level seven draws of 13 show it, six don't."""
    one = {0: [1.0], 1: [1.0] * 6 + [3.0] * 7}
    (found,) = break_even(one, {0: [2.0], 1: [2.0] * 13})
    assert (found.value, found.low, found.high) == (0.5, 0.5, inf)


def test_a_law_that_may_lead_nowhere_does_so_down_to_nominal() -> None:
    """With noise nominal too is random: seven draws of 13 favour one law there, none above."""
    noisy = Column("nominal", 0.0, random=True, ladder=True)
    above = Column("level 1", 1.0, random=True, ladder=True)
    one = [(noisy, draws_of([1.0] * 7 + [3.0] * 6)), (above, draws_of([3.0] * 13))]
    other = [(column, draws_of([2.0] * 13)) for column in (noisy, above)]
    (found,) = break_even_levels({"one": one, "other": other}, 0)
    assert (found.value, found.low, found.high, found.below) == (0.5, 0.0, 0.5, "one")


def test_levels_share_their_draws() -> None:
    """A draw that misses at one level is left out at all: what is left crosses as if it had not been."""
    one, other = {0: [1.0], 1: [3.0] * 9}, {0: [2.0], 1: [1.0] * 9}
    full = break_even(one, other)
    one[1], other[1] = [3.0] * 9 + [1e6], [1.0] * 9  # the tenth counts for one law alone
    assert break_even(one, other) == full


LEVELS = np.array([0.5, 1.0, 2.0])


def columns(*values: float, draws: int = 9) -> np.ndarray:
    """The same difference on every draw, by level."""
    return np.tile(np.array(values), (draws, 1))


def test_beyond_the_largest_level_and_below_the_smallest_are_said_so() -> None:
    """One law leads all along: beyond, or below if the other law was to lead first."""
    ahead = columns(-3.0, -2.0, -1.0)
    assert crossing_level(LEVELS, ahead) == Crossing(inf, inf, inf, -1)
    assert crossing_level(LEVELS, ahead, before=-1) == Crossing(inf, inf, inf, -1)
    assert crossing_level(LEVELS, ahead, before=1) == Crossing(-inf, -inf, -inf, 1)
    assert crossing_level(LEVELS, -ahead) == Crossing(inf, inf, inf, 1)


def test_ties_have_no_sign_of_their_own() -> None:
    """All ties: nothing to say, or nothing before the level; a tie in between is where it crosses."""
    assert crossing_level(LEVELS, columns(0.0, 0.0, 0.0)) is None
    assert crossing_level(LEVELS, columns(0.0, 0.0, 0.0), before=-1) == Crossing(inf, 0.5, inf, -1)
    assert crossing_level(LEVELS, columns(0.0, 0.0, 1.0), before=-1) == Crossing(1.0, 0.5, 1.0, -1)
    assert crossing_level(LEVELS, columns(-1.0, 0.0, 1.0)) == Crossing(1.0, 1.0, 1.0, -1)
    assert crossing_level(LEVELS, columns(-1.0, 0.0, -1.0)) == Crossing(inf, 1.0, inf, -1)
    assert crossing_level(LEVELS, np.empty((0, 3))) is None
    assert crossing_level(np.empty(0), np.empty((5, 0))) is None


def test_the_first_of_several_crossings_counts() -> None:
    """Where the order changes and changes back."""
    assert crossing_level(LEVELS, columns(-1.0, 1.0, -1.0)) == Crossing(0.75, 0.75, 0.75, -1)


def test_infinite_differences_order_but_do_not_interpolate() -> None:
    """One law fails to finish: midway, anywhere between; on few draws only it moves no median."""
    assert crossing_level(LEVELS, columns(-inf, 1.0, 1.0)) == Crossing(0.75, 0.5, 1.0, -1)
    assert crossing_level(LEVELS, columns(-1.0, inf, inf)) == Crossing(0.75, 0.5, 1.0, -1)
    assert crossing_level(LEVELS, columns(-inf, inf, -inf)) == Crossing(0.75, 0.5, 1.0, -1)
    some = columns(-1.0, 1.0, 3.0, draws=40)
    some[:2, 1:], some[2:4, 1:] = inf, -inf
    assert crossing_level(LEVELS, some) == Crossing(0.75, 0.75, 0.75, -1)


def test_few_draws_bound_nothing_but_an_exact_level_is_sure() -> None:
    """Five draws can't bound a median; where nothing is random there is nothing to bound."""
    few = columns(-1.0, 1.0, 3.0, draws=5)
    assert crossing_level(LEVELS, few) == Crossing(0.75, -inf, inf, -1)
    assert crossing_level(LEVELS, few, np.array([True, False, False])) == Crossing(0.75, 0.5, inf, -1)
    assert crossing_level(LEVELS, few, np.array([True, True, True])) == Crossing(0.75, 0.75, 0.75, -1)


@pytest.mark.parametrize("scale", [1e-9, 1e6])
def test_the_unit_of_the_score_does_not_matter(scale: float) -> None:
    """Scores in micrometres or in kilometres cross at the same level."""
    found = columns(-2.0, 1.0, 3.0) + np.random.default_rng(3).normal(size=(9, 1))
    one, other = crossing_level(LEVELS, found), crossing_level(LEVELS, scale * found)
    assert one is not None
    assert other is not None
    assert (other.value, other.low, other.high) == pytest.approx((one.value, one.low, one.high))

"""The search for gains: landscapes whose best point is known."""

from __future__ import annotations

import math
from collections.abc import Sequence
from statistics import median

import pytest

from rigbench.scores.gain_search import LEAST_TRIALS, Merit, Point, find_gains

BOUNDS = [(1.0, 30.0), (0.3, 2.0)]
DECLARED = (5.0, 1.0)


def valley(points: Sequence[Point]) -> list[Merit]:
    """A bent valley in logarithms; its bottom, 1, is at (12, 0.7)."""
    found = []
    for hz, damping in points:
        x, y = math.log(hz / 12.0), math.log(damping / 0.7)
        found.append((0.0, 1.0 + x**2 + 4.0 * (y + 0.5 * x) ** 2))
    return found


@pytest.mark.parametrize("seed", range(6))
def test_the_bottom_of_a_valley_is_found(seed: int) -> None:
    """With 40 trials the score is within 3 % of the least."""
    _, (missed, score) = find_gains(valley, BOUNDS, 40, seed, DECLARED)
    assert missed == 0.0
    assert 1.0 <= score < 1.03


def test_the_search_goes_on_as_long_as_it_gets_better() -> None:
    """With 100 trials the score is within 0.1 % of the least."""
    for seed in range(20):
        _, (_, score) = find_gains(valley, BOUNDS, 100, seed, DECLARED)
        assert score < 1.001


def test_the_best_point_at_a_slanting_limit_is_found() -> None:
    """The higher hz the better, with hz * damping at most 6 and damping at least 0.5: the best is (12, 0.5).

    Polls along the axes alone would stick to the limit, where the search first meets it. With 60 trials half of
    30 searches come within 15 % of the best score, and all of them within a factor of 2; the limits are kept.
    """

    def limited(points: Sequence[Point]) -> list[Merit]:
        return [
            (max(hz * damping / 6.0 - 1.0, 0.0) + max(0.5 / damping - 1.0, 0.0), 12.0 / hz)
            for hz, damping in points
        ]

    found = [find_gains(limited, BOUNDS, 60, seed, (20.0, 1.0)) for seed in range(30)]
    assert all(missed == 0.0 and point[0] * point[1] <= 6.0 for point, (missed, _) in found)
    scores = [score for _, (_, score) in found]
    assert min(scores) >= 1.0
    assert median(scores) < 1.15
    assert max(scores) < 2.0


def test_the_limits_are_gone_towards_where_nothing_keeps_them() -> None:
    """Where no point is within the limits, the one that misses them least is returned."""
    point, (missed, _) = find_gains(
        lambda points: [(hz / 1e-3, 0.0) for hz, _ in points], BOUNDS, 40, 0, DECLARED
    )
    assert missed == pytest.approx(1000.0, rel=0.05)
    assert point[0] == pytest.approx(1.0, rel=0.05)


def test_the_declared_gains_are_tried_first_and_kept_where_nothing_is_better() -> None:
    """Declared gains, also beyond the bounds, come back exactly where they are the best."""
    declared, asked = (47.123456, 0.123456), []

    def needle(points: Sequence[Point]) -> list[Merit]:
        asked.extend(points)
        return [(0.0, 0.0 if point == declared else 1.0) for point in points]

    assert find_gains(needle, BOUNDS, 20, 0, declared) == (declared, (0.0, 0.0))
    assert asked[0] == declared


@pytest.mark.parametrize("trials", [8, 9, 30, 200])
def test_it_keeps_to_its_budget_and_bounds(trials: int) -> None:
    """No more points than allowed, each once, within the bounds, with three digits; twice the same."""
    asked: list[list[Point]] = [[], []]
    for own in asked:

        def noted(points: Sequence[Point], own: list[Point] = own) -> list[Merit]:
            own.extend(points)
            return valley(points)

        find_gains(noted, BOUNDS, trials, 5, DECLARED)
    assert asked[0] == asked[1]
    assert len(set(asked[0])) == len(asked[0]) <= trials
    for hz, damping in asked[0]:
        assert 1.0 <= hz <= 30.0
        assert 0.3 <= damping <= 2.0
        assert (hz, damping) == (float(f"{hz:.3g}"), float(f"{damping:.3g}"))


@pytest.mark.parametrize("dimension", [1, 3])
def test_other_numbers_of_gains(dimension: int) -> None:
    """One gain, or three, are looked for as well."""

    def bowl(points: Sequence[Point]) -> list[Merit]:
        return [(0.0, sum(math.log(value / 4.0) ** 2 for value in point)) for point in points]

    point, _ = find_gains(bowl, [(1.0, 30.0)] * dimension, 80, 1, (20.0,) * dimension)
    assert point == pytest.approx((4.0,) * dimension, rel=0.15)


def test_runs_that_all_diverge_end_the_search() -> None:
    """Where every merit is infinite the declared gains come back."""
    found = find_gains(lambda points: [(math.inf, math.inf)] * len(points), BOUNDS, 30, 0, DECLARED)
    assert found == (DECLARED, (math.inf, math.inf))


def test_too_few_trials_are_refused() -> None:
    """A budget that is no search raises."""
    with pytest.raises(ValueError, match=f"at least {LEAST_TRIALS}"):
        find_gains(valley, BOUNDS, LEAST_TRIALS - 1, 0, DECLARED)

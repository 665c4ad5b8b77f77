"""The search for the worst point of a box: landscapes whose worst point is known."""

from __future__ import annotations

import math

import numpy as np
import pytest

from rigbench.arm.arm import Floats
from rigbench.scores.worst_search import LEAST_TRIALS, find_worst


class Landscape:
    """Counts and keeps what is asked of a function of points (P, N)."""

    def __init__(self, function) -> None:
        self.function, self.asked = function, []

    def __call__(self, points: Floats) -> Floats:
        self.asked.append(points)
        return self.function(points)

    @property
    def trials(self) -> int:
        return sum(len(points) for points in self.asked)


def peak_of(gains: Floats):
    """The peak over time of an error that is linear in u: convex, its largest value is in a corner."""
    return lambda points: np.abs(points @ gains.T).max(axis=1)


@pytest.mark.parametrize("seed", range(5))
def test_a_linear_error_s_worst_corner_is_found(seed: int) -> None:
    """Of abs(g u) over one instant the worst is sum abs(g), in 200 trials of 20 parameters."""
    gains = np.random.default_rng(seed).standard_normal((1, 20))
    point, value = find_worst(peak_of(gains), 20, 200, seed)
    assert value == pytest.approx(np.abs(gains).sum(), rel=1e-12)
    assert set(map(abs, point)) == {1.0}


@pytest.mark.parametrize("seed", range(5))
def test_the_peak_over_many_instants_is_nearly_found(seed: int) -> None:
    """Of the peak over 40 instants, whose largest value is the largest sum, at least 90 % is found.

    Of ten times as many random points none comes as far.
    """
    gains = np.random.default_rng(seed).standard_normal((40, 20))
    _, value = find_worst(peak_of(gains), 20, 300, seed)
    assert value >= 0.9 * np.abs(gains).sum(axis=1).max()
    drawn = np.random.default_rng(seed + 100).uniform(-1, 1, (3000, 20))
    assert value > peak_of(gains)(drawn).max()


def test_signs_are_turned_together() -> None:
    """Of 60 parameters of a linear error one turn of each is enough: in 150 trials the worst corner is found."""
    gains = np.random.default_rng(1).standard_normal((1, 60))
    _, value = find_worst(peak_of(gains), 60, 150, 1)
    assert value == pytest.approx(np.abs(gains).sum(), rel=1e-12)


def test_a_worst_point_inside_the_box_is_approached() -> None:
    """Where the worst point is no corner, evolution gets nearer to it than any corner is."""
    place = np.array([0.3, -0.5, 0.1])
    _, value = find_worst(lambda points: 1 / (0.01 + ((points - place) ** 2).sum(axis=1)), 3, 600, 0)
    corners = ((np.sign(place) - place) ** 2).sum()
    assert value > 3 / (0.01 + corners)


@pytest.mark.parametrize("trials", [10, 11, 37, 200])
def test_it_keeps_to_its_budget(trials: int) -> None:
    """No more points than allowed are asked for, none twice, all within the box and with four digits."""
    landscape = Landscape(peak_of(np.random.default_rng(1).standard_normal((5, 9))))
    find_worst(landscape, 9, trials, 3)
    asked = np.vstack(landscape.asked)
    assert len(np.unique(asked, axis=0)) == len(asked) == landscape.trials <= trials
    assert np.abs(asked).max() <= 1.0
    assert np.array_equal(asked, np.round(asked, 4))


def test_it_is_repeated_exactly_and_asks_in_batches() -> None:
    """The same answers bring the same questions, a generation or a whole turn of the signs at a time."""
    gains = np.random.default_rng(2).standard_normal((5, 12))
    first, second = Landscape(peak_of(gains)), Landscape(peak_of(gains))
    assert find_worst(first, 12, 150, 7) == find_worst(second, 12, 150, 7)
    assert all(np.array_equal(one, other) for one, other in zip(first.asked, second.asked, strict=True))
    assert len(first.asked) < 25
    assert find_worst(Landscape(peak_of(gains)), 12, 20, 8) != find_worst(
        Landscape(peak_of(gains)), 12, 20, 7
    )


def test_nothing_is_looked_for_beyond_the_worst_there_is() -> None:
    """Where a point is infinitely bad the search ends with that batch."""
    landscape = Landscape(lambda points: np.where(points[:, 0] > 0, math.inf, 1.0))
    point, value = find_worst(landscape, 4, 500, 0)
    assert value == math.inf
    assert point[0] > 0
    assert len(landscape.asked) == 1


def test_it_starts_where_it_is_told() -> None:
    """A start is among the first points asked for, and a needle there is found."""
    needle = (0.5, -0.25, 0.125, 1.0)
    landscape = Landscape(lambda points: 1.0 + 9.0 * (points == needle).all(axis=1))
    assert find_worst(landscape, 4, 30, 0, [needle]) == (needle, 10.0)
    assert needle in {tuple(point) for point in landscape.asked[0].tolist()}


def test_one_parameter_and_a_flat_landscape() -> None:
    """A box of one dimension and one without any difference are searched as well."""
    assert find_worst(lambda points: 2.0 + points[:, 0], 1, 30, 0) == ((1.0,), 3.0)
    assert find_worst(lambda points: np.zeros(len(points)), 3, 30, 0)[1] == 0.0


def test_too_few_trials_are_refused() -> None:
    """A budget that is no search raises."""
    with pytest.raises(ValueError, match=f"at least {LEAST_TRIALS}"):
        find_worst(lambda points: np.zeros(len(points)), 3, LEAST_TRIALS - 1, 0)

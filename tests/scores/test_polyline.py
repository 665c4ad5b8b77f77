"""Distance from a path."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rigbench.scores.polyline import farthest


def by_every_segment(points: np.ndarray, path: np.ndarray) -> float:
    """The plain twin: every point against every segment, one by one."""
    worst = 0.0
    for point in points:
        nearest = min(np.linalg.norm(point - vertex) for vertex in path)
        for start, end in pairwise(path):
            span = end - start
            if span @ span > 0:
                along = np.clip((point - start) @ span / (span @ span), 0, 1)
                nearest = min(nearest, np.linalg.norm(point - start - along * span))
        worst = max(worst, nearest)
    return worst


@settings(max_examples=60, deadline=None)
@given(st.integers(1, 12), st.integers(1, 12), st.integers(0, 2**32 - 1), st.booleans())
def test_equals_every_point_against_every_segment(count: int, vertices: int, seed: int, rests: bool) -> None:
    """On any polyline, be it coarse, self-crossing or with repeated vertices, to its stated 1e-9."""
    random = np.random.default_rng(seed)
    points, path = random.normal(size=(count, 3)), random.normal(size=(vertices, 3))
    if rests:
        path = np.repeat(path, random.integers(1, 4, size=vertices), axis=0)
    assert farthest(points, path) == pytest.approx(by_every_segment(points, path), rel=1e-9, abs=1e-15)


@pytest.mark.parametrize("seed", range(5))
def test_a_path_that_comes_by_again_is_looked_at_whole(seed: int) -> None:
    """Laps side by side and a walk at random: as every segment has it, though a point's own lap is not the nearest."""
    random = np.random.default_rng(seed)
    turn = np.linspace(0.0, 7.0 * 2.0 * np.pi, 900)
    laps = np.column_stack((np.cos(turn), np.sin(turn), 0.05 * np.sin(0.5 * turn)))
    wandering = np.cumsum(random.normal(size=(700, 3)), axis=0)
    for path in (laps, wandering):
        points = path + random.normal(scale=0.3, size=(1, 3)) + random.normal(scale=0.05, size=path.shape)
        spans = path[1:] - path[:-1]
        along = np.einsum("psk,sk->ps", points[:, None] - path[None, :-1], spans) / np.sum(spans**2, axis=1)
        feet = path[None, :-1] + np.clip(along, 0.0, 1.0)[..., None] * spans
        gaps = np.linalg.norm(points[:, None] - feet, axis=2).min(axis=1)
        assert farthest(points, path) == pytest.approx(gaps.max(), rel=1e-9)


def test_points_on_a_long_path_far_away_have_no_distance() -> None:
    """What is left is rounding, 1e-13 of coordinates of size 1000, wherever the boxes around segments end."""
    path = np.linspace([1000.0, -2000.0, 500.0], [1001.0, -2003.0, 507.0], 1000)
    points = path[:-1] + np.linspace(0.0, 1.0, 999)[:, None] * (path[1:] - path[:-1])
    assert farthest(points, path) <= 1e-12


def test_the_nearest_vertex_may_belong_to_another_segment() -> None:
    """A point beside the middle of a long segment, with a vertex of another one close by."""
    path = np.array([[0, 0, 0], [10, 0, 0], [10, 5, 0], [5, 5, 0], [5, 0.3, 0]], float)
    assert farthest(np.array([[5, 0.1, 0]]), path) == pytest.approx(0.1, rel=1e-12)


def test_a_path_that_stands_still_is_a_point() -> None:
    """Its distance is that of the point."""
    assert farthest(np.array([[3.0, 4.0, 0.0]]), np.zeros((5, 3))) == pytest.approx(5.0)


def test_a_walk_that_ends_in_the_wrong_valley_is_put_right() -> None:
    """Along a hairpin, points that jump across to the other arm are nearest to where a walk would not go."""
    there = np.linspace(0, 1, 50)[:, None] * [1.0, 0.0, 0.0]
    path = np.vstack((there, there[::-1] + np.array([0.0, 0.5, 0.0])))
    points = there[::7] + np.array([0.0, 0.4, 0.0])
    assert farthest(points, path) == pytest.approx(0.1, rel=1e-12)


def test_points_on_the_path_have_no_distance() -> None:
    """Between vertices as well as on them; 1e-15 is rounding of coordinates of size 1."""
    path = np.array([[0, 0, 0], [1, 0, 0], [1, 1, 0]], float)
    points = np.array([[0.3, 0, 0], [1, 0, 0], [1, 0.9, 0], [1, 1, 0]])
    assert farthest(points, path) <= 1e-15

"""Accuracy and repeatability of ISO 9283:1998 (formulas from memory)."""

from __future__ import annotations

from math import inf, sqrt

import numpy as np
import pytest

from rigbench.scores.iso9283 import Accuracy, at_normal_planes, path_accuracy, pose_accuracy

FAR = np.array([0.0, 0.0, 100.0])


def test_the_vector_of_three_poses() -> None:
    """Attained 0, 0 and 3 on one axis, commanded 0: AP 1, distances 1, 1, 2, S with n - 1.

    By hand: l = 4/3, S = 1/sqrt(3) = 0.577350, RP = 3.065384.
    """
    attained = np.array([[0.0, 0, 0], [0, 0, 0], [3, 0, 0]])
    found = pose_accuracy(attained, np.zeros(3))
    assert found.accuracy == pytest.approx(1.0, abs=1e-12)
    assert found.repeatability == pytest.approx(4 / 3 + 3 / sqrt(3), abs=1e-12)
    assert found.repeatability == pytest.approx(3.065384, abs=5e-7)


def test_repeatability_knows_nothing_of_the_command() -> None:
    """Moving all attained points moves AP alone; turning all of them changes neither."""
    points = np.random.default_rng(1).normal(size=(30, 3))
    here, there = pose_accuracy(points, np.zeros(3)), pose_accuracy(points + FAR, np.zeros(3))
    assert there.repeatability == pytest.approx(here.repeatability)
    assert there.accuracy == pytest.approx(np.linalg.norm(points.mean(axis=0) + FAR))
    turn = np.linalg.qr(np.random.default_rng(2).normal(size=(3, 3)))[0]
    turned = pose_accuracy(points @ turn, np.zeros(3))
    assert (turned.accuracy, turned.repeatability) == pytest.approx((here.accuracy, here.repeatability))


def test_one_run_repeats_nothing_and_none_says_nothing() -> None:
    """None stands for what isn't there; a run that did not finish is infinitely far."""
    assert pose_accuracy(np.ones((1, 3)), np.zeros(3)) == Accuracy(sqrt(3), None)
    assert pose_accuracy(np.empty((0, 3)), np.zeros(3)) == Accuracy(None, None)
    assert pose_accuracy(np.array([[1.0, 0, 0], [inf, inf, inf]]), np.zeros(3)) == Accuracy(inf, inf)
    assert pose_accuracy(np.array([[np.nan, 0, 0]]), np.zeros(3)) == Accuracy(inf, None)


def test_a_path_is_as_bad_as_its_worst_point() -> None:
    """AT and RT are the largest AP and RP over the points, not of the same point: here of two different ones."""
    random = np.random.default_rng(3)
    commanded = random.normal(size=(6, 3))
    attained = commanded + random.normal(size=(10, 6, 3)) * np.array([1, 1, 5, 1, 1, 1])[:, None]
    attained[:, 4] += 20.0
    each = [pose_accuracy(attained[:, i], commanded[i]) for i in range(6)]
    found = path_accuracy(attained, commanded)
    assert found.accuracy == each[4].accuracy
    assert found.repeatability == each[2].repeatability


def circle(turns: float, samples: int, radius: float = 1.0, late: float = 0.0) -> np.ndarray:
    """A circle about z, followed ``late`` by that angle."""
    angle = np.linspace(0, 2 * np.pi * turns, samples) - late
    return np.stack((radius * np.cos(angle), radius * np.sin(angle), np.zeros(samples)), axis=1)


@pytest.mark.parametrize("late", [0.3, -0.3])
@pytest.mark.parametrize("turns", [0.9, 3.0])
def test_timing_errors_are_no_path_errors(late: float, turns: float) -> None:
    """A run late or early by 0.3 rad on the circle itself: what is left is the polyline's sagitta,

    r (1 - cos(step / 2)), while at equal times it is 0.3 off. Only the ends, where the run starts beyond the
    plane or stops short of it, are off by what is missing.
    """
    commanded = circle(turns, 2001)
    attained = np.stack([circle(turns, 2001, late=late)] * 3)
    through, points = at_normal_planes(attained, commanded)
    away = np.linalg.norm(through - points, axis=2)
    reached = (np.linspace(0, 2 * np.pi * turns, 2001) > -late) & (
        np.linspace(0, 2 * np.pi * turns, 2001) < 2 * np.pi * turns - late
    )
    step = 2 * np.pi * turns / 2000
    assert away[:, reached].max() <= 1.01 * (1 - np.cos(step / 2))
    assert away[:, ~reached].max() == pytest.approx(2 * np.sin(0.15), rel=0.02)


def test_a_wider_circle_is_off_by_its_radius() -> None:
    """AT of runs with radii 1.02 and 1.04: 0.03; RT: l = 0.01, S = 0, both in the normal plane."""
    commanded = circle(1, 4001)
    attained = np.stack([circle(1, 4001, radius, late=0.1) for radius in (1.02, 1.04)])
    through, points = at_normal_planes(attained, commanded)
    inner = slice(200, -200)
    found = path_accuracy(through[:, inner], points[inner])
    assert (found.accuracy, found.repeatability) == pytest.approx((0.03, 0.01), abs=1e-5)


def test_a_path_that_comes_back_is_followed_in_order() -> None:
    """Out along a line, a rest, and back: a run that is 0.1 aside on the way out alone is so in the first half."""
    out, rest = np.linspace(0, 1, 101), np.ones(50)
    x = np.concatenate((out, rest, out[::-1]))
    commanded = np.stack((x, 0 * x, 0 * x), axis=1)
    late = np.concatenate((np.zeros(10), x[:-10]))
    attained = np.stack((late, np.where(np.arange(len(x)) < 120, 0.1, 0.0), 0 * x), axis=1)
    through, points = at_normal_planes(attained[None], commanded)
    assert len(points) == len(x) - 50  # at rest there is no direction
    half = len(points) // 2
    assert through[0, 5 : half - 5, 1] == pytest.approx(0.1)
    assert through[0, half + 5 : -15, 1] == pytest.approx(0.0)
    assert through[0, 5 : half - 5, 0] == pytest.approx(points[5 : half - 5, 0])


def test_runs_that_did_not_finish_are_infinitely_far_and_rests_have_no_planes() -> None:
    """Each run by itself; a command that never moves leaves no point."""
    commanded = circle(1, 101)
    attained = np.stack((commanded, np.full_like(commanded, np.nan)))
    through, points = at_normal_planes(attained, commanded)
    assert np.all(np.isinf(through[1]))
    assert through[0] == pytest.approx(points)
    for still in (np.ones((20, 3)), np.ones((1, 3)), np.ones((0, 3))):
        through, points = at_normal_planes(still[None], still)
        assert through.shape == (1, 0, 3)
        assert path_accuracy(through, points) == Accuracy(None, None)

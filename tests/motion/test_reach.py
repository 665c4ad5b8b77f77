"""Inverse kinematics at one pose."""

from __future__ import annotations

import pickle
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from scipy.spatial.transform import Rotation

from rigbench.arm.arm import PRISMATIC
from rigbench.arm.files import load_arm
from rigbench.motion.reach import (
    Found,
    Reach,
    Target,
    Unreachable,
    _unwound,
    conditioning,
    miss,
    rank,
    solve,
    solve_near,
)

DEMO = Path(__file__).resolve().parents[2] / "robots_demo"
LEVEL = np.radians([0, -60, 90, 0, 60, 0])


@pytest.fixture(scope="module")
def tray6():
    return load_arm(DEMO / "tray6" / "arm.yaml")


@pytest.fixture(scope="module")
def planar2():
    return load_arm(DEMO / "planar2" / "arm.yaml")


def test_every_pose_of_the_arm_is_found_again(tray6):
    """Two hundred poses drawn within the limits are reached to 1e-9 from a start half a radian away."""
    reach, rng = Reach.of(tray6), np.random.default_rng(3)
    for _ in range(200):
        q = rng.uniform(tray6.lower, tray6.upper)
        target = reach.tool(q)
        found = solve(reach, q + rng.uniform(-0.5, 0.5, 6), target)
        assert found.reached
        there = reach.tool(found.q)
        assert np.linalg.norm(there.position - target.position) <= 1e-9
        assert Rotation.from_matrix(there.rotation @ target.rotation.T).magnitude() <= 2e-9


def test_the_miss_turns_the_tool_onto_the_target(tray6):
    """Its last three numbers are the rotation vector from the tool to the target, half turns included."""
    reach, rng = Reach.of(tray6), np.random.default_rng(4)
    here = reach.tool(LEVEL)
    axes = [*np.eye(3), *-np.eye(3), *rng.normal(size=(20, 3))]
    for axis in axes:
        for angle in (0.0, 1e-9, 1e-4, 1.0, 3.0, np.pi - 1e-7, np.pi):
            vector = angle * axis / np.linalg.norm(axis)
            turned = Target(here.position, Rotation.from_rotvec(vector).as_matrix() @ here.rotation)
            turn = miss(reach, LEVEL, turned)[3:]
            if angle == np.pi:  # either way round
                turn *= np.sign(turn @ vector)
            np.testing.assert_allclose(turn, vector, atol=1e-14 + 1e-8 * (angle > 3))


def test_the_two_link_arm_has_its_closed_form(planar2):
    """The elbow follows the law of cosines, on the side of the near pose."""
    reach = Reach.of(planar2)
    for side in (1, -1):
        near = np.array([0.2, side * 1.0])
        x, z = 0.55, 0.31
        found = solve_near(reach, near, Target(np.array([x, 0, z]), None))
        elbow = side * np.arccos((x * x + z * z - 0.5**2 - 0.4**2) / (2 * 0.5 * 0.4))
        shoulder = np.arctan2(z, x) - np.arctan2(0.4 * np.sin(elbow), 0.5 + 0.4 * np.cos(elbow))
        np.testing.assert_allclose(found.q, [shoulder, elbow], atol=1e-9)


def test_how_far_a_two_link_arm_is_from_singular(planar2):
    """The singular values of J / (l1 + l2) in closed form; the third, zero in every pose, is passed over."""
    reach = Reach.of(planar2)
    assert reach.length == pytest.approx(0.9)
    assert rank(reach, 3) == 2
    for elbow in (0.0, 0.01, 1.0, -2.0):
        product = 0.5 * 0.4 * abs(np.sin(elbow)) / 0.9**2  # of the two, the determinant
        squares = (0.5**2 + 2 * 0.4**2 + 2 * 0.5 * 0.4 * np.cos(elbow)) / 0.9**2  # their sum
        least = np.sqrt((squares - np.sqrt(squares**2 - 4 * product**2)) / 2)
        got = conditioning(reach, np.array([[0.7, elbow]]), 3)
        assert got[0] == pytest.approx(least, abs=1e-7)


def test_a_stretched_wrist_is_singular(tray6):
    """At q5 = 0 the six-axis arm is singular, and a sixth of a radian away it isn't."""
    reach = Reach.of(tray6)
    poses = np.tile(np.radians([10, -60, 90, 20, 0, 30]), (3, 1))
    poses[0, 4], poses[2, 4] = -1 / 6, 1 / 6
    least = conditioning(reach, poses, 6)
    assert least[1] < 1e-15
    assert min(least[0], least[2]) > 0.02


def test_spare_joints_move_as_little_as_they_must(planar2):
    """Three parallel links on two coordinates: no smaller move in all joints reaches the point."""
    three = replace(
        planar2,
        joints=("a", "b", "c"), links=("a", "b", "c"), kinds=np.zeros(3), rotation=np.tile(np.eye(3), (3, 1, 1)),
        position=np.array([[0, 0, 0], [0.5, 0, 0], [0.4, 0, 0]]), axis=np.tile([0.0, -1.0, 0.0], (3, 1)),
        parameters=np.zeros((3, 10)), tool_position=np.array([0.3, 0, 0]),
        lower=np.full(3, -np.inf), upper=np.full(3, np.inf),
    )  # fmt: skip
    reach, q = Reach.of(three), np.array([0.4, 0.5, 0.6])
    here = reach.tool(q)
    found = solve(reach, q, Target(here.position + np.array([1e-4, 0, 2e-4]), None))
    assert found.reached
    moved = found.q - q
    # the shifts along the null space of J, (2,3) here, are orthogonal to a least move, to second order
    step = 1e-6
    columns = [
        (reach.tool(q + step * e).position - reach.tool(q - step * e).position) / (2 * step)
        for e in np.eye(3)
    ]
    null = np.linalg.svd(np.array(columns).T[[0, 2]])[2][-1]
    assert abs(null @ moved) < 1e-3 * np.linalg.norm(moved)
    # that it can't leave its plane makes it neither singular nor restless
    assert conditioning(reach, q[None], 3)[0] > 0.1
    beside = solve(reach, q, Target(here.position + np.array([0, 6e-10, 0]), None))
    assert beside.reached
    np.testing.assert_allclose(beside.q, q, atol=1e-9)


def test_a_slide_counts_by_the_arm_s_length(one_joint):
    """A prismatic joint's travel is scaled by the arm's length: another unit of length changes no step."""
    arm = replace(one_joint(), kinds=np.array([PRISMATIC]), axis=np.array([[0.6, 0.8, 0.0]]))
    reach = Reach.of(arm)
    assert reach.length == pytest.approx(0.5)
    found = solve(reach, np.zeros(1), Target(np.array([0.6, 0.8, -0.5]), None))
    assert found.q == pytest.approx([1.0], abs=1e-9)
    assert conditioning(reach, np.zeros((1, 1)), 3) == pytest.approx(1.0)


def test_whole_turns_are_taken_off(one_joint):
    """A joint ends close to the near pose, not turns away from it, unless a limit asks for the other side."""
    free = Reach.of(one_joint())
    target = free.tool(np.array([0.1]))
    assert solve_near(free, np.array([12.4]), target).q == pytest.approx([0.1 + 4 * np.pi], abs=1e-9)
    for side in (1, -1):
        limited = replace(free, lower=(3.0,) if side > 0 else (-7.0,), upper=(7.0,) if side > 0 else (-3.0,))
        found = solve_near(limited, np.array([side * 3.05]), free.tool(np.array([side * 0.1])))
        assert found.q == pytest.approx([side * (0.1 + 2 * np.pi)], abs=1e-9)
    wound = _unwound(free, np.array([1.0]), Found(np.array([1.3 - 6 * np.pi]), np.zeros(3)))
    assert wound.q == pytest.approx([1.3])


def test_another_start_is_tried_where_the_first_leads_beyond_a_limit(planar2):
    """With an elbow that only bends one way, the other side's near pose gives that way's position."""
    limited = Reach.of(replace(planar2, lower=np.array([-3.0, 0.05]), upper=np.array([3.0, 3.0])))
    target = Target(np.array([0.55, 0, 0.31]), None)
    found = solve_near(limited, np.array([0.9, -0.9]), target)
    assert found.reached
    assert found.q[1] > 0.05
    again = solve_near(limited, np.array([0.9, -0.9]), target)
    assert (again.q == found.q).all()


def test_a_point_out_of_reach_is_missed_by_the_least(planar2):
    """The closest that the two-link arm gets to a point 1.2 m away is 0.3 m."""
    reach = Reach.of(planar2)
    found = solve_near(reach, np.array([0.3, 0.5]), Target(np.array([0.0, 0, 1.2]), None))
    assert not found.reached
    assert np.linalg.norm(found.missed) * reach.length == pytest.approx(0.3, abs=1e-3)


def test_a_reach_is_a_value(tray6):
    """Equal arms make equal reaches with equal digests, small when pickled; drives and masses play no part."""
    reach = Reach.of(tray6)
    assert reach.chain[:, 16:].any() == 0
    again = pickle.loads(pickle.dumps(reach))
    assert again == reach
    assert hash(again) == hash(reach)
    assert len(pickle.dumps(reach)) < 1500
    assert Reach.of(tray6.replaced(parameters=tray6.parameters * 2)).digest == reach.digest
    assert Reach.of(replace(tray6, rotation=np.where(tray6.rotation == 0, -0.0, tray6.rotation))) == reach
    longer = replace(tray6, tool_position=tray6.tool_position + np.array([0.01, 0, 0]))
    assert Reach.of(longer).digest != reach.digest
    assert Reach.of(replace(tray6, upper=tray6.upper + 0.1)).digest != reach.digest


def test_an_unreachable_motion_says_when():
    """Its sentence ends on the time, and it survives pickling."""
    error = pickle.loads(pickle.dumps(Unreachable("the arm can't", 0.5, "another")))
    assert str(error) == "the arm can't, at 0.500 s"
    assert (error.problem, error.at_s, error.expected, error.exit_code) == (
        "the arm can't",
        0.5,
        "another",
        2,
    )

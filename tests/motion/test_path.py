"""The tool point led along circles and lines."""

from __future__ import annotations

import json
import os
import pickle
import subprocess
import sys
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from scipy.optimize import brentq
from scipy.spatial.transform import Rotation

from rigbench.arm.arm import PRISMATIC
from rigbench.arm.dynamics import tool_path
from rigbench.arm.files import load_arm
from rigbench.motion.curve import Circle
from rigbench.motion.follow import follow, rotation_of
from rigbench.motion.limits import check_motion
from rigbench.motion.path import PathMotion, circle, line, middle_of_limits
from rigbench.motion.reach import Reach, Unreachable

DEMO = Path(__file__).resolve().parents[2] / "robots_demo"
LEVEL = tuple(np.radians([0, -60, 90, 0, 60, 0]).tolist())
RIM = {"centre_m": [0.45, 0, 0.4], "radius_m": 0.12, "normal": [0, 0, 1], "turn_s": 2.0}
WHEEL = {"centre_m": [0.5, 0, 0.2], "radius_m": 0.15, "normal": [0, 1, 0], "turn_s": 1.5}


@pytest.fixture(scope="module")
def tray6():
    return load_arm(DEMO / "tray6" / "arm.yaml")


@pytest.fixture(scope="module")
def planar2():
    return load_arm(DEMO / "planar2" / "arm.yaml")


def tool(arm, motion, t):
    q, _, _ = motion.reference(np.asarray(t, float))
    return tool_path(arm.chain((0.0, 0.0, 0.0)), np.ascontiguousarray(q))


def moment(share, leg_s):
    """Time at which the quintic has done a share of the way."""
    return leg_s * brentq(lambda x: x**3 * (10 - 15 * x + 6 * x * x) - share, 0, 1, xtol=1e-15)


def derivative(function, t, step):
    """Central difference of fourth order."""
    return (
        8 * (function(t + step) - function(t - step)) - function(t + 2 * step) + function(t - 2 * step)
    ) / (12 * step)


@pytest.fixture(params=["rim", "three turns", "line", "planar circle", "free"])
def some(request, tray6, planar2):
    """(arm, motion): one of each kind."""
    return {
        "rim": lambda: (tray6, circle(tray6, LEVEL, **RIM)),
        "three turns": lambda: (tray6, circle(tray6, LEVEL, **RIM, turns=3, start_deg=-70, pace=1.3)),
        "line": lambda: (tray6, line(tray6, LEVEL, to_m=[0.4, 0.3, 0.3], leg_s=0.7)),
        "planar circle": lambda: (planar2, circle(planar2, (0.2, 1.0), **WHEEL, rest_s=0)),
        "free": lambda: (tray6, line(tray6, LEVEL, to_m=[0.4, 0.3, 0.3], orientation="free")),
    }[request.param]()


def test_velocity_and_acceleration_are_the_derivatives(some):
    """v and a agree with finite differences of q and v throughout the leg and in the rest."""
    _, motion = some
    step = 2e-4
    t = np.linspace(2 * step, motion.duration_s - 2 * step, 701)
    # clear of the leg's end, where the quintic's third derivative jumps
    t = t[np.abs(t - (motion.duration_s - motion.rest_s)) > 3 * step]
    _, v, a = motion.reference(t)
    # the difference's error: step^4/30 of the fifth derivative, below 1e5 rad/s^5 here (and at the knots of
    # the spline, where that jumps, as much); rounding 1e-16 of q, 1e-14 of v, over the step
    np.testing.assert_allclose(v, derivative(lambda s: motion.reference(s)[0], t, step), atol=1e-9)
    np.testing.assert_allclose(a, derivative(lambda s: motion.reference(s)[1], t, step), atol=1e-7)


def test_it_starts_and_ends_at_rest(some):
    """v and a vanish at both ends, through the rest and outside; the end is held to the last bit."""
    _, motion = some
    leg = motion.duration_s - motion.rest_s
    t = np.array([-1.0, 0.0, leg, motion.duration_s, motion.duration_s + 5])
    q, v, a = motion.reference(t)
    assert not v.any()
    assert not a.any()
    assert (q[:2] == q[0]).all()
    assert (q[2:] == q[2]).all()
    expected = () if motion.rest_s == 0 else ((leg, motion.duration_s),)
    np.testing.assert_allclose(motion.rests, expected)


def test_the_tool_keeps_to_the_circle(planar2):
    """The planar arm's tool goes round the wheel with the quintic's angle, within 1e-8 m at each of 4000 ticks
    a second, right-handed about +y from the point in front."""
    motion = circle(planar2, (0.2, 1.0), **WHEEL)
    t = np.arange(int(motion.duration_s * 4000)) / 4000
    x = np.minimum(t / 1.5, 1)
    angle = 2 * np.pi * x**3 * (10 - 15 * x + 6 * x * x)
    expected = np.array([0.5 + 0.15 * np.cos(angle), 0 * angle, 0.2 - 0.15 * np.sin(angle)]).T
    np.testing.assert_allclose(tool(planar2, motion, t)[0], expected, atol=1e-8)
    # closed form of the elbow: the law of cosines, on the side of the near pose
    elbow = np.arccos(((expected**2).sum(axis=1) - 0.41) / 0.4)
    np.testing.assert_allclose(motion.reference(t)[0][:, 1], elbow, atol=1e-7)


def test_the_tool_keeps_to_the_line(tray6):
    """From where the near pose has it to the end, straight, without turning."""
    motion = line(tray6, LEVEL, to_m=[0.4, 0.3, 0.3], leg_s=0.7)
    t = np.linspace(0, motion.duration_s, 1501)
    x = np.minimum(t / 0.7, 1)
    share = (x**3 * (10 - 15 * x + 6 * x * x))[:, None]
    start = Reach.of(tray6).tool(np.array(LEVEL)).position
    positions, rotations = tool(tray6, motion, t)
    np.testing.assert_allclose(positions, start + share * (np.array([0.4, 0.3, 0.3]) - start), atol=1e-8)
    np.testing.assert_allclose(rotations, np.broadcast_to(np.eye(3), rotations.shape), atol=1e-8)
    assert (motion.reference(np.zeros(1))[0] == LEVEL).all()  # so it follows a motion that ends there


def test_a_line_may_start_elsewhere(tray6):
    """With from_m it runs from there to the end, and both are in the inputs."""
    ends = {"from_m": [0.5, -0.1, 0.3], "to_m": [0.4, 0.2, 0.4]}
    motion = line(tray6, LEVEL, **ends)
    np.testing.assert_allclose(tool(tray6, motion, [0.0, 1.0])[0], list(ends.values()), atol=1e-9)
    assert motion.inputs()["start"] == ends["from_m"]
    assert motion.inputs()["end"] == ends["to_m"]


@pytest.mark.parametrize("rpy", [(0, 0, 40), (10, -20, 30), (0, 15, 0)])
def test_an_orientation_given_is_kept(tray6, rpy):
    """It is roll, pitch, yaw about the fixed axes, and overrides that of the near pose."""
    np.testing.assert_allclose(
        rotation_of(rpy), Rotation.from_euler("xyz", rpy, degrees=True).as_matrix(), atol=1e-15
    )
    motion = circle(tray6, LEVEL, **RIM, tool_rpy_deg=rpy)
    _, rotations = tool(tray6, motion, np.linspace(0, 2, 301))
    off = Rotation.from_matrix(rotations @ rotation_of(rpy).T).magnitude()
    assert off.max() < 1e-8


def test_a_free_orientation_turns(tray6):
    """Free, the tool point keeps to the line and the tool turns on the way."""
    motion = line(tray6, LEVEL, to_m=[0.4, 0.3, 0.3], orientation="free")
    positions, rotations = tool(tray6, motion, np.array([0.0, 1.0]))
    np.testing.assert_allclose(positions[1], [0.4, 0.3, 0.3], atol=1e-9)
    assert Rotation.from_matrix(rotations[0] @ rotations[1].T).magnitude() > 0.1


def test_a_closed_circle_comes_back(tray6):
    """A six-axis arm ends a whole turn in the position that it started from, to what the search leaves."""
    motion = circle(tray6, LEVEL, **RIM)
    q, _, _ = motion.reference(np.array([0.0, motion.duration_s]))
    np.testing.assert_allclose(q[1], q[0], atol=1e-11)
    half = circle(tray6, LEVEL, **RIM, turns=0.5)
    assert half.duration_s == pytest.approx(1.3)
    np.testing.assert_allclose(tool(tray6, half, [1.0])[0], [[0.33, 0, 0.4]], atol=1e-9)


@pytest.mark.parametrize(
    ("normal", "start_deg", "at_start", "at_quarter"),
    [
        ([0, 0, 2], 0, [1, 0, 0], [0, 1, 0]),
        ([0, 0, -1], 0, [1, 0, 0], [0, -1, 0]),
        ([0, 0, 1], 90, [0, 1, 0], [-1, 0, 0]),
        ([0, 3, 0], 0, [1, 0, 0], [0, 0, -1]),
        ([1, 0, 0], 0, [0, 1, 0], [0, 0, 1]),  # x stands on the plane: y takes its place
        ([1, 0, 1], 0, [0.5**0.5, 0, -(0.5**0.5)], [0, 1, 0]),
    ],
)
def test_where_a_circle_starts_and_which_way_it_goes(normal, start_deg, at_start, at_quarter):
    """Angles count from x laid down into the plane, right-handed about the normal, of any length."""
    unit = tuple((np.array(normal) / np.linalg.norm(normal)).tolist())
    curve = Circle((0.1, 0.2, 0.3), 2.0, unit, 1.0, start_deg)
    points = (curve.points(np.array([0.0, 0.25]), np.zeros(3)) - [0.1, 0.2, 0.3]) / 2
    np.testing.assert_allclose(points, [at_start, at_quarter], atol=1e-12)


def test_pace_shortens_the_leg_alone(tray6):
    """At half the pace the same path takes twice as long, at half the speed; the rest stays."""
    whole, half = circle(tray6, LEVEL, **RIM), circle(tray6, LEVEL, **RIM, pace=0.5)
    assert half == whole.paced(0.5)
    assert (whole.duration_s, half.duration_s) == pytest.approx((2.3, 4.3))
    np.testing.assert_allclose(half.rests, ((4.0, 4.3),))
    t = np.linspace(0, 2.0, 41)
    for ours, theirs, factor in zip(half.reference(2 * t), whole.reference(t), (1, 0.5, 0.25), strict=True):
        np.testing.assert_allclose(ours, factor * theirs, atol=1e-12)


def test_leaving_the_arm_s_reach_says_when(planar2):
    """A line outwards leaves the reach of 0.9 m at the time that the quintic takes to get there."""
    near = (-0.6, 1.4)
    start = Reach.of(planar2).tool(np.array(near)).position
    unit = start / np.linalg.norm(start)
    with pytest.raises(Unreachable, match=r"can't lead the tool on beyond") as caught:
        line(planar2, near, to_m=(1.3 * unit).tolist(), leg_s=2.0, pace=1.25)
    share = (0.9 - np.linalg.norm(start)) / (1.3 - np.linalg.norm(start))
    assert caught.value.at_s == pytest.approx(moment(share, 1.6), abs=1e-5)
    assert "orientation" not in caught.value.expected  # which is free already


def test_a_singular_pose_on_the_way_says_when(planar2):
    """A line that all but stretches the elbow is singular where the closed form of the least singular value
    passes the threshold."""
    near = (-0.6, 1.4)
    start = Reach.of(planar2).tool(np.array(near)).position
    distance = np.linalg.norm(start)

    def least(r):
        cosine = (r * r - 0.41) / 0.4
        product, squares = 0.2 * np.sqrt(1 - cosine**2) / 0.81, (0.57 + 0.4 * cosine) / 0.81
        return np.sqrt((squares - np.sqrt(squares**2 - 4 * product**2)) / 2)

    end = 0.89995
    at = brentq(lambda r: least(r) - 0.01, 0.85, end)
    with pytest.raises(Unreachable, match=r"singular pose with the tool at \(") as caught:
        line(planar2, near, to_m=(end * start / distance).tolist(), leg_s=2.0)
    assert caught.value.at_s == pytest.approx(moment((at - distance) / (end - distance), 2.0), abs=1e-6)


def test_passing_through_a_stretched_wrist_says_when(tray6):
    """With the tool's orientation held in the arm's plane the wrist runs straight through q5 = 0, smoothly: this
    is still singular, at the time at which the arm's triangle says so."""
    start, end = np.radians([0, -60, 90, 0, 30, 0]), np.radians([0, -35, 115, 0, -20, 0])
    reach = Reach.of(tray6)
    to = reach.tool(end).position

    def bend(share):
        """q5 from the triangle shoulder, elbow, wrist; the tool's orientation keeps q2 + q3 + q5."""
        ends = []
        for q in (start, end):
            elbow = np.array([0.4 * np.cos(q[1]), -0.4 * np.sin(q[1])])
            ends.append(elbow + 0.36 * np.array([np.cos(q[1] + q[2]), -np.sin(q[1] + q[2])]))
        x, z = ends[0] + share * (ends[1] - ends[0])
        elbow = np.arccos((x * x + z * z - 0.4**2 - 0.36**2) / (2 * 0.4 * 0.36))
        shoulder = -np.arctan2(z, x) - np.arctan2(0.36 * np.sin(elbow), 0.4 + 0.36 * np.cos(elbow))
        return np.radians(60) - shoulder - elbow

    assert bend(0.0) == pytest.approx(np.radians(30))
    straight = brentq(bend, 0, 1)
    with pytest.raises(Unreachable, match="singular pose") as caught:
        line(tray6, start.tolist(), to_m=to.tolist(), leg_s=1.0)
    share = brentq(lambda s: moment(s, 1.0) - caught.value.at_s, 0, 1)
    assert 0 < bend(share) < np.radians(5)
    assert share < straight
    assert "orientation: free" in caught.value.expected


def test_a_singular_pose_between_the_solved_points_is_found(tray6, monkeypatch):
    """The joint path is also looked at between the points at which it was solved, however coarse they are."""
    start, end = np.radians([0, -60, 90, 0, 30, 0]), np.radians([0, -35, 115, 0, -20, 0])
    to = Reach.of(tray6).tool(end).position.tolist()
    monkeypatch.setattr("rigbench.motion.follow.PARTS", 8)
    monkeypatch.setattr("rigbench.motion.follow.ACCURATE", 1.0)
    with pytest.raises(Unreachable, match="singular pose"):
        line(tray6, start.tolist(), to_m=to)


def test_a_start_out_of_reach_says_by_how_much(planar2, tray6):
    """A circle beside the planar arm's plane is 50 mm off, at 0 s; one too far out likewise."""
    beside = WHEEL | {"centre_m": [0.5, 0.05, 0.2]}
    with pytest.raises(
        Unreachable, match=r"bring the tool to \(0\.65, 0\.05, 0\.2\) m: .* 50 mm off"
    ) as caught:
        circle(planar2, (0.2, 1.0), **beside)
    assert caught.value.at_s == 0
    with pytest.raises(Unreachable, match=r"mm and .* deg off, at 0\.000 s"):
        circle(tray6, LEVEL, **(RIM | {"centre_m": [1.5, 0, 0.4]}))


def test_a_circle_that_leaves_the_plane_says_when(planar2):
    """A circle that starts in the planar arm's plane and tilts out of it ends at once: by 1e-9 m of 0.1 m."""
    with pytest.raises(Unreachable, match="can't lead the tool on") as caught:
        circle(planar2, (0.2, 1.0), **(WHEEL | {"normal": [0, 0.8, 0.6]}))
    # 1e-9 of the arm's length of 0.9 m are left behind in 0.8 ms, the finest step that is tried takes 3 ms
    assert caught.value.at_s < 0.005


def test_a_line_without_length_is_refused(tray6):
    """It would be a motion that doesn't move."""
    to_m = Reach.of(tray6).tool(np.array(LEVEL)).position.tolist()
    with pytest.raises(Unreachable, match="ends where it begins"):
        line(tray6, LEVEL, to_m=to_m)


def test_a_joint_limit_on_the_way_is_found_with_its_time(planar2):
    """The elbow passes a limit at the first tick after the law of cosines says so."""
    near = (-0.6, 1.4)
    start = Reach.of(planar2).tool(np.array(near)).position
    distance = np.linalg.norm(start)
    limited = replace(planar2, lower=np.array([-3.0, 0.9]))
    motion = line(limited, near, to_m=(0.85 / distance * start).tolist(), leg_s=2.0)
    (passing,) = check_motion(motion, limited, 1000)
    assert (passing.joint, passing.limit) == ("elbow", "lower limit")
    at = np.sqrt(0.41 + 0.4 * np.cos(0.9))
    due = moment((at - distance) / (0.85 - distance), 2.0)
    assert passing.time_s == pytest.approx(due, abs=1e-3)
    assert passing.time_s >= due
    assert passing.value == pytest.approx(np.degrees(np.arccos((0.85**2 - 0.41) / 0.4)), abs=1e-6)


def test_a_speed_limit_on_the_way_is_found(tray6):
    """A quick rim is too fast for joint 1 or 2; the same at a tenth of the pace is not."""
    quick = circle(tray6, LEVEL, **(RIM | {"turn_s": 0.5}))
    assert "speed limit" in {passing.limit for passing in check_motion(quick, tray6, 1000)}
    assert check_motion(quick.paced(0.1), tray6, 1000) == []


def test_the_near_pose_decides_between_positions(planar2):
    """Elbow up and elbow down lead the tool along the same circle."""
    up, down = circle(planar2, (0.2, 1.0), **WHEEL), circle(planar2, (1.0, -1.0), **WHEEL)
    t = np.linspace(0, 1.8, 50)
    np.testing.assert_allclose(tool(planar2, up, t)[0], tool(planar2, down, t)[0], atol=1e-8)
    np.testing.assert_allclose(up.reference(t)[0][:, 1], -down.reference(t)[0][:, 1], atol=1e-7)


def test_an_arm_with_slides_follows_too(planar2):
    """A gantry (slide along x, turn about z with a boom of 0.3 m, slide down): a level line is led straight and
    exactly, with the boom turning as it may, or without turning where the orientation is held."""
    gantry = replace(
        planar2,
        joints=("x", "turn", "z"), links=("bridge", "boom", "post"), kinds=np.array([PRISMATIC, 0, PRISMATIC]),
        rotation=np.tile(np.eye(3), (3, 1, 1)), position=np.array([[0, 0, 1], [0, 0, 0], [0.3, 0, 0]]),
        axis=np.array([[1.0, 0, 0], [0, 0, 1], [0, 0, -1]]), parameters=np.zeros((3, 10)),
        tool_position=np.zeros(3), lower=np.full(3, -2.0), upper=np.full(3, 2.0),
    )  # fmt: skip
    near = (0.1, 0.8, 0.2)
    start = Reach.of(gantry).tool(np.array(near)).position
    t = np.linspace(0, 1, 201)
    for way, orientation in (((0.2, -0.1, 0.1), None), ((0.2, 0.0, 0.1), "held")):
        end = start + np.array(way)
        motion = line(gantry, near, to_m=end.tolist(), orientation=orientation)
        positions, rotations = tool(gantry, motion, t)
        share = (t**3 * (10 - 15 * t + 6 * t * t))[:, None]
        np.testing.assert_allclose(positions, start + share * way, atol=1e-8)
        turned = np.abs(rotations - rotations[0]).max()
        assert turned < 1e-9 if orientation else turned > 0.1
    with pytest.raises(Unreachable, match="can't lead the tool on"):  # held, it can't go sideways
        line(gantry, near, to_m=(start + np.array([0.2, 0.1, 0])).tolist(), orientation="held")


def test_lengths_in_the_wrong_unit_are_a_fault_like_any_other(planar2):
    """Millimetres given as metres are out of reach by so much."""
    with pytest.raises(Unreachable, match=r"773\.1 m off"):
        circle(planar2, (0.2, 1.0), **(WHEEL | {"centre_m": [650, 0, 420]}))
    with pytest.raises(Unreachable, match="can't lead the tool on"):
        line(planar2, (0.2, 1.0), to_m=[1e6, 0, 0])


def test_the_middle_of_the_limits(planar2):
    """Midway, and 0 where a joint has a limit on one side or none."""
    arm = replace(planar2, lower=np.array([-1.0, -np.inf]), upper=np.array([3.0, 2.0]))
    assert middle_of_limits(arm) == (1.0, 0.0)


def test_it_is_a_value(tray6):
    """Equal motions are equal, hash alike, survive pickling in few bytes, and their inputs are the same JSON."""
    motion = circle(tray6, LEVEL, **RIM)
    text = pickle.dumps(motion)
    again = pickle.loads(text)
    assert again == motion
    assert hash(again) == hash(motion)
    assert len(text) < 2000
    assert pickle.dumps(again) == text
    same = circle(tray6, LEVEL, **(RIM | {"centre_m": (0.45, -0.0, 0.4), "normal": [0, 0, 5]}), turns=1)
    assert json.dumps(same.inputs()) == json.dumps(motion.inputs())
    assert circle(tray6, LEVEL, **(RIM | {"normal": [0, 0, 1e-300]})) == motion
    assert line(tray6, LEVEL, to_m=[0.4, 0, 0.3]).inputs()["start"] is None


@pytest.mark.parametrize(
    "other",
    [
        {"centre_m": [0.45, 0, 0.41]}, {"radius_m": 0.11}, {"normal": [0, 0, -1]}, {"turn_s": 2.5}, {"turns": 2},
        {"start_deg": 5}, {"rest_s": 0.4}, {"pace": 0.9}, {"orientation": "free"}, {"tool_rpy_deg": [0, 0, 0]},
    ],
)  # fmt: skip
def test_whatever_differs_is_in_the_inputs(tray6, other):
    """Each declared number, the near pose and the arm's geometry change the inputs."""
    motion = circle(tray6, LEVEL, **RIM)
    assert circle(tray6, LEVEL, **(RIM | other)).inputs() != motion.inputs()
    elsewhere = (*LEVEL[:5], 0.1)
    assert circle(tray6, elsewhere, **RIM).inputs() != motion.inputs()
    longer = replace(tray6, tool_position=tray6.tool_position + np.array([0.01, 0, 0]))
    assert circle(longer, LEVEL, **RIM).inputs() != motion.inputs()
    twice = circle(tray6, LEVEL, **(RIM | {"turn_s": 1.0}), turns=2)  # in the same time
    assert twice.inputs() != motion.inputs()


def test_the_joint_path_is_solved_once_whatever_the_times(tray6):
    """Other times, rests and paces of one curve share its joint path, and so does an unpickled motion."""
    follow.cache_clear()
    motion = circle(tray6, LEVEL, **RIM)
    for other in (
        circle(tray6, LEVEL, **(RIM | {"turn_s": 3.0})),
        pickle.loads(pickle.dumps(motion.paced(0.3))),
    ):
        other.reference(np.zeros(1))
    assert follow.cache_info().misses == 1


def test_another_process_gives_the_same_bits(tray6, tmp_path):
    """The solved path is the same to the last bit in a fresh process with one thread."""
    motion = circle(tray6, LEVEL, **RIM)
    (tmp_path / "motion").write_bytes(pickle.dumps(motion))
    code = (
        "import pickle, sys, numpy as np; m = pickle.load(open(sys.argv[1], 'rb')); "
        "sys.stdout.buffer.write(b''.join(x.tobytes() for x in m.reference(np.linspace(0, 2, 501))))"
    )
    once = {**os.environ, "OPENBLAS_NUM_THREADS": "1", "OMP_NUM_THREADS": "1"}
    done = subprocess.run(
        [sys.executable, "-c", code, str(tmp_path / "motion")], capture_output=True, check=True, env=once
    )
    assert done.stdout == b"".join(x.tobytes() for x in motion.reference(np.linspace(0, 2, 501)))


@pytest.mark.parametrize(
    "nonsense",
    [
        {"normal": [0, 0, 0]},
        {"normal": [0, 1]},
        {"centre_m": [0, 0, float("nan")]},
        {"centre_m": [0, 1e300, 0]},
        {"start_deg": float("inf")},
        {"radius_m": 0},
        {"turns": 0},
        {"turn_s": 0},
        {"turn_s": float("inf")},
        {"rest_s": -1},
        {"pace": 0},
        {"orientation": "loose"},
        {"orientation": "free", "tool_rpy_deg": [0, 0, 0]},
        {"tool_rpy_deg": [0, 0]},
    ],
)
def test_nonsense_is_refused(tray6, nonsense):
    """What the declaration should have caught is a mistake of the caller."""
    with pytest.raises(ValueError, match=r"not zero|at most|finite|orientation"):
        circle(tray6, LEVEL, **(RIM | nonsense))
    with pytest.raises(ValueError, match="near"):
        circle(tray6, LEVEL[:5], **RIM)


def test_a_motion_that_can_t_be_says_so_whenever_it_is_asked(planar2):
    """One built without the check raises with its own time as it is asked for its reference."""
    good = line(planar2, (-0.6, 1.4), to_m=[0.6, 0, 0.1], leg_s=1.0)
    bad = PathMotion(replace(good.task, curve=replace(good.task.curve, end=(1.5, 0.0, 0.1))), 4.0)
    with pytest.raises(Unreachable) as caught:
        bad.reference(np.zeros(1))
    assert 0 < caught.value.at_s < 4

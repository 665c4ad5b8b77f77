"""Where a motion leaves the arm's limits."""

from __future__ import annotations

from dataclasses import replace
from math import radians

import numpy as np
import pytest

from rigbench.arm.arm import PRISMATIC, REVOLUTE, Arm, Drives
from rigbench.motion.limits import Passing, check_motion, passings, shown
from rigbench.motion.via import ViaMotion


def make_arm(kinds=(REVOLUTE, REVOLUTE, PRISMATIC), lower=None, upper=None, speed=None) -> Arm:
    """An arm of which only joints and limits matter."""
    n = len(kinds)
    limit = {"lower": -np.inf, "upper": np.inf}
    return Arm(
        name="mock",
        joints=tuple(f"j{i + 1}" for i in range(n)),
        links=tuple(f"link{i + 1}" for i in range(n)),
        kinds=np.array(kinds),
        rotation=np.tile(np.eye(3), (n, 1, 1)),
        position=np.zeros((n, 3)),
        axis=np.tile([0.0, 0, 1], (n, 1)),
        parameters=np.zeros((n, 10)),
        tool_rotation=np.eye(3),
        tool_position=np.zeros(3),
        lower=np.array(lower if lower is not None else [limit["lower"]] * n),
        upper=np.array(upper if upper is not None else [limit["upper"]] * n),
        drives=replace(Drives.ideal(n), speed_limit=np.array(speed if speed is not None else [np.inf] * n)),
    )


def leg(start, end, leg_s=1.0) -> ViaMotion:
    """One leg."""
    return ViaMotion((tuple(start), tuple(end)), leg_s)


def test_a_motion_within_its_limits_passes_none():
    """Unlimited joints, and joints whose limits contain the motion, yield nothing."""
    motion = leg([0, 0, 0], [1, -2, 0.3])
    assert check_motion(motion, make_arm(), 1000) == []
    arm = make_arm(lower=[-0.1, -2.1, -0.1], upper=[1.1, 0.1, 0.4], speed=[1.9, 3.8, 0.6])
    assert check_motion(motion, arm, 1000) == []


def test_upper_and_lower_limits_are_told_with_time_and_extent():
    """The first tick beyond, the farthest value, in degrees; the time follows from s(x) = 1/2 at x = 1/2."""
    motion = leg([0, 0, 0], [2, -2, 0])
    arm = make_arm(lower=[-9, -1, -9], upper=[1, 9, 9])
    found = check_motion(motion, arm, 1000)
    assert [(passing.joint, passing.limit) for passing in found] == [
        ("j1", "upper limit"),
        ("j2", "lower limit"),
    ]
    for passing, sign in zip(found, (1, -1), strict=True):
        assert passing.time_s == pytest.approx(0.501, abs=1e-9)  # at 0.500 the limit is met, not passed
        assert passing.value == pytest.approx(sign * np.degrees(2))
        assert passing.bound == pytest.approx(sign * np.degrees(1))
        assert passing.unit == "deg"


def test_prismatic_joints_are_told_in_millimetres():
    """Positions in mm and speeds in mm/s for a prismatic joint."""
    motion = leg([0, 0, 0], [0, 0, 0.5])
    found = check_motion(motion, make_arm(upper=[9, 9, 0.4], speed=[9, 9, 0.9]), 1000)
    assert [(passing.bound, passing.unit) for passing in found] == [
        (pytest.approx(400), "mm"),
        (pytest.approx(900), "mm/s"),
    ]
    assert found[1].value == pytest.approx(15 / 8 * 500)


@pytest.mark.parametrize("sign", [1, -1])
def test_the_speed_limit_holds_both_ways(sign):
    """A quintic's peak speed 15/8 step / T is compared with the limit whichever way it goes."""
    motion = leg([0, 0, 0], [sign, 0, 0], 0.5)
    (passing,) = check_motion(motion, make_arm(speed=[3.7, 9, 9]), 1000)
    assert passing.limit == "speed limit"
    assert passing.value == pytest.approx(np.degrees(3.75))
    assert check_motion(motion, make_arm(speed=[3.76, 9, 9]), 1000) == []


def test_a_motion_that_ends_on_its_limit_does_not_pass_it():
    """150 deg against an upper limit of 150 deg, whatever the rounding; 150.001 deg does pass."""
    for degrees in range(1, 360):
        arm = make_arm((REVOLUTE,), upper=[degrees * np.pi / 180])
        assert check_motion(leg([0], [radians(degrees)], 9), arm, 10) == []
        assert len(check_motion(leg([0], [radians(degrees + 1e-3)], 9), arm, 10)) == 1
    assert check_motion(leg([0], [-1]), make_arm((REVOLUTE,), upper=[0.0]), 100) == []


def test_a_limit_below_where_it_starts_is_passed_at_once():
    """A start beyond a limit is told at 0 s."""
    (passing,) = check_motion(leg([1], [2]), make_arm((REVOLUTE,), upper=[0.5]), 100)
    assert passing.time_s == 0


def test_the_end_counts_though_no_tick_falls_on_it():
    """A leg of 0.35 s at 10 Hz ends between ticks, and its end is looked at."""
    (passing,) = check_motion(leg([0], [1], 0.35), make_arm((REVOLUTE,), upper=[1 - 1e-7]), 10)
    assert passing.time_s == pytest.approx(0.35)


def test_it_reads_as_a_sentence():
    """Joint, limit, time and how far, with units."""
    motion = leg([0, 0], [0, radians(163.2)], 2.0)
    (passing,) = check_motion(motion, make_arm((REVOLUTE, REVOLUTE), upper=[9, radians(150)]), 1000)
    # s(x) = 150/163.2 at x = 0.7733, which is 1.547 s.
    roots = np.roots([6, -15, 10, 0, 0, -150 / 163.2])
    (x,) = (root.real for root in roots if abs(root.imag) < 1e-9 and 0 < root.real < 1)
    assert passing.time_s == pytest.approx(np.ceil(2000 * x) / 1000)
    assert str(passing) == "joint j2 passes its upper limit 150 deg at 1.55 s (and reaches 163.2 deg)"
    fast = Passing("j1", "speed limit", 0.25, 200.0, 143.239, "deg/s")
    assert str(fast) == "joint j1 passes its speed limit 143.2 deg/s at 0.25 s (and reaches 200 deg/s)"


def test_numbers_that_are_close_are_told_apart():
    """A value just beyond its limit isn't written as the limit itself."""
    assert shown(150.0, 149.9999) == ("150", "149.9999")
    assert shown(200.0, 150.0) == ("200", "150")
    assert shown(123456.7, 20000.0) == ("123457", "20000")
    assert shown(0.1, 0.1) == ("0.10000000000000001", "0.10000000000000001")


def test_another_number_of_joints_is_a_mistake():
    """A motion of two joints can't be judged on an arm of three."""
    with pytest.raises(ValueError, match="2 joints, the arm has 3"):
        passings(leg([0, 0], [1, 1]), make_arm(), np.array([0.0]))

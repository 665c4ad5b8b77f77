"""Gear ratios: the laws of G and G^2 against closed forms, and the engine's tracking in the same order."""

from __future__ import annotations

import json
import math
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest

from rigbench.arm.files import ArmFiles
from rigbench.campaign.gears import RATIOS, gears
from rigbench.campaign.gears.demand import leg_seconds, quarter_motion, used
from rigbench.campaign.gears.workspace import sampled_poses
from rigbench.motion.quintic import quintic

DEMO = Path(__file__).resolve().parents[2] / "robots_demo"
G = 9.81

URDF = """<robot name="one">
  <link name="base"/>
  <link name="bar"><inertial><origin xyz="{cog} 0 0"/><mass value="2"/>
    <inertia ixx="0.01" ixy="0" ixz="0" iyy="0.02" iyz="0" izz="0.02"/></inertial></link>
  <link name="tip"/>
  <joint name="j" type="{kind}"><parent link="base"/><child link="bar"/><axis xyz="{axis}"/>
    <limit lower="{lower}" upper="{upper}" effort="0" velocity="0"/></joint>
  <joint name="end" type="fixed"><parent link="bar"/><child link="tip"/><origin xyz="0.5 0 0"/></joint>
</robot>
"""


@pytest.fixture
def one(tmp_path):
    """An arm of one joint: a bar of 2 kg whose centre of gravity is 0.25 m away, about 0.145 kg m^2."""

    def build(drive="", kind="revolute", axis="0 -1 0", lower=-2.0, upper=2.0):
        cog = 0.25 if kind != "prismatic" else 0.0
        (tmp_path / "one.urdf").write_text(
            URDF.format(kind=kind, axis=axis, cog=cog, lower=lower, upper=upper)
        )
        (tmp_path / "one.yaml").write_text(f"urdf: one.urdf\ntool: tip\ndrives:\n  j: {{{drive}}}\n")
        return ArmFiles.read(tmp_path / "one.yaml")

    return build


INERTIA = 0.02 + 2 * 0.25**2


def test_one_joint_in_closed_form(one):
    """J/G^2 + Jm, m g c / G, G^2 Jm, limits over G, and the shares of them that a quintic takes."""
    files = one("rotor_inertia: 3.0e-5, motor_torque_limit: 0.4, motor_speed_limit: 300, gear_ratio: 30")
    found = gears(files, ["j"], (0.5, 1.0, 7.0, 64.0), leg_s=1.5)
    (joint,) = found.joints
    assert (joint.declared_ratio, joint.prismatic) == (30, False)
    np.testing.assert_allclose([joint.link_least, joint.link_largest], INERTIA, rtol=1e-12)
    for row in joint.ratios:
        ratio, reflected = row.ratio, 3e-5 * row.ratio**2
        np.testing.assert_allclose(
            [row.inertia_least, row.inertia_largest], INERTIA / ratio**2 + 3e-5, rtol=1e-12
        )
        assert (row.damping_least, row.damping_largest) == (1.0, 1.0)
        assert row.reflected == pytest.approx(reflected, rel=1e-12)
        # the range holds the level pose, where gravity is m g c; 4096 poses come within 1e-3 rad of it
        assert row.disturbance == pytest.approx(2 * G * 0.25 / ratio, rel=1e-6)
        assert row.disturbance_share == pytest.approx(row.disturbance / 0.4, rel=1e-12)
        assert row.speed_limit == pytest.approx(300 / ratio, rel=1e-12)
        # of 2001 samples one is within a thousandth of the leg of its peak, where the speed is flat
        assert row.speed_used == pytest.approx(15 / 8 * 2.0 / 1.5 / (300 / ratio), rel=1e-5)
        x = np.linspace(0, 1, 20001)
        s, _, acceleration = quintic(x)
        torque = (INERTIA + reflected) * acceleration * 2.0 / 1.5**2 + 2 * G * 0.25 * np.cos(2.0 * s - 1.0)
        assert row.torque_used == pytest.approx(np.abs(torque).max() / (0.4 * ratio), rel=1e-5)
    assert joint.floor == pytest.approx(10 / np.sqrt(3) * 2.0 / 1.5**2 / (10 * np.pi) ** 2, rel=1e-5)


def test_the_second_power_and_the_first():
    """On planar2 with rotors: what links add to a motor's inertia falls by G^2 exactly, their torque by G; M11 is
    the closed form at each pose, its ends those of I + 2 m2 l1 c2 cos q2 over the range, 0.56 to 1.36 kg m^2."""
    files = ArmFiles.read(DEMO / "planar2" / "arm.yaml").with_drives([("all", "rotor_inertia", 1e-4)])
    found = gears(files, ["shoulder", "elbow"], (0.25, 1.0, 10.0, 100.0, 1000.0), leg_s=3.0)
    poses = sampled_poses(files.arm(), found.poses, found.seed)
    closed = 0.1 + 0.03 + 4 * 0.25**2 + 2 * (0.5**2 + 0.2**2 + 2 * 0.5 * 0.2 * np.cos(poses[:, 1]))
    shoulder, elbow = found.joints
    assert (shoulder.link_least, shoulder.link_largest) == pytest.approx(
        (closed.min(), closed.max()), rel=1e-12
    )
    assert (shoulder.link_least, shoulder.link_largest) == pytest.approx((0.56, 1.36), rel=1e-5)
    assert (elbow.link_least, elbow.link_largest) == pytest.approx((0.11, 0.11), rel=1e-12)
    first = shoulder.ratios[1]
    for row in shoulder.ratios:
        spread = row.inertia_largest - row.inertia_least
        assert spread == pytest.approx((closed.max() - closed.min()) / row.ratio**2, rel=1e-9)
        assert row.disturbance * row.ratio == pytest.approx(first.disturbance, rel=1e-12)
        middle = (closed.min() + closed.max()) / 2 + row.reflected
        ends = [math.sqrt(middle / (end + row.reflected)) for end in (closed.max(), closed.min())]
        assert [row.damping_least, row.damping_largest] == pytest.approx(ends, rel=1e-12)
    variations = [row.variation for row in shoulder.ratios]
    assert variations[0] == pytest.approx(1.36 / 0.56, rel=1e-4)
    assert variations[-1] == pytest.approx(1 + 0.8 / 100.56, rel=1e-4)
    # gravity level and stretched, 17.65 N m, and Coriolis torque besides
    assert first.disturbance > G * (4 * 0.25 + 2 * 0.5 + 2 * 0.2) * 0.999


def test_tracking_gets_better_in_the_order_of_the_ratios():
    """On tray6 the engine's error of independent-joint control falls with each ratio, for each joint and the tool,
    and at a high ratio the errors of the joints are nearer to what the reference's acceleration leaves."""
    files = ArmFiles.read(DEMO / "tray6" / "arm.yaml")
    joints = files.arm().joints
    found = gears(files, joints, (1.0, 10.0, 50.0, 100.0, 200.0, 1000.0))
    assert [run.outcome for run in found.tracked] == ["finished"] * 6
    assert all(one.tool_peak_mm > other.tool_peak_mm for one, other in pairwise(found.tracked))
    for joint in found.joints:
        errors = [row.error_peak for row in joint.ratios]
        assert all(one > other for one, other in pairwise(errors)), joint.joint
        assert abs(errors[-1] / joint.floor - 1) < 0.2 * abs(errors[0] / joint.floor - 1)
        shares = [row.disturbance_share for row in joint.ratios]
        assert all(one > other for one, other in pairwise(shares))


def test_without_a_rotor_a_gear_evens_nothing_out(one):
    """Damping, variation and error are the same at any ratio; inertia and disturbance at the motor still fall."""
    found = gears(one("coulomb: 0.1"), ["j"], (1.0, 100.0))
    low, high = found.joints[0].ratios
    assert high.error_peak == pytest.approx(low.error_peak, rel=1e-9)
    assert (high.variation, high.reflected) == (1.0, 0.0)
    assert high.inertia_least == pytest.approx(low.inertia_least / 1e4, rel=1e-12)
    assert (low.speed_limit, low.speed_used, low.torque_used, low.disturbance_share) == (None,) * 4
    assert low.possible


def test_a_sliding_joint_is_told_in_its_own_units(one):
    """2 kg up and down: m/G^2 + Jm [kg m^2] with G in rad/m, m g / G, and m for rad in the motion."""
    files = one("rotor_inertia: 1.0e-5, gear_ratio: 300", kind="prismatic", axis="0 0 1", lower=0, upper=0.8)
    found = gears(files, ["j"], (100.0, 1000.0), leg_s=1.0)
    (joint,) = found.joints
    assert joint.prismatic
    for row in joint.ratios:
        assert row.inertia_least == pytest.approx(2 / row.ratio**2 + 1e-5, rel=1e-12)
        assert row.disturbance == pytest.approx(2 * G / row.ratio, rel=1e-12)
    assert found.course.start == pytest.approx((0.2,))
    assert found.course.end == pytest.approx((0.6,))
    errors = [row.error_peak for row in joint.ratios]
    assert errors[0] > errors[1]
    # gravity over kp = (m + G^2 Jm) w^2, and the reference's own acceleration
    assert errors[0] == pytest.approx(2 * G / (2.1 * (10 * np.pi) ** 2) + joint.floor, rel=0.1)


def test_joints_without_position_limits(one):
    """A turn about 0: quarter points half a pi to either side."""
    files = one(kind="continuous")
    found = gears(files, ["j"], (1.0,), leg_s=1.0)
    assert (*found.course.start, *found.course.end) == pytest.approx((-np.pi / 2, np.pi / 2))


def test_the_time_of_the_leg_leaves_half_of_the_speed(one):
    """In whole tenths of a second, never beyond half of the speed limit; without one, at 1 rad/s."""
    limited, free = one("speed_limit: 3.0").arm(), one().arm()
    assert leg_seconds(limited) == pytest.approx(2.5)  # 15/8 2 rad / 1.5 rad/s
    assert leg_seconds(free) == pytest.approx(3.8)  # 3.75 s, rounded up
    speeds, torques = used(limited, (0, 0, -G), quarter_motion(limited, 2.5, 0.1))
    assert speeds == pytest.approx([0.5], rel=1e-6)
    assert torques == [None]


def test_the_torque_speed_line_counts_while_the_motor_drives(one):
    """Level (no gravity), so torque is J a + B v: of the line stall (1 - |v|/v0) it takes the largest share on the
    way up to speed; where the same torque brakes, the line does not count."""
    motion_s, span, stall, no_load, viscous = 1.0, 2.0, 2.0, 4.0, 0.1
    arm = one(
        f"motor_stall_torque: {stall}, motor_no_load_speed: {no_load}, viscous: {viscous}", axis="0 0 1"
    ).arm()
    _, (share,) = used(arm, (0, 0, -G), quarter_motion(arm, motion_s, 0.0))
    _, speed, acceleration = quintic(np.linspace(0, 1, 20001))
    torque = INERTIA * acceleration * span / motion_s**2 + viscous * speed * span / motion_s
    line = stall * (1 - speed * span / motion_s / no_load)
    assert share == pytest.approx((torque / line).max(), rel=1e-5)
    assert (-torque / line).max() < 0.9 * share  # what it would be if braking counted instead
    _, (stuck,) = used(
        arm, (0, 0, -G), quarter_motion(arm, 0.5, 0.0)
    )  # its peak, 7.5 rad/s, is beyond the line
    assert math.isinf(stuck)


def test_gear_loss_takes_torque(one):
    """With an efficiency of 0.8 a fifth of the carried torque comes on top while it moves."""
    whole, lossy = (one(f"torque_limit: 20, gear_efficiency: {share}").arm() for share in (1.0, 0.8))
    motion = quarter_motion(whole, 2.0, 0.0)
    (free,), (taken,) = (used(arm, (0, 0, -G), motion)[1] for arm in (whole, lossy))
    assert taken == pytest.approx(1.2 * free, rel=1e-3)


def test_joints_that_are_not_named_stay_as_declared():
    """With j2 alone, j1's drive is not touched: its run in the engine is that of its declared ratio."""
    files = ArmFiles.read(DEMO / "tray6" / "arm.yaml")
    found = gears(files, ["j2"], (10.0, 121.0))
    assert [joint.joint for joint in found.joints] == ["j2"]
    declared = gears(files.with_drives([("j2", "gear_ratio", 121.0)]), ["j6"], (51.0,))
    assert found.tracked[1].tool_peak_mm == declared.tracked[0].tool_peak_mm


def test_a_run_that_comes_to_nothing_has_a_reason():
    """A rotor of a million times the links: engine and drive disagree, and no error is told."""
    files = ArmFiles.read(DEMO / "tray6" / "arm.yaml")
    found = gears(files, ["j6"], (1e6,), leg_s=1.0)
    (run,), (row,) = found.tracked, found.joints[0].ratios
    assert run.outcome != "finished"
    assert run.reason
    assert run.tool_peak_mm is row.error_peak is None
    assert not row.possible


def test_the_document_is_whole_and_finite():
    """JSON without anything infinite; each row says whether it is possible."""
    files = ArmFiles.read(DEMO / "planar2" / "arm.yaml")
    document = gears(files, ["elbow"], leg_s=0.5).document()
    assert document == json.loads(json.dumps(document, allow_nan=False))
    (joint,) = document["joints"]
    assert [row["ratio"] for row in joint["ratios"]] == list(RATIOS)
    assert {row["possible"] for row in joint["ratios"]} == {False}
    assert joint["motor_torque_limit"] is None


def test_the_same_twice():
    """A function of its arguments: the same numbers each time."""
    files = ArmFiles.read(DEMO / "planar2" / "arm.yaml")
    one, other = (gears(files, ["shoulder"], (1.0, 5.0), leg_s=0.5) for _ in range(2))
    assert one == other

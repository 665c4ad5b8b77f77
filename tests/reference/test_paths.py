"""Motions of the tool point against pinocchio, an independent rigid-body dynamics library."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pinocchio as pin
import pybullet_data
import pytest

from rigbench.arm.files import load_arm
from rigbench.motion.path import circle, line

ROOT = Path(__file__).resolve().parents[2]
SEVEN = Path(pybullet_data.getDataPath()) / "kuka_iiwa" / "model.urdf"
CONTROL_HZ = 4000
CIRCLES = {
    "tray6": {"centre_m": [0.45, 0, 0.4], "radius_m": 0.12, "normal": [0, 0, 1], "turn_s": 2.0},
    "tray6, tilted": {
        "centre_m": [0.5, 0.1, 0.35], "radius_m": 0.1, "normal": [0.3, -0.4, 1], "turn_s": 1.5, "turns": 2.5,
        "start_deg": 70, "tool_rpy_deg": [5, -10, 20],
    },
    "seven": {"centre_m": [0.55, 0, 0.5], "radius_m": 0.12, "normal": [0.3, 0, 1], "turn_s": 2.0},
    "seven, free": {
        "centre_m": [0.5, 0.1, 0.5], "radius_m": 0.1, "normal": [0, 0, -1], "turn_s": 1.0, "orientation": "free",
    },
}  # fmt: skip


@pytest.fixture
def arms(tmp_path):
    """By name: (arm, pinocchio's model of the same URDF, name of the tool's frame, near pose)."""
    joints = "".join(f"  lbr_iiwa_joint_{i}: {{}}\n" for i in range(1, 8))
    (tmp_path / "arm.yaml").write_text(f"urdf: {SEVEN}\ntool: lbr_iiwa_link_7\ndrives:\n{joints}")
    tray6 = ROOT / "robots_demo" / "tray6"
    return {
        "tray6": (
            load_arm(tray6 / "arm.yaml"), pin.buildModelFromUrdf(str(tray6 / "tray6.urdf")), "tool_point",
            np.radians([0, -60, 90, 0, 60, 0]),
        ),
        "seven": (
            load_arm(tmp_path / "arm.yaml"), pin.buildModelFromUrdf(str(SEVEN)), "lbr_iiwa_link_7",
            np.radians([0, 30, 0, -70, 0, 80, 0]),
        ),
    }  # fmt: skip


def tool_states(model, frame, motion, t):
    """Position, rotation, velocity and acceleration of the tool, from pinocchio, at the reference."""
    data, at, world = model.createData(), model.getFrameId(frame), pin.LOCAL_WORLD_ALIGNED
    positions, rotations, velocities, accelerations = [], [], [], []
    for q, v, a in zip(*motion.reference(t), strict=True):
        pin.forwardKinematics(model, data, q, v, a)
        pin.updateFramePlacements(model, data)
        positions.append(data.oMf[at].translation.copy())
        rotations.append(data.oMf[at].rotation.copy())
        velocities.append(pin.getFrameVelocity(model, data, at, world).linear.copy())
        accelerations.append(pin.getFrameClassicalAcceleration(model, data, at, world).linear.copy())
    return (np.array(each) for each in (positions, rotations, velocities, accelerations))


def quintic(t, leg_s):
    """Share of the way, its rate and the rate of that, from the polynomial alone."""
    law, x = np.polynomial.Polynomial([0, 0, 0, 10, -15, 6]), np.clip(t / leg_s, 0, 1)
    return law(x), law.deriv()(x) / leg_s, law.deriv(2)(x) / leg_s**2


@pytest.mark.parametrize("name", CIRCLES)
def test_the_tool_is_on_the_declared_circle(arms, name):
    """At every tick of a 4 kHz control the tool is within 1e-8 m of where the declared circle has it, turned as
    it should be, at the circle's velocity and acceleration.

    Wanted is 1e-6 m of the circle. The joint path is good to 1e-9 m (its own bound, midway between solved
    points some 0.05 rad apart); differentiated twice that grows to 1e-5 m/s^2 beside 5 m/s^2.
    """
    declared = dict(CIRCLES[name])
    arm, model, frame, near = arms[name.split(",")[0]]
    motion = circle(arm, near.tolist(), **declared, rest_s=0.1)
    t = np.arange(int(motion.duration_s * CONTROL_HZ) + 1) / CONTROL_HZ
    positions, rotations, velocities, accelerations = tool_states(model, frame, motion, t)

    normal = np.array(declared["normal"]) / np.linalg.norm(declared["normal"])
    from_centre = positions - declared["centre_m"]
    # the circle as a set of points, without regard to time
    assert np.abs(from_centre @ normal).max() < 1e-8
    assert np.abs(np.linalg.norm(from_centre, axis=1) - declared["radius_m"]).max() < 1e-8

    turns = declared.get("turns", 1)
    s, ds, dds = quintic(t, turns * declared["turn_s"])
    whole = 2 * np.pi * turns
    first = np.array([1.0, 0, 0]) - normal[0] * normal
    first /= np.linalg.norm(first)
    second = np.cross(normal, first)
    angle = whole * s + np.radians(declared.get("start_deg", 0))
    out = np.cos(angle)[:, None] * first + np.sin(angle)[:, None] * second
    along = np.cos(angle)[:, None] * second - np.sin(angle)[:, None] * first
    r = declared["radius_m"]
    np.testing.assert_allclose(from_centre, r * out, atol=1e-8)
    np.testing.assert_allclose(velocities, r * whole * ds[:, None] * along, atol=1e-7)
    expected = r * whole * dds[:, None] * along - r * (whole * ds[:, None]) ** 2 * out
    np.testing.assert_allclose(accelerations, expected, atol=2e-5)

    if declared.get("orientation") != "free":
        data = model.createData()
        pin.framesForwardKinematics(model, data, near)
        held = data.oMf[model.getFrameId(frame)].rotation
        if "tool_rpy_deg" in declared:
            held = pin.rpy.rpyToMatrix(*np.radians(declared["tool_rpy_deg"]))
        assert np.abs(rotations - held).max() < 1e-8


def test_the_tool_is_on_the_declared_line(arms):
    """A seven-axis arm leads the tool straight, at the line's own velocity, without turning it."""
    arm, model, frame, near = arms["seven"]
    motion = line(arm, near.tolist(), to_m=[0.45, 0.35, 0.4], leg_s=1.2, rest_s=0.1)
    t = np.arange(int(motion.duration_s * CONTROL_HZ) + 1) / CONTROL_HZ
    positions, rotations, velocities, _ = tool_states(model, frame, motion, t)
    s, ds, _ = quintic(t, 1.2)
    start = positions[0]
    way = np.array([0.45, 0.35, 0.4]) - start
    np.testing.assert_allclose(positions, start + s[:, None] * way, atol=1e-8)
    np.testing.assert_allclose(velocities, ds[:, None] * way, atol=1e-7)
    assert np.abs(rotations - rotations[0]).max() < 1e-8

"""Dynamics kernels against pinocchio, an independent rigid-body dynamics library, and closed forms."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pinocchio as pin
import pybullet_data
import pytest

from rigbench.arm import dynamics
from rigbench.arm.files import load_arm
from rigbench.arm.plant_urdf import plant_urdf
from rigbench.rig.engine import Engine

ROOT = Path(__file__).resolve().parents[2]
DATA = Path(pybullet_data.getDataPath())
GRAVITY = (0.0, 0.0, -9.81)

PRISMATIC = """<robot name="gantry"><link name="floor"/>
<joint name="x" type="prismatic"><parent link="floor"/><child link="bridge"/><origin xyz="0 0 1" rpy="0.1 0.2 -0.3"/>
 <axis xyz="1 0.2 0"/><limit lower="-2" upper="2" effort="0" velocity="0"/></joint>
<link name="bridge"><inertial><origin xyz="0.1 0.2 -0.1" rpy="0.3 0 0.2"/><mass value="12"/>
 <inertia ixx="0.5" ixy="0.02" ixz="-0.01" iyy="0.6" iyz="0.03" izz="0.7"/></inertial></link>
<joint name="turn" type="revolute"><parent link="bridge"/><child link="post"/><origin xyz="0 0.3 0" rpy="-0.5 0 1"/>
 <axis xyz="0 -1 1"/><limit lower="-3" upper="3" effort="0" velocity="0"/></joint>
<link name="post"><inertial><origin xyz="0 0 -0.2"/><mass value="4"/>
 <inertia ixx="0.1" ixy="0.01" ixz="0" iyy="0.12" iyz="-0.005" izz="0.05"/></inertial></link>
<joint name="z" type="prismatic"><parent link="post"/><child link="gripper"/><origin xyz="0 0 -0.3" rpy="0 0.4 0"/>
 <axis xyz="0 0 -1"/><limit lower="-1" upper="1" effort="0" velocity="0"/></joint>
<link name="gripper"><inertial><origin xyz="0.02 0 -0.1"/><mass value="1.5"/>
 <inertia ixx="0.01" ixy="0" ixz="0.001" iyy="0.012" iyz="0" izz="0.004"/></inertial></link>
</robot>"""


def write_arm(folder: Path, urdf: Path, tool: str, joints: list[str]) -> Path:
    drives = "".join(f"  {joint}: {{}}\n" for joint in joints)
    path = folder / "arm.yaml"
    path.write_text(f"urdf: {urdf}\ntool: {tool}\ndrives:\n{drives}")
    return path


@pytest.fixture(params=["planar2", "tray6", "seven", "gantry"])
def both(request, tmp_path):
    """(our arm, pinocchio's model of the same file, in the arm's joint order)."""
    if request.param in ("planar2", "tray6"):
        path = ROOT / "robots_demo" / request.param / "arm.yaml"
        urdf = ROOT / "robots_demo" / request.param / f"{request.param}.urdf"
    elif request.param == "seven":
        urdf = DATA / "kuka_iiwa" / "model.urdf"
        path = write_arm(tmp_path, urdf, "lbr_iiwa_link_7", [f"lbr_iiwa_joint_{i}" for i in range(1, 8)])
    else:
        urdf = tmp_path / "gantry.urdf"
        urdf.write_text(PRISMATIC)
        path = write_arm(tmp_path, urdf, "gripper", ["x", "turn", "z"])
    arm, model = load_arm(path), pin.buildModelFromUrdf(str(urdf))
    assert list(model.names[1:]) == list(arm.joints)
    assert model.nq == arm.n  # no continuous joints: pinocchio would give them two coordinates
    model.gravity.linear = np.array(GRAVITY)
    return arm, model


def states(arm, count):
    rng = np.random.default_rng(7)
    for _ in range(count):
        yield rng.uniform(-3, 3, arm.n), rng.normal(size=arm.n) * 2, rng.normal(size=arm.n) * 10


def close(ours, theirs, relative):
    assert np.abs(ours - theirs).max() <= relative * np.abs(theirs).max()


def symmetric(upper):
    return np.triu(upper) + np.triu(upper, 1).T


def test_thousand_states_equal_pinocchio(both):
    """Inverse dynamics, mass matrix, bias and gravity torque agree to 1e-10 of their largest entry."""
    arm, model = both
    data, chain = model.createData(), arm.chain(GRAVITY)
    for q, v, a in states(arm, 1000):
        close(dynamics.inverse_dynamics(chain, q, v, a), pin.rnea(model, data, q, v, a), 1e-10)
        close(dynamics.mass_matrix(chain, q), symmetric(pin.crba(model, data, q)), 1e-10)
        close(dynamics.bias_torque(chain, q, v), pin.nle(model, data, q, v), 1e-10)
        gravity = pin.computeGeneralizedGravity(model, data, q)
        assert np.abs(dynamics.gravity_torque(chain, q) - gravity).max() <= 1e-10 * (
            1 + np.abs(gravity).max()
        )


def test_kinematics_equal_pinocchio(both):
    """Poses of every link agree to 1e-12 m, and the tool's Jacobian is the derivative of its pose."""
    arm, model = both
    data, chain = model.createData(), arm.chain(GRAVITY)
    for q, v, _ in states(arm, 100):
        pin.forwardKinematics(model, data, q)
        poses = dynamics.forward_kinematics(chain, q)
        for i in range(arm.n):
            np.testing.assert_allclose(poses[i, 9:], data.oMi[i + 1].translation, atol=1e-12)
            np.testing.assert_allclose(poses[i, :9].reshape(3, 3), data.oMi[i + 1].rotation, atol=1e-12)
        step = 1e-6
        (before, after), (turned_from, turned_to) = dynamics.tool_path(
            chain, np.array([q - step * v, q + step * v])
        )
        twist = dynamics.tool_jacobian(chain, q) @ v
        np.testing.assert_allclose(
            twist[:3], (after - before) / (2 * step), atol=1e-7 * (1 + np.abs(v).max()) ** 2
        )
        np.testing.assert_allclose(
            twist[3:],
            pin.log3(turned_to @ turned_from.T) / (2 * step),
            atol=1e-7 * (1 + np.abs(v).max()) ** 2,
        )


def test_engine_accelerates_as_the_model(both):
    """One small step of the engine from rest and in motion gives pinocchio's acceleration to 1e-8.

    The engine's step is v+ = v + dt M^-1 (tau - h); the acceleration is read off with a dt that makes
    the difference large (rounding: 1e-16 / 1e-16).
    """
    arm, model = both
    data, engine = model.createData(), Engine()
    assert "<robot" in plant_urdf(arm)
    dt = 1e-3
    try:
        for q, v, a in states(arm, 40):
            engine.load(arm, q, v, GRAVITY, dt)
            torque = pin.rnea(model, data, q, v, a)
            engine.apply(torque.tolist())
            engine.step()
            reached = np.array([s[1] for s in engine.read()])
            close((reached - v) / dt, a, 1e-8)
    finally:
        engine.close()


def test_two_point_masses_on_bars(one_joint):
    """Closed form of the planar arm with point masses (Craig, "Introduction to Robotics", ch. 6;
    from memory, checked): l1 = l2 = 0.5 m, m1 = 4.6, m2 = 2.3 kg gives (42.183896, 6.933401) N m."""
    from dataclasses import replace

    arm = one_joint()
    point = lambda m: [m, 0.5 * m, 0, 0, 0, 0, 0.25 * m, 0, 0, 0.25 * m]  # noqa: E731
    two = replace(
        arm,
        joints=("a", "b"), links=("a", "b"), kinds=np.zeros(2), rotation=np.tile(np.eye(3), (2, 1, 1)),
        position=np.array([[0, 0, 0], [0.5, 0, 0]]), axis=np.tile([0.0, 0.0, 1.0], (2, 1)),
        parameters=np.array([point(4.6), point(2.3)]),
    )  # fmt: skip
    tau = dynamics.inverse_dynamics(
        two.chain((0.0, -9.81, 0.0)), np.array([0.3, 0.7]), np.array([1.2, -0.7]), np.array([2.0, -3.0])
    )
    np.testing.assert_allclose(tau, [42.183896, 6.933401], atol=1e-6)


def test_published_two_link_vector(published_two_link):
    """Kelly, Santibanez, Loria 2005, ch. 5: M and h at one state (numbers derived from its closed form)."""
    chain = published_two_link().chain(GRAVITY)
    q, v, a = np.array([0.5, -0.8]), np.array([1.2, -0.7]), np.array([2.0, -3.0])
    mass = [[0.352267859, 0.021159209], [0.021159209, 0.012672838]]
    np.testing.assert_allclose(dynamics.mass_matrix(chain, q), mass, atol=1e-9)
    np.testing.assert_allclose(dynamics.gravity_torque(chain, q), [5.381323, -0.135817], atol=1e-6)
    np.testing.assert_allclose(
        dynamics.bias_torque(chain, q, v) - dynamics.gravity_torque(chain, q),
        [-0.010398, -0.012583],
        atol=1e-6,
    )
    np.testing.assert_allclose(dynamics.inverse_dynamics(chain, q, v, a), [6.011983, -0.144100], atol=1e-6)

"""A plant's URDF: the engine that loads it moves as the arm's arrays say."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path

import numpy as np
import pinocchio
import pybullet
import pytest

from rigbench.arm.arm import PRISMATIC, Arm, Floats
from rigbench.arm.chain import chain_of
from rigbench.arm.files import load_arm
from rigbench.arm.physical import from_inertia
from rigbench.arm.plant_urdf import plant_urdf
from rigbench.arm.urdf import read_urdf, turn

ROOT = Path(__file__).resolve().parents[2]
GRAVITY = (1.0, -2.0, -9.5)
DT = 1e-3


@pytest.fixture
def client() -> Iterator[int]:
    number = pybullet.connect(pybullet.DIRECT)
    yield number
    pybullet.disconnect(number)


def random_arm(seed: int) -> Arm:
    """The gantry's drives and names with a chain of random geometry and random full tensors."""
    rng = np.random.default_rng(seed)
    arm = load_arm(Path(__file__).parent / "gantry" / "arm.yaml")
    n = arm.n

    def rotation() -> Floats:
        axis = rng.normal(size=3)
        return turn(axis / np.linalg.norm(axis), rng.uniform(-3, 3))

    axes = rng.normal(size=(n, 3))
    moments = rng.uniform(0.01, 0.3, (n, 3))  # second moments: any positive ones belong to a body
    bodies = [
        from_inertia(rng.uniform(0.5, 8), rng.uniform(-0.2, 0.2, 3), r @ np.diag(m.sum() - m) @ r.T)
        for m, r in zip(moments, (rotation() for _ in range(n)), strict=True)
    ]
    return Arm(
        name='rods & "wires" <1>',
        joints=arm.joints,
        links=arm.links,
        kinds=arm.kinds,
        rotation=np.array([rotation() for _ in range(n)]),
        position=rng.uniform(-0.5, 0.5, (n, 3)),
        axis=axes / np.linalg.norm(axes, axis=1, keepdims=True),
        parameters=np.array(bodies),
        tool_rotation=np.eye(3),
        tool_position=np.zeros(3),
        lower=arm.lower,
        upper=arm.upper,
        drives=arm.drives,
    )


def upright_arm() -> Arm:
    """An arm whose joint frames pitch by exactly and almost 90 degrees, where roll and yaw are one."""
    arm = random_arm(5)
    (x, y, z), rotation = np.eye(3), arm.rotation.copy()
    for i, (off, yaw) in enumerate(((0.0, 0.7), (1e-9, -2.0), (-1e-7, 1.0), (1e-4, 3.0))):
        rotation[i] = turn(z, yaw) @ turn(y, (-1) ** i * np.pi / 2 + off) @ turn(x, 0.4)
    return replace(arm, rotation=rotation)


ARMS = {
    "tray6": lambda: load_arm(ROOT / "robots_demo/tray6/arm.yaml"),
    "planar2": lambda: load_arm(ROOT / "robots_demo/planar2/arm.yaml"),
    "gantry": lambda: load_arm(Path(__file__).parent / "gantry" / "arm.yaml"),
    "random": lambda: random_arm(1),
    "upright": upright_arm,
}


def library_model(arm: Arm) -> pinocchio.Model:
    """The arm's arrays as a model of an independent library, without any file in between."""
    model = pinocchio.Model()
    for i in range(arm.n):
        kind = (
            pinocchio.JointModelPrismaticUnaligned
            if arm.kinds[i] == PRISMATIC
            else pinocchio.JointModelRevoluteUnaligned
        )
        pose = pinocchio.SE3(arm.rotation[i], arm.position[i])
        joint = model.addJoint(i, kind(arm.axis[i]), pose, arm.joints[i])
        body = pinocchio.Inertia.FromDynamicParameters(arm.parameters[i])
        model.appendBodyToJoint(joint, body, pinocchio.SE3.Identity())
    model.gravity.linear = np.array(GRAVITY)
    return model


def engine_acceleration(client: int, file: Path, q: Floats, v: Floats, torque: Floats) -> Floats:
    """Acceleration that the engine itself takes in one step, all that it adds by default being off."""
    pybullet.resetSimulation(physicsClientId=client)
    pybullet.setGravity(*GRAVITY, physicsClientId=client)
    pybullet.setTimeStep(DT, physicsClientId=client)
    flags = pybullet.URDF_USE_INERTIA_FROM_FILE
    body = pybullet.loadURDF(str(file), useFixedBase=True, flags=flags, physicsClientId=client)
    assert pybullet.getNumJoints(body, physicsClientId=client) == len(q)
    for i in range(-1, len(q)):
        pybullet.changeDynamics(
            body, i, linearDamping=0, angularDamping=0, jointDamping=0, maxJointVelocity=1e9,
            physicsClientId=client,
        )  # fmt: skip
    for i in range(len(q)):
        pybullet.resetJointState(body, i, q[i], v[i], physicsClientId=client)
        pybullet.setJointMotorControl2(body, i, pybullet.VELOCITY_CONTROL, force=0, physicsClientId=client)
        pybullet.setJointMotorControl2(
            body, i, pybullet.TORQUE_CONTROL, force=torque[i], physicsClientId=client
        )
    pybullet.stepSimulation(physicsClientId=client)
    after = np.array([pybullet.getJointState(body, i, client)[1] for i in range(len(q))])
    return (after - v) / DT


@pytest.mark.parametrize("name", ARMS)
def test_engine_moves_as_the_arrays_say(client: int, tmp_path: Path, name: str) -> None:
    """The engine's accelerations equal an independent library's, to 1e-8 of the largest.

    That library gets the arrays, the engine the file: so the file says what the arrays say, names that
    XML can't hold as they are included. 1e-8: the engine's own solver is good to 2e-10 with full tensors.
    """
    arm = ARMS[name]()
    model = library_model(arm)
    data = model.createData()
    file = tmp_path / "plant.urdf"
    file.write_text(plant_urdf(arm), "utf-8")
    rng = np.random.default_rng(3)
    for _ in range(4):
        q, v = rng.uniform(-1, 1, (2, arm.n))
        torque = rng.uniform(-20, 20, arm.n)
        expected = pinocchio.aba(model, data, q, v, torque)
        found = engine_acceleration(client, file, q, v, torque)
        np.testing.assert_allclose(found, expected, rtol=0, atol=1e-8 * np.abs(expected).max())


@pytest.mark.parametrize("name", ARMS)
def test_file_reads_back_as_the_arm(name: str) -> None:
    """Our own reader gets every number back, to the rounding of one change of frame (1e-14)."""
    arm = ARMS[name]()
    robot, faults = read_urdf("plant.urdf", plant_urdf(arm))
    assert faults == []
    assert robot is not None
    chain, faults = chain_of(robot, f"link {arm.n}", {})
    assert faults == []
    assert chain is not None
    assert tuple(joint.name for joint in chain.joints) == arm.joints
    assert robot.name == arm.name
    np.testing.assert_array_equal(chain.kinds, arm.kinds)
    np.testing.assert_array_equal(chain.position, arm.position)
    for i, joint in enumerate(chain.joints):
        np.testing.assert_allclose(joint.axis, arm.axis[i], rtol=0, atol=1e-15)
    np.testing.assert_allclose(chain.rotation, arm.rotation, rtol=0, atol=1e-14)
    scale = np.abs(arm.parameters).max()
    np.testing.assert_allclose(chain.parameters, arm.parameters, rtol=0, atol=1e-14 * scale)

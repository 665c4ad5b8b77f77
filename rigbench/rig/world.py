"""A world that somebody else built, as the rig's engine: the arm in it is driven, all else is left alone."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import numpy as np
from scipy.spatial.transform import Rotation

from rigbench.arm.arm import PRISMATIC, Arm, Floats
from rigbench.arm.dynamics import forward_kinematics, mass_matrix
from rigbench.errors import Fault, InputFaults, nearest
from rigbench.rig.engine import Apply, Read, Step, bound, engine_errors, pybullet, release
from rigbench.rig.weigh import body_mass_matrix, link_pose, weights

__all__ = ["World", "tool_pose"]

SAME = 1e-6
"""Share of the largest entry by which the mass matrices of body and arm may differ: the rounding of a
URDF's digits stays far below, a wrong or forgotten link far above."""


class World:
    """The joints of ``arm`` in a body of the world of ``client`` (physicsClientId), found by name.

    Raises InputFaults, addressed to the arguments, with what keeps the rig from driving them: a name that
    isn't there, another kind of joint, an axis not of length 1, a base that is free, a time step other than
    1/physics_hz, substeps, real time; or else other masses than the arm's. EngineError if the engine
    refuses.
    """

    def __init__(self, client: int, body: int, arm: Arm, physics_hz: float) -> None:
        self._client, self._body, self._arm = client, body, arm
        with engine_errors("looking at the world"):
            faults = list(self._world_faults(physics_hz))
            self._infos = self._infos_of() if not faults else []
            faults += list(self._joint_faults()) if not faults else []
            if faults:
                raise InputFaults(faults)
            self.joints = [self._index(name) for name in arm.joints]
            if (fault := self._mass_fault()) is not None:
                raise InputFaults([fault])
        self.read: Read
        self.apply: Apply
        self.step: Step
        self.read, self.apply, self.step = bound(client, body, self.joints)

    def release(self) -> None:
        """Switch off motors and damping of the arm's joints, see :func:`rigbench.rig.engine.release`."""
        with engine_errors("switching off the arm's motors"):
            release(self._client, self._body, self.joints)

    def state(self) -> tuple[Floats, Floats]:
        """Return positions and velocities (n,) of the arm's joints, in the engine's own reading."""
        with engine_errors("reading the arm's joints"):
            states = self.read()
        return np.array([s[0] for s in states]), np.array([s[1] for s in states])

    def gravity(self) -> tuple[float, float, float]:
        """Return gravity [m/s^2] in the frame of the arm's base, however it stands in the world."""
        q, _ = self.state()
        with engine_errors("looking at the world"):
            parameters = pybullet.getPhysicsEngineParameters(self._client)
            _, turned = link_pose(self._client, self._body, self.joints[0])
        first = forward_kinematics(self._arm.chain((0.0, 0.0, 0.0)), q)[0, :9].reshape(3, 3)
        world = np.array([parameters[f"gravityAcceleration{axis}"] for axis in "XYZ"])
        x, y, z = first @ turned.T @ world
        return float(x), float(y), float(z)

    def _world_faults(self, physics_hz: float) -> Iterator[Fault]:
        client, body = self._client, self._body
        if not pybullet.isConnected(client):
            yield _fault("client", f"no engine is connected as {client}", "a physicsClientId")
            return
        bodies = [pybullet.getBodyUniqueId(i, client) for i in range(pybullet.getNumBodies(client))]
        if body not in bodies:
            yield _fault("body", f"no body of this world has the number {body}", f"one of {bodies}")
        elif pybullet.getDynamicsInfo(body, -1, client)[0] != 0:
            yield _fault("body", "its base is free to move", "a body loaded with useFixedBase=True")
        parameters = pybullet.getPhysicsEngineParameters(client)
        dt = parameters["fixedTimeStep"]
        if abs(dt * physics_hz - 1.0) > 1e-9:
            problem = f"physics_hz {physics_hz:g} is not the world's: its time step is {dt:g} s"
            yield _fault("rates", problem, f"physics_hz {1.0 / dt:g}")
        if parameters["numSubSteps"]:
            problem = f"the world takes {parameters['numSubSteps']} substeps without the drive in between"
            yield _fault("client", problem, "numSubSteps 0 and a shorter time step")
        if parameters["useRealTimeSimulation"]:
            yield _fault("client", "the world runs in real time by itself", "setRealTimeSimulation(0)")

    def _infos_of(self) -> list[Any]:
        count = pybullet.getNumJoints(self._body, self._client)
        return [pybullet.getJointInfo(self._body, i, self._client) for i in range(count)]

    def _index(self, name: str) -> int:
        return next((i for i, info in enumerate(self._infos) if info[1].decode() == name), -1)

    def _joint_faults(self) -> Iterator[Fault]:
        """Yield what is wrong with the body's joints."""
        kinds = {pybullet.JOINT_REVOLUTE: "revolute", pybullet.JOINT_PRISMATIC: "prismatic"}
        moving = [info[1].decode() for info in self._infos if info[2] in kinds]
        for name, kind in zip(self._arm.joints, self._arm.kinds, strict=True):
            index, wanted = self._index(name), "prismatic" if kind == PRISMATIC else "revolute"
            if index < 0:
                problem = f"it has no joint called '{name}'"
                yield _fault("body", problem, f"one of {', '.join(moving)}", nearest(name, moving))
            elif kinds.get(self._infos[index][2]) != wanted:
                found = kinds.get(self._infos[index][2], "fixed or of another kind")
                yield _fault("body", f"its joint '{name}' is {found}", wanted)
            elif abs(length := float(np.linalg.norm(self._infos[index][13])) - 1.0) > SAME:
                problem = f"the axis of its joint '{name}' is {length + 1.0:.6g} long: the engine errs then"
                yield _fault("body", problem, "an <axis> of length 1 in the URDF")

    def _mass_fault(self) -> Fault | None:
        """Compare the mass matrices of body and arm where the body stands, and say how they differ."""
        states = pybullet.getJointStates(self._body, self.joints, self._client)
        q = np.array([state[0] for state in states])
        ours = mass_matrix(self._arm.chain((0.0, 0.0, 0.0)), q)
        theirs = body_mass_matrix(self._client, self._body, self.joints, self._arm, q)
        apart, largest = float(np.abs(theirs - ours).max()), float(np.abs(ours).max())
        if apart <= SAME * largest:
            return None
        problem = f"where it stands, its mass matrix is off the arm's by up to {apart:.3g} (of {largest:.3g})"
        unsaid = [str(w.link) for w in weights(self._client, self._body, self.joints) if w.unsaid]
        if unsaid:
            problem += f"; the engine gave 1 kg to links without <inertial>: {', '.join(unsaid)}"
            return _fault("body", problem, "changeDynamics(mass=0, localInertiaDiagonal=(0, 0, 0)) on these")
        expected = (
            "the arm's URDF, loaded with URDF_USE_INERTIA_FROM_FILE, locked joints as the arm file has them"
        )
        return _fault("body", problem, expected)


def _fault(argument: str, problem: str, expected: str = "", near: str | None = None) -> Fault:
    return Fault("Rig.attach", None, argument, problem, "" if near else expected, near)


def tool_pose(
    client: int, body: int, arm: Arm
) -> tuple[tuple[float, float, float], tuple[float, float, float, float]]:
    """Return where the tool point of ``arm`` is in the world: position [m] and quaternion (x, y, z, w).

    For a scene or a world of your own that puts something on the tool; in the engine's own form.
    """
    count = pybullet.getNumJoints(body, physicsClientId=client)
    names = [pybullet.getJointInfo(body, i, physicsClientId=client)[1].decode() for i in range(count)]
    position, rotation = link_pose(client, body, names.index(arm.joints[-1]))
    x, y, z = position + rotation @ arm.tool_position
    a, b, c, d = Rotation.from_matrix(rotation @ arm.tool_rotation).as_quat()
    return (float(x), float(y), float(z)), (float(a), float(b), float(c), float(d))

"""The physics engine behind the rig: load a plant, read its state, apply torque, step."""

from __future__ import annotations

import contextlib
import os
import tempfile
from collections.abc import Callable, Iterator, Sequence
from typing import Any

from rigbench.arm.arm import Arm, Floats
from rigbench.arm.plant_urdf import plant_urdf
from rigbench.errors import EngineError

__all__ = ["Engine"]


@contextlib.contextmanager
def _quiet(*streams: int) -> Iterator[None]:
    """Keep what the engine's C code prints off these file descriptors (1: where a caller's JSON goes)."""
    saved, sink = [os.dup(stream) for stream in streams], os.open(os.devnull, os.O_WRONLY)
    try:
        for stream in streams:
            os.dup2(sink, stream)
        yield
    finally:
        for stream, copy in zip(streams, saved, strict=True):
            os.dup2(copy, stream)
            os.close(copy)
        os.close(sink)


with _quiet(1, 2):  # its import prints a banner
    import pybullet


class Engine:
    """One pybullet client in DIRECT mode, with one arm in its world.

    Connecting takes about 25 ms and 30 MB, so a worker keeps its engine and loads plant after plant.
    ``read`` returns the joint states as the engine gives them (position and velocity first),
    ``apply`` takes a list of n torques [N m], ``step`` advances by one physics step; all three are
    bound once a plant is loaded.
    """

    def __init__(self) -> None:
        with _quiet(1):
            self._client = int(pybullet.connect(pybullet.DIRECT))
        if self._client < 0:
            raise EngineError("connecting", "no client to be had")
        self.read: Callable[[], Sequence[Sequence[Any]]]
        self.apply: Callable[[list[float]], None]
        self.step: Callable[[], None]

    def close(self) -> None:
        """Disconnect."""
        with contextlib.suppress(pybullet.error):
            pybullet.disconnect(self._client)

    def load(self, arm: Arm, q: Floats, v: Floats, gravity: tuple[float, float, float], dt: float) -> None:
        """Load ``arm`` as the plant, at position ``q`` and velocity ``v`` of the engine's own reading.

        Everything that the engine adds to rigid-body dynamics by default is switched off: joint
        motors, damping of joints and bodies, the clamp on joint speed. Raises EngineError.
        """
        with tempfile.NamedTemporaryFile(
            "w", prefix="rigbench-plant-", suffix=".urdf", encoding="utf-8"
        ) as file:
            file.write(plant_urdf(arm))
            file.flush()
            try:
                with _quiet(1):
                    self._load(file.name, arm.n, q, v, gravity, dt)
            except pybullet.error as problem:
                raise EngineError("loading the plant", str(problem)) from None

    def _load(
        self, path: str, n: int, q: Floats, v: Floats, gravity: tuple[float, float, float], dt: float
    ) -> None:
        client = self._client
        pybullet.resetSimulation(physicsClientId=client)
        # a reset zeroes gravity but keeps some of the rest: set everything every time
        pybullet.setGravity(*gravity, physicsClientId=client)
        pybullet.setPhysicsEngineParameter(
            fixedTimeStep=dt, numSubSteps=0, enableFileCaching=0, deterministicOverlappingPairs=1,
            physicsClientId=client,
        )  # fmt: skip
        # without this flag a link without collision shapes silently gets wrong inertias
        flags = pybullet.URDF_USE_INERTIA_FROM_FILE
        body = pybullet.loadURDF(path, useFixedBase=True, flags=flags, physicsClientId=client)
        if pybullet.getNumJoints(body, physicsClientId=client) != n:
            raise EngineError("loading the plant", "another number of joints than the arm has")
        joints = list(range(n))
        for link in range(-1, n):
            pybullet.changeDynamics(
                body, link, linearDamping=0, angularDamping=0, jointDamping=0, maxJointVelocity=1e9,
                physicsClientId=client,
            )  # fmt: skip
        pybullet.setJointMotorControlArray(
            body, joints, pybullet.VELOCITY_CONTROL, forces=[0.0] * n, physicsClientId=client
        )
        # a pending torque and a warm start outlive a reset of the state: let one step take them away
        pybullet.stepSimulation(physicsClientId=client)
        for joint in joints:
            pybullet.resetJointState(body, joint, float(q[joint]), float(v[joint]), physicsClientId=client)
        states, control, step = (
            pybullet.getJointStates, pybullet.setJointMotorControlArray, pybullet.stepSimulation,
        )  # fmt: skip
        mode = pybullet.TORQUE_CONTROL
        self.read = lambda: states(body, joints, client)
        self.apply = lambda torques: control(body, joints, mode, forces=torques, physicsClientId=client)
        self.step = lambda: step(client)

"""The physics engine behind the rig: load a plant, read its state, apply torque, step."""

from __future__ import annotations

import contextlib
import os
import tempfile
from collections.abc import Callable, Iterator, Sequence
from typing import Any

from rigbench.arm.arm import Arm, Floats
from rigbench.arm.collision import Shape
from rigbench.arm.plant_urdf import plant_urdf
from rigbench.errors import EngineError, SceneError
from rigbench.rig.scene import SceneChoice

__all__ = ["Engine", "bound", "engine_errors", "pybullet", "release"]


CONTACT_BREAKING_M = 0.02
"""Distance at which a contact point is given up, as the engine has it when it is new."""


@contextlib.contextmanager
def _quiet(*streams: int) -> Iterator[None]:
    """Keep what the engine's C code prints off these file descriptors (1: where a caller's JSON goes)."""
    saved = {}
    for stream in streams:
        with contextlib.suppress(OSError):  # it is closed
            saved[stream] = os.dup(stream)
    sink = os.open(os.devnull, os.O_WRONLY)
    try:
        for stream in saved:
            os.dup2(sink, stream)
        yield
    finally:
        for stream, copy in saved.items():
            os.dup2(copy, stream)
            os.close(copy)
        os.close(sink)


with _quiet(1, 2):  # its import prints a banner, so others take it from here
    import pybullet


@contextlib.contextmanager
def engine_errors(doing: str) -> Iterator[None]:
    """Turn the engine's own exception into an EngineError."""
    try:
        yield
    except pybullet.error as problem:
        raise EngineError(doing, str(problem)) from None


def release(client: int, body: int, joints: Sequence[int]) -> None:
    """Switch off what the engine adds to rigid-body dynamics by default, for these joints of a body.

    That is joint motors, damping of joints and of the body, and the clamp on joint speed.
    """
    for link in (-1, *joints):
        pybullet.changeDynamics(
            body, link, linearDamping=0, angularDamping=0, jointDamping=0, maxJointVelocity=1e9,
            physicsClientId=client,
        )  # fmt: skip
    pybullet.setJointMotorControlArray(
        body, joints, pybullet.VELOCITY_CONTROL, forces=[0.0] * len(joints), physicsClientId=client
    )


Read = Callable[[], Sequence[Sequence[Any]]]
Apply = Callable[[list[float]], None]
Step = Callable[[], None]


def bound(client: int, body: int, joints: Sequence[int]) -> tuple[Read, Apply, Step]:
    """Return read, apply and step of these joints: see :class:`Engine`."""
    states, control, step = (
        pybullet.getJointStates, pybullet.setJointMotorControlArray, pybullet.stepSimulation,
    )  # fmt: skip
    mode = pybullet.TORQUE_CONTROL
    return (
        lambda: states(body, joints, client),
        lambda torques: control(body, joints, mode, forces=torques, physicsClientId=client),
        lambda: step(client),
    )


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
        self.read: Read
        self.apply: Apply
        self.step: Step

    def close(self) -> None:
        """Disconnect."""
        with contextlib.suppress(pybullet.error):
            pybullet.disconnect(self._client)

    def load(
        self,
        arm: Arm,
        q: Floats,
        v: Floats,
        gravity: tuple[float, float, float],
        dt: float,
        shapes: tuple[Shape, ...] = (),
        scene: SceneChoice | None = None,
    ) -> None:
        """Load ``arm`` as the plant, at position ``q`` and velocity ``v`` of the engine's own reading.

        Everything that the engine adds to rigid-body dynamics by default is switched off, see
        :func:`release`. With ``shapes`` the arm can be touched; ``scene`` adds what may touch it. What a
        scene sets in the engine may outlive it, so give each its own engine. Raises EngineError;
        SceneError if the scene raises or changes what is not its own.
        """
        with tempfile.NamedTemporaryFile(
            "w", prefix="rigbench-plant-", suffix=".urdf", encoding="utf-8"
        ) as file:
            file.write(plant_urdf(arm, shapes))
            file.flush()
            with engine_errors("loading the plant"), _quiet(1):
                body = self._load(file.name, arm.n, q, v, gravity, dt)
        if scene is not None:
            with _quiet(1):
                self._build(scene, body, arm)

    def _load(
        self, path: str, n: int, q: Floats, v: Floats, gravity: tuple[float, float, float], dt: float
    ) -> int:
        client = self._client
        pybullet.resetSimulation(physicsClientId=client)
        # a reset zeroes gravity but keeps some of the rest: set everything every time
        pybullet.setGravity(*gravity, physicsClientId=client)
        pybullet.setPhysicsEngineParameter(
            fixedTimeStep=dt, numSubSteps=0, enableFileCaching=0, deterministicOverlappingPairs=1,
            physicsClientId=client,
        )  # fmt: skip
        # without the first a link without collision shapes silently gets wrong inertias; without the second
        # a cylinder is a prism
        flags = pybullet.URDF_USE_INERTIA_FROM_FILE | pybullet.URDF_USE_IMPLICIT_CYLINDER
        body = int(pybullet.loadURDF(path, useFixedBase=True, flags=flags, physicsClientId=client))
        if pybullet.getNumJoints(body, physicsClientId=client) != n:
            raise EngineError("loading the plant", "another number of joints than the arm has")
        joints = list(range(n))
        release(client, body, joints)
        # a pending torque and a warm start outlive a reset of the state: let one step take them away
        pybullet.stepSimulation(physicsClientId=client)
        for joint in joints:
            pybullet.resetJointState(body, joint, float(q[joint]), float(v[joint]), physicsClientId=client)
        self.read, self.apply, self.step = bound(client, body, joints)
        return body

    def _build(self, scene: SceneChoice, body: int, arm: Arm) -> None:
        """Let the scene add to the world; see that it left alone what is not its own."""
        # this one is the whole process's, so what another scene made of it outlives even that engine
        pybullet.setPhysicsEngineParameter(
            contactBreakingThreshold=CONTACT_BREAKING_M, physicsClientId=self._client
        )
        before = self._held(body)
        scene.build(self._client, body, arm)
        try:
            after = self._held(body)
        except pybullet.error:
            raise SceneError(scene.plugin, "it took the arm out of the world", "") from None
        for name, value in before.items():
            if after[name] != value:
                raise SceneError(scene.plugin, f"it changed {name}, which the rig has set", "")

    def _held(self, body: int) -> dict[str, Any]:
        """Return what the drive is worked out with, and a scene must leave as it is."""
        client, states = self._client, [state[:2] for state in self.read()]
        parameters = pybullet.getPhysicsEngineParameters(client)
        return {
            "the state of the arm": states,
            "the masses of the arm": [
                (found := pybullet.getDynamicsInfo(body, link, physicsClientId=client))[0:1] + found[2:5]
                for link in range(-1, len(states))
            ],
            "gravity": [parameters[f"gravityAcceleration{axis}"] for axis in "XYZ"],
            "the time step": [parameters[name] for name in ("fixedTimeStep", "numSubSteps")],
        }

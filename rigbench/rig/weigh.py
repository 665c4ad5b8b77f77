"""What a body in an engine's world weighs, told as the mass matrix of an arm's joints."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np
from scipy.spatial.transform import Rotation

from rigbench.arm.arm import REVOLUTE, Arm, Floats
from rigbench.arm.dynamics import forward_kinematics
from rigbench.rig.engine import pybullet

__all__ = ["Weight", "body_mass_matrix", "link_pose", "weights"]

UNSAID = (1.0, (1.0, 1.0, 1.0))
"""Mass and principal inertias that the engine gives to a link without <inertial>."""


@dataclass(frozen=True, eq=False)
class Weight:
    """A link of the body, in the world: ``joint`` counts the arm's joints up to the one that carries it."""

    link: int
    joint: int
    mass: float
    cog: Floats  # (3,) [m]
    tensor: Floats  # (3, 3) [kg m^2], about the centre of gravity
    unsaid: bool  # whether the engine made the numbers up


def link_pose(client: int, body: int, link: int) -> tuple[Floats, Floats]:
    """Return position (3,) [m] and rotation (3, 3) of a link's frame in the world.

    By way of its inertial frame: the engine gives the link's own in single precision only.
    """
    state = pybullet.getLinkState(body, link, computeForwardKinematics=True, physicsClientId=client)
    inside = Rotation.from_quat(state[3]).as_matrix()
    turned: Floats = Rotation.from_quat(state[1]).as_matrix() @ inside.T
    return np.array(state[0]) - turned @ np.array(state[2]), turned


def weights(client: int, body: int, joints: Sequence[int]) -> Iterator[Weight]:
    """Yield the links that move with the joints numbered ``joints`` in the engine, base to tool."""
    for link in range(pybullet.getNumJoints(body, physicsClientId=client)):
        carrier = link
        while carrier >= 0 and carrier not in joints:
            carrier = pybullet.getJointInfo(body, carrier, physicsClientId=client)[16]
        if carrier < 0:
            continue
        state = pybullet.getLinkState(body, link, computeForwardKinematics=True, physicsClientId=client)
        found = pybullet.getDynamicsInfo(body, link, physicsClientId=client)
        turned = Rotation.from_quat(state[1]).as_matrix()
        tensor = turned @ np.diag(found[2]) @ turned.T
        unsaid = (found[0], tuple(found[2])) == UNSAID
        yield Weight(link, joints.index(carrier), found[0], np.array(state[0]), tensor, unsaid)


def body_mass_matrix(client: int, body: int, joints: Sequence[int], arm: Arm, q: Floats) -> Floats:
    """Return M (n, n) [kg m^2] of the body's links as they stand at q (n,), about the axes of ``arm``.

    M = sum over links of m Jv' Jv + Jw' I Jw, from masses, centres of gravity and inertias as the engine
    has them. Movable links beside the chain count where they stand now. The engine's own call for it
    keeps what it once worked out, whatever is changed later.
    """
    placed = forward_kinematics(arm.chain((0.0, 0.0, 0.0)), q)[: arm.n]
    position, turned = link_pose(client, body, joints[0])
    base = turned @ placed[0, :9].reshape(3, 3).T
    origin = position - base @ placed[0, 9:]
    axes = np.array([base @ p[:9].reshape(3, 3) @ axis for p, axis in zip(placed, arm.axis, strict=True)])
    points = origin + placed[:, 9:] @ base.T
    turns = (arm.kinds == REVOLUTE)[:, None]
    mass: Floats = np.zeros((arm.n, arm.n))
    for weight in weights(client, body, joints):
        linear = np.where(turns, np.cross(axes, weight.cog - points), axes)
        angular = np.where(turns, axes, 0.0)
        linear[weight.joint + 1 :] = angular[weight.joint + 1 :] = 0.0
        mass += weight.mass * linear @ linear.T + angular @ weight.tensor @ angular.T
    return mass

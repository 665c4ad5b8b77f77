"""What the links are to each joint, over the workspace: poses, inertia, and torque as disturbance."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from rigbench.arm.arm import PRISMATIC, Arm, Floats
from rigbench.arm.dynamics import bias_torque, mass_matrix

__all__ = ["Workspace", "quarter_points", "sampled_poses", "workspace"]


@dataclass(frozen=True, eq=False)
class Workspace:
    """By joint (n,): least and largest inertia of the links [kg m^2; kg], their largest torque [N m; N]."""

    least: Floats
    largest: Floats
    disturbance: Floats

    @property
    def middle(self) -> Floats:
        """The inertia half way between the two [kg m^2; kg]."""
        return (self.least + self.largest) / 2


def workspace(
    arm: Arm, gravity: tuple[float, float, float], speeds: Floats, count: int, seed: int
) -> Workspace:
    """Return M_jj(q) and the size of h_j(q, v) at their ends over ``count`` sampled poses.

    h is gravity, Coriolis and centripetal torque, at rest and with every joint at ``speeds`` (n,) one way or
    the other.
    """
    poses = sampled_poses(arm, count, seed)
    inertias = _inertias(arm, poses)
    return Workspace(
        inertias.min(axis=0), inertias.max(axis=0), _disturbances(arm, gravity, poses, speeds, seed)
    )


def _ranges(arm: Arm) -> tuple[Floats, Floats]:
    """Return the ends (n,) of each joint's range; a turn, or a metre, where it has no limit on a side."""
    turn = np.where(arm.kinds == PRISMATIC, 1.0, 2 * np.pi)
    low = np.where(
        np.isfinite(arm.lower), arm.lower, np.where(np.isfinite(arm.upper), arm.upper - turn, -turn / 2)
    )
    high = np.where(np.isfinite(arm.upper), arm.upper, low + turn)
    return low, high


def sampled_poses(arm: Arm, count: int, seed: int) -> Floats:
    """Return poses (count, n), independent and uniform within the joints' ranges."""
    low, high = _ranges(arm)
    poses: Floats = low + (high - low) * np.random.default_rng(seed).random((count, arm.n))
    return poses


def quarter_points(arm: Arm) -> tuple[Floats, Floats]:
    """Return the poses (n,) a quarter and three quarters along the joints' ranges."""
    low, high = _ranges(arm)
    return low + (high - low) / 4, high - (high - low) / 4


def _inertias(arm: Arm, poses: Floats) -> Floats:
    chain = arm.chain((0.0, 0.0, 0.0))
    return np.array([np.diag(mass_matrix(chain, q)) for q in poses])


def _disturbances(
    arm: Arm, gravity: tuple[float, float, float], poses: Floats, speeds: Floats, seed: int
) -> Floats:
    chain, rest = arm.chain(gravity), np.zeros(arm.n)
    ways = np.random.default_rng([seed, 1]).choice([-1.0, 1.0], size=poses.shape)
    torques = [
        bias_torque(chain, q, v) for q, way in zip(poses, ways, strict=True) for v in (rest, way * speeds)
    ]
    largest: Floats = np.abs(torques).max(axis=0)
    return largest

"""Leading the tool point along a curve: the joint path, from inverse kinematics at close points."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np
from scipy.interpolate import BSpline, make_interp_spline

from rigbench.arm.arm import Floats
from rigbench.arm.dynamics import tool_path
from rigbench.errors import RigbenchError
from rigbench.motion.curve import Circle, Curve, Vector
from rigbench.motion.reach import Found, Reach, Target, conditioning, solve, solve_near

__all__ = ["JointPath", "Lost", "Task", "follow"]

SINGULAR = 0.01
"""Smallest singular value of the scaled Jacobian, below which a pose counts as singular: there some joint
turns 100 rad for each arm's length, or rad, that the tool moves. About a degree from a stretched wrist."""

ACCURATE = 1e-9
"""Farthest that the joint path may lead the tool from the curve [m] or from its orientation [rad], midway
between the points at which it was solved."""

PARTS, MOST_PARTS = 32, 4096
"""Parts into which a turn, or a line, is cut: as few as are accurate enough."""

FINEST = 2.0**-24
"""Share of the way by which the arm must be able to move on."""

JUMP = 0.5
"""A joint that turns farther [rad, or share of the arm's length] from one point to the next has jumped."""

CLOSELY = 8
"""Places in each part at which the joint path is looked at for singular poses."""

REFINED = 30
"""Halvings after which the place at which a path becomes singular is known well enough."""


class Lost(RigbenchError):
    """The arm can't follow: ``problem`` at the ``share`` of the way, and what is ``expected`` instead.

    A motion, which knows the time, turns it into :class:`rigbench.motion.reach.Unreachable`.
    """

    def __init__(self, problem: str, share: float, expected: str) -> None:
        self.problem, self.share, self.expected = problem, share, expected
        super().__init__(problem, share, expected)


@dataclass(frozen=True)
class Task:
    """A curve of the tool point, the pose ``near`` which the arm starts, and what the tool's frame does.

    ``held``: the tool keeps one orientation, that of ``rpy_deg`` (fixed-axis roll, pitch, yaw in the base
    frame, as in URDF) or, if None, the one it has in the pose ``near`` [rad or m]. Else it turns as it may.
    """

    reach: Reach
    curve: Curve
    near: tuple[float, ...]
    held: bool = True
    rpy_deg: Vector | None = None

    def points(self, shares: Floats) -> Floats:
        """Return where the tool point should be (N, 3) [m] at the shares (N,) of the way."""
        return self.curve.points(shares, self.reach.tool(np.array(self.near)).position)

    @property
    def rotation(self) -> Floats | None:
        """How the tool should be turned (3, 3); None where that is free."""
        if not self.held:
            return None
        if self.rpy_deg is not None:
            return rotation_of(self.rpy_deg)
        return self.reach.tool(np.array(self.near)).rotation

    @property
    def rows(self) -> int:
        """How many numbers say where the tool should be."""
        return 6 if self.held else 3

    @property
    def turns(self) -> float:
        """How many times the fewest parts the way is cut into."""
        return max(1.0, self.curve.turns) if isinstance(self.curve, Circle) else 1.0

    def inputs(self) -> dict[str, Any]:
        """Return all that the joint path depends on, JSON-able."""
        return self.curve.inputs() | {
            "reach": self.reach.digest,
            "near": [value + 0.0 for value in self.near],
            "held": self.held,
            "rpy_deg": None if self.rpy_deg is None else [value + 0.0 for value in self.rpy_deg],
        }


def rotation_of(rpy_deg: Vector) -> Floats:
    """Return the rotation (3, 3) by roll about x, then pitch about y, then yaw about z, all of them fixed."""
    r, p, y = (math.radians(angle) for angle in rpy_deg)
    cr, sr, cp, sp, cy, sy = math.cos(r), math.sin(r), math.cos(p), math.sin(p), math.cos(y), math.sin(y)
    return np.array(
        [
            [cy * cp, cy * sp * sr - sy * cr, cy * sp * cr + sy * sr],
            [sy * cp, sy * sp * sr + cy * cr, sy * sp * cr - cy * sr],
            [-sp, cp * sr, cp * cr],
        ]
    )


@dataclass(frozen=True, eq=False)
class JointPath:
    """Joint positions (n,) [rad or m] over the share of the way, with both derivatives."""

    position: BSpline
    first: BSpline
    second: BSpline

    @classmethod
    def through(cls, shares: Floats, q: Floats) -> JointPath:
        """Return the quintic spline, four times continuously differentiable, through q (N, n)."""
        spline = make_interp_spline(shares, q, k=5)
        return cls(spline, spline.derivative(1), spline.derivative(2))


@lru_cache(maxsize=256)
def follow(task: Task) -> JointPath:
    """Return the joint path of a task; Lost where the arm can't follow.

    Each point is solved from the one before, so an arm with joints to spare moves them as little as it
    must from point to point; on a closed curve it then needn't come back to the position that it started
    from (Klein, Huang 1983, from memory). The points are joined by a quintic spline, and doubled until it
    keeps the tool within ACCURATE of the curve midway between them.
    """
    follower = _Follower(task)
    parts = math.ceil(PARTS * task.turns)
    while True:
        shares = np.linspace(0.0, 1.0, parts + 1)
        q = follower.points(shares)
        follower.check_singular(shares, q)
        path = JointPath.through(shares, q)
        midway = (shares[:-1] + shares[1:]) / 2
        off = follower.off(midway, path.position(midway))
        if off.max() <= ACCURATE:
            closely = np.linspace(0.0, 1.0, parts * CLOSELY + 1)
            follower.check_singular(closely, path.position(closely))
            return path
        if parts >= MOST_PARTS * task.turns:
            raise follower.too_close(float(midway[off.argmax()]))
        parts *= 2


class _Follower:
    """What the steps along one task have in common."""

    def __init__(self, task: Task) -> None:
        self.task, self.reach, self.rotation = task, task.reach, task.rotation

    def target(self, share: float) -> Target:
        """Return where the tool should be at a share of the way."""
        return Target(self.task.points(np.array([share]))[0], self.rotation)

    def points(self, shares: Floats) -> Floats:
        """Return the joint positions (N, n) at the shares (N,) of the way."""
        start = solve_near(self.reach, np.array(self.task.near), self.target(float(shares[0])))
        if not start.reached:
            raise self.out_of_reach(float(shares[0]), start)
        q = [start.q]
        for begin, end in zip(shares[:-1].tolist(), shares[1:].tolist(), strict=True):
            q.append(self.advance(begin, q[-1], end))
        return np.array(q)

    def advance(self, share: float, q: Floats, end: float) -> Floats:
        """Return the joint position at the share ``end`` of the way, coming from that at ``share``."""
        step = end - share
        while share < end:
            to = min(share + step, end)
            found = solve(self.reach, q, self.target(to))
            jumped = bool(np.abs((found.q - q) / self.reach.scale).max() > JUMP)
            if found.reached and not jumped:
                share, q = to, found.q
            elif step > FINEST:
                step /= 2
            elif jumped:
                raise self.too_close(to)
            else:
                raise self.out_of_reach(to, found)
        return q

    def check_singular(self, shares: Floats, q: Floats) -> None:
        """Raise Lost at the first share of the way at which the arm is singular."""
        singular = conditioning(self.reach, q, self.task.rows) < SINGULAR
        if not singular.any():
            return
        k = int(singular.argmax())
        low, high, last = float(shares[max(k - 1, 0)]), float(shares[k]), q[max(k - 1, 0)]
        for _ in range(REFINED):
            middle = (low + high) / 2
            found = solve(self.reach, last, self.target(middle)).q
            if conditioning(self.reach, found[None], self.task.rows)[0] < SINGULAR:
                high = middle
            else:
                low = middle
        raise self.too_close(high)

    def off(self, shares: Floats, q: Floats) -> Floats:
        """Return by how much the tool is off at each share: the larger of distance [m] and angle [rad]."""
        positions, rotations = tool_path(self.reach.chain, np.ascontiguousarray(q))
        off: Floats = np.linalg.norm(positions - self.task.points(shares), axis=1)
        if self.rotation is None:
            return off
        # 2 sqrt(2) sin(angle / 2) is the Frobenius norm of the difference
        turned = np.linalg.norm(rotations - self.rotation, axis=(1, 2)) / np.sqrt(2)
        larger: Floats = np.maximum(off, turned)
        return larger

    def out_of_reach(self, share: float, found: Found) -> Lost:
        """Build the error for a point that the arm can't reach."""
        distance = self.reach.length * float(np.linalg.norm(found.missed[:3]))
        gap = f"{distance:.4g} m" if distance >= 1 else f"{1e3 * distance:.3g} mm"
        if self.task.held:
            gap += f" and {math.degrees(np.linalg.norm(found.missed[3:])):.3g} deg"
        where = self.place(share)
        if share == 0.0:
            problem = f"the arm can't bring the tool to {where}: the closest that was found is {gap} off"
            return Lost(problem, share, "a start within reach, or a near_deg closer to it" + self.hint)
        problem = f"the arm can't lead the tool on beyond {where}"
        return Lost(problem, share, "a path within reach" + self.hint)

    def too_close(self, share: float) -> Lost:
        """Build the error for a singular pose."""
        problem = f"the arm gets into a singular pose with the tool at {self.place(share)}"
        return Lost(problem, share, "a path that keeps away from it, or another near_deg" + self.hint)

    @property
    def hint(self) -> str:
        """What else may help."""
        return ", or 'orientation: free'" if self.task.held else ""

    def place(self, share: float) -> str:
        """Write the point at a share of the way."""
        return "(" + ", ".join(f"{x + 0.0:.4g}" for x in self.target(share).position.round(6)) + ") m"

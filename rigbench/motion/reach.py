"""Where an arm's tool can be: inverse kinematics at one pose."""

from __future__ import annotations

import hashlib
import math
from dataclasses import dataclass, fields
from functools import cached_property, lru_cache
from typing import Any

import numpy as np

from rigbench.arm.arm import LINK, REVOLUTE, Arm, Floats
from rigbench.arm.dynamics import forward_kinematics, tool_jacobian
from rigbench.errors import RigbenchError

__all__ = ["Found", "Reach", "Target", "Unreachable", "conditioning", "miss", "rank", "solve", "solve_near"]

EXACT = 1e-12
"""Miss, scaled as in :func:`miss`, at which the search for a joint position ends."""

REACHED = 1e-9
"""Miss, scaled likewise, up to which a pose counts as reached, where rounding stops the search earlier."""

MOST_STEPS = 200
MOST_STEP = 0.5
"""Farthest that any joint moves in one step of the search [rad, or share of the arm's length]."""

DAMPING = 0.5
"""Square of the damping over the square of the miss."""

OTHER_STARTS = 24
"""Starts that are tried around the near pose where the search from the pose itself leads nowhere."""


class Unreachable(RigbenchError):
    """A motion that the arm can't do: ``problem`` at the time ``at_s`` [s]; ``expected`` instead."""

    exit_code = 2

    def __init__(self, problem: str, at_s: float, expected: str = "") -> None:
        self.problem, self.at_s, self.expected = problem, at_s, expected
        super().__init__(problem, at_s, expected)

    def __str__(self) -> str:
        return f"{self.problem}, at {self.at_s:.3f} s"


@dataclass(frozen=True, eq=False)
class Target:
    """Where the tool should be: ``position`` (3,) [m] and, unless free, ``rotation`` (3, 3), base frame."""

    position: Floats
    rotation: Floats | None


@dataclass(frozen=True)
class Reach:
    """What of an arm decides where its tool can be: its geometry and its position limits.

    ``packed``: the chain array's columns before the link parameters, (n + 1, 16) doubles.
    """

    packed: bytes
    lower: tuple[float, ...]
    upper: tuple[float, ...]

    @classmethod
    def of(cls, arm: Arm) -> Reach:
        """Return that of an arm."""
        geometry = arm.chain((0.0, 0.0, 0.0))[:, : LINK.start] + 0.0  # + 0.0: -0.0 is the same arm as 0.0
        return cls(geometry.astype("<f8").tobytes(), tuple(arm.lower.tolist()), tuple(arm.upper.tolist()))

    def __getstate__(self) -> dict[str, Any]:
        return {field.name: getattr(self, field.name) for field in fields(self)}

    @cached_property
    def chain(self) -> Floats:
        """The chain array for the kinematics kernels, links without mass."""
        geometry = np.frombuffer(self.packed, "<f8").reshape(-1, LINK.start)
        chain = np.zeros((len(geometry), LINK.stop))
        chain[:, : LINK.start] = geometry
        return chain

    @property
    def n(self) -> int:
        """Number of joints."""
        return len(self.lower)

    @cached_property
    def length(self) -> float:
        """Sum of the distances from joint to joint and on to the tool [m]; 1 if they are all zero."""
        return float(np.linalg.norm(self.chain[:, 10:13], axis=1).sum()) or 1.0

    @cached_property
    def scale(self) -> Floats:
        """What a joint's travel is measured in (n,): 1 rad, or the arm's length [m] if prismatic."""
        return np.where(self.chain[:-1, 0] == REVOLUTE, 1.0, self.length)

    @cached_property
    def digest(self) -> str:
        """Digest of all the numbers (hex)."""
        limits = np.array([self.lower, self.upper]) + 0.0
        return hashlib.blake2b(self.packed + limits.astype("<f8").tobytes(), digest_size=20).hexdigest()

    def tool(self, q: Floats) -> Target:
        """Return where the tool is at q (n,) [rad or m]."""
        pose = forward_kinematics(self.chain, q)[-1]
        return Target(pose[9:], pose[:9].reshape(3, 3))


@dataclass(frozen=True, eq=False)
class Found:
    """The joint position (n,) [rad or m] at which a search ended, and by how much it misses."""

    q: Floats
    missed: Floats

    @property
    def reached(self) -> bool:
        """Whether the tool is where it should be."""
        return bool(np.linalg.norm(self.missed) <= REACHED)


def miss(reach: Reach, q: Floats, target: Target) -> Floats:
    """Return from the tool to the target: the distance over the arm's length, then the turn [rad].

    Shape (6,), or (3,) where the target has no rotation; base frame.
    """
    pose = forward_kinematics(reach.chain, q)[-1]
    way = (target.position - pose[9:]) / reach.length
    if target.rotation is None:
        return np.asarray(way)
    return np.concatenate([way, _turn(target.rotation @ pose[:9].reshape(3, 3).T)])


def _turn(rotation: Floats) -> Floats:
    """Return the rotation vector (3,) [rad] of a rotation, up to and including half a turn."""
    (a, b, c), (d, e, f), (g, h, i) = rotation.tolist()
    # the unit quaternion, from the largest of its four components (Shepperd 1978, from memory)
    squares = (1 + a + e + i, 1 + a - e - i, 1 - a + e - i, 1 - a - e + i)
    largest = squares.index(max(squares))
    w, x, y, z = (
        (squares[0], h - f, c - g, d - b),
        (h - f, squares[1], b + d, c + g),
        (c - g, b + d, squares[2], f + h),
        (d - b, c + g, f + h, squares[3]),
    )[largest]
    sine = math.sqrt(x * x + y * y + z * z)
    if sine == 0.0:
        return np.zeros(3)
    angle = 2 * math.atan2(sine, abs(w)) * (-1.0 if w < 0 else 1.0)
    return np.array([x, y, z]) * (angle / sine)


def _scaled_jacobian(reach: Reach, q: Floats, rows: int) -> Floats:
    jacobian = tool_jacobian(reach.chain, q)[:rows] * reach.scale
    jacobian[:3] /= reach.length
    return np.asarray(jacobian)


@lru_cache(maxsize=64)
def rank(reach: Reach, rows: int) -> int:
    """Return in how many directions the arm can move its tool in general, of 3 (position) or 6 ``rows``."""
    poses = np.random.default_rng(0).uniform(-np.pi, np.pi, (8, reach.n)) * reach.scale
    values = [np.linalg.svd(_scaled_jacobian(reach, q, rows), compute_uv=False) for q in poses]
    return int(max((value > 1e-6).sum() for value in values))


def conditioning(reach: Reach, q: Floats, rows: int) -> Floats:
    """Return how far each of the poses q (N, n) is from singular, (N,).

    That is the smallest singular value of the Jacobian, lengths over the arm's length. Those that are zero
    in every pose are passed over: a planar arm is not singular for being planar.
    """
    jacobians = np.array([_scaled_jacobian(reach, pose, rows) for pose in q])
    return np.asarray(np.linalg.svd(jacobians, compute_uv=False)[:, rank(reach, rows) - 1])


def solve(reach: Reach, q: Floats, target: Target) -> Found:
    """Search for the joint position of a target from q (n,) on, by damped least squares.

    Each step is V diag(s / (s^2 + d^2)) U' e, with the miss e and the singular value decomposition
    U diag(s) V' of the scaled Jacobian: the least step in all joints (a turn of 1 rad counts as much as a
    travel of the arm's length) for what it gains. d^2 = e'e / 2, and more where a step would not gain,
    so that the damping fades as the target is reached and the last steps are Newton's. An arm with more
    joints than the task asks for thus moves no more than it must.

    Sources, from memory: Wampler 1986 and Nakamura, Hanafusa 1986 (damped least squares); Sugihara 2011
    (damping by the remaining miss).
    """
    missed = miss(reach, q, target)
    directions = rank(reach, len(missed))
    for _ in range(MOST_STEPS):
        size = float(missed @ missed)
        if size <= EXACT**2:
            break
        u, s, vt = np.linalg.svd(_scaled_jacobian(reach, q, len(missed)), full_matrices=False)
        # directions in which the tool can't move at all would only let rounding into the joints
        u, s, vt = u[:, :directions], s[:directions], vt[:directions]
        pull = u.T @ missed
        damping = DAMPING * size
        while True:
            step = (s / (s * s + damping) * pull) @ vt
            step *= min(1.0, MOST_STEP / max(float(np.abs(step).max()), 1e-300))
            tried = q + step * reach.scale
            left = miss(reach, tried, target)
            if left @ left < size:
                q, missed = tried, left
                break
            damping *= 8
            if damping > 1e6:  # no step gains any more
                return Found(q, missed)
    return Found(q, missed)


def solve_near(reach: Reach, near: Floats, target: Target) -> Found:
    """Search for the joint position of a target close to the pose ``near`` (n,).

    The search starts at ``near``. Where that leads nowhere or beyond a position limit, it also starts at
    some poses around (always the same ones), and of the positions within the limits the one closest to
    ``near`` is taken, or without regard to the limits if there is none. If none reaches the target: the one
    that misses it least.
    """
    first = _unwound(reach, near, solve(reach, near, target))
    if first.reached and _within(reach, first.q):
        return first
    spread = np.random.default_rng(0).normal(size=(OTHER_STARTS, reach.n)) * reach.scale
    low, high = np.array(reach.lower), np.array(reach.upper)
    candidates = [first]
    for start in np.clip(near + spread * np.linspace(0.1, 1.5, OTHER_STARTS)[:, None], low, high):
        candidates.append(_unwound(reach, near, solve(reach, start, target)))
    reached = [found for found in candidates if found.reached]
    if not reached:
        return min(candidates, key=lambda found: float(np.linalg.norm(found.missed)))
    fits = [found for found in reached if _within(reach, found.q)] or reached
    return min(fits, key=lambda found: float(np.linalg.norm((found.q - near) / reach.scale)))


def _unwound(reach: Reach, near: Floats, found: Found) -> Found:
    """Take whole turns off the joints so that they are close to ``near``, or within their limits."""
    turns = np.where(reach.chain[:-1, 0] == REVOLUTE, np.round((found.q - near) / (2 * np.pi)), 0.0)
    q = found.q - 2 * np.pi * turns
    for shift in (2 * np.pi, -2 * np.pi):
        moved = q + np.where(reach.chain[:-1, 0] == REVOLUTE, shift, 0.0)
        inside = (moved >= reach.lower) & (moved <= reach.upper)
        outside = (q < reach.lower) | (q > reach.upper)
        q = np.where(outside & inside, moved, q)
    return Found(q, found.missed)


def _within(reach: Reach, q: Floats) -> bool:
    return bool(((q >= reach.lower) & (q <= reach.upper)).all())

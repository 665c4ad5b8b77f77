"""Motions of the tool point: along a circle or a straight line, from rest to rest."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from rigbench.arm.arm import Arm, Floats
from rigbench.motion.curve import Circle, Curve, Line, Vector
from rigbench.motion.follow import JointPath, Lost, Task, follow
from rigbench.motion.quintic import elapsed, quintic, when
from rigbench.motion.reach import Reach, Unreachable

__all__ = ["PathMotion", "circle", "line", "middle_of_limits"]

HOLDING = 6
"""An arm with this many joints or more holds the tool's orientation unless told otherwise."""

SHORTEST = 1e-6
"""Shortest line [m]."""

MOST = 1e6
"""Greatest length, angle or turn that makes sense to anyone; squares of them stay far from overflow."""


@dataclass(frozen=True)
class PathMotion:
    """The tool point led along a curve in ``leg_s`` / ``pace`` seconds, then a rest of ``rest_s``.

    The share of the way that is done is s = 10 x^3 - 15 x^4 + 6 x^5 with x = t pace / leg_s, so the tool
    moves off and arrives without a jerk of acceleration, at 15/8 of its mean speed midway. The joint
    positions are q(s), a quintic spline through the inverse kinematics at close points (see
    :func:`rigbench.motion.follow.follow`); v = q'(s) ds/dt and a = q''(s) (ds/dt)^2 + q'(s) d2s/dt2 are its
    exact derivatives. The tool is within 1e-9 m of the curve midway between those points, and closer at them.

    It holds declared numbers alone and solves q(s) once a process; that path doesn't depend on the times.
    ``pace`` shortens the leg and leaves the rest. ValueError if a time or the pace is not above 0 (a rest
    may be 0) or not finite.
    """

    task: Task
    leg_s: float
    rest_s: float = 0.0
    pace: float = 1.0

    def __post_init__(self) -> None:
        if not (0 < self.leg_s < math.inf and 0 < self.pace < math.inf and 0 <= self.rest_s < math.inf):
            raise ValueError("leg_s and pace are above 0 and rest_s is not below 0, all finite")

    @property
    def _leg(self) -> float:
        return self.leg_s / self.pace

    @property
    def duration_s(self) -> float:
        """Time of the leg and the rest [s]."""
        return self._leg + self.rest_s

    @property
    def rests(self) -> tuple[tuple[float, float], ...]:
        """(end of the leg, end of the rest) [s]; empty if rest_s is 0."""
        return () if self.rest_s == 0 else ((self._leg, self.duration_s),)

    def reference(self, t: Floats) -> tuple[Floats, Floats, Floats]:
        """Return q, v, a, each (N, n), at the times t (N,) [s], as every Motion does.

        Unreachable, with the time, if the arm can't follow (:func:`circle` and :func:`line` have made sure).
        """
        path = self.joint_path()
        s, ds, dds = quintic(elapsed(np.asarray(t, float), self._leg))
        first = path.first(s)
        v = first * (ds / self._leg)[:, None]
        a = path.second(s) * (ds / self._leg)[:, None] ** 2 + first * (dds / self._leg**2)[:, None]
        return path.position(s), v, a

    def joint_path(self) -> JointPath:
        """Return the joint positions over the share of the way; Unreachable as in :meth:`reference`."""
        try:
            return follow(self.task)
        except Lost as lost:
            at_s = when(lost.share) * self._leg
            raise Unreachable(lost.problem, at_s, lost.expected) from None

    def paced(self, factor: float) -> PathMotion:
        """Return the same motion at ``factor`` times its pace."""
        return replace(self, pace=self.pace * factor)

    def inputs(self) -> dict[str, Any]:
        """Return curve, near pose, orientation, a digest of the arm's geometry, times and pace, JSON-able."""
        return self.task.inputs() | {
            "leg_s": float(self.leg_s),
            "rest_s": float(self.rest_s) + 0.0,
            "pace": float(self.pace),
        }


def circle(
    arm: Arm,
    near: Sequence[float],
    *,
    centre_m: Sequence[float],
    radius_m: float,
    normal: Sequence[float],
    turn_s: float,
    turns: float = 1.0,
    start_deg: float = 0.0,
    rest_s: float = 0.3,
    pace: float = 1.0,
    orientation: str | None = None,
    tool_rpy_deg: Sequence[float] | None = None,
) -> PathMotion:
    """Return a motion of the tool point around a circle, solved and found possible.

    In ``turns * turn_s`` seconds from rest to rest; the angle counts as in
    :class:`rigbench.motion.curve.Circle`, with a ``normal`` of any length. ``near`` (n,) [rad or m],
    ``orientation`` and ``tool_rpy_deg`` as in :func:`line`. Raises Unreachable with the time at which the
    arm can't follow or is singular; ValueError where a number makes no sense. Joint limits and speeds are
    for :func:`rigbench.motion.limits.check_motion`.
    """
    axis = np.array(_vector(normal, "normal"))
    if not np.abs(axis).max() > 0:
        raise ValueError("the normal is not zero")
    if not (0 < radius_m <= MOST and 0 < turns <= MOST and abs(start_deg) <= MOST):
        raise ValueError(f"radius_m and turns are above 0, and with start_deg at most {MOST:g}")
    axis /= np.abs(axis).max()
    unit = _vector((axis / np.linalg.norm(axis)).tolist(), "normal")
    curve = Circle(_vector(centre_m, "centre_m"), radius_m, unit, turns, start_deg)
    task = _task(arm, near, curve, orientation, tool_rpy_deg)
    return _possible(PathMotion(task, turns * turn_s, rest_s, pace))


def line(
    arm: Arm,
    near: Sequence[float],
    *,
    to_m: Sequence[float],
    from_m: Sequence[float] | None = None,
    leg_s: float = 1.0,
    rest_s: float = 0.3,
    pace: float = 1.0,
    orientation: str | None = None,
    tool_rpy_deg: Sequence[float] | None = None,
) -> PathMotion:
    """Return a motion of the tool point along a straight line, solved and found possible.

    ``from_m`` None: from where the tool is in the pose ``near`` (n,) [rad or m], close to which the arm
    starts in any case. ``orientation``: 'held', the default for arms of six joints or more, as
    ``tool_rpy_deg`` says (fixed-axis roll, pitch, yaw in the base frame, as in URDF) or, if that is None,
    as it is in the pose ``near``; or 'free', the default for others. Raises as :func:`circle`, and for a
    line without length.
    """
    start = None if from_m is None else _vector(from_m, "from_m")
    task = _task(arm, near, Line(_vector(to_m, "to_m"), start), orientation, tool_rpy_deg)
    motion = PathMotion(task, leg_s, rest_s, pace)
    begin, end = task.points(np.array([0.0, 1.0]))
    if np.linalg.norm(end - begin) < SHORTEST:
        raise Unreachable("the line ends where it begins", 0.0, f"at least {SHORTEST} m between them")
    return _possible(motion)


def middle_of_limits(arm: Arm) -> tuple[float, ...]:
    """Return the pose (n,) [rad or m] midway between the position limits, 0 where a joint lacks one."""
    both = np.isfinite(arm.lower) & np.isfinite(arm.upper)
    low, high = np.where(both, arm.lower, 0.0), np.where(both, arm.upper, 0.0)
    return tuple(((low + high) / 2).tolist())


def _vector(values: Sequence[float], name: str) -> Vector:
    if len(values) != 3 or not all(abs(value) <= MOST for value in values):
        raise ValueError(f"{name} is three numbers of at most {MOST:g}")
    x, y, z = (float(value) for value in values)
    return x, y, z


def _task(
    arm: Arm, near: Sequence[float], curve: Curve, orientation: str | None, rpy_deg: Sequence[float] | None
) -> Task:
    if len(near) != arm.n or not all(math.isfinite(position) for position in near):
        raise ValueError(f"near is one finite position a joint, {arm.n}")
    if orientation not in (None, "held", "free"):
        raise ValueError("orientation is held or free")
    held = arm.n >= HOLDING if orientation is None else orientation == "held"
    if rpy_deg is not None and orientation == "free":
        raise ValueError("a free orientation has no tool_rpy_deg")
    rpy = None if rpy_deg is None else _vector(rpy_deg, "tool_rpy_deg")
    return Task(
        Reach.of(arm), curve, tuple(float(position) for position in near), held or rpy is not None, rpy
    )


def _possible(motion: PathMotion) -> PathMotion:
    motion.joint_path()
    return motion

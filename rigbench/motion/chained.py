"""Motions one after the other, and over and over."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, fields, replace
from functools import cached_property
from typing import Any

import numpy as np

from rigbench.arm.arm import Arm, Floats
from rigbench.motion.limits import unit_of
from rigbench.motion.motion import Motion
from rigbench.motion.reach import Unreachable
from rigbench.motion.via import ViaMotion

__all__ = ["ChainMotion", "chained"]

SAME = 1e-6
"""Joint positions that differ by no more [rad or m] are the same where two motions meet."""

STILL = 1e-2
"""A joint that moves no faster [rad/s or m/s] is at rest where two motions meet: the spline of a table that
was planned from rest to rest does not end on an exact zero."""


@dataclass(frozen=True)
class ChainMotion:
    """``parts`` one after the other, the whole ``repeats`` times.

    Where a part does not start in the pose in which the one before it ended, a leg of ``join_s`` seconds
    leads there, straight in joint space and from rest to rest as in
    :class:`rigbench.motion.via.ViaMotion`, without a rest at its end. Build it with :func:`chained`, which
    finds out whether the parts can be joined at all.
    """

    parts: tuple[Motion, ...]
    repeats: int = 1
    join_s: float | None = None

    def __post_init__(self) -> None:
        if not self.parts or self.repeats < 1:
            raise ValueError("a chain has a part or more, and repeats is 1 or more")
        if self.join_s is not None and not 0 < self.join_s < math.inf:
            raise ValueError("join_s is above 0 and finite")

    def __getstate__(self) -> dict[str, Any]:
        # What is cached stays behind: it is quickly made again, and equal motions pickle alike.
        return {field.name: getattr(self, field.name) for field in fields(self)}

    @cached_property
    def _segments(self) -> tuple[Motion, ...]:
        """The parts and the legs between them; a leg from the last back to the first closes the cycle."""
        segments: list[Motion] = []
        for part, after in zip(self.parts, (*self.parts[1:], self.parts[0]), strict=True):
            segments.append(part)
            end, start = _end(part)[0], _start(after)[0]
            if self.join_s is not None and np.abs(start - end).max() > SAME:
                segments.append(ViaMotion((tuple(end.tolist()), tuple(start.tolist())), self.join_s))
        return tuple(segments)

    @cached_property
    def _starts(self) -> Floats:
        """When each segment of a cycle starts, and the next cycle [s]."""
        return np.cumsum([0.0, *(segment.duration_s for segment in self._segments)])

    @property
    def _last(self) -> int:
        """Index of the last part among the segments: a leg back to the first comes after it, or nothing."""
        return len(self._segments) - (1 if self._segments[-1] is self.parts[-1] else 2)

    @property
    def duration_s(self) -> float:
        """Time of all parts, and of the legs between them [s]."""
        return (self.repeats - 1) * float(self._starts[-1]) + float(self._starts[self._last + 1])

    @property
    def rests(self) -> tuple[tuple[float, float], ...]:
        """The rests of all parts, at their times in the whole [s]."""
        whole = float(self._starts[-1])
        return tuple(
            (cycle * whole + float(start) + begin, cycle * whole + float(start) + end)
            for cycle in range(self.repeats)
            for start, segment in zip(self._starts, self._segments, strict=False)
            for begin, end in segment.rests
        )

    def reference(self, t: Floats) -> tuple[Floats, Floats, Floats]:
        """Return q, v, a, each (N, n), at the times t (N,) [s], as every Motion does."""
        t = np.asarray(t, float)
        cycle = np.clip(np.floor(t / self._starts[-1]), 0, self.repeats - 1)
        inside = t - cycle * self._starts[-1]
        last = np.where(cycle < self.repeats - 1, len(self._segments) - 1, self._last)
        at = np.clip(np.searchsorted(self._starts, inside, side="right") - 1, 0, last)
        n = _start(self.parts[0])[0].shape[0]
        q, v, a = (np.empty((len(t), n)) for _ in range(3))
        for k, segment in enumerate(self._segments):
            here = at == k
            q[here], v[here], a[here] = segment.reference(inside[here] - self._starts[k])
        return q, v, a

    def paced(self, factor: float) -> ChainMotion:
        """Return the same motion at ``factor`` times its pace: that of each part and of the legs between."""
        join_s = None if self.join_s is None else self.join_s / factor
        return replace(self, parts=tuple(part.paced(factor) for part in self.parts), join_s=join_s)

    def inputs(self) -> dict[str, Any]:
        """Return those of the parts, the repeats and the time of the legs between, JSON-able."""
        return {
            "kind": "chain",
            "parts": [part.inputs() for part in self.parts],
            "repeats": int(self.repeats),
            "join_s": None if self.join_s is None else float(self.join_s),
        }


def chained(
    parts: Sequence[tuple[str, Motion]],
    arm: Arm,
    *,
    repeats: int = 1,
    join_s: float | None = None,
    pace: float = 1.0,
) -> ChainMotion:
    """Return motions, by name, one after the other, the whole ``repeats`` times.

    ``join_s`` [s]: duration of the leg that leads from the end of one to the start of the next where they
    differ; None if there is to be none. ``pace`` multiplies that of every part, and shortens such legs.
    Raises Unreachable, with the time, where two parts don't meet and ``join_s`` is None, and where a part
    is in motion as it meets another.
    """
    chain = ChainMotion(tuple(motion for _, motion in parts), repeats, join_s).paced(pace)
    at_s = 0.0
    for k, (name, _) in enumerate(parts):
        part, after = chain.parts[k], (k + 1) % len(parts)
        at_s += part.duration_s
        if after == 0 and repeats == 1:
            break
        following = None if len(parts) == 1 else parts[after][0]
        _check_meeting(arm, (name, part), (following, chain.parts[after]), at_s, join_s)
        gap = float(np.abs(_start(chain.parts[after])[0] - _end(part)[0]).max())
        at_s += chain.join_s if chain.join_s is not None and gap > SAME else 0.0
    return chain


def _check_meeting(
    arm: Arm, one: tuple[str, Motion], other: tuple[str | None, Motion], at_s: float, join_s: float | None
) -> None:
    """Raise Unreachable if ``other`` (with None for its name: the same again) can't follow ``one``."""
    (end, leaving), (start, entering) = _end(one[1]), _start(other[1])
    for which, speeds in ((f"'{one[0]}' ends", leaving), (f"'{other[0] or one[0]}' starts", entering)):
        i = int(np.abs(speeds).argmax())
        if abs(speeds[i]) > STILL:
            unit, scale = unit_of(arm, i)
            problem = f"{which} in motion (joint {arm.joints[i]} at {speeds[i] * scale:.4g} {unit}/s)"
            raise Unreachable(problem, at_s, "motions that meet at rest")
    i = int(np.abs(start - end).argmax())
    if join_s is None and abs(start[i] - end[i]) > SAME:
        unit, scale = unit_of(arm, i)
        gap = f"{abs(start[i] - end[i]) * scale:.4g} {unit}"
        problem = (
            f"can't be repeated: it ends {gap} from where it starts (joint {arm.joints[i]})"
            if other[0] is None
            else f"'{other[0]}' starts {gap} from where '{one[0]}' ends (joint {arm.joints[i]})"
        )
        raise Unreachable(problem, at_s, "the same pose, or a join_s for a leg in between")


def _start(motion: Motion) -> tuple[Floats, Floats]:
    """Return position and velocity (n,) at the start."""
    q, v, _ = motion.reference(np.zeros(1))
    return q[0], v[0]


def _end(motion: Motion) -> tuple[Floats, Floats]:
    """Return position and velocity (n,) at the end; the velocity from just before it."""
    q, v, _ = motion.reference(motion.duration_s * np.array([1.0, 1 - 1e-9]))
    return q[0], v[1]

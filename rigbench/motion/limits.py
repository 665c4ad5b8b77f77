"""Where a motion leaves the limits of the arm's joints."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from rigbench.arm.arm import PRISMATIC, Arm, Floats
from rigbench.motion.motion import Motion

__all__ = ["Passing", "check_motion", "passings", "shown"]

SLACK = 1e-9
"""Share of a limit by which it may be passed: a motion that ends on it is not beyond it by rounding."""


@dataclass(frozen=True)
class Passing:
    """One joint's reference beyond one of its limits.

    ``limit`` is 'lower limit', 'upper limit' or 'speed limit'; ``time_s`` the first time sampled
    beyond it; ``value`` the reference farthest beyond it and ``bound`` the limit itself, both in
    ``unit`` (deg, mm, deg/s or mm/s).
    """

    joint: str
    limit: str
    time_s: float
    value: float
    bound: float
    unit: str

    def __str__(self) -> str:
        value, bound = shown(self.value, self.bound)
        return (
            f"joint {self.joint} passes its {self.limit} {bound} {self.unit} at {self.time_s:.2f} s "
            f"(and reaches {value} {self.unit})"
        )


def shown(value: float, bound: float) -> tuple[str, str]:
    """Write two numbers with as many digits, at least four, as it takes to tell them apart."""
    for digits in range(4, 17):
        if f"{value:.{digits}g}" != f"{bound:.{digits}g}":
            return f"{value:.{digits}g}", f"{bound:.{digits}g}"
    return f"{value:.17g}", f"{bound:.17g}"


def passings(motion: Motion, arm: Arm, times: Floats) -> list[Passing]:
    """Return every limit that the reference passes at any of ``times`` (N,) [s, rising], joint by joint.

    ValueError if the motion has another number of joints than the arm.
    """
    q, v, _ = motion.reference(times)
    if q.shape[1] != arm.n:
        raise ValueError(f"the motion moves {q.shape[1]} joints, the arm has {arm.n}")
    found = []
    for i, joint in enumerate(arm.joints):
        unit, scale = ("mm", 1e3) if arm.kinds[i] == PRISMATIC else ("deg", math.degrees(1))
        speed = arm.drives.speed_limit[i]
        for limit, value, bound, beyond in (
            ("lower limit", q[:, i], arm.lower[i], arm.lower[i] - q[:, i]),
            ("upper limit", q[:, i], arm.upper[i], q[:, i] - arm.upper[i]),
            ("speed limit", np.abs(v[:, i]), speed, np.abs(v[:, i]) - speed),
        ):
            if not math.isfinite(bound):
                continue
            over = np.flatnonzero(beyond > SLACK * abs(bound))
            if over.size:
                per = f"{unit}/s" if limit == "speed limit" else unit
                worst, first = float(value[beyond.argmax()]) * scale, float(times[over[0]])
                found.append(Passing(joint, limit, first, worst, float(bound) * scale, per))
    return found


def check_motion(motion: Motion, arm: Arm, control_hz: float) -> list[Passing]:
    """Return every limit that the reference passes at a control tick or at its end, joint by joint."""
    ticks = np.arange(math.floor(motion.duration_s * control_hz) + 1) / control_hz
    return passings(motion, arm, np.append(ticks[ticks < motion.duration_s], motion.duration_s))

"""Where a motion leaves the limits of the arm's joints."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rigbench.arm.arm import PRISMATIC, Arm, Floats
from rigbench.motion.motion import Motion

__all__ = ["Passing", "beyond", "check_motion", "passings", "shown", "to_si", "unit_of"]

SLACK = 1e-9
"""By how much a limit may be passed, in SI units and as a share of it: a motion that stands on its limit
is not beyond it by rounding."""


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


def unit_of(arm: Arm, i: int) -> tuple[str, float]:
    """Return the unit that people read joint i's position in, and how many of it make the SI unit."""
    return ("mm", 1e3) if arm.kinds[i] == PRISMATIC else ("deg", math.degrees(1))


def to_si(arm: Arm) -> Floats:
    """Return what turns a joint's deg into rad and a prismatic joint's mm into m, shape (n,)."""
    return np.where(arm.kinds == PRISMATIC, 1e-3, math.radians(1.0))


def beyond(excess: Floats, bound: float) -> NDArray[np.intp]:
    """Return where (indices) a limit is passed by ``excess``, both in SI units; nowhere if it is infinite."""
    if not math.isfinite(bound):
        return np.empty(0, np.intp)
    return np.flatnonzero(excess > SLACK * max(1.0, abs(bound)))


def shown(value: float, bound: float) -> tuple[str, str]:
    """Write two numbers with as many digits, at least four, as it takes to tell them apart."""
    whole = max(len(f"{abs(number):.0f}") for number in (value, bound))
    for digits in range(min(max(4, whole), 16), 17):
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
        unit, scale = unit_of(arm, i)
        speed = arm.drives.speed_limit[i]
        for limit, value, bound, excess in (
            ("lower limit", q[:, i], arm.lower[i], arm.lower[i] - q[:, i]),
            ("upper limit", q[:, i], arm.upper[i], q[:, i] - arm.upper[i]),
            ("speed limit", np.abs(v[:, i]), speed, np.abs(v[:, i]) - speed),
        ):
            over = beyond(excess, bound)
            if over.size:
                per = f"{unit}/s" if limit == "speed limit" else unit
                worst, first = float(value[excess.argmax()]) * scale, float(times[over[0]])
                found.append(Passing(joint, limit, first, worst, float(bound) * scale, per))
    return found


def check_motion(motion: Motion, arm: Arm, control_hz: float) -> list[Passing]:
    """Return every limit that the reference passes at a control tick or at its end, joint by joint."""
    ticks = np.arange(math.floor(motion.duration_s * control_hz) + 1) / control_hz
    return passings(motion, arm, np.append(ticks[ticks < motion.duration_s], motion.duration_s))

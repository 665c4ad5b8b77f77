"""What a law is shown: states and references at control ticks, quiet ones and extreme ones."""

from __future__ import annotations

import numpy as np

from rigbench.arm.arm import PRISMATIC, Arm, Floats
from rigbench.laws.law import Reference

__all__ = ["CONTROL_HZ", "Tick", "ticks_for"]

CONTROL_HZ = 1000.0

Tick = tuple[float, Floats, Floats, Reference]
"""Time [s], position and velocity (n,), reference."""

MOVING, STILL = 12, 3


def ticks_for(arm: Arm) -> list[Tick]:
    """Return calls for a law: an arm that lags behind its reference, then one that stands and one that races.

    In this order: the first step from rest, exactly on the reference; states along a motion; rest beside a
    reference at rest; far beyond a turn (or a metre) away; at the speed limit either way.
    """
    rng, n = np.random.default_rng(7), arm.n
    unit = np.where(arm.kinds == PRISMATIC, 0.1, 1.0)
    fast = np.where(np.isfinite(arm.drives.speed_limit), arm.drives.speed_limit, 10.0 * unit)
    zero, found = np.zeros(n), []
    phase = rng.uniform(0.5, 2.0, n)
    found.append((zero, zero, (zero, zero, zero)))
    for k in range(MOVING):
        x = 0.3 * (k + 1) * phase
        wanted = unit * np.sin(x), 3 * unit * np.cos(x), -9 * unit * np.sin(x)
        away = 0.01 * unit * rng.normal(size=(2, n))
        found.append((wanted[0] + away[0], wanted[1] + 10 * away[1], wanted))
    for _ in range(STILL):
        found.append((unit, zero, (unit - 1e-4 * unit, zero, zero)))
    found.append((7 * unit, zero, (-7 * unit, zero, zero)))
    found.append((unit, fast, (unit, fast, zero)))
    found.append((unit, -fast, (unit, fast, zero)))
    return [
        (k / CONTROL_HZ, q.copy(), v.copy(), Reference(*(part.copy() for part in ref)))
        for k, (q, v, ref) in enumerate(found)
    ]

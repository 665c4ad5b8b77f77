"""The time law of a leg from rest to rest: a quintic without velocity or acceleration at either end."""

from __future__ import annotations

import numpy as np

from rigbench.arm.arm import Floats

__all__ = ["elapsed", "quintic", "when"]

ARRIVED = 1e-9
"""Share of a leg before its end that counts as its end, so that rounding in t leaves no trace in a rest;
the position is the same in double precision there, as s differs from 1 by 1e-26."""


def elapsed(t: Floats, leg_s: float) -> Floats:
    """Return the share x of a leg that has passed at the times t [s] since its start, 0 to 1."""
    x = np.clip(t / leg_s, 0.0, 1.0)
    return np.where(x > 1 - ARRIVED, 1.0, x)


def quintic(x: Floats) -> tuple[Floats, Floats, Floats]:
    """Return s = 10 x^3 - 15 x^4 + 6 x^5 and its first and second derivative by x, for x from 0 to 1.

    s runs from 0 to 1; the peaks of the derivatives are 15/8, at x = 1/2, and 10/sqrt(3).
    """
    s = x**3 * (10 + x * (6 * x - 15))
    return s, 30 * (x * (1 - x)) ** 2, 60 * x * (1 - x) * (1 - 2 * x)


def when(s: float) -> float:
    """Return the x at which the quintic has come to s (its inverse), to rounding."""
    if s in (0.0, 1.0):
        return s
    low, high = 0.0, 1.0
    for _ in range(60):
        middle = (low + high) / 2
        if quintic(np.array(middle))[0] < s:
            low = middle
        else:
            high = middle
    return high

"""Nonlinear least squares with bounds from below, of which few matter."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy import bool_
from numpy.typing import NDArray

from rigbench.arm.arm import Floats

__all__ = ["bounded_fit"]

Function = Callable[[Floats], Floats]


def bounded_fit(
    misfit: Function, slope: Function, least: Floats, tolerance: float, steps: int | None = None
) -> Floats:
    """Return z (p,), from 0 on, where the sum of squares of ``misfit`` (m,) is least, m >= p, z >= ``least``.

    ``slope`` is d misfit / d z, (m, p); ``steps`` are taken at most in each fit. Solved without bounds; what
    falls below its own is held there, and the rest solved again, until nothing does. Nothing is let go again.
    Solvers that stay inside the bounds stop far from the least where it lies on several of them.
    """
    held, z = np.zeros(len(least), bool), np.zeros(len(least))
    while True:
        z = _fitted(misfit, slope, z, ~held, tolerance, steps)
        below = ~held & (z < least)
        if not below.any():
            return z
        held |= below
        z = np.where(held, least, z)


def _fitted(
    misfit: Function, slope: Function, z: Floats, free: NDArray[bool_], tolerance: float, steps: int | None
) -> Floats:
    """Return z with its ``free`` entries where the sum of squares is least; the others stay."""
    from scipy.optimize import least_squares  # slow to import

    def whole(part: Floats) -> Floats:
        full = z.copy()
        full[free] = part
        return full

    found = least_squares(
        lambda part: misfit(whole(part)),
        z[free],
        lambda part: slope(whole(part))[:, free],
        xtol=tolerance,
        ftol=tolerance,
        max_nfev=steps,
    )
    return whole(found.x)

"""Whole parameters of bodies that can exist, near the declared ones, from estimated base parameters."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import scipy.linalg
from scipy.optimize import least_squares

from rigbench.arm.arm import Arm, Floats
from rigbench.arm.log_cholesky import Coordinates
from rigbench.arm.vector import LINK, with_vector
from rigbench.arm.whitening import floored, whitening
from rigbench.identify.estimate import Estimate
from rigbench.identify.regressor import Terms, parameter_values

__all__ = ["SPREAD", "Consistent", "consistent"]

SPREAD = 0.3
"""Default spread of the declared values in log-Cholesky coordinates: a mass is believed to 60 %, a
friction to 30 % (our choice: wide beside what excitation shows, narrow beside nothing)."""

LEAST_SCALE, NIL = 1e-9, 1e-12
"""Scale of a drive's term that is nowhere seen, and how far below 0 the solver may start from one at 0."""


@dataclass(frozen=True, eq=False)
class Consistent:
    """An arm whose links can exist, and how well its parameters are known.

    ``offset`` (n,) [N m] holds the constant torques, zeros where they were not asked for. ``covariance``
    (k, k) is that of the coordinates z about ``arm`` (see :class:`Coordinates`), to first order.
    """

    arm: Arm
    offset: Floats
    covariance: Floats
    scales: Floats  # (k - 10 n,), of the drives' coordinates


def consistent(arm: Arm, terms: Terms, found: Estimate, spread: float = SPREAD) -> Consistent:
    """Return the arm nearest to the declared ``arm`` and to the estimated base parameters.

    Least of (K x - b)' C^-1 (K x - b) + z'z / spread^2 over z, with b and C the estimate and its covariance,
    x the parameters at the coordinates z about the declared arm, and no friction or rotor below 0. So
    what the torques show decides where it is shown well, and the declared values where it is not.
    """
    declared = parameter_values(arm, terms)
    combination, links = found.base.combination, LINK * arm.n
    shown = np.abs(scipy.linalg.lstsq(combination, found.values)[0])[links:]
    scales = np.maximum(np.maximum(declared[links:], shown), LEAST_SCALE)
    about = Coordinates(declared, arm.n, scales)
    size = np.abs(combination) @ np.abs(declared) + np.abs(found.values)
    whitened = whitening(floored(found.covariance, size))

    def misfit(z: Floats) -> Floats:
        return np.concatenate([whitened(combination @ about.values(z) - found.values), z / spread])

    def slope(z: Floats) -> Floats:
        return np.vstack([whitened(combination @ about.slope(z)), np.eye(len(z)) / spread])

    drive_terms = [name for name in terms.names if name != "offset"]
    end = links + arm.n * len(drive_terms)
    least = np.full(len(declared), -np.inf)
    least[links:end] = np.minimum(-declared[links:end] / scales[: end - links], -NIL)
    start = np.zeros(len(declared))
    solved = least_squares(misfit, start, slope, bounds=(least, np.inf), xtol=1e-12, ftol=1e-12)
    values = about.values(solved.x)
    values[links:end] = np.maximum(values[links:end], 0.0)
    seen = whitened(combination @ Coordinates(values, arm.n, scales).slope(start))
    return Consistent(
        arm=with_vector(arm, values, drive_terms),
        offset=values[end:] if terms.offset else np.zeros(arm.n),
        covariance=_left_over(seen, spread),
        scales=scales,
    )


def _left_over(seen: Floats, spread: float) -> Floats:
    """Return (A'A + 1 / spread^2)^-1 of A (b, p) by its singular values, which may be 1e12 apart."""
    _, size, directions = scipy.linalg.svd(seen)
    known = np.zeros(len(directions))
    known[: len(size)] = size**2
    covariance: Floats = (directions.T / (known + spread**-2)) @ directions
    return covariance

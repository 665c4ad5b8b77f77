"""Errors of known covariance, turned into ones of covariance 1."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from rigbench.arm.arm import Floats

__all__ = ["floored", "whitening"]

FINEST = 1e-6
"""Least standard deviation that counts, as a share of what a number is made of: a finer one would leave a
solver no digits for what hardly shows."""


def floored(covariance: Floats, size: Floats) -> Floats:
    """Return a covariance (b, b) with deviations of :data:`FINEST` of the ``size`` (b,) added, all > 0."""
    least = FINEST * np.maximum(size, size.max() * FINEST)
    result: Floats = covariance + np.diag(least**2)
    return result


def whitening(covariance: Floats) -> Callable[[Floats], Floats]:
    """Return what turns errors (b, ...) of a covariance (b, b), positive definite, into ones of covariance 1.

    Units may be 1e12 apart: each error is divided by its own deviation before anything is solved.
    """
    import scipy.linalg  # slow to import

    deviation = np.sqrt(np.diag(covariance))
    root = scipy.linalg.cholesky(covariance / np.outer(deviation, deviation), lower=True)

    def whitened(error: Floats) -> Floats:
        scaled = (error.T / deviation).T
        result: Floats = scipy.linalg.solve_triangular(root, scaled, lower=True)
        return result

    return whitened

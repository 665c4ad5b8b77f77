"""Whole parameters of bodies that can exist, near the declared ones, from estimated base parameters."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import scipy.linalg

from rigbench.arm.arm import Arm, Floats
from rigbench.arm.log_cholesky import Coordinates
from rigbench.arm.nearest_parameters import nearest_parameters
from rigbench.arm.vector import LINK, with_vector
from rigbench.arm.whitening import floored, whitening
from rigbench.identify.estimate import Estimate
from rigbench.identify.regressor import Terms, parameter_values

__all__ = ["SPREAD", "Consistent", "consistent"]

SPREAD = 0.3
"""Default spread of the declared values in log-Cholesky coordinates: a mass is believed to 60 %, a
friction to 30 % (our choice: wide beside what excitation shows, narrow beside nothing)."""

LEAST_SCALE = 1e-9
"""Scale of a drive's term that is nowhere seen."""

MOST_STEPS = 200
"""Steps of the fit at most. Where torques without noise show a body that is a point, which is at the end of
these coordinates, rounding keeps it from standing still; all others take some 60."""

LOAD_SPREAD = 1.0
"""Spread of a load about its first guess in the same coordinates: a standard deviation is a factor of 7 in
its mass, of 2.7 in its extent (our choice: there is no drawing of it to believe in)."""


@dataclass(frozen=True, eq=False)
class Consistent:
    """An arm whose links can exist, and how well its parameters are known.

    ``offset`` (n,) [N m] holds the constant torques, zeros where they were not asked for. ``covariance``
    (k, k) is that of the coordinates z about ``arm`` (see :class:`Coordinates`), to first order. ``load``
    (10,) is a body that the last link holds, in its frame, where one was estimated.
    """

    arm: Arm
    offset: Floats
    covariance: Floats
    scales: Floats  # (k - 10 n,), of the drives' coordinates
    load: Floats | None = None


def consistent(
    arm: Arm, terms: Terms, found: Estimate, spread: float = SPREAD, load: Floats | None = None
) -> Consistent:
    """Return the arm nearest to the declared ``arm`` and to the estimated base parameters.

    Least of (K x - b)' C^-1 (K x - b) + z'z / spread^2 over z, with b and C the estimate and its covariance,
    x the parameters at the coordinates z about the declared arm, and no friction or rotor below 0. So
    what the torques show decides where it is shown well, and the declared values where it is not.

    With a first guess of a ``load`` (10,), a body that can exist, ``found`` is of
    :func:`rigbench.identify.load.beside`: the load's ten parameters stand after the links', and are held to
    the guess by :data:`LOAD_SPREAD`. The covariance is then the arm's share of the whole.
    """
    own = LINK * arm.n
    carried = np.empty(0) if load is None else load
    declared = np.insert(parameter_values(arm, terms), own, carried)
    spreads = np.insert(
        np.full(len(declared) - len(carried), spread), own, np.full(len(carried), LOAD_SPREAD)
    )
    combination, links = found.base.combination, own + len(carried)
    shown = np.abs(scipy.linalg.lstsq(combination, found.values)[0])[links:]
    scales = np.maximum(np.maximum(declared[links:], shown), LEAST_SCALE)
    about = Coordinates(declared, links // LINK, scales)
    size = np.abs(combination) @ np.abs(declared) + np.abs(found.values)
    whitened = whitening(floored(found.covariance, size))
    drive_terms = [name for name in terms.names if name != "offset"]
    end = links + arm.n * len(drive_terms)
    values = nearest_parameters(
        about, combination, found.values, whitened, spreads, end - links, 1e-12, MOST_STEPS
    )
    seen = whitened(combination @ Coordinates(values, links // LINK, scales).slope(np.zeros(len(values))))
    kept = np.delete(np.arange(len(values)), np.s_[own:links])
    return Consistent(
        arm=with_vector(arm, values[kept], drive_terms),
        offset=values[end:] if terms.offset else np.zeros(arm.n),
        covariance=_left_over(seen, spreads)[np.ix_(kept, kept)],
        scales=scales,
        load=None if load is None else values[own:links],
    )


def _left_over(seen: Floats, spreads: Floats) -> Floats:
    """Return (A'A + S^-2)^-1 of A (b, p), S the diagonal of ``spreads`` (p,).

    By the singular values of A S, which may be 1e12 apart.
    """
    _, size, directions = scipy.linalg.svd(seen * spreads)
    known = np.zeros(len(directions))
    known[: len(size)] = size**2
    covariance: Floats = (directions.T / (known + 1.0)) @ directions * np.outer(spreads, spreads)
    return covariance

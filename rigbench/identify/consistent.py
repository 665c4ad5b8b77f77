"""Whole parameters of bodies that can exist, near the declared ones, from estimated base parameters."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
import scipy.linalg
from scipy.optimize import least_squares

from rigbench.arm.arm import Arm, Floats
from rigbench.arm.physical import from_pseudo_inertia, pseudo_inertia
from rigbench.identify.base import LINK
from rigbench.identify.estimate import Estimate
from rigbench.identify.regressor import Terms, parameter_values

__all__ = ["SPREAD", "Consistent", "Coordinates", "consistent", "from_log_cholesky"]

SPREAD = 0.3
"""Default spread of the declared values in log-Cholesky coordinates: a mass is believed to 60 %, a
friction to 30 % (our choice: wide beside what excitation shows, narrow beside nothing)."""

FINEST = 1e-6
"""Least standard deviation of a base parameter that counts, as a share of what it is made of: a finer
one would leave the solver no digits for the declared values."""

LEAST_SCALE, NIL = 1e-9, 1e-12
"""Scale of a drive's term that is nowhere seen, and how far below 0 the solver may start from one at 0."""

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


@dataclass(frozen=True, eq=False)
class Coordinates:
    """Coordinates z about parameters: ten for each link, then one for each term of the drives.

    A link's pseudo-inertia is U0 U(z) U(z)' U0', with U0 U0' that at z = 0 and U(z) as in
    :func:`from_log_cholesky`, so that the same z is the same change whatever the link's size, units or
    frame. A drive's term is its value at z = 0 plus z times its ``scale``.
    """

    origin: Floats  # (p,), parameters at z = 0
    links: int
    scales: Floats

    @cached_property
    def _roots(self) -> Floats:
        """U0 of each link (n, 4, 4), upper triangular."""
        pseudo = pseudo_inertia(self.origin[: LINK * self.links].reshape(-1, LINK))
        flipped = np.linalg.cholesky(pseudo[:, ::-1, ::-1])
        return np.ascontiguousarray(flipped[:, ::-1, ::-1])

    def values(self, z: Floats) -> Floats:
        """Return the parameters (p,) at z (p,)."""
        split = LINK * self.links
        root = self._roots @ from_log_cholesky(z[:split].reshape(-1, LINK))
        bodies = from_pseudo_inertia(root @ np.swapaxes(root, 1, 2))
        return np.concatenate([bodies.ravel(), self.origin[split:] + self.scales * z[split:]])

    def slope(self, z: Floats) -> Floats:
        """Return d values / d z at z, (p, p): dJ = U0 (dU U' + U dU') U0' for a link."""
        split = LINK * self.links
        upper = from_log_cholesky(z[:split].reshape(-1, LINK))
        change = np.zeros((self.links, LINK, 4, 4))  # dU for each coordinate
        change[:, 0] = upper
        for k in range(3):
            change[:, 1 + k, k, k] = upper[:, k, k]
        for coordinate, (row, column) in enumerate(((0, 1), (1, 2), (0, 2), (0, 3), (1, 3), (2, 3)), 4):
            change[:, coordinate, row, column] = upper[:, 3, 3]
        half = self._roots[:, None] @ change @ np.swapaxes(self._roots @ upper, 1, 2)[:, None]
        bodies = from_pseudo_inertia(half + np.swapaxes(half, 2, 3))
        slope: Floats = scipy.linalg.block_diag(*np.swapaxes(bodies, 1, 2), np.diag(self.scales))
        return slope


def from_log_cholesky(theta: Floats) -> Floats:
    """Return the upper triangular U (..., 4, 4) of coordinates (..., 10); U U^T is a body's pseudo-inertia.

    theta = (alpha, d1, d2, d3, s12, s23, s13, t1, t2, t3), U = e^alpha [[e^d1, s12, s13, t1], [0, e^d2,
    s23, t2], [0, 0, e^d3, t3], [0, 0, 0, 1]]. Every theta is a body that can exist, and every such
    body is one theta. Source: Rucker, Wensing 2022, "Smooth parameterization of rigid-body inertia".
    """
    upper = np.zeros((*theta.shape[:-1], 4, 4))
    for k in range(3):
        upper[..., k, k] = np.exp(theta[..., 1 + k])
        upper[..., k, 3] = theta[..., 7 + k]
    upper[..., 0, 1], upper[..., 1, 2], upper[..., 0, 2] = theta[..., 4], theta[..., 5], theta[..., 6]
    upper[..., 3, 3] = 1.0
    scaled: Floats = upper * np.exp(theta[..., :1, None])
    return scaled


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
    whitened = _whitened(found, np.abs(combination) @ np.abs(declared))

    def misfit(z: Floats) -> Floats:
        return np.concatenate([whitened(combination @ about.values(z) - found.values), z / spreads])

    def slope(z: Floats) -> Floats:
        return np.vstack([whitened(combination @ about.slope(z)), np.diag(1 / spreads)])

    drive_terms = [name for name in terms.names if name != "offset"]
    end = links + arm.n * len(drive_terms)
    least = np.full(len(declared), -np.inf)
    least[links:end] = np.minimum(-declared[links:end] / scales[: end - links], -NIL)
    start = np.zeros(len(declared))
    solved = least_squares(
        misfit, start, slope, bounds=(least, np.inf), xtol=1e-12, ftol=1e-12, max_nfev=MOST_STEPS
    )
    values = about.values(solved.x)
    values[links:end] = np.maximum(values[links:end], 0.0)
    seen = whitened(combination @ Coordinates(values, links // LINK, scales).slope(start))
    kept = np.delete(np.arange(len(values)), np.s_[own:links])
    return Consistent(
        arm=_with(arm, values[kept], drive_terms),
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


def _whitened(found: Estimate, made_of: Floats) -> Callable[[Floats], Floats]:
    """Return what turns errors of the base parameters (b, ...) into ones of covariance 1."""
    size = made_of + np.abs(found.values)
    covariance = found.covariance + np.diag((FINEST * np.maximum(size, size.max() * FINEST)) ** 2)
    deviation = np.sqrt(np.diag(covariance))
    root = scipy.linalg.cholesky(covariance / np.outer(deviation, deviation), lower=True)

    def whitened(error: Floats) -> Floats:
        scaled = (error.T / deviation).T
        result: Floats = scipy.linalg.solve_triangular(root, scaled, lower=True)
        return result

    return whitened


def _with(arm: Arm, values: Floats, drive_terms: list[str]) -> Arm:
    """Return the arm with these parameters; breakaway keeps its ratio to Coulomb friction."""
    n, drives = arm.n, arm.drives
    of = {
        name: values[LINK * n + n * k : LINK * n + n * (k + 1)].copy() for k, name in enumerate(drive_terms)
    }
    changes: dict[str, Floats] = {}
    if "rotor" in of:
        changes["rotor_inertia"] = of["rotor"] / drives.gear_ratio**2
    if "viscous" in of:
        changes["viscous"] = of["viscous"]
    if "coulomb" in of:
        dry = drives.coulomb > 0
        ratio = np.where(dry, drives.static / np.where(dry, drives.coulomb, 1.0), 1.0)
        changes |= {"coulomb": of["coulomb"], "static": of["coulomb"] * ratio}
    return arm.replaced(values[: LINK * n].reshape(n, LINK).copy(), replace(drives, **changes))

"""Coordinates of parameters in which every point is a machine that can exist."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.arm.physical import from_pseudo_inertia, pseudo_inertia
from rigbench.arm.vector import LINK

__all__ = ["Coordinates", "from_log_cholesky"]


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
        slope = np.zeros((len(self.origin), len(self.origin)))
        for k in range(self.links):
            own = slice(LINK * k, LINK * k + LINK)
            slope[own, own] = bodies[k].T
        slope[split:, split:] = np.diag(self.scales)
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

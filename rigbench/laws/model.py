"""The model: what a law believes about the arm."""

from __future__ import annotations

from typing import Literal

import numpy as np

from rigbench.arm import dynamics
from rigbench.arm.arm import LINK, Arm, Floats
from rigbench.arm.kernel import kernel
from rigbench.laws.passive import passive_torque

__all__ = ["FRICTION_ROWS", "FrictionTerm", "Model", "friction_torque"]

FrictionTerm = Literal["none", "viscous", "full"]

FRICTION_ROWS = 4
"""Rows that :func:`friction_torque` reads: viscous, coulomb, static, stribeck_speed."""

STANDSTILL = 1e-4
"""Below this speed [rad/s] a reference counts as standing and Coulomb friction has no sign: else noise
of 1e-12 in a reference at rest would command torque ripple of whole N m."""


@kernel
def friction_torque(rows: Floats, v: Floats, out: Floats) -> None:
    """Add the friction torque [N m] at speed v (n,) to ``out`` (n,).

    (Fc + (Fs - Fc) exp(-(v/vs)^2)) sign(v) + B v, with the sign taken as 0 below 1e-4 rad/s; steady
    Stribeck friction, Armstrong-Helouvry, Dupont, Canudas de Wit 1994. ``rows`` (4, n) as above.
    """
    for i in range(v.shape[0]):
        out[i] += rows[0, i] * v[i]
        if abs(v[i]) >= STANDSTILL:
            slip = v[i] / rows[3, i]
            size = rows[1, i] + (rows[2, i] - rows[1, i]) * np.exp(-slip * slip)
            out[i] += size if v[i] > 0.0 else -size


class Model:
    """The believed arm: functions of joint vectors (n,), and the flat arrays that kernels take.

    Rotor inertia is included where acceleration enters: ``mass_matrix`` is M + G^2 Jm, and
    ``inverse_dynamics`` carries G^2 Jm a. Friction is apart, in ``friction``.
    """

    def __init__(self, arm: Arm, gravity: tuple[float, float, float]) -> None:
        self.arm = arm
        self.chain: Floats = arm.chain(gravity)
        self.reflected: Floats = arm.drives.reflected

    @property
    def n(self) -> int:
        """Number of joints."""
        return self.arm.n

    def mass_matrix(self, q: Floats) -> Floats:
        """Return M(q) + diag(G^2 Jm), (n, n) [kg m^2]."""
        return dynamics.mass_matrix(self.chain, q) + np.diag(self.reflected)

    def bias_torque(self, q: Floats, v: Floats) -> Floats:
        """Return h(q, v), (n,) [N m]: Coriolis, centripetal and gravity torque."""
        return dynamics.bias_torque(self.chain, q, v)

    def gravity_torque(self, q: Floats) -> Floats:
        """Return g(q), (n,) [N m]."""
        return dynamics.gravity_torque(self.chain, q)

    def inverse_dynamics(self, q: Floats, v: Floats, a: Floats) -> Floats:
        """Return (M(q) + G^2 Jm) a + h(q, v), (n,) [N m]."""
        return dynamics.inverse_dynamics(self.chain, q, v, a) + self.reflected * a

    def passive_torque(self, q: Floats, v: Floats, v_r: Floats, a_r: Floats) -> Floats:
        """Return (M(q) + G^2 Jm) a_r + C(q, v) v_r + g(q), (n,) [N m], with M' - 2 C skew-symmetric."""
        placed, tau = np.empty((self.n, 12)), np.empty(self.n)
        dynamics.place(self.chain, q, placed)
        passive_torque(self.chain, placed, v, v_r, a_r, self.chain[:-1, LINK].copy(), tau)
        return tau + self.reflected * a_r

    def friction_rows(self, term: FrictionTerm) -> Floats:
        """Return the believed friction as ``term`` goes, (4, n), for :func:`friction_torque`."""
        drives = self.arm.drives
        rows = np.zeros((FRICTION_ROWS, self.n))
        rows[3] = drives.stribeck_speed
        if term != "none":
            rows[0] = drives.viscous
        if term == "full":
            rows[1], rows[2] = drives.coulomb, drives.static
        return rows

    def friction(self, v: Floats, term: FrictionTerm = "full") -> Floats:
        """Return the believed friction torque (n,) [N m] at speed v."""
        out = np.zeros(self.n)
        friction_torque(self.friction_rows(term), v, out)
        return out

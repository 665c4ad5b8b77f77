"""What the laws with a shifted reference velocity have in common: s, v_r, a_r and the links' parameters."""

from __future__ import annotations

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.arm.dynamics import place
from rigbench.arm.kernel import kernel
from rigbench.laws.feedback import believed_friction
from rigbench.laws.gains import PdLaw, positive_damping, positive_kd
from rigbench.laws.law import A_REF, Q_REF, V_REF, Q, Reference, Setup, V
from rigbench.laws.model import FrictionTerm
from rigbench.laws.passive import regressor

__all__ = ["REFLECTED", "SLOPE", "ShiftedLaw", "link_sizes", "shift"]

REFLECTED, SLOPE = 6, 7
"""Rows of ``own`` after kp, kd and the believed friction, see :meth:`ShiftedLaw.shifted_rows`."""


class ShiftedLaw(PdLaw):
    """v_r = v_ref + L e, a_r = a_ref + L e', s = v_r - v = e' + L e [rad/s], with L = Kp / Kd [1/s]."""

    damping: float = positive_damping()
    kd: tuple[float, ...] | None = positive_kd()
    friction: FrictionTerm = believed_friction()

    def start(self, setup: Setup) -> None:
        """Take model and gains; work out L."""
        super().start(setup)
        self._slope = self._kp / self._kd

    def shifted(self, q: Floats, v: Floats, ref: Reference) -> tuple[Floats, Floats, Floats]:
        """Return v_r, a_r and s, each (n,)."""
        e, rate = ref.q - q, ref.v - v
        return ref.v + self._slope * e, ref.a + self._slope * rate, rate + self._slope * e

    def columns(self, q: Floats, v: Floats, v_r: Floats, a_r: Floats) -> Floats:
        """Return Y of the links' parameters, (n, n, 10), see :func:`rigbench.laws.passive.regressor`."""
        placed = np.empty((self._model.n, 12))
        place(self._model.chain, q, placed)
        return regressor(self._model.chain, placed, v, v_r, a_r)

    def shifted_rows(self) -> Floats:
        """Return the first rows of ``own``, (8, n): kp, kd, friction (4), reflected rotor inertia, L."""
        return np.vstack([self.own_rows(), self._model.reflected, self._slope])


@kernel
def shift(io: Floats, slope: Floats, v_r: Floats, a_r: Floats, s: Floats) -> None:
    """Fill ``v_r``, ``a_r`` and ``s`` (n,) for ``slope`` (n,), L."""
    for i in range(io.shape[1]):
        e, rate = io[Q_REF, i] - io[Q, i], io[V_REF, i] - io[V, i]
        v_r[i], a_r[i] = io[V_REF, i] + slope[i] * e, io[A_REF, i] + slope[i] * rate
        s[i] = rate + slope[i] * e


def link_sizes(parameters: Floats, percent: float) -> Floats:
    """Return how far each of the links' ``parameters`` (n, 10) may be off, (10, n).

    ``percent`` of m, m l and m l^2, with l the root of the link's mean square distance from its frame's
    origin: a parameter that is believed to be 0 may be off as well.
    """
    second = 0.5 * (parameters[:, 4] + parameters[:, 6] + parameters[:, 9])
    first = np.sqrt(parameters[:, 0] * second)
    return percent / 100.0 * np.vstack([parameters[:, 0], *[first] * 3, *[second] * 6])

"""Passivity-based robust control: the model's parameters lean, within bounds, against the error."""

from __future__ import annotations

import numpy as np

from rigbench.arm.arm import LINK, Floats
from rigbench.arm.dynamics import place
from rigbench.arm.kernel import kernel
from rigbench.laws.feedback import saturated
from rigbench.laws.law import TAU, V_REF, Compiled, Q, Reference, Setup, V, option
from rigbench.laws.model import friction_torque
from rigbench.laws.passive import joint_torques, link_forces, link_motion, parameter_power
from rigbench.laws.shifted import REFLECTED, SLOPE, ShiftedLaw, link_sizes, shift

__all__ = ["RobustPassivity"]

BOUNDARY = 8
SIZE = slice(9, 19)
"""Rows of ``own`` after those of :meth:`ShiftedLaw.shifted_rows`."""


class RobustPassivity(ShiftedLaw):
    """tau = (M(q) + Jr) a_r + C(q, v) v_r + g(q) + friction(v_ref) + Kd s, M, C and g of leaning parameters.

    e = q_ref - q; L = Kp / Kd [1/s]; v_r = v_ref + L e, a_r = a_ref + L e', s = v_r - v = e' + L e [rad/s],
    as in slotine-li, so Kd s is the feedback of independent-joint with the same Kp and Kd. C in the form of
    Christoffel symbols. The torque is linear in the links' parameters (ten each), Y p, and instead of being
    adapted each of them leans against the error at once:
    p = p_0 + size sat(size Y^T s / boundary), component by component, sat cuts at -1 and 1. p_0 is the
    believed model; size is how far the true one may be off: bound_percent of m, m l and m l^2, l the root
    of the link's mean square distance from its frame's origin.

    While every true parameter lies within its size of p_0, V = s^T (M + Jr) s / 2 has
    V' <= -s^T Kd s + (number of parameters) boundary / 4: it falls wherever s^T Kd s exceeds the last term,
    so s ends up in a region that shrinks with the boundary. Rotors, Jr = G^2 Jm [kg m^2], and friction are
    as believed. Where every sat is below 1 the lean is a gain of Y size^2 Y^T / boundary on s beside Kd. The
    boundary is there against chatter: that gain and Kd, over the joint's inertia and times the control
    period, are to stay well below 2.

    All is worked out at control_hz and held in between; no state, so nothing winds up where the drive limits
    the torque (but V may rise there). Source: Spong 1992, "On the robust control of robot manipulators"
    (from memory).
    """

    bound_percent: float = option(
        100.0, "%", "how far the links' true parameters may be from the believed ones", at_least=0
    )
    boundary: float = option(
        3.0, "W", "power of the error on a parameter's size at which it leans by all of it", above=0
    )

    def start(self, setup: Setup) -> None:
        """Take model and gains; work out the sizes."""
        super().start(setup)
        self._size = link_sizes(self._model.arm.parameters, self.bound_percent)

    def torque(self, t: float, q: Floats, v: Floats, ref: Reference, held: Floats) -> Floats:
        """Return the torque (n,) [N m]."""
        del t, held
        model = self._model
        v_r, a_r, s = self.shifted(q, v, ref)
        columns = self.columns(q, v, v_r, a_r)
        power = self._size * np.einsum("jik,j->ki", columns, s)
        lean = self._size * np.clip(power / self.boundary, -1.0, 1.0)
        torque: Floats = np.einsum("jik,ik->j", columns, model.chain[: model.n, LINK] + lean.T)
        return torque + model.reflected * a_r + self._kd * s + model.friction(ref.v, self.friction)

    def compiled(self) -> Compiled:
        """Return the kernel; ``own`` rows: :meth:`shifted_rows`, boundary, sizes (10)."""
        own = np.vstack([self.shifted_rows(), np.full(self._model.n, self.boundary), self._size])
        return Compiled(torque=_torque, own=own)


@kernel
def _torque(io: Floats, held: Floats, chain: Floats, own: Floats) -> None:
    n, size = io.shape[1], own[SIZE]
    placed, moved, force, ten = np.empty((n, 12)), np.empty((n, 12)), np.empty((n, 6)), np.empty((n, 10))
    v_r, a_r, s = np.empty(n), np.empty(n), np.empty(n)
    shift(io, own[SLOPE], v_r, a_r, s)
    place(chain, io[Q], placed)
    link_motion(chain, placed, io[V], v_r, a_r, moved)
    parameter_power(chain, placed, moved, s, ten)
    for i in range(n):
        for k in range(10):
            lean = saturated(size[k, i] * ten[i, k] / own[BOUNDARY, i])
            ten[i, k] = chain[i, 16 + k] + size[k, i] * lean
    link_forces(ten, moved, force)
    joint_torques(chain, placed, force, io[TAU])
    friction_torque(own[2:6], io[V_REF], io[TAU])
    for i in range(n):
        io[TAU, i] += own[REFLECTED, i] * a_r[i] + own[1, i] * s[i]

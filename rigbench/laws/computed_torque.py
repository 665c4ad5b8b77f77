"""Computed torque: the model inverts the arm's dynamics at every sample."""

from __future__ import annotations

from typing import ClassVar

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.arm.dynamics import composite_inertia, newton_euler, place
from rigbench.arm.kernel import kernel
from rigbench.laws.feedback import model_rate
from rigbench.laws.gains import PdLaw
from rigbench.laws.law import A_REF, Q_REF, TAU, V_REF, Compiled, Q, Reference, V, option
from rigbench.laws.model import FrictionTerm, friction_torque

__all__ = ["ComputedTorque"]


class ComputedTorque(PdLaw):
    """tau = (M(q) + Jr) (a_ref + Kd (v_ref - v) + Kp (q_ref - q)) + h(q, v) + friction(v_ref).

    With an exact model each joint's error obeys e'' + Kd e' + Kp e = 0, so Kp [s^-2] and Kd [s^-1]
    pass through the inertia matrix. M and h are worked out at the sensed state, friction at the
    reference's velocity, at model_hz, and held in between. Jr = G^2 Jm [kg m^2].
    Source: Luh, Walker, Paul 1980 (from memory).
    """

    through_inertia: ClassVar[bool] = True

    model_hz: float | None = model_rate()
    friction: FrictionTerm = option(
        "full",
        "",
        "believed friction to add, at the reference's velocity",
        choices=("none", "viscous", "full"),
    )

    def model_term(self, t: float, q: Floats, v: Floats, ref: Reference) -> Floats:
        """Return M + Jr row by row and then h + friction, (n n + n,)."""
        del t
        torque = self._model.bias_torque(q, v) + self._model.friction(ref.v, self.friction)
        return np.concatenate([self._model.mass_matrix(q).ravel(), torque])

    def torque(self, t: float, q: Floats, v: Floats, ref: Reference, held: Floats) -> Floats:
        """Return the torque (n,) [N m]."""
        del t
        n = len(q)
        wanted = ref.a + self._kd * (ref.v - v) + self._kp * (ref.q - q)
        return held[: n * n].reshape(n, n) @ wanted + held[n * n :]

    def compiled(self) -> Compiled:
        """Return the kernels; ``own`` rows: kp, kd, believed friction (4), reflected rotor inertia."""
        model, n = self._model, self._model.n
        own = np.vstack([self.own_rows(), model.reflected])
        return Compiled(torque=_torque, own=own, model_term=_model_term, held_size=n * n + n)


@kernel
def _torque(io: Floats, held: Floats, chain: Floats, own: Floats) -> None:
    n = io.shape[1]
    wanted = np.empty(n)
    for i in range(n):
        wanted[i] = (
            io[A_REF, i] + own[1, i] * (io[V_REF, i] - io[V, i]) + own[0, i] * (io[Q_REF, i] - io[Q, i])
        )
    for i in range(n):
        total = held[n * n + i]
        for j in range(n):
            total += held[i * n + j] * wanted[j]
        io[TAU, i] = total


@kernel
def _model_term(io: Floats, held: Floats, chain: Floats, own: Floats) -> None:
    n = io.shape[1]
    placed = np.empty((n, 12))
    place(chain, io[Q], placed)
    mass = held[: n * n].reshape(n, n)
    composite_inertia(chain, placed, mass)
    for i in range(n):
        mass[i, i] += own[6, i]
    newton_euler(chain, placed, io[V], io[V], False, held[n * n :])
    friction_torque(own[2:6], io[V_REF], held[n * n :])

"""PD+: proportional-derivative control beside a model term that keeps the arm's passivity."""

from __future__ import annotations

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.arm.dynamics import place
from rigbench.arm.kernel import kernel
from rigbench.laws.feedback import HeldTermLaw, believed_friction, feedback_on_held
from rigbench.laws.law import A_REF, V_REF, Compiled, Q, Reference, V
from rigbench.laws.model import FrictionTerm, friction_torque
from rigbench.laws.passive import passive_torque

__all__ = ["PdPlus"]


class PdPlus(HeldTermLaw):
    """tau = (M(q) + Jr) a_ref + C(q, v) v_ref + g(q) + friction(v_ref) + Kd e' + Kp e.

    e = q_ref - q; C in the form of Christoffel symbols, in which M' - 2 C is skew-symmetric. With an exact
    model (M + Jr) e'' + (C + Kd) e' + Kp e = 0, so V = e'^T (M + Jr) e' / 2 + e^T Kp e / 2 never rises:
    V' = -e'^T Kd e'. No inertia matrix is inverted and Kp [N m/rad], Kd [N m s/rad] act as torque, as in
    independent-joint.

    M a_ref, C v_ref, g and friction are worked out at model_hz, at the sensed state, and held in between; no
    state, so nothing winds up where the drive limits the torque. Jr = G^2 Jm [kg m^2].
    Source: Paden, Panja 1988 (from memory).
    """

    friction: FrictionTerm = believed_friction()

    def model_term(self, t: float, q: Floats, v: Floats, ref: Reference) -> Floats:
        """Return the model's torque and the believed friction, (n,) [N m]."""
        del t
        return self._model.passive_torque(q, v, ref.v, ref.a) + self._model.friction(ref.v, self.friction)

    def compiled(self) -> Compiled:
        """Return the kernels; ``own`` rows: kp, kd, believed friction (4), reflected rotor inertia."""
        model = self._model
        own = np.vstack([self.own_rows(), model.reflected])
        return Compiled(torque=feedback_on_held, own=own, model_term=_model_term, held_size=model.n)


@kernel
def _model_term(io: Floats, held: Floats, chain: Floats, own: Floats) -> None:
    n = io.shape[1]
    placed, ten = np.empty((n, 12)), np.empty((n, 10))
    for i in range(n):
        for k in range(10):
            ten[i, k] = chain[i, 16 + k]
    place(chain, io[Q], placed)
    passive_torque(chain, placed, io[V], io[V_REF], io[A_REF], ten, held)
    for i in range(n):
        held[i] += own[6, i] * io[A_REF, i]
    friction_torque(own[2:6], io[V_REF], held)

"""Proportional-derivative control with gravity compensation."""

from __future__ import annotations

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.arm.dynamics import newton_euler, place
from rigbench.arm.kernel import kernel
from rigbench.laws.feedback import HeldTermLaw, feedback_on_held
from rigbench.laws.law import V_REF, Compiled, Q, Reference
from rigbench.laws.model import friction_torque

__all__ = ["GravityCompensated"]


class GravityCompensated(HeldTermLaw):
    """tau = Kp (q_ref - q) + Kd (v_ref - v) + g(q) [+ friction(v_ref)].

    g [N m] is the model's gravity torque with its believed payload, at the sensed position. At rest
    Kp e = g_true - g_model.

    g and friction are worked out at model_hz and held in between, the feedback at every tick; no state, so
    nothing winds up where the drive limits the torque. Source: Takegaki, Arimoto 1981 (from memory).
    """

    def model_term(self, t: float, q: Floats, v: Floats, ref: Reference) -> Floats:
        """Return g(q) and the believed friction, (n,) [N m]."""
        del t, v
        return self._model.gravity_torque(q) + self._model.friction(ref.v, self.friction)

    def compiled(self) -> Compiled:
        """Return the kernels; ``own`` rows: kp, kd, believed friction (4)."""
        own = self.own_rows()
        return Compiled(torque=feedback_on_held, own=own, model_term=_model_term, held_size=self._model.n)


@kernel
def _model_term(io: Floats, held: Floats, chain: Floats, own: Floats) -> None:
    n = io.shape[1]
    placed, rest = np.empty((n, 12)), np.zeros(n)
    place(chain, io[Q], placed)
    newton_euler(chain, placed, rest, rest, False, held)
    friction_torque(own[2:6], io[V_REF], held)

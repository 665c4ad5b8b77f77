"""Torque feedforward: the model's torque for the reference, beside independent-joint feedback."""

from __future__ import annotations

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.arm.dynamics import newton_euler, place
from rigbench.arm.kernel import kernel
from rigbench.laws.feedback import HeldTermLaw, feedback_on_held
from rigbench.laws.law import A_REF, Q_REF, V_REF, Compiled, Reference, option
from rigbench.laws.model import FrictionTerm, friction_torque

__all__ = ["TorqueFeedforward"]


class TorqueFeedforward(HeldTermLaw):
    """tau = Kp (q_ref - q) + Kd (v_ref - v) + (M(q_ref) + Jr) a_ref + h(q_ref, v_ref) + friction(v_ref).

    The model term depends on the motion alone, so it may run at model_hz, far below control_hz (50 or
    100 Hz beside a 1 kHz loop is common practice); between its ticks it is held. Jr = G^2 Jm
    [kg m^2]. Source: An, Atkeson, Hollerbach, "Model-Based Control of a Robot Manipulator", 1988
    (from memory).
    """

    friction: FrictionTerm = option(
        "full",
        "",
        "believed friction to add, at the reference's velocity",
        choices=("none", "viscous", "full"),
    )

    def model_term(self, t: float, q: Floats, v: Floats, ref: Reference) -> Floats:
        """Return the feedforward torque (n,) [N m]."""
        del t, q, v
        return self._model.inverse_dynamics(*ref) + self._model.friction(ref.v, self.friction)

    def compiled(self) -> Compiled:
        """Return the kernels; ``own`` rows: kp, kd, believed friction (4), reflected rotor inertia."""
        model = self._model
        own = np.vstack([self.own_rows(), model.reflected])
        return Compiled(torque=feedback_on_held, own=own, model_term=_model_term, held_size=model.n)


@kernel
def _model_term(io: Floats, held: Floats, chain: Floats, own: Floats) -> None:
    n = io.shape[1]
    placed = np.empty((n, 12))
    place(chain, io[Q_REF], placed)
    newton_euler(chain, placed, io[V_REF], io[A_REF], True, held)
    for i in range(n):
        held[i] += own[6, i] * io[A_REF, i]
    friction_torque(own[2:6], io[V_REF], held)

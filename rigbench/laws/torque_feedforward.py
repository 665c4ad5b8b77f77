"""Torque feedforward: the model's torque for the reference, beside independent-joint feedback."""

from __future__ import annotations

from typing import Literal

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.arm.dynamics import composite_inertia, newton_euler, place
from rigbench.arm.kernel import kernel
from rigbench.laws.feedback import HeldTermLaw, believed_friction, feedback_on_held
from rigbench.laws.law import A_REF, Q_REF, V_REF, Compiled, Reference, Setup, option
from rigbench.laws.model import FrictionTerm, friction_torque

__all__ = ["TorqueFeedforward"]

REFLECTED, AHEAD, DIAGONAL = 6, 7, 8
"""Rows of ``own`` after kp, kd and the believed friction."""


class TorqueFeedforward(HeldTermLaw):
    """tau = Kp (q_ref - q) + Kd (v_ref - v) + (M(q_ref) + Jr) a_ref + h(q_ref, v_ref) + friction(v_ref).

    The model term depends on the motion alone, so it may run at model_hz, far below control_hz (50 or
    100 Hz beside a 1 kHz loop is common practice); between its ticks it is held. Jr = G^2 Jm
    [kg m^2]. Source: An, Atkeson, Hollerbach, "Model-Based Control of a Robot Manipulator", 1988
    (from memory).

    With terms: diagonal it is (diag M(q_ref) + Jr) a_ref + g(q_ref) + friction(v_ref): gravity and each
    joint's own inertia, without coupling. A held term is half a period late on average; look_ahead: 0.5 works
    it out for where the reference will be by then, q_ref + v_ref T + a_ref T^2 / 2 and v_ref + a_ref T with
    T = look_ahead / model_hz (control_hz where model_hz is absent), a_ref as it stands (Taylor).
    """

    friction: FrictionTerm = believed_friction()
    terms: Literal["full", "diagonal"] = option(
        "full",
        "",
        "the whole model, or gravity and each joint's own inertia alone",
        choices=("full", "diagonal"),
    )
    look_ahead: float = option(
        0.0, "periods of the model term", "how far ahead of its tick the model term is worked out", at_least=0
    )

    def start(self, setup: Setup) -> None:
        """Take model and gains; work out how far to look ahead [s]."""
        super().start(setup)
        self._ahead = self.look_ahead / (self.model_hz or setup.control_hz)

    def model_term(self, t: float, q: Floats, v: Floats, ref: Reference) -> Floats:
        """Return the feedforward torque (n,) [N m]."""
        del t, q, v
        ahead, model = self._ahead, self._model
        at, rate = ref.q + ahead * ref.v + 0.5 * ahead**2 * ref.a, ref.v + ahead * ref.a
        friction = model.friction(rate, self.friction)
        if self.terms == "full":
            return model.inverse_dynamics(at, rate, ref.a) + friction
        return np.diag(model.mass_matrix(at)) * ref.a + model.gravity_torque(at) + friction

    def compiled(self) -> Compiled:
        """Return the kernels; ``own`` rows: kp, kd, friction (4), and as the names at the top say."""
        model, n = self._model, self._model.n
        rest = [model.reflected, np.full(n, self._ahead), np.full(n, float(self.terms == "diagonal"))]
        own = np.vstack([self.own_rows(), *rest])
        return Compiled(torque=feedback_on_held, own=own, model_term=_model_term, held_size=n)


@kernel
def _model_term(io: Floats, held: Floats, chain: Floats, own: Floats) -> None:
    n, ahead = io.shape[1], own[AHEAD, 0]
    placed, at, rate = np.empty((n, 12)), np.empty(n), np.empty(n)
    for i in range(n):
        at[i] = io[Q_REF, i] + ahead * io[V_REF, i] + 0.5 * ahead * ahead * io[A_REF, i]
        rate[i] = io[V_REF, i] + ahead * io[A_REF, i]
    place(chain, at, placed)
    if own[DIAGONAL, 0] == 0.0:
        newton_euler(chain, placed, rate, io[A_REF], True, held)
    else:
        rest, mass = np.zeros(n), np.empty((n, n))
        composite_inertia(chain, placed, mass)
        newton_euler(chain, placed, rest, rest, False, held)
        for i in range(n):
            held[i] += mass[i, i] * io[A_REF, i]
    for i in range(n):
        held[i] += own[REFLECTED, i] * io[A_REF, i]
    friction_torque(own[2:6], rate, held)

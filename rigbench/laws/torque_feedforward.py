"""Torque feedforward: the model's torque for the reference, beside independent-joint feedback."""

from __future__ import annotations

from typing import Literal

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.arm.dynamics import composite_inertia, newton_euler, place
from rigbench.arm.kernel import kernel
from rigbench.laws.feedback import HeldTermLaw, believed_friction, feedback_on_held
from rigbench.laws.law import A_REF, CLOCK, Q_REF, V_REF, Compiled, Reference, Setup, option
from rigbench.laws.model import FrictionTerm, friction_torque

__all__ = ["TorqueFeedforward"]

REFLECTED, AHEAD, DIAGONAL, LAST, LAST_TIME = range(6, 11)
"""Rows of ``own`` after kp, kd and the believed friction; the last two are the state."""


class TorqueFeedforward(HeldTermLaw):
    """tau = Kp (q_ref - q) + Kd (v_ref - v) + (M(q_ref) + Jr) a_ref + h(q_ref, v_ref) + friction(v_ref).

    The model term depends on the motion alone, so it may run at model_hz, far below control_hz (50 or
    100 Hz beside a 1 kHz loop is common practice); between its ticks it is held, and the feedback between
    those of control_hz. Neither remembers an error, so nothing winds up where the drive limits the torque.
    Jr = G^2 Jm [kg m^2]. Source: An, Atkeson, Hollerbach, "Model-Based Control of a Robot Manipulator", 1988
    (from memory).

    With terms: diagonal it is (diag M(q_ref) + Jr) a_ref + g(q_ref) + friction(v_ref): gravity and each
    joint's own inertia, without coupling. A held term is half a period late on average; look_ahead: 0.5 works
    it out for where the reference will be by then (Taylor): q_ref + v_ref T + a_ref T^2 / 2, v_ref + a_ref T
    and a_ref + j T, T = look_ahead / model_hz (control_hz where model_hz is absent), j [rad/s^3] the
    difference of a_ref to the model's tick before over the time between (0 at the first).
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
        self._last, self._last_time = np.zeros(setup.n), -1.0

    def model_term(self, t: float, q: Floats, v: Floats, ref: Reference) -> Floats:
        """Return the feedforward torque (n,) [N m]."""
        del q, v
        at, rate, push = self._taylor(t, ref) if self.look_ahead > 0 else ref
        friction = self._model.friction(rate, self.friction)
        if self.terms == "full":
            return self._model.inverse_dynamics(at, rate, push) + friction
        return np.diag(self._model.mass_matrix(at)) * push + self._model.gravity_torque(at) + friction

    def _taylor(self, t: float, ref: Reference) -> Reference:
        """Return the reference where it is expected to be ``ahead`` of now."""
        ahead, jerk = self._ahead, np.zeros(self._model.n)
        if self._last_time >= 0:
            jerk = (ref.a - self._last) / (t - self._last_time)
        self._last, self._last_time = ref.a, t
        return Reference(
            ref.q + ahead * ref.v + 0.5 * ahead**2 * ref.a, ref.v + ahead * ref.a, ref.a + ahead * jerk
        )

    def compiled(self) -> Compiled:
        """Return the kernels; ``own`` rows: kp, kd, friction (4), and as the names at the top say."""
        model, n = self._model, self._model.n
        flags = np.full((2, n), [[self._ahead], [float(self.terms == "diagonal")]])
        state = [self._last, np.full(n, self._last_time)]
        own = np.vstack([self.own_rows(), model.reflected, flags, *state])
        return Compiled(torque=feedback_on_held, own=own, model_term=_model_term, held_size=n)


@kernel
def _taylor(io: Floats, own: Floats, wanted: Floats) -> None:
    """Fill ``wanted`` (3, n) with the reference where it is expected to be at the time looked ahead to."""
    ahead, since = own[AHEAD, 0], io[CLOCK, 0] - own[LAST_TIME, 0]
    for i in range(io.shape[1]):
        rate, push = io[V_REF, i], io[A_REF, i]
        wanted[0, i] = io[Q_REF, i] + ahead * rate + 0.5 * ahead * ahead * push
        wanted[1, i] = rate + ahead * push
        wanted[2, i] = push
        if own[LAST_TIME, 0] >= 0.0:
            wanted[2, i] += ahead * (push - own[LAST, i]) / since
        own[LAST, i] = push
    own[LAST_TIME, 0] = io[CLOCK, 0]


@kernel
def _model_term(io: Floats, held: Floats, chain: Floats, own: Floats) -> None:
    n = io.shape[1]
    placed, wanted = np.empty((n, 12)), np.empty((3, n))
    if own[AHEAD, 0] > 0.0:
        _taylor(io, own, wanted)
    else:
        wanted[0], wanted[1], wanted[2] = io[Q_REF], io[V_REF], io[A_REF]
    place(chain, wanted[0], placed)
    if own[DIAGONAL, 0] == 0.0:
        newton_euler(chain, placed, wanted[1], wanted[2], True, held)
    else:
        rest, mass = np.zeros(n), np.empty((n, n))
        composite_inertia(chain, placed, mass)
        newton_euler(chain, placed, rest, rest, False, held)
        for i in range(n):
            held[i] += mass[i, i] * wanted[2, i]
    for i in range(n):
        held[i] += own[REFLECTED, i] * wanted[2, i]
    friction_torque(own[2:6], wanted[1], held)

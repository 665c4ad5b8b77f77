"""Independent-joint control with an integral that does not wind up."""

from __future__ import annotations

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.arm.kernel import kernel
from rigbench.laws.feedback import winds_up
from rigbench.laws.gains import PdLaw
from rigbench.laws.law import Q_REF, TAU, V_REF, Compiled, Q, Reference, Setup, V, option
from rigbench.laws.model import friction_torque

__all__ = ["IndependentJointPid"]

KI, LIMIT, PERIOD, INTEGRAL = range(6, 10)
"""Rows of ``own`` after kp, kd and the believed friction; the last is the state."""


class IndependentJointPid(PdLaw):
    """tau = Kp e + Kd e' + Ki (integral of e) [+ friction(v_ref)], Ki = 2 pi integral_hz Kp.

    e = q_ref - q [rad], Ki [N m/(rad s)]. The integral takes away what a constant load leaves of the error
    (Kp e = load without it). On a joint of inertia J' the loop s^3 + 2 damping w s^2 + w^2 s +
    2 pi integral_hz w^2 is stable for integral_hz below 2 damping natural_hz (Routh); a tenth of that still
    damps well.

    The integral starts at 0, adds e over the control period after each tick, and is held between ticks. It
    waits while the joint's command is beyond the drive's torque limit and e would lead further (conditional
    integration). With dry friction it can hunt: the joint sticks, the integral grows until it breaks away.
    Source: common practice; Franklin, Powell, Emami-Naeini, ch. 9, on windup (from memory).
    """

    integral_hz: float = option(
        1.0, "Hz", "how fast the integral acts; keep well below 2 damping natural_hz", at_least=0
    )

    def start(self, setup: Setup) -> None:
        """Take model and gains; the integral is 0."""
        super().start(setup)
        self._ki = 2.0 * np.pi * self.integral_hz * self._kp
        self._limit, self._period = setup.torque_limit, 1.0 / setup.control_hz
        self._integral = np.zeros(setup.n)

    def torque(self, t: float, q: Floats, v: Floats, ref: Reference, held: Floats) -> Floats:
        """Return the torque (n,) [N m]."""
        del t, held
        e = ref.q - q
        torque = self._kp * e + self._kd * (ref.v - v) + self._ki * self._integral
        torque += self._model.friction(ref.v, self.friction)
        waits = (np.abs(torque) > self._limit) & (torque * e > 0)
        self._integral = self._integral + np.where(waits, 0.0, self._period * e)
        return torque

    def compiled(self) -> Compiled:
        """Return the kernel; ``own`` rows: kp, kd, friction (4), ki, torque limit, period, integral."""
        rest = [self._ki, self._limit, np.full(self._model.n, self._period), self._integral]
        return Compiled(torque=_torque, own=np.vstack([self.own_rows(), *rest]))


@kernel
def _torque(io: Floats, held: Floats, chain: Floats, own: Floats) -> None:
    n = io.shape[1]
    for i in range(n):
        feedback = own[0, i] * (io[Q_REF, i] - io[Q, i]) + own[1, i] * (io[V_REF, i] - io[V, i])
        io[TAU, i] = feedback + own[KI, i] * own[INTEGRAL, i]
    friction_torque(own[2:6], io[V_REF], io[TAU])
    for i in range(n):
        e = io[Q_REF, i] - io[Q, i]
        if not winds_up(io[TAU, i], own[LIMIT, i], e):
            own[INTEGRAL, i] += own[PERIOD, i] * e

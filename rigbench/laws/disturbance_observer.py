"""Independent joints, each with an observer that estimates what disturbs it and cancels that."""

from __future__ import annotations

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.arm.kernel import kernel
from rigbench.laws.gains import PdLaw
from rigbench.laws.law import A_REF, CLOCK, Q_REF, TAU, V_REF, Compiled, Q, Reference, Setup, V, option
from rigbench.laws.model import friction_torque

__all__ = ["DisturbanceObserver"]

INERTIA, CORNER, LIMIT, ESTIMATE, LAST_TORQUE, LAST_SPEED, LAST_TIME = range(6, 13)
"""Rows of ``own`` after kp, kd and the believed friction; the last four are the state."""


class DisturbanceObserver(PdLaw):
    """tau = J' a_ref + Kp e + Kd e' + d [+ friction(v_ref)], d [N m] the estimated disturbance.

    e = q_ref - q; J' = G^2 Jm + M_jj [kg m^2] of the model at the gain pose; Kp, Kd as in
    independent-joint. The estimate is (tau - J' q'') after a first-order filter, g / (s + g) with
    g = 2 pi observer_hz: whatever the torque did not accelerate J' with (gravity, coupling, friction, a
    wrong J'). On a joint of just that inertia a disturbance D leaves the error
    e = D s / ((s + g) (J' s^2 + Kd s + Kp)): none where D is constant.

    At each tick q'' is the velocity's difference to the tick before over the time between, tau the torque
    held since, cut at the drive's torque limit (so that the estimate does not wind up there) and without the
    believed friction, which is no disturbance. In a run's first tick d is 0.
    Source: Nakao, Ohnishi, Miyachi 1987 (from memory).
    """

    observer_hz: float = option(20.0, "Hz", "corner of the estimate's filter", above=0)

    def start(self, setup: Setup) -> None:
        """Take model and gains; nothing is estimated yet."""
        super().start(setup)
        self._inertia = np.diag(setup.model.mass_matrix(setup.gain_pose)).copy()
        self._corner, self._limit = 2.0 * np.pi * self.observer_hz, setup.torque_limit
        self._estimate, self._last_torque, self._last_speed = np.zeros((3, setup.n))
        self._last_time = -1.0

    def torque(self, t: float, q: Floats, v: Floats, ref: Reference, held: Floats) -> Floats:
        """Return the torque (n,) [N m]."""
        del held
        if self._last_time >= 0:
            period = t - self._last_time
            unexplained = self._last_torque - self._inertia * (v - self._last_speed) / period
            share = 1.0 - np.exp(-self._corner * period)
            self._estimate = self._estimate + share * (unexplained - self._estimate)
        friction = self._model.friction(ref.v, self.friction)
        feedback = self._kp * (ref.q - q) + self._kd * (ref.v - v)
        torque = self._inertia * ref.a + feedback + self._estimate + friction
        self._last_torque = np.clip(torque, -self._limit, self._limit) - friction
        self._last_speed, self._last_time = v.copy(), t
        return torque

    def compiled(self) -> Compiled:
        """Return the kernel; ``own`` rows: kp, kd, friction (4), and as the names at the top say."""
        n = self._model.n
        state = [self._estimate, self._last_torque, self._last_speed, np.full(n, self._last_time)]
        own = [self.own_rows(), self._inertia, np.full(n, self._corner), self._limit, *state]
        return Compiled(torque=_torque, own=np.vstack(own))


@kernel
def _torque(io: Floats, held: Floats, chain: Floats, own: Floats) -> None:
    n = io.shape[1]
    if own[LAST_TIME, 0] >= 0.0:
        period = io[CLOCK, 0] - own[LAST_TIME, 0]
        share = 1.0 - np.exp(-own[CORNER, 0] * period)
        for i in range(n):
            accelerated = own[INERTIA, i] * (io[V, i] - own[LAST_SPEED, i]) / period
            own[ESTIMATE, i] += share * (own[LAST_TORQUE, i] - accelerated - own[ESTIMATE, i])
    for i in range(n):
        io[TAU, i] = 0.0
    friction_torque(own[2:6], io[V_REF], io[TAU])
    for i in range(n):
        friction = io[TAU, i]
        feedback = own[0, i] * (io[Q_REF, i] - io[Q, i]) + own[1, i] * (io[V_REF, i] - io[V, i])
        io[TAU, i] = own[INERTIA, i] * io[A_REF, i] + feedback + own[ESTIMATE, i] + friction
        own[LAST_TORQUE, i] = min(max(io[TAU, i], -own[LIMIT, i]), own[LIMIT, i]) - friction
        own[LAST_SPEED, i] = io[V, i]
    own[LAST_TIME, 0] = io[CLOCK, 0]

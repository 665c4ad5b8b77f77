"""The cascade of industrial drives: a position loop around a velocity loop, joint by joint."""

from __future__ import annotations

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.arm.kernel import kernel
from rigbench.laws.feedback import winds_up
from rigbench.laws.gains import PdLaw, positive_damping, positive_kd
from rigbench.laws.law import Q_REF, TAU, V_REF, Compiled, Q, Reference, Setup, V, option
from rigbench.laws.model import friction_torque

__all__ = ["JointCascade"]

SLOPE, SPEED, RATE, LIMIT, PERIOD, INTEGRAL = range(6, 12)
"""Rows of ``own`` after kp, kd and the believed friction; the last is the state."""


class JointCascade(PdLaw):
    """tau = Kd (v_c - v + 2 pi integral_hz (integral of v_c - v)) [+ friction(v_ref)], v_c = v_ref + L e.

    e = q_ref - q [rad], L = Kp / Kd [1/s] the position loop's gain, v_c [rad/s] the velocity that it asks
    for, cut at the drive's speed limit; Kd [N m s/rad] the velocity loop's gain. Without the integral this is
    independent-joint with the same Kp and Kd. With it, on a joint of inertia J', the loop is
    s^3 + 2 damping w s^2 + (w^2 + 2 damping w wi) s + w^2 wi with wi = 2 pi integral_hz: stable for any
    integral_hz where damping is at least 0.5, and a constant load leaves no error.

    The integral starts at 0, adds v_c - v over the control period after each tick, and is held between ticks.
    It waits while the joint's command is beyond the drive's torque limit and v_c - v would lead further
    (conditional integration). Both loops run at control_hz.
    Source: common practice of servo drives; Gross, Hamann, Wiegaertner, on cascades (from memory).
    """

    damping: float = positive_damping()
    kd: tuple[float, ...] | None = positive_kd()
    integral_hz: float = option(1.0, "Hz", "how fast the velocity loop's integral acts", at_least=0)

    def start(self, setup: Setup) -> None:
        """Take model and gains; the integral is 0."""
        super().start(setup)
        self._slope, self._rate = self._kp / self._kd, 2.0 * np.pi * self.integral_hz
        self._limit, self._speed = setup.torque_limit, setup.speed_limit
        self._period, self._integral = 1.0 / setup.control_hz, np.zeros(setup.n)

    def torque(self, t: float, q: Floats, v: Floats, ref: Reference, held: Floats) -> Floats:
        """Return the torque (n,) [N m]."""
        del t, held
        off = np.clip(ref.v + self._slope * (ref.q - q), -self._speed, self._speed) - v
        torque = self._kd * (off + self._rate * self._integral)
        torque += self._model.friction(ref.v, self.friction)
        waits = (np.abs(torque) > self._limit) & (torque * off > 0)
        self._integral = self._integral + np.where(waits, 0.0, self._period * off)
        return torque

    def compiled(self) -> Compiled:
        """Return the kernel; ``own`` rows: kp, kd, friction (4), and as the names at the top say."""
        whole = [np.full(self._model.n, value) for value in (self._rate, self._period)]
        rest = [self._slope, self._speed, whole[0], self._limit, whole[1], self._integral]
        return Compiled(torque=_torque, own=np.vstack([self.own_rows(), *rest]))


@kernel
def _off(io: Floats, own: Floats, i: int) -> float:
    """Return by how much joint i is slower than the position loop asks [rad/s]."""
    asked = io[V_REF, i] + own[SLOPE, i] * (io[Q_REF, i] - io[Q, i])
    off: float = min(max(asked, -own[SPEED, i]), own[SPEED, i]) - io[V, i]
    return off


@kernel
def _torque(io: Floats, held: Floats, chain: Floats, own: Floats) -> None:
    n = io.shape[1]
    for i in range(n):
        io[TAU, i] = own[1, i] * (_off(io, own, i) + own[RATE, i] * own[INTEGRAL, i])
    friction_torque(own[2:6], io[V_REF], io[TAU])
    for i in range(n):
        off = _off(io, own, i)
        if not winds_up(io[TAU, i], own[LIMIT, i], off):
            own[INTEGRAL, i] += own[PERIOD, i] * off

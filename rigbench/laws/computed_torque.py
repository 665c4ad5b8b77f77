"""Computed torque: the model inverts the arm's dynamics at every sample."""

from __future__ import annotations

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.arm.kernel import kernel
from rigbench.laws.feedback import InertiaLaw, through_inertia
from rigbench.laws.law import A_REF, Q_REF, V_REF, Compiled, Q, Reference, Setup, V, option

__all__ = ["ComputedTorque"]

CORNER, PERIOD, LAG, LAG_RATE = range(7, 11)
"""Rows of ``own`` after those of :meth:`InertiaLaw.compiled_with`; the last two are the filter's state."""


class ComputedTorque(InertiaLaw):
    """tau = (M(q) + Jr) (a_ref + Kd (v_ref - v) + Kp (q_ref - q)) + h(q, v) + friction(v_ref).

    With an exact model each joint's error obeys e'' + Kd e' + Kp e = 0, so Kp [s^-2] and Kd [s^-1]
    pass through the inertia matrix. M and h are worked out at the sensed state, friction at the
    reference's velocity, at model_hz, and held in between; the rest at every tick. No error is remembered,
    so nothing winds up where the drive limits the torque. Jr = G^2 Jm [kg m^2].
    Source: Luh, Walker, Paul 1980 (from memory).

    With filter_hz the reference passes a critically damped second-order filter first. What it lags by
    obeys d'' + 2 w d' + w^2 d = a_ref with w = 2 pi filter_hz, from rest, and q_ref - d, v_ref - d' and
    w^2 d + 2 w d' stand for q_ref, v_ref and a_ref: an acceleration that jumps reaches the motors rounded,
    at the price of a_ref / w^2 in position. Solved exactly from tick to tick, a_ref held in between;
    friction stays at the unfiltered velocity.
    """

    filter_hz: float | None = option(
        None, "Hz", "corner of a second-order filter on the reference; none if absent", above=0
    )

    def start(self, setup: Setup) -> None:
        """Take model and gains; the filter is at rest."""
        super().start(setup)
        self._corner = 2.0 * np.pi * (self.filter_hz or 0.0)
        self._period = 1.0 / setup.control_hz
        self._lag, self._lag_rate = np.zeros((2, setup.n))

    def torque(self, t: float, q: Floats, v: Floats, ref: Reference, held: Floats) -> Floats:
        """Return the torque (n,) [N m]."""
        del t
        if self.filter_hz is not None:
            ref = self._filtered(ref)
        return self.through(ref.a + self._kd * (ref.v - v) + self._kp * (ref.q - q), held)

    def _filtered(self, ref: Reference) -> Reference:
        w, lag, rate = self._corner, self._lag, self._lag_rate
        filtered = Reference(ref.q - lag, ref.v - rate, w**2 * lag + 2 * w * rate)
        off = lag - ref.a / w**2
        slope, decay = rate + w * off, np.exp(-w * self._period)
        self._lag = ref.a / w**2 + (off + slope * self._period) * decay
        self._lag_rate = (rate - w * slope * self._period) * decay
        return filtered

    def compiled(self) -> Compiled:
        """Return the kernels; the law's own rows are as the names at the top say."""
        rest = np.zeros((4, self._model.n))
        rest[0], rest[1] = self._corner, self._period
        return self.compiled_with(_torque, *rest)


@kernel
def _torque(io: Floats, held: Floats, chain: Floats, own: Floats) -> None:
    n, w = io.shape[1], own[CORNER, 0]
    wanted = np.empty(n)
    if w == 0.0:
        for i in range(n):
            wanted[i] = (
                io[A_REF, i] + own[1, i] * (io[V_REF, i] - io[V, i]) + own[0, i] * (io[Q_REF, i] - io[Q, i])
            )
    else:
        period = own[PERIOD, 0]
        decay = np.exp(-w * period)
        for i in range(n):
            lag, rate = own[LAG, i], own[LAG_RATE, i]
            wanted[i] = w * w * lag + 2.0 * w * rate
            wanted[i] += own[1, i] * (io[V_REF, i] - rate - io[V, i])
            wanted[i] += own[0, i] * (io[Q_REF, i] - lag - io[Q, i])
            settled = io[A_REF, i] / (w * w)
            slope = rate + w * (lag - settled)
            own[LAG, i] = settled + (lag - settled + slope * period) * decay
            own[LAG_RATE, i] = (rate - w * slope * period) * decay
    through_inertia(io, held, wanted)

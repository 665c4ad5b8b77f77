"""Sliding mode with a boundary layer, through the model's inertia matrix."""

from __future__ import annotations

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.arm.kernel import kernel
from rigbench.laws.feedback import InertiaLaw, saturated, through_inertia
from rigbench.laws.gains import positive_damping, positive_kd
from rigbench.laws.law import A_REF, Q_REF, V_REF, Compiled, Q, Reference, Setup, V, option

__all__ = ["SlidingMode"]

SLOPE, RHO, BOUNDARY = 7, 8, 9
"""Rows of ``own`` after those of :meth:`InertiaLaw.compiled_with`."""


class SlidingMode(InertiaLaw):
    """tau = (M(q) + Jr) (a_ref + L e' + rho sat(s / boundary)) + h(q, v) + friction(v_ref).

    e = q_ref - q, s = e' + L e [rad/s], L = Kp / Kd [1/s], sat cuts at -1 and 1. Where the model misses an
    acceleration d, s' = d - rho sat(s / boundary): while abs(d) stays below rho, s reaches the layer
    abs(s) <= boundary in a finite time, at most abs(s) / (rho - abs(d)), and stays; the error is then at most
    boundary / L. With boundary = rho / Kd, the default, the loop within the layer has the natural
    frequency given and a damping ratio of damping + 1 / (4 damping); a thinner layer is stiffer, until it
    chatters: rho / boundary times the control period is to stay well below 2.

    M, h and friction are held in between the ticks of model_hz, the rest is worked out at every tick; no
    state, so nothing winds up where the drive limits the torque. Jr = G^2 Jm [kg m^2].
    Source: Slotine, Sastry 1983; Slotine, Li, "Applied Nonlinear Control", 1991, ch. 7 (both from memory).
    """

    damping: float = positive_damping()
    kd: tuple[float, ...] | None = positive_kd()
    rho: float = option(20.0, "rad/s^2", "switching acceleration, in each joint", above=0)
    boundary: float | None = option(None, "rad/s", "half width of the layer; rho / Kd if absent", above=0)

    def start(self, setup: Setup) -> None:
        """Take model and gains; work out slope and layer."""
        super().start(setup)
        self._slope = self._kp / self._kd
        self._layer = self.rho / self._kd if self.boundary is None else np.full(setup.n, self.boundary)

    def torque(self, t: float, q: Floats, v: Floats, ref: Reference, held: Floats) -> Floats:
        """Return the torque (n,) [N m]."""
        del t
        rate = ref.v - v
        s = rate + self._slope * (ref.q - q)
        return self.through(ref.a + self._slope * rate + self.rho * np.clip(s / self._layer, -1.0, 1.0), held)

    def compiled(self) -> Compiled:
        """Return the kernels; the law's own rows: slope, rho, boundary."""
        return self.compiled_with(_torque, self._slope, np.full(self._model.n, self.rho), self._layer)


@kernel
def _torque(io: Floats, held: Floats, chain: Floats, own: Floats) -> None:
    n = io.shape[1]
    wanted = np.empty(n)
    for i in range(n):
        rate = io[V_REF, i] - io[V, i]
        s = rate + own[SLOPE, i] * (io[Q_REF, i] - io[Q, i])
        wanted[i] = io[A_REF, i] + own[SLOPE, i] * rate + own[RHO, i] * saturated(s / own[BOUNDARY, i])
    through_inertia(io, held, wanted)

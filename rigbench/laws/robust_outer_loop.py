"""Computed torque with a robust outer loop: an acceleration of bounded size against what the model misses."""

from __future__ import annotations

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.arm.kernel import kernel
from rigbench.laws.feedback import InertiaLaw, saturated, through_inertia
from rigbench.laws.law import A_REF, Q_REF, V_REF, Compiled, Q, Reference, V, option

__all__ = ["RobustOuterLoop"]

RHO, BOUNDARY = 7, 8
"""Rows of ``own`` after those of :meth:`InertiaLaw.compiled_with`."""


class RobustOuterLoop(InertiaLaw):
    """tau = (M(q) + Jr) (a_ref + Kd e' + Kp e + rho sat(z / boundary)) + h(q, v) + friction(v_ref).

    e = q_ref - q, z = e' + Kd/2 e [rad/s], sat cuts at -1 and 1. Where the model is wrong the error obeys
    e'' + Kd e' + Kp e + rho sat(z / boundary) = d with d [rad/s^2] what the model misses. While abs(d) is
    at most rho, joint by joint, V = (Kp + Kd^2/2) e^2 + Kd e e' + e'^2 falls wherever
    Kd (Kp e^2 + e'^2) exceeds rho boundary / 2, so the error ends up in a region that shrinks with the
    boundary. Within the boundary the extra term is a gain of rho / boundary on z: a constant d leaves
    e = d / (Kp + rho Kd / (2 boundary)). The boundary is there against chatter: (Kd + rho / boundary) times
    the control period is to stay well below 2.

    M, h and friction are held in between the ticks of model_hz, the rest is worked out at every tick; no
    state, so nothing winds up where the drive limits the torque. Jr = G^2 Jm [kg m^2].
    Source: Corless, Leitmann 1981; Spong, Vidyasagar 1989, ch. 8 (both from memory).
    """

    rho: float = option(
        10.0, "rad/s^2", "bound on the acceleration that the model misses, in each joint", at_least=0
    )
    boundary: float = option(0.1, "rad/s", "size of z at which the extra acceleration is whole", above=0)

    def torque(self, t: float, q: Floats, v: Floats, ref: Reference, held: Floats) -> Floats:
        """Return the torque (n,) [N m]."""
        del t
        e, rate = ref.q - q, ref.v - v
        extra = self.rho * np.clip((rate + 0.5 * self._kd * e) / self.boundary, -1.0, 1.0)
        return self.through(ref.a + self._kd * rate + self._kp * e + extra, held)

    def compiled(self) -> Compiled:
        """Return the kernels; the law's own rows: rho, boundary."""
        n = self._model.n
        return self.compiled_with(_torque, np.full(n, self.rho), np.full(n, self.boundary))


@kernel
def _torque(io: Floats, held: Floats, chain: Floats, own: Floats) -> None:
    n = io.shape[1]
    wanted = np.empty(n)
    for i in range(n):
        e, rate = io[Q_REF, i] - io[Q, i], io[V_REF, i] - io[V, i]
        extra = own[RHO, i] * saturated((rate + 0.5 * own[1, i] * e) / own[BOUNDARY, i])
        wanted[i] = io[A_REF, i] + own[1, i] * rate + own[0, i] * e + extra
    through_inertia(io, held, wanted)

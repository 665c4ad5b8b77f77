"""Proportional-derivative control with the reference's gravity torque."""

import numba
import numpy as np

from rigbench.arm.dynamics import newton_euler, place
from rigbench.laws import Compiled, Law, option
from rigbench.laws.law import Q_REF, TAU, V_REF, Q, V


class SteadyGravity(Law):
    """tau = J (w^2 (q_ref - q) + 2 w (v_ref - v)) + g(q_ref), w = 2 pi natural_hz.

    J = M_jj + G^2 Jm [kg m^2] at the gain pose; g [N m] is the model's gravity torque, at the reference,
    where no noise of the encoders reaches it. Source: Kelly 1997 (from memory).
    """

    natural_hz: float = option(6.0, "Hz", "natural frequency of every joint", above=0)
    model_hz: float | None = option(None, "Hz", "how often g is worked out; at every tick if absent", above=0)

    def start(self, setup):
        """Take the model and work out the gains."""
        self.model = setup.model
        w, inertia = 2 * np.pi * self.natural_hz, np.diag(setup.model.mass_matrix(setup.gain_pose))
        self.kp, self.kd = w**2 * inertia, 2 * w * inertia

    def model_term(self, t, q, v, ref):
        """Return g(q_ref), (n,) [N m]."""
        return self.model.gravity_torque(ref.q)

    def torque(self, t, q, v, ref, held):
        """Return the torque (n,) [N m]."""
        return self.kp * (ref.q - q) + self.kd * (ref.v - v) + held

    def compiled(self):
        """Return the same two as kernels; own rows: kp, kd."""
        own = np.vstack([self.kp, self.kd])
        return Compiled(torque=torque_kernel, own=own, model_term=gravity_kernel, held_size=self.model.n)


@numba.njit
def torque_kernel(io, held, chain, own):
    """Write io[TAU]."""
    for i in range(io.shape[1]):
        io[TAU, i] = own[0, i] * (io[Q_REF, i] - io[Q, i]) + own[1, i] * (io[V_REF, i] - io[V, i]) + held[i]


@numba.njit
def gravity_kernel(io, held, chain, own):
    """Write held: the torque that holds the believed chain at the reference, at rest."""
    n = io.shape[1]
    placed, rest = np.empty((n, 12)), np.zeros(n)
    place(chain, io[Q_REF], placed)
    newton_euler(chain, placed, rest, rest, False, held)

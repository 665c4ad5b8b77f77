"""Independent-joint control: each joint for itself, with the arm as its disturbance."""

from __future__ import annotations

from rigbench.arm.arm import Floats
from rigbench.arm.kernel import kernel
from rigbench.laws.gains import PdLaw
from rigbench.laws.law import Q_REF, TAU, V_REF, Compiled, Q, Reference, V
from rigbench.laws.model import friction_torque

__all__ = ["IndependentJoint"]


class IndependentJoint(PdLaw):
    """tau = Kp (q_ref - q) + Kd (v_ref - v) [+ friction(v_ref)].

    q, v [rad, rad/s] are sensed, q_ref, v_ref the motion's; tau [N m] at the joint. It knows nothing
    of the links beyond the inertia in its gains; what the rest of the arm does to a joint is a
    disturbance, which a gearbox of ratio G divides by G and the feedback has to fight.

    Worked out at every tick and held in between; no state, so nothing winds up where the drive limits the
    torque. Source: common practice; Craig, "Introduction to Robotics", ch. 9 (from memory).
    """

    def torque(self, t: float, q: Floats, v: Floats, ref: Reference, held: Floats) -> Floats:
        """Return the torque (n,) [N m]."""
        del t, held
        feedback = self._kp * (ref.q - q) + self._kd * (ref.v - v)
        return feedback + self._model.friction(ref.v, self.friction)

    def compiled(self) -> Compiled:
        """Return the kernel; ``own`` rows: kp, kd, believed friction (4)."""
        own = self.own_rows()
        return Compiled(torque=_torque, own=own)


@kernel
def _torque(io: Floats, held: Floats, chain: Floats, own: Floats) -> None:
    for i in range(io.shape[1]):
        io[TAU, i] = own[0, i] * (io[Q_REF, i] - io[Q, i]) + own[1, i] * (io[V_REF, i] - io[V, i])
    friction_torque(own[2:6], io[V_REF], io[TAU])

"""What the laws with torque feedback around a held model term have in common."""

from __future__ import annotations

from rigbench.arm.arm import Floats
from rigbench.arm.kernel import kernel
from rigbench.laws.gains import PdLaw
from rigbench.laws.law import Q_REF, TAU, V_REF, Q, Reference, V, option

__all__ = ["HeldTermLaw", "feedback_on_held", "model_rate"]


def model_rate() -> float | None:
    """Declare the option ``model_hz`` of a law whose model term may run slower than the law."""
    rate: float | None = option(
        None, "Hz", "how often the model term is worked out; at every control tick if absent", above=0
    )
    return rate


class HeldTermLaw(PdLaw):
    """tau = held + Kp (q_ref - q) + Kd (v_ref - v), with ``held`` the last model term (n,) [N m]."""

    model_hz: float | None = model_rate()

    def torque(self, t: float, q: Floats, v: Floats, ref: Reference, held: Floats) -> Floats:
        """Return the torque (n,) [N m]."""
        del t
        return held + self._kp * (ref.q - q) + self._kd * (ref.v - v)


@kernel
def feedback_on_held(io: Floats, held: Floats, chain: Floats, own: Floats) -> None:
    """Write tau = held + Kp (q_ref - q) + Kd (v_ref - v) [N m]; ``own`` rows 0 and 1: kp, kd."""
    for i in range(io.shape[1]):
        feedback = own[0, i] * (io[Q_REF, i] - io[Q, i]) + own[1, i] * (io[V_REF, i] - io[V, i])
        io[TAU, i] = held[i] + feedback

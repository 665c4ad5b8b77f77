"""What several laws have in common: their held model terms, feedback around them, and their integrals."""

from __future__ import annotations

from collections.abc import Callable
from typing import ClassVar

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.arm.dynamics import composite_inertia, newton_euler, place
from rigbench.arm.kernel import kernel
from rigbench.laws.gains import PdLaw
from rigbench.laws.law import Q_REF, TAU, V_REF, Compiled, Q, Reference, V, option
from rigbench.laws.model import FrictionTerm, friction_torque

__all__ = [
    "HeldTermLaw", "InertiaLaw", "believed_friction", "feedback_on_held", "inertia_and_bias", "model_rate",
    "saturated", "through_inertia", "winds_up",
]  # fmt: skip


def model_rate() -> float | None:
    """Declare the option ``model_hz`` of a law whose model term may run slower than the law."""
    rate: float | None = option(
        None, "Hz", "how often the model term is worked out; at every control tick if absent", above=0
    )
    return rate


def believed_friction() -> FrictionTerm:
    """Declare the option ``friction`` of a law that adds all of it unless told otherwise."""
    term: FrictionTerm = option(
        "full",
        "",
        "believed friction to add, at the reference's velocity",
        choices=("none", "viscous", "full"),
    )
    return term


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


class InertiaLaw(PdLaw):
    """tau = (M(q) + Jr) a + h(q, v) + friction(v_ref) for an acceleration ``a`` that a subclass wants."""

    through_inertia: ClassVar[bool] = True

    model_hz: float | None = model_rate()
    friction: FrictionTerm = believed_friction()

    def model_term(self, t: float, q: Floats, v: Floats, ref: Reference) -> Floats:
        """Return M + Jr row by row and then h + friction, (n n + n,)."""
        del t
        torque = self._model.bias_torque(q, v) + self._model.friction(ref.v, self.friction)
        return np.concatenate([self._model.mass_matrix(q).ravel(), torque])

    def through(self, wanted: Floats, held: Floats) -> Floats:
        """Return the torque (n,) [N m] for the acceleration ``wanted`` (n,)."""
        n = len(wanted)
        torque: Floats = held[: n * n].reshape(n, n) @ wanted + held[n * n :]
        return torque

    def compiled_with(
        self, torque: Callable[[Floats, Floats, Floats, Floats], None], *rows: Floats
    ) -> Compiled:
        """Return the law's kernels: its own ``torque``, and the model term.

        ``own`` holds kp, kd, friction (4), reflected rotor inertia, and then the law's own ``rows`` (n,).
        """
        n = self._model.n
        own = np.vstack([self.own_rows(), self._model.reflected, *rows])
        return Compiled(torque=torque, own=own, model_term=inertia_and_bias, held_size=n * (n + 1))


@kernel
def inertia_and_bias(io: Floats, held: Floats, chain: Floats, own: Floats) -> None:
    """Write M + Jr and h + friction into ``held`` (n n + n,); ``own`` as in :class:`InertiaLaw`."""
    n = io.shape[1]
    placed = np.empty((n, 12))
    place(chain, io[Q], placed)
    mass = held[: n * n].reshape(n, n)
    composite_inertia(chain, placed, mass)
    for i in range(n):
        mass[i, i] += own[6, i]
    newton_euler(chain, placed, io[V], io[V], False, held[n * n :])
    friction_torque(own[2:6], io[V_REF], held[n * n :])


@kernel
def through_inertia(io: Floats, held: Floats, wanted: Floats) -> None:
    """Write the torque for the acceleration ``wanted`` (n,) through what :func:`inertia_and_bias` held."""
    n = io.shape[1]
    for i in range(n):
        total = held[n * n + i]
        for j in range(n):
            total += held[i * n + j] * wanted[j]
        io[TAU, i] = total


@kernel
def saturated(ratio: float) -> float:
    """Return ``ratio`` cut at -1 and 1."""
    return min(max(ratio, -1.0), 1.0)


@kernel
def winds_up(torque: float, limit: float, push: float) -> bool:
    """Tell whether an integral must wait: the command is beyond the limit and ``push`` leads further."""
    return abs(torque) > limit and torque * push > 0.0

"""Passivity-based adaptive control: the model's parameters are adapted while the arm moves."""

from __future__ import annotations

from typing import Literal

import numpy as np

from rigbench.arm.arm import LINK, Floats
from rigbench.arm.dynamics import place
from rigbench.arm.kernel import kernel
from rigbench.arm.physical import add_point_mass
from rigbench.laws.feedback import saturated
from rigbench.laws.law import TAU, V_REF, Compiled, Q, Reference, Setup, V, option
from rigbench.laws.model import STANDSTILL, friction_torque
from rigbench.laws.passive import joint_torques, link_forces, link_motion, parameter_power
from rigbench.laws.shifted import REFLECTED, SLOPE, ShiftedLaw, link_sizes, shift

__all__ = ["SlotineLi"]

ADAPTED = 12
"""Rows of the adapted numbers: ten for each link, then viscous and Coulomb friction of each joint."""

LIMIT, GAIN, TOGETHER = range(8, 11)
SIZE, STATE = slice(11, 11 + ADAPTED), slice(11 + ADAPTED, 11 + 2 * ADAPTED)
"""Rows of ``own`` after those of :meth:`ShiftedLaw.shifted_rows`. GAIN: adaptation times control period."""


class SlotineLi(ShiftedLaw):
    """tau = (M(q) + Jr) a_r + C(q, v) v_r + g(q) + friction(v_ref) + Kd s, with adapted M, C and g.

    e = q_ref - q; L = Kp / Kd [1/s]; v_r = v_ref + L e, a_r = a_ref + L e', s = v_r - v = e' + L e [rad/s],
    so Kd s is the feedback of independent-joint with the same Kp and Kd. C in the form of Christoffel
    symbols. The torque is linear in what is adapted, Y p with p = p_0 + size x; the numbers x
    start at 0 and follow x' = adaptation size Y^T s, joint by joint and link by link. On an arm that the
    parameters can describe V = s^T (M + Jr) s / 2 + sum (x - x_true)^2 / (2 adaptation) never rises:
    V' = -s^T Kd s, so s goes to 0 whether or not the parameters become the true ones.

    p_0 is the believed model; size bounds how far p may go from it, which is where adaptation stops (x is
    kept within -1 and 1). adapts says which: links (ten parameters each; sizes are bound_percent of m, m l
    and m l^2, l the root of the link's mean square distance from its frame's origin), masses (one factor on
    all ten of a link), payload (a point mass at the tool point, payload_bound_kg either way),
    friction (viscous, times v_r, and Coulomb, with the sign of v_ref that is 0 below 1e-4 rad/s; sizes are
    bound_percent of the declared ones, beside what the option friction adds), all (links and friction).
    Rotors, Jr = G^2 Jm [kg m^2], are not adapted.

    All is worked out at control_hz; x takes one Euler step after each tick and is held in between. While any
    joint's command is beyond its drive's torque limit x waits: what the drive cuts is no fault of the model.
    Each run starts from p_0 again. Source: Slotine, Li 1987 (from memory).
    """

    adapts: Literal["all", "links", "masses", "payload", "friction"] = option(
        "all",
        "",
        "what is adapted",
        choices=("all", "links", "masses", "payload", "friction"),
    )
    adaptation: float = option(
        1.0, "1/J", "how fast: rate of x for each watt of power that the error takes", at_least=0
    )
    bound_percent: float = option(
        100.0, "%", "how far an adapted number may go from the believed one", at_least=0
    )
    payload_bound_kg: float = option(
        2.0, "kg", "how far the payload may go from the believed one, with adapts: payload", at_least=0
    )

    def start(self, setup: Setup) -> None:
        """Take model and gains; what is adapted is as believed."""
        super().start(setup)
        self._limit, self._period = setup.torque_limit, 1.0 / setup.control_hz
        self._size, self._x = self._sizes(), np.zeros((ADAPTED, setup.n))

    def _sizes(self) -> Floats:
        """Return how far each adapted number may go from the believed one, (12, n)."""
        arm, share = self._model.arm, self.bound_percent / 100.0
        ten, sizes = arm.parameters, np.zeros((ADAPTED, arm.n))
        if self.adapts == "masses":
            sizes[:10] = share * ten.T
        elif self.adapts == "payload":
            unit = add_point_mass(np.zeros(10), 1.0, arm.tool_position)
            sizes[:10, -1] = self.payload_bound_kg * unit
        elif self.adapts != "friction":
            sizes[:10] = link_sizes(ten, self.bound_percent)
        if self.adapts in ("all", "friction"):
            sizes[10:] = share * arm.drives.viscous, share * arm.drives.coulomb
        return sizes

    @property
    def _together(self) -> bool:
        """Whether the ten numbers of a link have one x in common."""
        return self.adapts in ("masses", "payload")

    def torque(self, t: float, q: Floats, v: Floats, ref: Reference, held: Floats) -> Floats:
        """Return the torque (n,) [N m]."""
        del t, held
        model = self._model
        v_r, a_r, s = self.shifted(q, v, ref)
        columns = self.columns(q, v, v_r, a_r)
        change, sign = self._size * self._x, np.where(np.abs(ref.v) < STANDSTILL, 0.0, np.sign(ref.v))
        torque: Floats = np.einsum("jik,ik->j", columns, model.chain[: model.n, LINK] + change[:10].T)
        torque += model.reflected * a_r + self._kd * s + model.friction(ref.v, self.friction)
        torque += change[10] * v_r + change[11] * sign
        if not (np.abs(torque) > self._limit).any():
            power = np.vstack([np.einsum("jik,j->ki", columns, s), v_r * s, sign * s]) * self._size
            if self._together:
                power[:10] = power[:10].sum(axis=0)
            self._x = np.clip(self._x + self.adaptation * self._period * power, -1.0, 1.0)
        return torque

    def compiled(self) -> Compiled:
        """Return the kernel; ``own`` rows: :meth:`shifted_rows`, and as the names at the top say."""
        n = self._model.n
        flags = np.full((2, n), [[self.adaptation * self._period], [float(self._together)]])
        rest = [self._limit, flags, self._size, self._x]
        return Compiled(torque=_torque, own=np.vstack([self.shifted_rows(), *rest]))


@kernel
def _torque(io: Floats, held: Floats, chain: Floats, own: Floats) -> None:
    n = io.shape[1]
    size, x = own[SIZE], own[STATE]
    placed, moved, force, ten = np.empty((n, 12)), np.empty((n, 12)), np.empty((n, 6)), np.empty((n, 10))
    v_r, a_r, s, sign = np.empty(n), np.empty(n), np.empty(n), np.zeros(n)
    shift(io, own[SLOPE], v_r, a_r, s)
    for i in range(n):
        if abs(io[V_REF, i]) >= STANDSTILL:
            sign[i] = 1.0 if io[V_REF, i] > 0.0 else -1.0
        for k in range(10):
            ten[i, k] = chain[i, 16 + k] + size[k, i] * x[k, i]
    place(chain, io[Q], placed)
    link_motion(chain, placed, io[V], v_r, a_r, moved)
    link_forces(ten, moved, force)
    joint_torques(chain, placed, force, io[TAU])
    friction_torque(own[2:6], io[V_REF], io[TAU])
    within = True
    for i in range(n):
        io[TAU, i] += own[REFLECTED, i] * a_r[i] + own[1, i] * s[i]
        io[TAU, i] += size[10, i] * x[10, i] * v_r[i] + size[11, i] * x[11, i] * sign[i]
        within = within and abs(io[TAU, i]) <= own[LIMIT, i]
    if within:
        parameter_power(chain, placed, moved, s, ten)
        _adapt(own, ten, s, v_r, sign)


@kernel
def _adapt(own: Floats, power: Floats, s: Floats, v_r: Floats, sign: Floats) -> None:
    """Take one step of the adapted numbers; ``power`` (n, 10): Y^T s of the links' parameters."""
    size, x = own[SIZE], own[STATE]
    for i in range(s.shape[0]):
        gain, total = own[GAIN, i], 0.0
        for k in range(10):
            total += size[k, i] * power[i, k]
        for k in range(10):
            own_power = total if own[TOGETHER, i] > 0.0 else size[k, i] * power[i, k]
            x[k, i] = saturated(x[k, i] + gain * own_power)
        x[10, i] = saturated(x[10, i] + gain * size[10, i] * v_r[i] * s[i])
        x[11, i] = saturated(x[11, i] + gain * size[11, i] * sign[i] * s[i])

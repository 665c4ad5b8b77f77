"""The exact course of a sampled loop: law at the ticks, torque held in between, an ODE solver underneath."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.integrate import solve_ivp
from scipy.linalg.lapack import dposv

from rigbench.arm.arm import Arm, Floats
from rigbench.arm.dynamics import bias_torque, gravity_torque, mass_matrix
from rigbench.campaign.audit.states import GRAVITY
from rigbench.laws.law import Reference, Setup
from rigbench.laws.model import Model
from rigbench.laws.registry import LawChoice
from rigbench.motion.motion import Motion

__all__ = ["Exact", "exact_loop"]

RELATIVE, ABSOLUTE = 1e-11, 1e-13  # the solver's tolerances
BUDGET = 100_000
"""Evaluations over which a course counts as too stiff for this solver: some seconds. A twentieth is free."""

RUNAWAY = 1e3  # rad/s


@dataclass(frozen=True, eq=False)
class Exact:
    """Positions and velocities of the joints (N, n) at the ticks; ``note`` says why there are none."""

    q: Floats
    v: Floats
    note: str = ""


def exact_loop(arm: Arm, choice: LawChoice, motion: Motion, control_hz: float) -> Exact | None:
    """Return the course of ``arm`` (without dry friction and limits) under a law whose model is exact.

    State: q, v of the links; r, w of the rotors of elastic joints; the lagged torque m:

        (M + Jr) dv/dt + h + B v = m                                       stiff joints
        M dv/dt + h = K (r - q) + C (w - v) = s,  Jr dw/dt + B w = m - s    elastic joints
        lag dm/dt = u - m, or m = u without lag

    with the law's torque u held from tick to tick. scipy's DOP853 at 1e-11, started anew at each tick,
    where u jumps. A run starts at rest at the reference's first point, its springs in balance and its
    current loops settled on the first torque. None where stiffness makes that too slow.
    """
    n, t = arm.n, np.arange(int(np.floor(motion.duration_s * control_hz + 1e-6)) + 1) / control_hz
    references = motion.reference(t)
    law, model = choice.make(), Model(arm, GRAVITY)
    limits = arm.drives.torque_limit, arm.drives.speed_limit
    law.start(Setup(arm.joints, model, control_hz, references[0][0], *limits))
    rate = _Rate(arm)
    state, found, evaluations = rate.start(references[0][0]), np.empty((len(t), 2 * n)), 0
    for k, now in enumerate(t.tolist()):
        found[k] = state[: 2 * n]
        if k + 1 == len(t):
            break
        q, v = rate.sensed(state)
        reference = Reference(*(series[k] for series in references))
        rate.u = law.torque(now, q, v, reference, law.model_term(now, q, v, reference))
        if k == 0:
            state[rate.split[-1]] = rate.u[rate.lagged]
        with np.errstate(all="ignore"):
            solved = solve_ivp(
                rate, (0.0, 1.0 / control_hz), state, "DOP853",
                rtol=RELATIVE, atol=ABSOLUTE, first_step=1.0 / control_hz,
            )  # fmt: skip
        state, evaluations = solved.y[:, -1], evaluations + solved.nfev
        if not (solved.success and np.isfinite(state).all() and np.abs(state[n : 2 * n]).max() < RUNAWAY):
            return Exact(found[:0, :n], found[:0, n:], "the law does not hold this arm")
        if evaluations > BUDGET * (0.05 + (k + 1) / len(t)):
            return None
    return Exact(found[:, :n], found[:, n:])


class _Rate:
    """The right-hand side; ``u`` is the torque that is held. State: q, v, then r and w, then m."""

    def __init__(self, arm: Arm) -> None:
        drives, self.n = arm.drives, arm.n
        self.chain = arm.chain(GRAVITY)
        self.elastic = np.flatnonzero(np.isfinite(drives.stiffness))
        self.lagged = np.flatnonzero(drives.torque_lag > 0)
        self.stiffness, self.damping = drives.stiffness[self.elastic], drives.spring_damping[self.elastic]
        self.rotor, self.lag = drives.reflected[self.elastic], drives.torque_lag[self.lagged]
        self.viscous = drives.viscous
        added = drives.reflected.copy()
        added[self.elastic] = 0.0
        self.added = np.diag(added)
        self.u = np.zeros(arm.n)
        ends = np.cumsum([arm.n, arm.n, len(self.elastic), len(self.elastic)])
        self.split = [slice(a, b) for a, b in zip([0, *ends], [*ends, None], strict=True)]

    def start(self, q: Floats) -> Floats:
        """Return the state at rest at q."""
        r = q[self.elastic] + gravity_torque(self.chain, q)[self.elastic] / self.stiffness
        return np.concatenate([q, np.zeros(self.n), r, np.zeros(len(r) + len(self.lagged))])

    def sensed(self, state: Floats) -> tuple[Floats, Floats]:
        """Return position and velocity (n,) as encoders on the motors have them."""
        q, v, r, w, _ = (state[part] for part in self.split)
        q, v = q.copy(), v.copy()
        q[self.elastic], v[self.elastic] = r, w
        return q, v

    def __call__(self, _: float, state: Floats) -> Floats:
        q, v, r, w, m = (state[part] for part in self.split)
        motor, elastic = self.u, self.elastic
        if m.size:
            motor = self.u.copy()
            motor[self.lagged] = m
        torque = motor - self.viscous * v
        if not elastic.size:
            return np.concatenate([v, self._turned(q, v, torque), (self.u[self.lagged] - m) / self.lag])
        spring = self.stiffness * (r - q[elastic]) + self.damping * (w - v[elastic])
        turning = (motor[elastic] - spring - self.viscous[elastic] * w) / self.rotor
        torque[elastic] = spring
        lagging = (self.u[self.lagged] - m) / self.lag
        return np.concatenate([v, self._turned(q, v, torque), w, turning, lagging])

    def _turned(self, q: Floats, v: Floats, torque: Floats) -> Floats:
        """Return the links' accelerations, (M + Jr)^-1 (torque - h)."""
        mass = mass_matrix(self.chain, q) + self.added
        solved: tuple[Floats, Floats, int] = dposv(mass, torque - bias_torque(self.chain, q, v))
        return solved[1]

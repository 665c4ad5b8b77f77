"""A run without an engine: the rig's own loop around an arm whose motion is worked out by our kernels."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from rigbench.arm.arm import Arm, Floats
from rigbench.arm.dynamics import bias_torque, mass_matrix
from rigbench.laws.law import Law, Setup
from rigbench.laws.model import Model
from rigbench.motion.motion import Motion
from rigbench.rig.law_call import start_law
from rigbench.rig.log import Log
from rigbench.rig.loop import Loop, Setting, sampled
from rigbench.rig.run import Rates
from rigbench.rig.sampled import Sensing, Timing

__all__ = ["GRAVITY", "SimulatedArm", "run_law", "setup_of"]

GRAVITY = (0.0, 0.0, -9.81)
"""[m/s^2], in the frame of the base."""


class SimulatedArm:
    """Links of an arm in place of the engine's: M(q) (v+ - v)/dt + h(q, v) = tau, q+ = q + dt v+.

    The same semi-implicit Euler as the engine's, so the rig's drive foresees its velocity to rounding.
    """

    def __init__(
        self, arm: Arm, q: Floats, v: Floats, gravity: tuple[float, float, float], dt: float
    ) -> None:
        self.q, self.v, self.torque = q.copy(), v.copy(), np.zeros(arm.n)
        self._chain, self._dt = arm.chain(gravity), dt

    def read(self) -> Sequence[tuple[float, float, tuple[()], float]]:
        """Return the joints' states as the engine does: position and velocity first."""
        return [(float(q), float(v), (), 0.0) for q, v in zip(self.q, self.v, strict=True)]

    def apply(self, torques: list[float]) -> None:
        """Take the torques [N m] of the next step."""
        self.torque = np.array(torques)

    def step(self) -> None:
        """Go on by one step."""
        force = self.torque - bias_torque(self._chain, self.q, self.v)
        self.v = self.v + self._dt * np.linalg.solve(mass_matrix(self._chain, self.q), force)
        self.q = self.q + self._dt * self.v


def run_law(
    law: Law,
    arm: Arm,
    motion: Motion,
    *,
    rates: Rates | None = None,
    model: Arm | None = None,
    gravity: tuple[float, float, float] = GRAVITY,
) -> Log:
    """Run a law on a simulated arm along a motion, from rest at its start, and return the log.

    Drive, friction and rates are the rig's own. ``rates``: 1000 Hz for both by default; ``model``: what the
    law believes, the arm itself by default. Raises LawError if the law raises or returns nonsense.
    """
    rates = Rates(1000.0, 1000.0) if rates is None else rates
    setting = Setting(arm, gravity, rates, Sensing(), Timing(), 0.0, 0, 0, contacts=False)
    start, rest = sampled(motion, rates.control_hz)[1][0, 0].copy(), np.zeros(arm.n)
    setup = setup_of(arm if model is None else model, rates.control_hz, start, gravity)
    loop = Loop(setting, start_law(type(law).__name__, law, setup), motion, start, rest)
    loop.go(SimulatedArm(arm, start, rest, gravity, 1.0 / rates.physics_hz))
    return loop.log()


def setup_of(
    arm: Arm, control_hz: float, pose: Floats, gravity: tuple[float, float, float] = GRAVITY
) -> Setup:
    """Return what a law is told when it starts, with the arm itself as its model."""
    limits = arm.drives.torque_limit.copy(), arm.drives.speed_limit.copy()
    return Setup(arm.joints, Model(arm, gravity), control_hz, pose.copy(), *limits)

"""Engine against model: the acceleration of both in the same random states."""

from __future__ import annotations

import numpy as np

from rigbench.arm.arm import Arm
from rigbench.arm.dynamics import inverse_dynamics
from rigbench.campaign.audit.result import Accelerations
from rigbench.campaign.audit.states import GRAVITY, random_states
from rigbench.rig.engine import Engine

__all__ = ["compare_accelerations"]

STATES = 100
STEP = 1e-3  # s; the engine's acceleration is that of the step's start, whatever the step


def compare_accelerations(engine: Engine, arm: Arm) -> Accelerations:
    """Ask for random accelerations in random states, by the model's torque, and see what the engine gives.

    The torque is M(q) a + h(q, v) of the links alone, for the engine knows no rotors.
    """
    chain = arm.chain(GRAVITY)
    asked, given = np.empty((STATES, arm.n)), np.empty((STATES, arm.n))
    for k, (q, v, a) in enumerate(random_states(arm, STATES)):
        engine.load(arm, q, v, GRAVITY, STEP)
        engine.apply(inverse_dynamics(chain, q, v, a).tolist())
        engine.step()
        asked[k], given[k] = a, (np.array([state[1] for state in engine.read()]) - v) / STEP
    off = np.abs(given - asked).max(axis=0) / np.sqrt(np.mean(asked**2, axis=0))
    # no number at all is no agreement
    differences = np.where(np.isfinite(off), off, np.inf)
    return Accelerations(STATES, arm.joints, tuple(differences.tolist()))

"""The arm with parts of its drives taken away, for checks that have an exact answer without them."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from rigbench.arm.arm import Arm
from rigbench.arm.files import ArmFiles

__all__ = ["DryArm", "SmoothArm", "frictionless", "only_sliding", "smooth", "unlimited"]


def _with(arm: Arm, **drives: float) -> Arm:
    given: dict[str, Any] = {name: np.full(arm.n, value) for name, value in drives.items()}
    return arm.replaced(drives=replace(arm.drives, **given))


NO_DRY = {"coulomb": 0.0, "static": 0.0, "bristle_stiffness": 0.0, "bristle_damping": 0.0, "gear_loss": 0.0}
NO_LIMITS = dict.fromkeys(("torque_limit", "speed_limit", "stall_torque", "no_load_speed"), np.inf)
NO_STEPS = {"torque_step": 0.0, "ripple": 0.0, "encoder_step": 0.0}


def smooth(arm: Arm) -> Arm:
    """Return the arm as an ODE solver can take it: links, rotors, springs, viscous friction, torque lag.

    Without dry friction, limits, counts, rounding and ripple.
    """
    free = np.full(arm.n, np.inf)
    return replace(_with(arm, **NO_DRY, **NO_LIMITS, **NO_STEPS), lower=-free, upper=free)


def unlimited(arm: Arm) -> Arm:
    """Return the arm with all its friction, but with a motor that gives what it is asked for."""
    return _with(arm, **NO_LIMITS, **NO_STEPS, torque_lag=0.0)


def frictionless(arm: Arm) -> Arm:
    """Return the arm as a conservative machine: links, rotors and undamped springs."""
    return _with(smooth(arm), viscous=0.0, spring_damping=0.0, torque_lag=0.0)


def only_sliding(arm: Arm, joint: int) -> Arm:
    """Return the arm with stiff gears and that joint alone free, with Coulomb and viscous friction.

    The others are held by dry friction that nothing here overcomes.
    """
    held = np.full(arm.n, 1e12)
    held[joint] = arm.drives.coulomb[joint]
    bare = _with(smooth(arm), stiffness=np.inf, torque_lag=0.0)
    return bare.replaced(drives=replace(bare.drives, coulomb=held, static=held))


@dataclass(frozen=True)
class SmoothArm(ArmFiles):
    """The files of an arm that stand for :func:`smooth` of it."""

    def arm(self) -> Arm:
        """Return the arm."""
        return smooth(ArmFiles.arm(self))


@dataclass(frozen=True)
class DryArm(ArmFiles):
    """The files of an arm that stand for it as declared, but with exact positions sensed."""

    def arm(self) -> Arm:
        """Return the arm."""
        return _with(ArmFiles.arm(self), encoder_step=0.0)

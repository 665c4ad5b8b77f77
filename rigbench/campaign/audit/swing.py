"""Free swing: what energy and momentum do where nothing takes any away."""

from __future__ import annotations

import numpy as np

from rigbench.arm.arm import PRISMATIC, Arm
from rigbench.campaign.audit.bench import energies, momenta, watch
from rigbench.campaign.audit.result import Momentum, Swing, order_of
from rigbench.campaign.audit.states import GRAVITY, middle, speeds
from rigbench.campaign.audit.variants import frictionless
from rigbench.rig.engine import Engine

__all__ = ["free_swing"]

RATES = (1000.0, 2000.0, 4000.0)
SECONDS = 1.0
SHOWN = 100  # points of a trace in the picture
ROUNDING = 1e-14
"""Drifts below this share of the whole energy are rounding, and tell no order."""


def free_swing(engine: Engine, arm: Arm) -> tuple[Swing, Momentum, float]:
    """Let the arm swing from its middle pose at half its speed, joints in turn to and fro.

    Returns what energy and momentum did, and the residual [rad/s].
    """
    bare = frictionless(arm)
    speed = 0.5 * speeds(arm)
    speed[1::2] *= -1.0
    start, rest = (middle(arm), speed), np.zeros(arm.n)
    why, applies = _symmetry(arm)
    drifts, lost, traces, residual, peak, floor = [], [], [], 0.0, 0.0, 0.0
    times = np.linspace(0.0, SECONDS, SHOWN + 1)
    for hz in RATES:
        path = watch(engine, bare, start, rest, hz, SECONDS, GRAVITY)
        kinetic, whole = energies(bare, GRAVITY, path)
        peak = float(kinetic.max())
        floor = ROUNDING * float(np.abs(whole).max()) / peak
        gone = (whole - whole[0]) / peak
        ended = len(path.t) < round(SECONDS * hz) + 1
        drifts.append(np.inf if ended else float(np.abs(gone).max()))
        traces.append(tuple(np.interp(times, path.t, gone).tolist()))
        residual = max(residual, path.residual)
        if applies:
            along, scale = momenta(bare, GRAVITY, path)
            lost.append(float(np.abs(along - along[0]).max()) / scale)
    order = order_of(RATES, tuple(drifts), floor)
    swing = Swing(SECONDS, RATES, tuple(drifts), order, peak, tuple(times.tolist()), tuple(traces))
    return swing, Momentum(applies, why, RATES if applies else (), tuple(lost)), residual


def _symmetry(arm: Arm) -> tuple[str, bool]:
    """Say whether gravity leaves the momentum of the first joint alone."""
    axis = arm.rotation[0] @ arm.axis[0]
    along = abs(float(axis @ np.array(GRAVITY))) / float(np.linalg.norm(GRAVITY))
    joint = arm.joints[0]
    if arm.kinds[0] == PRISMATIC:
        if along < 1e-9:
            return f"the first joint, {joint}, shifts across gravity", True
        return f"does not apply: the first joint, {joint}, shifts with or against gravity", False
    if along > 1 - 1e-12:
        return f"the first joint, {joint}, turns about gravity's axis", True
    return f"does not apply: the first joint, {joint}, does not turn about gravity's axis", False

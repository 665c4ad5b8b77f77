"""What a motion asks of the drives: the shares of their limits of speed and torque."""

from __future__ import annotations

import math

import numpy as np

from rigbench.arm.arm import PRISMATIC, Arm, Floats
from rigbench.campaign.gears.workspace import quarter_points
from rigbench.laws.model import Model
from rigbench.motion.via import ViaMotion

__all__ = ["leg_seconds", "quarter_motion", "used"]

PEAK = 15 / 8
"""Of a quintic leg's speed over its mean."""

BRISK = 0.5
"""Share of its declared speed limit that the busiest joint takes by default: half, so that there is room for
a ratio twice as high."""

FREE_SPEED = 1.0
"""Peak speed [rad/s; m/s] by default of a joint without a speed limit."""

LEAST_S, MOST_S = 0.2, 10.0
SAMPLES = 2001


def leg_seconds(arm: Arm) -> float:
    """Return the time of the leg [s], in whole tenths, in which no joint passes half of its speed limit."""
    start, end = quarter_points(arm)
    limits = np.minimum(arm.drives.speed_limit, arm.drives.no_load_speed)
    brisk = np.where(np.isfinite(limits), BRISK * limits, np.where(arm.kinds == PRISMATIC, 0.2, FREE_SPEED))
    seconds = float(np.max(PEAK * np.abs(end - start) / brisk))
    return math.ceil(10 * min(max(seconds, LEAST_S), MOST_S) - 1e-6) / 10


def quarter_motion(arm: Arm, leg_s: float, rest_s: float) -> ViaMotion:
    """Return one quintic leg from a quarter to three quarters of every joint's range, and a rest."""
    start, end = quarter_points(arm)
    return ViaMotion((tuple(start.tolist()), tuple(end.tolist())), leg_s, rest_s)


def used(
    arm: Arm, gravity: tuple[float, float, float], motion: ViaMotion
) -> tuple[list[float | None], list[float | None]]:
    """Return the largest shares of each joint's limits of speed and of torque that a motion takes.

    |v| over the speed limit (or the speed at which the motor's torque-speed line ends). |tau| over the torque
    limit, where it drives over what the line leaves as well; tau = (M + G^2 Jm) a + h + friction, gear loss
    included. None where no limit is declared, inf where nothing is left of one.
    """
    drives, model = arm.drives, Model(arm, gravity)
    q, v, a = motion.reference(np.linspace(0.0, motion.duration_s, SAMPLES))
    fastest = np.minimum(drives.speed_limit, drives.no_load_speed)
    links = np.array([model.inverse_dynamics(*state) for state in zip(q, v, a, strict=True)])
    carried = links - drives.reflected * a
    torque = (
        links + np.array([model.friction(one) for one in v]) + drives.gear_loss * np.abs(carried) * np.sign(v)
    )
    left = np.broadcast_to(drives.torque_limit, torque.shape)
    lined = np.isfinite(drives.no_load_speed)
    with np.errstate(invalid="ignore", divide="ignore"):
        line = np.where(
            lined, drives.stall_torque * np.maximum(1.0 - np.abs(v) / drives.no_load_speed, 0.0), np.inf
        )
        left = np.where(torque * v > 0.0, np.minimum(left, line), left)
        shares = np.where(torque == 0.0, 0.0, np.abs(torque) / left)
    speeds, torques = np.abs(v).max(axis=0) / fastest, shares.max(axis=0)
    limited = np.isfinite(drives.torque_limit) | lined
    return _where(np.isfinite(fastest), speeds), _where(limited, torques)


def _where(known: np.ndarray[tuple[int, ...], np.dtype[np.bool_]], shares: Floats) -> list[float | None]:
    return [float(share) if is_known else None for is_known, share in zip(known, shares, strict=True)]

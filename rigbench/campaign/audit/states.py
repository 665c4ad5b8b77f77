"""Where an audit puts an arm: random states, a middle pose and a reference motion, within its limits."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from rigbench.arm.arm import PRISMATIC, Arm, Floats
from rigbench.laws.model import Model
from rigbench.motion.via import ViaMotion

__all__ = ["GRAVITY", "middle", "random_states", "reference_motion", "speeds", "steady_hz"]

GRAVITY = (0.0, 0.0, -9.81)

LEG_S, REST_S = 0.7, 0.15
STROKE = 0.5  # the reference's share of a joint's range
MOST_TURN, MOST_SHIFT = 1.0, 0.3  # rad, m
SHARE = 0.8  # of the speed and torque limits that the reference uses
PEAK = 15 / 8  # of a quintic leg's speed over its mean


def _window(arm: Arm) -> tuple[Floats, Floats]:
    """Return the middle and the half width (n,) of the range in which an audit moves each joint.

    Half a turn, or 0.5 m, to either side where the arm has more.
    """
    reach = np.where(arm.kinds == PRISMATIC, 0.5, np.pi)
    lower, upper = arm.lower, arm.upper
    low = np.where(np.isfinite(lower), lower, np.where(np.isfinite(upper), upper - 2 * reach, -reach))
    high = np.where(np.isfinite(upper), upper, low + 2 * reach)
    return (low + high) / 2, np.minimum((high - low) / 2, reach)


def middle(arm: Arm) -> Floats:
    """Return the pose (n,) in the middle of the joints' ranges."""
    return _window(arm)[0]


def speeds(arm: Arm) -> Floats:
    """Return a lively speed of each joint (n,) [rad/s or m/s]: its limit, at most 3 rad/s or 1 m/s."""
    return np.minimum(arm.drives.speed_limit, np.where(arm.kinds == PRISMATIC, 1.0, 3.0))


def random_states(arm: Arm, count: int, seed: int = 1) -> Iterator[tuple[Floats, Floats, Floats]]:
    """Yield positions, velocities and accelerations (n,) within the limits; +-10 rad/s^2 (m/s^2)."""
    centre, half = _window(arm)
    random = np.random.default_rng(seed)
    for _ in range(count):
        u = random.uniform(-1, 1, (3, arm.n))
        yield centre + 0.95 * half * u[0], speeds(arm) * u[1], 10.0 * u[2]


def reference_motion(arm: Arm) -> ViaMotion:
    """Return the audit's motion: there and back about the middle pose, joints in turn up and down.

    Two quintic legs of 0.7 s with rests, over half of each joint's range (at most 1 rad or 0.3 m), less
    where the speed limit asks for it, and less again until the torque limits hold it, as far as that
    goes: what gravity alone takes can't be helped.
    """
    centre, half = _window(arm)
    most = np.where(arm.kinds == PRISMATIC, MOST_SHIFT, MOST_TURN)
    stroke = np.minimum(most, np.minimum(2 * STROKE * half, SHARE * arm.drives.speed_limit * LEG_S / PEAK))
    stroke[1::2] *= -1.0
    motion = _there_and_back(centre, stroke)
    for scale in (0.7, 0.5, 0.35, 0.25):
        if _within_torque(arm, motion):
            break
        motion = _there_and_back(centre, scale * stroke)
    return motion


def _there_and_back(centre: Floats, stroke: Floats) -> ViaMotion:
    one, other = (tuple((centre + side * stroke / 2).tolist()) for side in (-1, 1))
    return ViaMotion((one, other, one), LEG_S, REST_S)


def _within_torque(arm: Arm, motion: ViaMotion) -> bool:
    model = Model(arm, GRAVITY)
    q, v, a = motion.reference(np.linspace(0.0, motion.duration_s, 60))
    torques = [
        model.inverse_dynamics(*map(np.ascontiguousarray, point)) + model.friction(point[1])
        for point in zip(q, v, a, strict=True)
    ]
    return bool((np.abs(torques) <= SHARE * arm.drives.torque_limit).all())


def steady_hz(arm: Arm, motion: ViaMotion, control_hz: float) -> float:
    """Return a natural frequency [Hz] of joint-wise feedback that this arm holds stable at control_hz.

    5 Hz, or less where strong coupling asks for it: joint-wise gains kd = 2 w J_ii meet the inertia
    matrix J, so the fastest loop's rate is 2 w times the largest eigenvalue of J^-1 diag(J_ii), and a
    third of what a sampled loop bears is used (Kd T / J < 2). An elastic joint's motor meets its rotor
    alone, and the loop stays at a quarter of the joint's resonance.
    """
    drives = arm.drives
    fastest, resonance = 1.0, np.inf
    for q in np.array(motion.points):
        mass = Model(arm, GRAVITY).mass_matrix(q)
        whole = np.diag(mass)
        fastest = max(fastest, float(np.linalg.eigvals(np.linalg.solve(mass, np.diag(whole))).real.max()))
        elastic = np.isfinite(drives.stiffness)
        if elastic.any():
            fastest = max(fastest, float((whole / drives.reflected)[elastic].max()))
            resonance = min(resonance, float(np.sqrt(drives.stiffness / whole)[elastic].min()))
    w = min(control_hz / (3.0 * fastest), resonance / 4.0)
    return min(5.0, float(f"{w / (2 * np.pi):.1g}"))

"""Dry friction: what it holds, and how it brings a sliding joint to rest."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from rigbench.arm.arm import Arm, Floats
from rigbench.arm.dynamics import gravity_torque, mass_matrix
from rigbench.campaign.audit.bench import Path, watch
from rigbench.campaign.audit.result import Rest, Slide
from rigbench.campaign.audit.states import GRAVITY, middle, speeds
from rigbench.campaign.audit.variants import only_sliding, unlimited
from rigbench.rig.engine import Engine

__all__ = ["at_rest", "closed_stop", "sliding"]

HZ = 1000.0
SECONDS = 10.0
SETTLING = 1.0  # s, in which bristles bend and springs come to rest
LOAD = 0.9  # of breakaway
LONGEST = 2.0  # s, of a slide
WEIGHTLESS = (0.0, 0.0, 0.0)


def at_rest(engine: Engine, arm: Arm) -> tuple[Rest, float]:
    """Load every joint with 90 % of its breakaway torque, beside what holds it against gravity, for 10 s.

    Where a joint lacks dry friction nothing can hold it under gravity for long, so the arm is then
    weightless and that joint bears no load. Returns also the residual [rad/s].
    """
    dry = arm.drives.static
    if not (dry > 0).any():
        return Rest("no joint has dry friction, so there is nothing to hold", 0.0, None), 0.0
    signs = np.where(np.arange(arm.n) % 2 == 0, 1.0, -1.0)
    load, pose = LOAD * dry * signs, middle(arm)
    if (dry > 0).all():
        how, gravity = "every joint at 90 % of its breakaway torque, under gravity", GRAVITY
        load = load + gravity_torque(arm.chain(gravity), pose)
    else:
        names = ", ".join(name for name, size in zip(arm.joints, dry, strict=True) if size > 0)
        how, gravity = f"{names} at 90 % of breakaway, weightless (others have no dry friction)", WEIGHTLESS
    path = watch(engine, unlimited(arm), (pose, np.zeros(arm.n)), load, HZ, SETTLING + SECONDS, gravity)
    settled = path.q[round(SETTLING * HZ) :]
    whole = len(settled) == round(SECONDS * HZ) + 1
    drift = float(np.abs(settled - settled[0]).max()) if whole else np.inf
    return Rest(how, SECONDS, drift), path.residual


def sliding(engine: Engine, arm: Arm) -> Iterator[tuple[Slide, float]]:
    """Let each joint with Coulomb friction slide to a stop, the others held, the arm weightless.

    One joint alone turns a body of fixed inertia J = M_ii + Jr, whatever its own angle. Yields the slide
    with its residual [rad/s].
    """
    pose = middle(arm)
    inertia = np.diag(mass_matrix(arm.chain(GRAVITY), pose)) + arm.drives.reflected
    for i in np.flatnonzero(arm.drives.coulomb > 0):
        body = float(inertia[i]), float(arm.drives.viscous[i]), float(arm.drives.coulomb[i])
        speed = min(0.5 * float(speeds(arm)[i]), _speed_for(*body, LONGEST))
        stop, travel = closed_stop(*body, speed)
        start = np.zeros(arm.n)
        start[i] = speed
        path = watch(
            engine, only_sliding(arm, int(i)), (pose, start), np.zeros(arm.n), HZ, stop + 0.1, WEIGHTLESS
        )
        moved = float(path.q[-1, i] - pose[i])
        yield Slide(arm.joints[i], speed, _stop(path, int(i)), stop, moved, travel), path.residual


def closed_stop(inertia: float, viscous: float, coulomb: float, speed: float) -> tuple[float, float]:
    """Return when [s] and after which angle [rad] J dv/dt = -F - B v comes to rest from ``speed``.

    t = (J/B) ln(1 + B v0/F), angle = (J v0 - F t)/B; without B, J v0/F and J v0^2/(2 F).
    """
    x = viscous * speed / coulomb
    if x < 1e-6:  # where the difference would be lost in rounding; the next term is of order x
        return inertia * speed / coulomb * (1 - x / 2), inertia * speed**2 / (2 * coulomb) * (1 - 2 * x / 3)
    stop = inertia / viscous * float(np.log1p(x))
    return stop, (inertia * speed - coulomb * stop) / viscous


def _speed_for(inertia: float, viscous: float, coulomb: float, stop: float) -> float:
    """Return the speed from which the joint stops after ``stop`` seconds."""
    x = viscous * stop / inertia
    if x > 50:
        return float(np.inf)
    return coulomb * stop / inertia * (float(np.expm1(x)) / x if x > 0 else 1.0)


def _stop(path: Path, joint: int) -> float:
    """Return when the joint came to rest: its last two speeds, carried on in a straight line."""
    v: Floats = np.abs(path.v[:, joint])
    moving = np.flatnonzero(v > 1e-9)
    last = int(moving[-1])
    slowing = v[last - 1] - v[last] if last > 0 else v[last] - v[last + 1]
    step = path.t[1] - path.t[0]
    return float(path.t[last] + step * (v[last] / slowing if slowing > 0 else 1.0))

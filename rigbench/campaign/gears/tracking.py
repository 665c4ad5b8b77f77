"""Independent-joint control in the engine, at one gear ratio after the other."""

from __future__ import annotations

from dataclasses import dataclass, fields, replace
from typing import Any

import numpy as np

from rigbench.arm.arm import Arm, Floats
from rigbench.arm.files import ArmFiles
from rigbench.errors import EngineError
from rigbench.laws.registry import LawChoice
from rigbench.motion.via import ViaMotion
from rigbench.rig.engine import Engine
from rigbench.rig.run import Rates, Run
from rigbench.rig.simulate import simulate
from rigbench.scores.of_run import score_run

__all__ = ["Outcome", "gains", "track"]

NO_LIMITS = dict.fromkeys(("torque_limit", "speed_limit", "stall_torque", "no_load_speed"), np.inf)


@dataclass(frozen=True)
class Outcome:
    """How a run came out: the largest error of each joint (n,) [rad; m] and of the tool; None without one."""

    outcome: str
    reason: str
    errors: Floats | None = None
    tool_peak_mm: float | None = None


@dataclass(frozen=True)
class _StrongArm(ArmFiles):
    """The files of an arm whose drives have no limits: the errors are then the gear's, not the limits'."""

    def arm(self) -> Arm:
        arm = ArmFiles.arm(self)
        given: dict[str, Any] = {name: np.full(arm.n, value) for name, value in NO_LIMITS.items()}
        return arm.replaced(drives=replace(arm.drives, **given))


def gains(inertia: Floats, natural_hz: float, damping: float) -> tuple[Floats, Floats]:
    """Return kp = J w^2 and kd = 2 damping J w, w = 2 pi natural_hz, for inertias J (n,) at the joints."""
    w = 2.0 * np.pi * natural_hz
    return inertia * w**2, 2.0 * damping * inertia * w


def track(
    engine: Engine, files: ArmFiles, kp: Floats, kd: Floats, motion: ViaMotion, control_hz: float
) -> Outcome:
    """Run the arm of the files along a motion, without limits, under independent-joint control."""
    parts = {field.name: getattr(files, field.name) for field in fields(files)}
    law = LawChoice("independent-joint", (("kd", tuple(kd.tolist())), ("kp", tuple(kp.tolist()))))
    run = Run(_StrongArm(**parts), law, motion, Rates(control_hz, control_hz), motion.points[0], 0.5)
    try:
        log = simulate(run, engine)
    except EngineError as problem:
        return Outcome("engine", str(problem))
    if log.outcome != "finished":
        return Outcome(log.outcome, log.reason)
    if log.in_doubt:
        return Outcome("disagrees", f"engine and drive disagree by {log.residual:.1e} rad/s")
    errors: Floats = np.abs(log.q_ref - log.q).max(axis=0)
    return Outcome("finished", "", errors, score_run(log, motion, 0.5)["tool_peak_mm"])

"""How fine the engine's step has to be: runs along a reference motion against what they converge to."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import fields, replace

import numpy as np

from rigbench.arm.files import ArmFiles
from rigbench.campaign.audit.result import Convergence, order_of
from rigbench.campaign.audit.sampled_loop import Exact, exact_loop
from rigbench.campaign.audit.states import reference_motion, steady_hz
from rigbench.campaign.audit.variants import DryArm, SmoothArm
from rigbench.laws.registry import LawChoice
from rigbench.motion.motion import Motion
from rigbench.rig.engine import Engine
from rigbench.rig.log import Log
from rigbench.rig.run import Rates, Run
from rigbench.rig.simulate import simulate
from rigbench.scores.of_run import score_run

__all__ = ["CONTROL_HZ", "RATES", "convergences", "excess"]

RATES = (500.0, 1000.0, 2000.0, 4000.0, 8000.0)
FINEST = 16.0  # of the engine against itself, in steps a control tick
CONTROL_HZ = 1000.0  # or physics_hz where that is less
LAWS = ("computed-torque", "independent-joint")
SHARE = 0.01
LEAST = {"mm": 1e-3, "deg": 1e-4}
ROUNDING = 1e-12  # rad; what is below tells no order


def convergences(engine: Engine, files: ArmFiles) -> Iterator[tuple[Convergence, float]]:
    """Yield, law by law, the runs without dry friction and then those as declared, each with its residual."""
    arm = files.arm()
    motion = reference_motion(arm)
    natural_hz = steady_hz(arm, motion, RATES[0])
    parts = {field.name: getattr(files, field.name) for field in fields(files)}
    for law in LAWS:
        choice = LawChoice(law, (("natural_hz", natural_hz),))
        for dry in (False, True):
            test = _Test(engine, DryArm(**parts) if dry else SmoothArm(**parts), choice, motion)
            yield test.done(natural_hz, dry), test.residual


def _control(physics_hz: float) -> float:
    return min(physics_hz, CONTROL_HZ)


class _Test:
    """One law on one variant of the arm, at every rate."""

    def __init__(self, engine: Engine, files: ArmFiles, law: LawChoice, motion: Motion) -> None:
        self.engine, self.files, self.law, self.motion = engine, files, law, motion
        self.residual = 0.0

    def run(self, physics_hz: float, control_hz: float) -> Log:
        start = tuple(self.motion.reference(np.zeros(1))[0][0].tolist())
        run = Run(self.files, self.law, self.motion, Rates(control_hz, physics_hz), start, 0.5)
        log = simulate(run, self.engine)
        if log.outcome != "diverged":
            self.residual = max(self.residual, log.residual)
        return log

    def done(self, natural_hz: float, dry: bool) -> Convergence:
        exact = {} if dry else self._exact()
        against, targets = ("ode", exact.__getitem__) if exact else ("finest", self._finest)
        made = Convergence(self.law.plugin, natural_hz, dry, against, RATES, (), (), (), None)
        return self._against(made, targets)

    def _exact(self) -> dict[float, Exact]:
        """Return the ODE solution by control_hz; {} where the arm is too stiff for it."""
        arm, found = self.files.arm(), {}
        for control_hz in sorted({_control(hz) for hz in RATES}):
            course = exact_loop(arm, self.law, self.motion, control_hz)
            if course is None:
                return {}
            found[control_hz] = course
        return found

    def _finest(self, control_hz: float) -> Exact:
        log = self.run(FINEST * control_hz, control_hz)
        return Exact(log.q, log.v, log.reason)

    def _against(self, made: Convergence, targets: Callable[[float], Exact]) -> Convergence:
        found: dict[float, Exact] = {}
        errors, used, worst, reason = [], [], [], ""
        for hz in RATES:
            control_hz = _control(hz)
            if control_hz not in found:
                found[control_hz] = targets(control_hz)
            target, log = found[control_hz], self.run(hz, control_hz)
            error, share, name = np.inf, np.inf, ""
            if target.note or log.outcome != "finished":
                reason = target.note or log.reason
            else:
                error = float(np.abs(log.q - target.q).max())
                share, name = excess(log, replace(log, q=target.q, v=target.v), self.motion)
            errors.append(error)
            used.append(share)
            worst.append(name)
        note = "" if np.isfinite(errors).any() else f"no run gets to its end ({reason})"
        # what the engine's own finest run tells is too little for an order, and dry friction has none
        order = order_of(RATES[1:], tuple(errors[1:]), ROUNDING) if made.against == "ode" else None
        return replace(
            made, errors=tuple(errors), used=tuple(used), worst=tuple(worst), order=order, note=note
        )


def excess(log: Log, exact: Log, motion: Motion) -> tuple[float, str]:
    """Return the worst difference of a joint or tool score over what is allowed, and the score's name.

    Allowed is 1 % of the exact score, or 0.001 mm or 1e-4 deg where that is more.
    """
    one, other = score_run(log, motion, 0.5), score_run(exact, motion, 0.5)
    shares = {}
    for name, value in other.items():
        base = name.split(".")[0]
        unit = base.rsplit("_", 1)[-1]
        if base.startswith(("joint_", "tool_", "path_")) and unit in LEAST:
            shares[name] = abs(one[name] - value) / max(SHARE * abs(value), LEAST[unit])
    worst = max(shares, key=lambda name: shares[name])
    return float(shares[worst]), worst

"""The audit of an arm: does the engine play the machine that the arm file declares, and at which step?"""

from __future__ import annotations

import numpy as np

from rigbench.arm.arm import PRISMATIC, Arm
from rigbench.arm.files import ArmFiles
from rigbench.campaign.audit.accelerations import compare_accelerations
from rigbench.campaign.audit.convergence import convergences
from rigbench.campaign.audit.friction import at_rest, sliding
from rigbench.campaign.audit.result import Audit
from rigbench.campaign.audit.swing import free_swing
from rigbench.rig.engine import Engine
from rigbench.rig.simulate import worker_engine

__all__ = ["Audit", "audit"]


def audit(files: ArmFiles, engine: Engine | None = None) -> Audit:
    """Measure how well the engine plays the arm; takes seconds. Raises InputFaults, EngineError.

    ``engine`` is this process's where none is given.
    """
    engine = worker_engine() if engine is None else engine
    arm = files.arm()
    accelerations = compare_accelerations(engine, arm)
    swing, momentum, swung = free_swing(engine, arm)
    courses = list(convergences(engine, files))
    rest, rested = at_rest(engine, arm)
    slides = list(sliding(engine, arm))
    residuals = [swung, rested, *(left for _, left in courses), *(left for _, left in slides)]
    return Audit(
        path=files.path,
        name=arm.name,
        joints=arm.joints,
        unit=_unit(arm),
        accelerations=accelerations,
        swing=swing,
        momentum=momentum,
        convergences=tuple(convergence for convergence, _ in courses),
        rest=rest,
        slides=tuple(slide for slide, _ in slides),
        residual=float(np.max(residuals)),
    )


def _unit(arm: Arm) -> str:
    slides = arm.kinds == PRISMATIC
    return "m" if slides.all() else "rad or m" if slides.any() else "rad"

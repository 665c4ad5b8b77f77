"""Positions of all joints, as the user writes them: deg, or mm for a prismatic joint."""

from __future__ import annotations

import math
from collections.abc import Mapping

import numpy as np

from rigbench.arm.arm import PRISMATIC, Arm, Floats
from rigbench.experiment.findings import Findings, entries
from rigbench.motion.limits import SLACK, shown, to_si
from rigbench.motion.motion import Motion
from rigbench.yamlfile import KeyPath

__all__ = ["check_position", "check_start", "joint_list"]


def joint_list(
    key: str, values: list[float] | None, arm: Arm, findings: Findings
) -> tuple[float, ...] | None:
    """Return a list of deg (mm for a prismatic joint) in rad (m); None if there is none or it is at fault."""
    if values is None:
        return None
    if len(values) != arm.n:
        findings.fault((key,), entries(len(values)), f"{arm.n}, one a joint")
        return None
    return tuple((np.array(values) * to_si(arm)).tolist())


def check_start(
    offset: tuple[float, ...], motions: Mapping[str, Motion], arm: Arm, findings: Findings
) -> None:
    """Check that every run starts within the limits of the joints; ``offset`` (n,) in rad (m)."""
    for name, motion in motions.items():
        first = (motion.reference(np.zeros(1))[0][0] + np.array(offset)) / to_si(arm)
        check_position(("start_offset_deg",), first, arm, findings, f"motion {name} would start at ")


def check_position(path: KeyPath, position: Floats, arm: Arm, findings: Findings, where: str = "") -> None:
    """Add a fault for each joint of a position (n,) [deg or mm] that lies beyond its limits.

    ``where`` is what comes before the number, if it is more than the number that is at fault.
    """
    scale = to_si(arm)
    for i, joint in enumerate(arm.joints):
        unit = "mm" if arm.kinds[i] == PRISMATIC else "deg"
        for side, bound, sign in (("least", arm.lower[i], -1), ("most", arm.upper[i], 1)):
            if math.isfinite(bound) and sign * (position[i] * scale[i] - bound) > SLACK * abs(bound):
                value, limit = shown(float(position[i]), float(bound / scale[i]))
                problem = f"{where}{value} {unit}{',' if where else ' is'} beyond the limit of joint {joint}"
                findings.fault(path, problem, f"at {side} {limit} {unit}")

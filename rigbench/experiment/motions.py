"""The motions of an experiment: made from their keys or files and held against the arm's limits."""

from __future__ import annotations

import math
from collections.abc import Mapping
from pathlib import Path

import numpy as np

from rigbench.arm.arm import PRISMATIC, Arm, Floats
from rigbench.errors import InputFaults
from rigbench.experiment.findings import Findings, entries, unreadable
from rigbench.experiment.schema import MotionKeys
from rigbench.motion.limits import SLACK, check_motion, shown
from rigbench.motion.motion import Motion
from rigbench.motion.read import read_table
from rigbench.motion.via import ViaMotion
from rigbench.yamlfile import KeyPath, read_text

__all__ = ["check_position", "motions_of", "to_si"]

MOST_TICKS = 5_000_000
"""Control ticks that a motion may have: what a run logs of them has to fit into memory."""

LEAST_TICKS = 2


def to_si(arm: Arm) -> Floats:
    """Return what turns a joint's deg into rad and a prismatic joint's mm into m, shape (n,)."""
    return np.where(arm.kinds == PRISMATIC, 1e-3, math.radians(1.0))


def motions_of(
    motions: Mapping[str, MotionKeys], findings: Findings, folder: Path, arm: Arm, control_hz: float
) -> dict[str, Motion]:
    """Return the motions that are in order, by the user's names; what is not goes to ``findings``."""
    made: dict[str, Motion] = {}
    for name, keys in motions.items():
        path: KeyPath = ("motions", name)
        if not findings.clean(*path):
            continue
        if (keys.via_deg is None) == (keys.file is None):
            problem = (
                "neither via_deg nor file is given"
                if keys.file is None
                else "both via_deg and file are given"
            )
            findings.fault(path, problem, "one of them")
        elif keys.file is None:
            motion: Motion | None = _via(path, keys, findings, arm, control_hz)
        else:
            motion = _table(path, keys, findings, folder, arm)
        if findings.clean(*path) and motion is not None:
            _check_length(path, motion, control_hz, findings)
            made[name] = motion
    return made


def _via(
    path: KeyPath, keys: MotionKeys, findings: Findings, arm: Arm, control_hz: float
) -> ViaMotion | None:
    points = keys.via_deg or []
    scale = to_si(arm)
    for i, point in enumerate(points):
        where = (*path, "via_deg", i)
        if len(point) != arm.n:
            findings.fault(where, entries(len(point)), f"{arm.n}, one a joint")
        else:
            check_position(where, np.array(point), arm, findings)
    if not findings.clean(*path):
        return None
    rows = tuple(tuple((np.array(point) * scale).tolist()) for point in points)
    motion = ViaMotion(rows, keys.leg_s, keys.rest_s, keys.pace_percent / 100.0)
    if motion.duration_s * control_hz <= MOST_TICKS:
        for passing in check_motion(motion, arm, control_hz):
            if passing.limit == "speed limit":
                findings.fault(path, str(passing), "a longer leg_s or a lower pace_percent")
    return motion


def check_position(path: KeyPath, position: Floats, arm: Arm, findings: Findings, where: str = "") -> None:
    """Add a fault for each joint of a position (n,) [deg or mm] that lies beyond its limits."""
    scale = to_si(arm)
    for i, joint in enumerate(arm.joints):
        unit = "mm" if arm.kinds[i] == PRISMATIC else "deg"
        for side, bound, sign in (("least", arm.lower[i], -1), ("most", arm.upper[i], 1)):
            if math.isfinite(bound) and sign * (position[i] * scale[i] - bound) > SLACK * abs(bound):
                value, limit = shown(float(position[i]), float(bound / scale[i]))
                problem = f"{where}{value} {unit} is beyond the limit of joint {joint}"
                findings.fault(path, problem, f"at {side} {limit} {unit}")


def _table(path: KeyPath, keys: MotionKeys, findings: Findings, folder: Path, arm: Arm) -> Motion | None:
    assert keys.file is not None
    for key in ("leg_s", "rest_s"):
        if key in keys.model_fields_set:
            findings.fault((*path, key), "goes with via_deg, not with file", "via_deg, or the key left out")
    file = folder / keys.file
    problem = unreadable(file)
    if problem is not None:
        findings.fault((*path, "file"), f"'{keys.file}' {problem}", f"a CSV file, relative to {folder}")
        return None
    try:
        return read_table(str(file), read_text(file, str(file)), arm, keys.pace_percent / 100.0)
    except InputFaults as error:
        findings.take(error.faults)
        return None


def _check_length(path: KeyPath, motion: Motion, control_hz: float, findings: Findings) -> None:
    ticks = motion.duration_s * control_hz
    if not LEAST_TICKS <= ticks <= MOST_TICKS:
        problem = f"lasts {motion.duration_s:g} s, which is {ticks:.3g} control ticks"
        findings.fault(path, problem, f"{LEAST_TICKS} to {MOST_TICKS}")

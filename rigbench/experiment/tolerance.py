"""The tolerance of an experiment: which scores it limits, and whether its motions have them."""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator, Mapping
from typing import Any

from rigbench.arm.arm import PRISMATIC, REVOLUTE, Arm
from rigbench.errors import nearest
from rigbench.experiment.findings import Findings
from rigbench.experiment.schema import ExperimentKeys
from rigbench.motion.motion import Motion
from rigbench.scores.names import SCORES
from rigbench.scores.results import Tolerance
from rigbench.yamlfile import KeyPath

__all__ = ["SETTLE_BAND_MM", "check_applies", "check_limits", "limits_of", "tolerance_of"]

BAND = "settle_band_mm"

SETTLE_BAND_MM = 0.5
"""Default of settle_band_mm [mm]."""

AT_RESTS = ("overshoot_mm", "settle_ms")
OF_REVOLUTE = ("joint_peak_deg", "joint_rms_deg")
OF_PRISMATIC = ("joint_peak_mm", "joint_rms_mm")
OVER_LIMIT = ("torque_peak_percent", "torque_rms_percent", "chatter")


def tolerance_of(
    keys: ExperimentKeys, arm: Arm | None, findings: Findings
) -> tuple[Tolerance | None, dict[str, float]]:
    """Return the tolerance and the declared settle bands [mm]; faults go to ``findings``.

    The bands are by the motion's name; that of the experiment is under ''.
    """
    bands: dict[str, float] = {}
    limits = limits_of(("tolerance",), keys.tolerance, arm, bands, "", findings)
    own = {
        name: limits_of(("motions", name, "tolerance"), motion.tolerance, arm, bands, name, findings)
        for name, motion in (keys.motions or {}).items()
    }
    tolerance = Tolerance(limits, keys.required_share, {name: found for name, found in own.items() if found})
    if keys.tolerance and not tolerance.limited and findings.clean("tolerance"):
        findings.note(("tolerance",), "it limits no score, so nothing is shown to keep or miss it")
    return (tolerance if tolerance.limited else None), bands


def limits_of(
    path: KeyPath,
    declared: Mapping[str, Any] | None,
    arm: Arm | None,
    bands: dict[str, float],
    motion: str,
    findings: Findings,
) -> dict[str, float]:
    """Return the limits that are declared at ``path``; a settle band of ``motion`` goes to ``bands``."""
    limits: dict[str, float] = {}
    for name, value in (declared or {}).items():
        here = (*path, name)
        if name == BAND:
            if _positive(here, value, findings):
                bands[motion] = float(value)
        elif name not in SCORES:
            near = nearest(name, [*SCORES, BAND])
            expected = "" if near else "one of " + ", ".join([*_limitable(), BAND])
            findings.fault(here, "is not a score", expected, near)
        elif SCORES[name].host:
            findings.fault(here, "tells about this computer, not about the arm", "a score of the arm")
        else:
            limits |= _limits(here, name, value, arm, findings)
    return limits


def _limitable() -> Iterator[str]:
    return (name for name, info in SCORES.items() if not info.host)


def _limits(path: KeyPath, name: str, value: Any, arm: Arm | None, findings: Findings) -> dict[str, float]:
    """Return the limits of one score: its own, or those of single joints."""
    least = 0.0 if name == "saturated_percent" else math.ulp(0.0)
    if not isinstance(value, dict):
        return {name: float(value)} if _positive(path, value, findings, least) else {}
    if not SCORES[name].per_joint:
        findings.fault(path, "has no values by joint", "a number")
        return {}
    found = {}
    for joint, limit in value.items():
        where = (*path, joint)
        if arm is not None and joint not in arm.joints:
            near = nearest(joint, arm.joints)
            expected = "" if near else "one of " + ", ".join(arm.joints)
            findings.fault(where, f"the arm has no joint '{joint}'", expected, near)
        elif _positive(where, limit, findings, least):
            found[f"{name}.{joint}"] = float(limit)
    return found


def _positive(path: KeyPath, value: Any, findings: Findings, least: float = math.ulp(0.0)) -> bool:
    """Tell whether a value is a finite number of at least ``least``; a fault if it is not."""
    bound = "above 0" if least > 0 else "at least 0"
    if isinstance(value, bool) or not isinstance(value, int | float) or math.isnan(value):
        findings.fault(path, f"{_shown(value)} is not a number", f"a number {bound}")
    elif not least <= value < math.inf:
        findings.fault(path, f"{value!r} is out of range", bound)
    else:
        return True
    return False


def _shown(value: Any) -> str:
    if isinstance(value, str):
        return f"'{value}'"
    if isinstance(value, list):
        return "a list"
    return "an empty value" if value is None else str(value).lower()


def check_applies(tolerance: Tolerance, motions: Mapping[str, Motion], arm: Arm, findings: Findings) -> None:
    """Add a fault for each limit on a score that no motion has that it is for; a note where some lack it."""
    check_limits(("tolerance",), tolerance.limits, motions, arm, findings)
    for name, limits in tolerance.motions.items():
        if name in motions:
            path = ("motions", name, "tolerance")
            check_limits(path, limits, {name: motions[name]}, arm, findings)


def check_limits(
    path: KeyPath, limits: Iterable[str], motions: Mapping[str, Motion], arm: Arm, findings: Findings
) -> None:
    """Add a fault for each score limited at ``path`` that no motion has; a note where some lack it."""
    for name in limits:
        base, _, joint = name.partition(".")
        here: KeyPath = (*path, base, joint) if joint else (*path, base)
        if base in AT_RESTS:
            _check_rests(here, motions, findings)
            continue
        of = [arm.joints.index(joint)] if joint else range(arm.n)
        whose = f"joint {joint}" if joint else "every joint"
        kinds = {arm.kinds[i] for i in of}
        if base in OF_REVOLUTE and REVOLUTE not in kinds:
            findings.fault(here, f"{whose} is prismatic", base.replace("_deg", "_mm"))
        elif base in OF_PRISMATIC and PRISMATIC not in kinds:
            findings.fault(here, f"{whose} is revolute", base.replace("_mm", "_deg"))
        elif base in OVER_LIMIT and all(math.isinf(arm.drives.torque_limit[i]) for i in of):
            findings.fault(here, f"{whose} is without a torque limit to compare with", "one in the arm file")


def _check_rests(path: KeyPath, motions: Mapping[str, Motion], findings: Findings) -> None:
    without = [name for name, motion in motions.items() if not motion.rests]
    if len(without) == len(motions):
        who = "no motion has" if path[0] == "tolerance" else "it does not have"
        findings.fault(path, f"{who} a rest, where this is measured", "a motion with rest_s above 0")
    elif without:
        findings.note(path, f"not measured in {', '.join(without)}: no rest there")

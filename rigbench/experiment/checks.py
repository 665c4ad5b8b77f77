"""Cross-checks: what only shows against the arm or another key of the experiment file."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path

import numpy as np

from rigbench.arm.arm import Arm
from rigbench.arm.files import ArmFiles
from rigbench.arm.mismatch import Mismatch, Payload
from rigbench.errors import Fault, InputFaults
from rigbench.experiment.findings import Findings, entries, unreadable
from rigbench.experiment.laws import is_whole
from rigbench.experiment.motions import check_position, to_si
from rigbench.experiment.schema import ExperimentKeys, MismatchKeys, RatesKeys
from rigbench.motion.motion import Motion
from rigbench.rig.run import Rates

__all__ = [
    "arm_files",
    "check_conditions",
    "check_model",
    "check_names",
    "check_start",
    "joint_list",
    "mismatch_of",
    "rates_of",
]

FORMAT = 1
"""Version of the experiment file's format."""

MOST_LEVEL = 100.0

REQUIRED = ("rigbench", "arm", "motions", "laws")


def check_names(keys: ExperimentKeys, findings: Findings) -> None:
    """Check that what is required is there, the format's version, and that the user's names fit a line."""
    for key in REQUIRED:
        if getattr(keys, key) is None and findings.clean(key):
            findings.take([Fault(findings.document.file, None, key, "missing")])
    if keys.rigbench not in (None, FORMAT):
        findings.fault(("rigbench",), f"{keys.rigbench} is not a version that is read here", str(FORMAT))
    for section in ("motions", "laws"):
        for name in getattr(keys, section) or {}:
            if not name or name != " ".join(name.split()):
                problem = f"the name '{name}' is empty or has odd blanks in it"
                findings.fault((section, name), problem, "words with single blanks between them")


def arm_files(key: str, name: str | None, findings: Findings, folder: Path) -> tuple[ArmFiles, Arm] | None:
    """Read the arm file that ``key`` names; its faults, addressed to it, go to ``findings``."""
    if name is None:
        return None
    path = folder / name
    problem = unreadable(path)
    if problem is not None:
        findings.fault((key,), f"'{name}' {problem}", f"an arm file, relative to {folder}")
        return None
    try:
        files = ArmFiles.read(path)
        arm = files.arm()
    except InputFaults as error:
        findings.take(error.faults)
        return None
    findings.notes += arm.notes
    return files, arm


def check_model(model: Arm, arm: Arm, findings: Findings) -> None:
    """Check that the believed arm has the joints of the arm itself."""
    if model.joints != arm.joints or not np.array_equal(model.kinds, arm.kinds):
        problem = f"its chain is {', '.join(model.joints)}"
        findings.fault(("model",), problem, f"the arm's: {', '.join(arm.joints)}, of the same kinds")


def rates_of(keys: RatesKeys, findings: Findings) -> Rates | None:
    """Return the rates; None where they are at fault."""
    if not findings.clean("rates"):
        return None
    physics_hz = 2.0 * keys.control_hz if keys.physics_hz is None else keys.physics_hz
    if not is_whole(physics_hz / keys.control_hz):
        problem = f"{physics_hz:g} is not a whole multiple of control_hz, {keys.control_hz:g}"
        findings.fault(("rates", "physics_hz"), problem, "1, 2, 3 ... times control_hz")
        return None
    return Rates(keys.control_hz, physics_hz)


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


def mismatch_of(keys: MismatchKeys, arm: Arm | None, findings: Findings) -> Mismatch:
    """Return the mismatch; what of it is at fault is left out."""
    payload = None
    if keys.payload is not None and findings.clean("mismatch", "payload"):
        given = keys.payload
        path = ("mismatch", "payload")
        if given.least_kg > given.most_kg:
            findings.fault(
                (*path, "least_kg"), f"{given.least_kg:g} is above most_kg", f"at most {given.most_kg:g}"
            )
        elif not given.least_kg <= given.believed_kg <= given.most_kg:
            problem = f"{given.believed_kg:g} is not between least_kg and most_kg"
            findings.fault((*path, "believed_kg"), problem, f"{given.least_kg:g} to {given.most_kg:g}")
        else:
            payload = Payload(given.believed_kg, given.least_kg, given.most_kg, given.cog_mm)
    spreads = keys.model_dump(exclude={"payload"})
    if arm is not None:
        _note_idle(keys, arm, findings)
    return Mismatch(**spreads, payload=payload)


def _note_idle(keys: MismatchKeys, arm: Arm, findings: Findings) -> None:
    """Note the sources that scale what is zero in this arm."""
    drives = arm.drives
    for source, value, what in (
        ("coulomb_percent", drives.static, "no drive has Coulomb friction"),
        ("viscous_percent", drives.viscous, "no drive has viscous friction"),
        ("rotor_inertia_percent", drives.rotor_inertia, "no drive has rotor inertia"),
    ):
        if getattr(keys, source) is not None and not np.any(value):
            findings.note(("mismatch", source), f"has no effect: {what}")


def check_conditions(keys: ExperimentKeys, sources: tuple[str, ...], findings: Findings) -> None:
    """Check that the levels rise and that there is something for the conditions to vary."""
    together = keys.conditions.together or []
    for i, level in enumerate(together):
        path = ("conditions", "together", i)
        if level == 0:
            findings.fault(path, "level 0 is the column 'nominal', which is always there", "above 0")
        elif not 0 < level <= MOST_LEVEL:
            findings.fault(path, f"{level:g} is out of range", f"above 0, at most {MOST_LEVEL:g}")
        elif i and level <= together[i - 1]:
            findings.fault(path, f"{level:g} after {together[i - 1]:g}", "levels that rise, each once")
    if sources or not findings.clean("mismatch"):
        return
    for key in ("each_alone", "together"):
        if getattr(keys.conditions, key) is not None:
            findings.fault(("conditions", key), "needs a mismatch", "a source with a spread under mismatch")

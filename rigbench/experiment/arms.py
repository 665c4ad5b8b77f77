"""The arm of an experiment and the one that its controllers believe, with the drives that it changes."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from rigbench.arm.arm import Arm
from rigbench.arm.declaration import ArmDeclaration
from rigbench.arm.drive_changes import EVERY, changed_drives
from rigbench.arm.files import ArmFiles
from rigbench.errors import InputFaults
from rigbench.experiment.findings import Findings, unreadable
from rigbench.experiment.schema import DriveKeys
from rigbench.yamlfile import KeyPath, key_text, load, validate

__all__ = ["Arms", "arms_of", "note_free_gears"]

MOTOR_SIDE = ("motor_torque_limit", "motor_speed_limit")


@dataclass(frozen=True)
class Arms:
    """The arm, and the files of it and of the one that is believed (None: the same)."""

    arm: Arm
    files: ArmFiles
    believed: ArmFiles | None


def arms_of(
    arm: str | None, model: str | None, drives: Mapping[str, DriveKeys], findings: Findings, folder: Path
) -> Arms | None:
    """Read the files that ``arm`` and ``model`` name, with ``drives`` in place of their own.

    Faults go to ``findings``, also those of ``model`` where ``arm`` is at fault; None then.
    """
    files = _files("arm", arm, drives, findings, folder)
    believed = _files("model", model, drives, findings, folder)
    if files is None:
        return None
    own = files.arm()
    if believed is not None:
        _check_model(believed.arm(), own, findings)
    return Arms(own, files, believed)


def _files(
    key: str, name: str | None, drives: Mapping[str, DriveKeys], findings: Findings, folder: Path
) -> ArmFiles | None:
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
        findings.notes += [note for note in files.arm().notes if note not in findings.notes]
    except InputFaults as error:
        findings.take(error.faults)
        return None
    changes = [
        (joint, number, getattr(keys, number)) for joint, keys in drives.items() for number in _given(keys)
    ]
    if not changes:
        return files
    changed = files.with_drives(changes)
    try:
        changed.arm()
    except InputFaults as error:
        for fault in error.faults:
            place = _place(fault.key, drives)
            findings.fault(place, fault.problem, fault.expected, fault.near)
        return None
    return changed


def _given(keys: DriveKeys) -> list[str]:
    """Return the numbers of a drive that are given, in the order of the schema."""
    return [name for name in DriveKeys.model_fields if name in keys.model_fields_set]


def _place(key: str, drives: Mapping[str, DriveKeys]) -> KeyPath:
    """Return where the number of a drive stands that a fault of the arm names by ``key``."""
    places: list[KeyPath] = [("drives",)]
    for joint, keys in drives.items():
        places += [("drives", joint), *(("drives", joint, number) for number in _given(keys))]
    around = [place for place in places if key == key_text(place) or key.startswith(f"{key_text(place)}.")]
    if around == places[:1] and EVERY in drives:
        return ("drives", EVERY)  # numbers of a joint that contradict those given for all
    return max(around, key=len, default=("drives",))


def _check_model(model: Arm, arm: Arm, findings: Findings) -> None:
    """Check that the believed arm has the joints of the arm itself."""
    if model.joints != arm.joints or not np.array_equal(model.kinds, arm.kinds):
        problem = f"its chain is {', '.join(model.joints)}"
        findings.fault(("model",), problem, f"the arm's: {', '.join(arm.joints)}, of the same kinds")


def note_free_gears(path: KeyPath, files: ArmFiles, findings: Findings) -> None:
    """Note the joints for which the sweep of gear ratios at ``path`` of the file costs nothing.

    The price of a ratio is in the limits of the motor: without them a higher ratio gains torque, loses no
    speed, and looks good at any number.
    """
    declaration, faults = validate(load(files.path, files.text), ArmDeclaration)
    assert declaration is not None, faults  # it has been made into an arm already
    drives, _ = changed_drives(files.path, declaration.drives, files.drive_changes)
    swept = [joint for joint in drives if path[1] in (joint, EVERY)]
    free = [joint for joint in swept if all(getattr(drives[joint], limit) is None for limit in MOTOR_SIDE)]
    if free:
        text = f"costs nothing at {', '.join(free)}: the motor has neither {' nor '.join(MOTOR_SIDE)} there"
        findings.note(("vary", *path), text)

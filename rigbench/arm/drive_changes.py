"""Changes of single drive numbers, as a sweep makes them, on top of what the arm file declares."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import replace

from rigbench.arm.declaration import DriveDeclaration
from rigbench.errors import Fault, nearest
from rigbench.yamlfile import Document, key_text, validate

__all__ = ["EVERY", "DriveChange", "changed_drives"]

DriveChange = tuple[str, str, float]
"""A joint's name or 'all', a key of DriveDeclaration, and the value that takes the declared one's place."""

EVERY = "all"


def changed_drives(
    file: str, declared: Mapping[str, DriveDeclaration], changes: Iterable[DriveChange]
) -> tuple[dict[str, DriveDeclaration], list[Fault]]:
    """Return the drives by joint with the changes in place, and what is wrong with the changes.

    A change of one joint goes before one of 'all', whichever comes first; else the later one counts.
    Nothing follows a change: with gear_ratio alone the motor (rotor_inertia, motor_*) and the friction
    at the joint stay as declared. Faults are addressed to ``file`` and drives.<joint or all>.<key>,
    without a line: unknown joints and keys, values out of range, numbers that contradict each other.
    """
    by_name: dict[str, dict[str, float]] = {}
    for name, key, value in changes:
        by_name.setdefault(name, {})[key] = value
    faults = [_unknown(file, name, list(declared)) for name in by_name if name not in (EVERY, *declared)]
    every = by_name.get(EVERY, {})
    drives = {}
    for joint, drive in declared.items():
        own = by_name.get(joint, {})
        drives[joint], found = _changed(file, joint, drive, every, own)
        faults += [fault for fault in found if fault not in faults]
    return drives, faults


def _unknown(file: str, name: str, joints: list[str]) -> Fault:
    near = nearest(name, [EVERY, *joints])
    expected = "" if near else ", ".join([EVERY, *joints])
    return Fault(
        file, None, key_text(("drives", name)), f"no driven joint is called '{name}'", expected, near
    )


def _changed(
    file: str, joint: str, drive: DriveDeclaration, every: Mapping[str, float], own: Mapping[str, float]
) -> tuple[DriveDeclaration, list[Fault]]:
    """Return one joint's drive with its changes; as declared where these are at fault."""
    if not every and not own:
        return drive, []
    numbers = {**drive.model_dump(exclude_unset=True), **every, **own}
    here = ("drives", joint)
    changed, faults = validate(Document(file, numbers, {}), DriveDeclaration, here, numbers)
    # a value given for all is at fault there, once, and not in every joint
    at_all = {key_text((*here, key)): key_text(("drives", EVERY, key)) for key in every if key not in own}
    return changed or drive, [replace(fault, key=at_all.get(fault.key, fault.key)) for fault in faults]

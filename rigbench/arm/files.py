"""The files of an arm: read once, carried as text, made into an Arm wherever it is needed."""

from __future__ import annotations

import hashlib
from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import astuple, dataclass, replace
from functools import lru_cache
from pathlib import Path
from typing import Any

import numpy as np

from rigbench.arm.arm import Arm
from rigbench.arm.chain import Chain, chain_of
from rigbench.arm.declaration import ArmDeclaration, DriveDeclaration, drives_of
from rigbench.arm.drive_changes import DriveChange, changed_drives
from rigbench.arm.urdf import Robot, read_urdf
from rigbench.errors import Fault, InputFaults, nearest
from rigbench.yamlfile import Document, load, partial, read_text, validate

__all__ = ["ArmFiles", "load_arm"]

EMPTY_DRIVE = "{gear_ratio: 1, rotor_inertia: 0, viscous: 0, coulomb: 0}"


@dataclass(frozen=True)
class ArmFiles:
    """The arm file and its URDF, as text, each with the name that the user knows it by.

    ``drive_changes``: ((joint or 'all', key of a drive, value), ...), which stand in place of what the
    arm file declares.
    """

    path: str
    text: str
    urdf_path: str
    urdf_text: str
    drive_changes: tuple[DriveChange, ...] = ()

    @classmethod
    def read(cls, path: Path | str) -> ArmFiles:
        """Read the arm file at ``path`` and the URDF that it names.

        Raises InputFaults where one of them can't be read or the arm file isn't YAML; then with all
        that is wrong in the arm file by itself.
        """
        name = str(path)
        text = read_text(Path(name), name, "the arm file")
        document = load(name, text)
        urdf = document.data.get("urdf") if isinstance(document.data, dict) else None
        if not isinstance(urdf, str) or not urdf:
            raise InputFaults(validate(document, ArmDeclaration)[1])
        urdf_path = str(Path(name).parent / urdf)
        try:
            urdf_text = read_text(Path(urdf_path), urdf_path, f"the URDF '{urdf_path}'")
        except InputFaults as error:
            unread = [f if f.line else _at_urdf(document, urdf_path, f) for f in error.faults]
            raise InputFaults([*unread, *validate(document, ArmDeclaration)[1]]) from None
        return cls(name, text, urdf_path, urdf_text)

    def with_drives(self, changes: Iterable[DriveChange]) -> ArmFiles:
        """Return the same files with these changes too; what is wrong with them :meth:`arm` says.

        A change of one joint goes before one of 'all', whichever comes first; else the later one counts.
        """
        return replace(self, drive_changes=(*self.drive_changes, *changes))

    def arm(self) -> Arm:
        """Return the arm that the files and the changes declare, the same object each time.

        Raises InputFaults with every fault of both files, or else with those of the changes: these are
        addressed to drives.<joint or all>.<key> of the arm file, without a line.
        """
        return _arm(self)

    @property
    def digest(self) -> str:
        """A digest (hex, 40 digits) of the arm's numbers and names; comments don't enter it."""
        return _digest(self)


def load_arm(path: Path | str) -> Arm:
    """Return the arm of the arm file at ``path``; raises InputFaults with every fault."""
    return ArmFiles.read(path).arm()


def _at_urdf(document: Document, path: str, fault: Fault) -> Fault:
    folder = Path(path).parent
    near = nearest(Path(path).name, sorted(file.name for file in folder.glob("*.urdf")))
    return document.fault(("urdf",), fault.problem, fault.expected, near)


@lru_cache(maxsize=512)  # a sweep of the drives has an arm for each sheet
def _arm(files: ArmFiles) -> Arm:
    document = load(files.path, files.text)
    declaration, faults = partial(document, ArmDeclaration)
    robot, more = read_urdf(files.urdf_path, files.urdf_text)
    faults += more
    chain = None
    if declaration is not None and robot is not None:
        lock, more = _locked(document, declaration, robot)
        faults += more
        if declaration.tool in robot.links:
            chain, more = chain_of(robot, declaration.tool, lock)
            faults += more
        else:
            problem = f"no link of {files.urdf_path} is called '{declaration.tool}'"
            near = nearest(declaration.tool, robot.links)
            faults.append(document.fault(("tool",), problem, "the link at the tool point", near))
    if chain is not None:
        faults += _drive_faults(document, [joint.name for joint in chain.joints], robot)
    if faults or declaration is None or robot is None or chain is None:
        # the arm file's first, each file's in the order of its lines
        raise InputFaults(sorted(faults, key=lambda fault: (fault.file != files.path, fault.line or 0)))
    drives, faults = changed_drives(files.path, declaration.drives, files.drive_changes)
    if faults:
        raise InputFaults(faults)
    return _assembled(robot.name, chain, drives, (*chain.notes, *_mesh_notes(robot)))


def _assembled(
    name: str, chain: Chain, declared: Mapping[str, DriveDeclaration], notes: tuple[Fault, ...]
) -> Arm:
    joints = chain.joints
    effort, velocity, lower, upper = (
        np.array([getattr(joint, limit) for joint in joints])
        for limit in ("effort", "velocity", "lower", "upper")
    )
    return Arm(
        name=name,
        joints=tuple(joint.name for joint in joints),
        links=tuple(joint.child for joint in joints),
        kinds=chain.kinds,
        rotation=chain.rotation,
        position=chain.position,
        axis=np.array([joint.axis for joint in joints]),
        parameters=chain.parameters,
        tool_rotation=chain.tool_rotation,
        tool_position=chain.tool_position,
        lower=lower,
        upper=upper,
        drives=drives_of([declared[joint.name] for joint in joints], effort, velocity),
        notes=notes,
    )


def _names(document: Document, key: str) -> list[str]:
    """Return the names that a mapping of the file declares, with those whose values are at fault."""
    inside: Any = document.data.get(key)
    return list(inside) if isinstance(inside, dict) else []


def _locked(
    document: Document, declaration: ArmDeclaration, robot: Robot
) -> tuple[Mapping[str, float], list[Fault]]:
    """Return the joints to freeze and what is wrong with them.

    A joint whose entry is at fault counts as locked, so that one slip makes one fault.
    """
    lock: dict[str, float] = {}
    faults: list[Fault] = []
    movable = [joint.name for joint in robot.joints.values() if joint.movable]
    for name in _names(document, "lock"):
        position = declaration.lock.get(name)
        near = None if name in robot.joints else nearest(name, movable)
        joint = robot.joints.get(near or name)
        if joint is None or near:
            problem = f"no joint of {robot.file} is called '{name}'"
            faults.append(document.fault(("lock", name), problem, "a movable joint", near))
        elif not joint.movable:
            problem = f"a {joint.kind} joint can't be locked"
            faults.append(document.fault(("lock", name), problem, "a movable joint"))
        elif position is not None and not joint.lower <= position <= joint.upper:
            problem = f"{position:g} is outside the joint's limits"
            expected = f"{joint.lower:g} to {joint.upper:g}"
            faults.append(document.fault(("lock", name), problem, expected))
        if joint is not None and joint.movable:
            lock[joint.name] = joint.resting if position is None or near else position
    return lock, faults


def _drive_faults(document: Document, joints: Sequence[str], robot: Robot | None) -> Iterator[Fault]:
    """Yield what is wrong with the names of the drives; what is wrong inside them is known by now."""
    declared = _names(document, "drives")
    meant: set[str | None] = set()
    for name in declared:
        if name in joints:
            continue
        if robot is not None and name in robot.joints:
            problem = f"the joint '{name}' is locked or fixed, so it needs no drive"
            yield document.fault(("drives", name), problem, "drives for " + ", ".join(joints))
            continue
        near = nearest(name, [joint for joint in joints if joint not in declared])
        meant.add(near)
        expected = "" if near else "drives for " + ", ".join(joints)
        yield document.fault(("drives", name), f"no joint is called '{name}'", expected, near)
    missing = [joint for joint in joints if joint not in declared and joint not in meant]
    if missing and (isinstance(document.data.get("drives"), dict) or "drives" not in document.data):
        block = "\n".join(["drives:", *(f"  {joint}: {EMPTY_DRIVE}" for joint in missing)])
        yield document.fault(
            ("drives",), f"missing for {', '.join(missing)}", f"this, with your numbers:\n{block}"
        )


def _mesh_notes(robot: Robot) -> Iterator[Fault]:
    """Yield one note on meshes that aren't there: they only matter to pictures."""
    absent = [
        (line, mesh)
        for link in robot.links.values()
        for line, mesh in link.meshes
        if "://" in mesh or not _exists(Path(robot.file).parent / mesh)
    ]
    if absent:
        line, mesh = absent[0]
        names = len({name for _, name in absent})
        said = f"the mesh file {mesh}" + ("" if names == 1 else f" and {names - 1} more")
        problem = f"{said} can't be found (only looks are affected)"
        yield Fault(robot.file, line, "", problem)


def _exists(path: Path) -> bool:
    try:
        return path.exists()
    except (OSError, ValueError):  # a name that no file can have
        return False


@lru_cache(maxsize=512)  # a sweep of the drives has an arm for each sheet
def _digest(files: ArmFiles) -> str:
    arm = files.arm()
    drives: Iterable[Any] = astuple(arm.drives)
    geometry = (arm.kinds, arm.rotation, arm.position, arm.axis, arm.tool_rotation, arm.tool_position)
    digest = hashlib.blake2b(repr((arm.joints, arm.links)).encode(), digest_size=20)
    for numbers in (*geometry, arm.parameters, arm.lower, arm.upper, *drives):
        digest.update((numbers + 0.0).astype("<f8").tobytes())  # + 0.0 makes -0.0 the same as 0.0
    return digest.hexdigest()

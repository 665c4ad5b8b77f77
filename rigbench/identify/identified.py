"""Identified arms as files: an arm file, its URDF, and how well their numbers are known."""

from __future__ import annotations

import xml.etree.ElementTree as ET
from collections.abc import Mapping
from pathlib import Path
from types import MappingProxyType
from typing import Any

import numpy as np
import yaml

from rigbench.arm.arm import Arm, Floats
from rigbench.arm.files import ArmFiles
from rigbench.arm.physical import inertia
from rigbench.errors import StoreError
from rigbench.identify.consistent import Consistent
from rigbench.identify.covariance_file import covariance_document, covariance_text
from rigbench.identify.estimate import Estimate
from rigbench.identify.regressor import Terms
from rigbench.yamlfile import load

__all__ = ["identified_files", "write_identified", "write_loaded"]

HEADING = """\
# Identified from recorded motions: inertials, rotor inertia, friction. All else is as declared.
# Before this model meets a real arm: a risk assessment under the local machinery rules and ISO 10218, people
# outside the reach, reduced speed first, an emergency stop in hand, torque and speed limits in the drive.
"""

LOADED = "# The last link carries the identified load: its inertial is of both.\n"


def write_identified(
    folder: Path | str, name: str, files: ArmFiles, terms: Terms, found: Estimate, result: Consistent
) -> tuple[Path, Path, Path]:
    """Write <name>.yaml, <name>.urdf and <name>-covariance.json into a folder, and return their paths.

    ``files`` are those of the declared arm that ``result`` was found about. The arm file reads back as
    ``result.arm`` to rounding: every moving link carries the inertial of its whole body, and links that are
    fixed to it none; names, limits, paths of meshes and what was not identified stay. Constant torques have
    no place in an arm file: they are in the covariance's.

    Raises StoreError where the files can't be written, ValueError if the drives are not the arm file's.
    """
    covariance = Path(folder) / f"{name}-covariance.json"
    known = covariance_text(covariance_document(result, terms, found))
    written = identified_files(files, terms, result.arm, Path(folder), name)
    return *_write(written, {covariance: known}), covariance


def write_loaded(folder: Path | str, name: str, files: ArmFiles, terms: Terms, arm: Arm) -> tuple[Path, Path]:
    """Write <name>.yaml and <name>.urdf of an identified arm that carries a load, and return their paths.

    As :func:`write_identified`; the load is part of the last link's inertial.
    """
    return _write(identified_files(files, terms, arm, Path(folder), name, HEADING + LOADED))


def identified_files(
    files: ArmFiles, terms: Terms, arm: Arm, folder: Path, name: str, heading: str = HEADING
) -> ArmFiles:
    """Return the files of an identified arm, of which nothing is written yet.

    ``files`` are those of the declared arm; ValueError if the drives are not the arm file's.
    """
    if files.drive_changes:
        raise ValueError("drives that were changed by an experiment have no arm file to write to")
    path, urdf = folder / f"{name}.yaml", folder / f"{name}.urdf"
    text = heading + _arm_text(files, terms, arm, urdf.name)
    return ArmFiles(str(path), text, str(urdf), _urdf_text(files, arm))


def _write(files: ArmFiles, others: Mapping[Path, str] = MappingProxyType({})) -> tuple[Path, Path]:
    """Write an arm's files, and others, into its folder, made if missing; StoreError where that can't be."""
    path, urdf = Path(files.path), Path(files.urdf_path)
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        for each, text in {path: files.text, urdf: files.urdf_text, **others}.items():
            each.write_text(text, encoding="utf-8")
    except OSError as error:
        raise StoreError(str(path.parent), f"the arm can't be written: {error.strerror}") from error
    return path, urdf


def _arm_text(files: ArmFiles, terms: Terms, arm: Arm, urdf: str) -> str:
    """Return the arm file's text with the drives' identified numbers."""
    declared: Any = load(files.path, files.text).data
    drives: dict[str, dict[str, Any]] = {}
    for i, joint in enumerate(arm.joints):
        drive = dict(declared["drives"][joint] or {})
        if terms.rotor:
            drive["rotor_inertia"] = float(arm.drives.rotor_inertia[i])
        if terms.viscous:
            drive["viscous"] = float(arm.drives.viscous[i])
            drive.pop("motor_viscous", None)
        if terms.coulomb:
            drive["coulomb"] = float(arm.drives.coulomb[i])
            drive.pop("motor_coulomb", None)
            if "static" in drive:
                drive["static"] = float(arm.drives.static[i])
        drives[joint] = drive
    return str(yaml.safe_dump(declared | {"urdf": urdf, "drives": drives}, sort_keys=False))


def _urdf_text(files: ArmFiles, arm: Arm) -> str:
    """Return the URDF with the identified inertials, each at the centre of gravity of a whole body."""
    robot = ET.fromstring(files.urdf_text)
    bodies = dict(zip(arm.links, arm.parameters, strict=True))
    for link in robot.findall("link"):
        for old in link.findall("inertial"):
            link.remove(old)
        if (name := link.get("name", "")) in bodies:
            link.insert(0, _inertial(bodies[name]))
    return ET.tostring(robot, encoding="unicode", xml_declaration=True) + "\n"


def _inertial(parameters: Floats) -> ET.Element:
    mass, cog, tensor = inertia(parameters)
    element = ET.Element("inertial")
    ET.SubElement(element, "origin", xyz=" ".join(repr(x) for x in cog.tolist()), rpy="0 0 0")
    ET.SubElement(element, "mass", value=repr(float(mass)))
    rows, columns = np.triu_indices(3)
    entries = {
        f"i{'xyz'[r]}{'xyz'[c]}": repr(float(tensor[r, c])) for r, c in zip(rows, columns, strict=True)
    }
    ET.SubElement(element, "inertia", entries)
    return element

"""Reading URDF: links and joints with the line each stands on, and every fault with its address.

What a URDF holds beyond inertials, joints and the names of meshes (looks, collision shapes, plugins)
is passed over. Source of the format's rules and defaults: wiki.ros.org/urdf/XML/link and /joint.
"""

from __future__ import annotations

import math
import re
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.arm.physical import from_inertia, second_moments
from rigbench.arm.xmlfile import Element, parse_xml
from rigbench.errors import Fault, nearest

__all__ = ["Inertial", "Joint", "Link", "Robot", "read_urdf", "turn"]

JOINT_KINDS = ("revolute", "continuous", "prismatic", "fixed", "floating", "planar")
MOVABLE = ("revolute", "continuous", "prismatic")

LARGEST = 1e9
"""Magnitude above which a number is taken for a slip; squares of it are still far from overflow."""

ROUNDING = 1e-9
"""Share of a link's inertia by which its published digits may miss the triangle inequality."""

_NUMBER = re.compile(r"[-+]?(\.[0-9]+|[0-9]+(\.[0-9]*)?)([eE][-+]?[0-9]+)?")


@dataclass(frozen=True, eq=False)
class Inertial:
    """A link's mass and inertia: ``parameters`` (10,) about the link frame's origin (see PARAMETERS)."""

    line: int
    parameters: Floats
    impossible: str  # why no body has these numbers; empty if one does


@dataclass(frozen=True, eq=False)
class Link:
    """A link; ``inertial`` None where it has no mass. ``meshes``: (line, file name as written)."""

    name: str
    line: int
    inertial: Inertial | None
    meshes: tuple[tuple[int, str], ...]


@dataclass(frozen=True, eq=False)
class Joint:
    """A joint: its frame in the parent link's (``rotation``, ``position`` [m]), axis and limits."""

    name: str
    line: int
    kind: str  # one of JOINT_KINDS
    parent: str
    child: str
    rotation: Floats  # (3, 3)
    position: Floats  # (3,)
    axis: Floats  # (3,), unit vector in the joint's frame
    lower: float  # rad or m; -inf where there is none
    upper: float
    effort: float  # N m or N, at the joint; inf where none is given
    velocity: float  # rad/s or m/s; inf likewise
    follows: str | None  # the joint that it mimics

    @property
    def movable(self) -> bool:
        """Tell whether it is revolute, continuous or prismatic."""
        return self.kind in MOVABLE

    @property
    def resting(self) -> float:
        """The position nearest to 0 that its limits allow."""
        return min(max(0.0, self.lower), self.upper)

    def at(self, position: float) -> tuple[Floats, Floats]:
        """Return the child link's frame in the parent's, (3, 3) and (3,) [m], with the joint there."""
        if self.kind == "prismatic":
            return self.rotation, self.position + self.rotation @ (position * self.axis)
        return self.rotation @ turn(self.axis, position), self.position


@dataclass(frozen=True, eq=False)
class Robot:
    """What a URDF declares; ``file`` is its name for messages."""

    file: str
    name: str
    links: Mapping[str, Link]
    joints: Mapping[str, Joint]
    line: int = 1

    def fault(self, part: Link | Joint, problem: str, expected: str = "", near: str | None = None) -> Fault:
        """Build a fault with the address of a link or joint."""
        kind = "link" if isinstance(part, Link) else "joint"
        return Fault(self.file, part.line, f"{kind} {part.name}", problem, expected, near)


def turn(axis: Floats, angle: float) -> Floats:
    """Return the rotation (3, 3) by ``angle`` [rad] about the unit vector ``axis`` (Rodrigues)."""
    x, y, z = axis
    cross = np.array([[0.0, -z, y], [z, 0.0, -x], [-y, x, 0.0]])
    rotation: Floats = np.eye(3) + math.sin(angle) * cross + (1.0 - math.cos(angle)) * (cross @ cross)
    return rotation


def read_urdf(file: str, text: str) -> tuple[Robot | None, list[Fault]]:
    """Read URDF text; ``file`` is its name for messages.

    Returns the robot, None where a fault left parts of it unknown, and all faults in line order.
    """
    root, faults = parse_xml(file, text)
    if root is not None and root.tag != "robot":
        faults.append(Fault(file, root.line, "", f"its outermost element is <{root.tag}>", "<robot>"))
    if root is None or faults:
        return None, faults
    reader = _Reader(file, faults)
    links = [reader.link(element) for element in root.children if element.tag == "link"]
    joints = [reader.joint(element) for element in root.children if element.tag == "joint"]
    if not links and not faults:
        reader.fault(root, "", "no links", "at least a base and one moving link")
    for joint in joints:
        for end in (joint.parent, joint.child):
            if end and end not in reader.names["link"]:
                near = nearest(end, reader.names["link"])
                faults.append(
                    Fault(file, joint.line, f"joint {joint.name}", f"no link is called '{end}'", near=near)
                )
    faults.sort(key=lambda fault: fault.line or 0)
    if faults:
        return None, faults
    name = root.attributes.get("name", "arm")
    return Robot(file, name, {k.name: k for k in links}, {j.name: j for j in joints}, root.line), []


class _Reader:
    """Turns elements into links and joints and notes what is wrong with them."""

    def __init__(self, file: str, faults: list[Fault]) -> None:
        self.file, self.faults = file, faults
        self.names: dict[str, dict[str, int]] = {"link": {}, "joint": {}}

    def fault(
        self, element: Element, key: str, problem: str, expected: str = "", near: str | None = None
    ) -> None:
        self.faults.append(Fault(self.file, element.line, key, problem, expected, near))

    def link(self, element: Element) -> Link:
        name = self._name(element)
        meshes = tuple(
            (mesh.line, mesh.attributes["filename"])
            for mesh in element.all("mesh")
            if "filename" in mesh.attributes
        )
        part = element.child("inertial")
        inertial = None if part is None else self._inertial(part, f"link {name}")
        return Link(name, element.line, inertial, meshes)

    def joint(self, element: Element) -> Joint:
        name = self._name(element)
        key = f"joint {name}"
        kind = element.attributes.get("type", "")
        if kind not in JOINT_KINDS:
            problem = f"the type '{kind}' is not known" if kind else "no type is given"
            self.fault(element, key, problem, ", ".join(JOINT_KINDS), nearest(kind, JOINT_KINDS))
        parent, child = self._end(element, "parent", key), self._end(element, "child", key)
        rotation, position = self._origin(element, key)
        axis = self._axis(element, key) if kind in MOVABLE else np.array([1.0, 0.0, 0.0])
        lower, upper, effort, velocity = self._limits(element, key, kind)
        mimic = element.child("mimic")
        follows = None if mimic is None else mimic.attributes.get("joint", "")
        return Joint(
            name,
            element.line,
            kind,
            parent,
            child,
            rotation,
            position,
            axis,
            lower,
            upper,
            effort,
            velocity,
            follows,
        )

    def _name(self, element: Element) -> str:
        name = element.attributes.get("name", "")
        taken = self.names[element.tag]
        if not name:
            self.fault(element, element.tag, "it has no name")
        elif name in taken:
            problem = f"the name is taken, by the {element.tag} on line {taken[name]}"
            self.fault(element, f"{element.tag} {name}", problem, "names that differ")
        taken.setdefault(name, element.line)
        return name

    def _end(self, element: Element, tag: str, key: str) -> str:
        part = element.child(tag)
        name = "" if part is None else part.attributes.get("link", "")
        if not name:
            self.fault(part or element, key, f"no {tag} link is given", f'<{tag} link="..."/>')
        return name

    def _number(self, element: Element, attribute: str, key: str, default: float | None = None) -> float:
        given = element.attributes.get(attribute)
        if given is None:
            if default is None:
                self.fault(element, key, f"<{element.tag}> lacks '{attribute}'", f'{attribute}="..."')
            return default or 0.0
        numbers = self._numbers(element, attribute, given, 1, key)
        return float(numbers[0])

    def _numbers(self, element: Element, attribute: str, given: str, count: int, key: str) -> Floats:
        words = given.split()
        numbers = [float(word) for word in words if _NUMBER.fullmatch(word)]
        if len(words) != count or len(numbers) != count or max(map(abs, numbers)) > LARGEST:
            expected = "a number" if count == 1 else f"{count} numbers"
            self.fault(element, key, f'{attribute}="{given}" of <{element.tag}> is not {expected}', expected)
            return np.zeros(count)
        return np.array(numbers)

    def _vector(self, element: Element, attribute: str, key: str, default: str) -> Floats:
        return self._numbers(element, attribute, element.attributes.get(attribute, default), 3, key)

    def _origin(self, element: Element, key: str) -> tuple[Floats, Floats]:
        """Return an element's <origin>: rotation Rz(yaw) Ry(pitch) Rx(roll) and position [m]."""
        origin = element.child("origin")
        if origin is None:
            return np.eye(3), np.zeros(3)
        roll, pitch, yaw = self._vector(origin, "rpy", key, "0 0 0")
        x, y, z = np.eye(3)
        return turn(z, yaw) @ turn(y, pitch) @ turn(x, roll), self._vector(origin, "xyz", key, "0 0 0")

    def _axis(self, element: Element, key: str) -> Floats:
        part = element.child("axis")
        if part is None:
            return np.array([1.0, 0.0, 0.0])  # the format's default
        known = len(self.faults)
        axis = self._vector(part, "xyz", key, "1 0 0")
        length = float(np.linalg.norm(axis))
        if length < 1e-12:
            if len(self.faults) == known:
                self.fault(part, key, "its axis has no length", "a direction, such as 0 0 1")
            return np.array([1.0, 0.0, 0.0])
        return axis / length

    def _limits(self, element: Element, key: str, kind: str) -> tuple[float, float, float, float]:
        """Return lower, upper, effort and velocity; an effort or velocity of 0 stands for none."""
        part = element.child("limit")
        bounded = kind in ("revolute", "prismatic")
        if part is None:
            if bounded:
                self.fault(element, key, f"a {kind} joint lacks <limit>", '<limit lower=".." upper=".."/>')
            return -math.inf, math.inf, math.inf, math.inf
        effort, velocity = (self._number(part, name, key, 0.0) for name in ("effort", "velocity"))
        lower, upper = (self._number(part, name, key, 0.0) for name in ("lower", "upper"))
        if bounded and lower > upper:
            self.fault(part, key, f"its lower limit {lower:g} is above its upper limit {upper:g}")
        if not bounded:
            lower, upper = -math.inf, math.inf
        return lower, upper, effort if effort > 0 else math.inf, velocity if velocity > 0 else math.inf

    def _inertial(self, element: Element, key: str) -> Inertial | None:
        """Return an <inertial>; None for one without mass and inertia."""
        known = len(self.faults)
        rotation, cog = self._origin(element, key)
        mass_part, tensor_part = element.child("mass"), element.child("inertia")
        for part, tag in ((mass_part, "mass"), (tensor_part, "inertia")):
            if part is None:
                self.fault(element, key, f"<inertial> lacks <{tag}>")
        if mass_part is None or tensor_part is None:
            return None
        mass = self._number(mass_part, "value", key)
        xx, xy, xz, yy, yz, zz = (
            self._number(tensor_part, name, key) for name in ("ixx", "ixy", "ixz", "iyy", "iyz", "izz")
        )
        tensor = rotation @ np.array([[xx, xy, xz], [xy, yy, yz], [xz, yz, zz]]) @ rotation.T
        if len(self.faults) > known or (mass == 0 and not tensor.any()):
            return None
        return Inertial(element.line, from_inertia(mass, cog, tensor), _impossible(mass, tensor))


def _impossible(mass: float, tensor: Floats) -> str:
    """Say why no body has a mass and central inertia tensor; a lamina, a rod or a point is allowed."""
    if mass <= 0:
        return f"its mass is {mass:g} kg, but it has inertia" if mass == 0 else f"its mass is {mass:g} kg"
    if np.linalg.eigvalsh(second_moments(tensor))[0] >= -ROUNDING * abs(np.trace(tensor)):
        return ""
    said = ", ".join(f"{moment:.6g}" for moment in np.linalg.eigvalsh(tensor))
    return f"its principal inertias are {said} kg m^2, which no body has"

"""What of an arm can be touched: the simple collision shapes of its URDF, placed on its moving bodies."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.arm.chain import carrier_of
from rigbench.arm.declaration import ArmDeclaration
from rigbench.arm.files import ArmFiles
from rigbench.arm.urdf import Robot, read_urdf, turn
from rigbench.arm.xmlfile import Element, parse_xml
from rigbench.errors import Fault, InputFaults
from rigbench.yamlfile import load, validate

__all__ = ["Collision", "Shape", "collision"]

SIZES = {"box": (("size", 3),), "cylinder": (("radius", 1), ("length", 1)), "sphere": (("radius", 1),)}
"""The shapes that are carried over, with their attributes and how many numbers each holds."""

IDENTITY = ((1.0, 0.0, 0.0), (0.0, 1.0, 0.0), (0.0, 0.0, 1.0))


@dataclass(frozen=True)
class Shape:
    """A collision shape on body ``link`` of the chain: 0 the base, i the link of joint i.

    ``attributes`` as the URDF's <box>, <cylinder> or <sphere> has them [m]; ``position`` [m] and
    ``rotation`` (rows) in the frame of that link.
    """

    link: int
    kind: str
    attributes: tuple[tuple[str, str], ...]
    position: tuple[float, float, float] = (0.0, 0.0, 0.0)
    rotation: tuple[tuple[float, ...], ...] = IDENTITY


@dataclass(frozen=True)
class Collision:
    """The shapes of an arm, and notes on what of its URDF can't be carried over (meshes)."""

    shapes: tuple[Shape, ...]
    notes: tuple[Fault, ...]


@lru_cache(maxsize=32)
def collision(files: ArmFiles) -> Collision:
    """Return the collision shapes that the arm's URDF declares: boxes, cylinders and spheres.

    Those of fixed and locked links go to the body that carries them. Source of the format's rules:
    wiki.ros.org/urdf/XML/link. InputFaults with every fault of the arm, or else of the shapes.
    """
    arm = files.arm()
    robot, _ = read_urdf(files.urdf_path, files.urdf_text)
    root, _ = parse_xml(files.urdf_path, files.urdf_text)
    declaration, _ = validate(load(files.path, files.text), ArmDeclaration)
    if robot is None or root is None or declaration is None:
        raise AssertionError("files.arm() has read them")
    reader = _Reader(robot, {name: i for i, name in enumerate(arm.links)}, declaration.lock)
    for link in root.children:
        if link.tag == "link":
            for element in link.children:
                if element.tag == "collision":
                    reader.read(link.attributes["name"], element)
    if reader.faults:
        raise InputFaults(reader.faults)
    return Collision(tuple(reader.shapes), tuple(reader.notes))


class _Reader:
    """Turns <collision> elements into shapes, and notes what is wrong with them."""

    def __init__(self, robot: Robot, heads: dict[str, int], lock: dict[str, float]) -> None:
        self.file, self.heads, self.lock = robot.file, heads, lock
        self.above = {joint.child: joint for joint in robot.joints.values()}
        self.shapes: list[Shape] = []
        self.faults: list[Fault] = []
        self.notes: list[Fault] = []

    def read(self, link: str, element: Element) -> None:
        """Read one <collision> of a link."""
        geometry = element.child("geometry")
        inside = geometry.children[0] if geometry is not None and geometry.children else None
        if inside is None:
            self._fault(element, link, "its <collision> has no shape")
        elif inside.tag not in SIZES:
            problem = f"a collision shape of kind {inside.tag} is left out: nothing can touch it"
            self.notes.append(
                Fault(self.file, inside.line, f"link {link}", problem, "box, cylinder or sphere")
            )
        else:
            for attribute, count in SIZES[inside.tag]:
                size = self._numbers(inside, attribute, count, link)
                if not (size > 0).all():
                    self._fault(inside, link, f"'{attribute}' of <{inside.tag}> is not above 0")
            self._place(link, element, inside)

    def _place(self, link: str, element: Element, inside: Element) -> None:
        rotation, position = np.eye(3), np.zeros(3)
        origin = element.child("origin")
        if origin is not None:
            x, y, z = np.eye(3)
            roll, pitch, yaw = self._numbers(origin, "rpy", 3, link, "0 0 0")
            rotation = turn(z, yaw) @ turn(y, pitch) @ turn(x, roll)
            position = self._numbers(origin, "xyz", 3, link, "0 0 0")
        head, turned, shifted = carrier_of(self.above, self.heads, link, self.lock)
        at, rows = shifted + turned @ position, turned @ rotation
        self.shapes.append(
            Shape(
                link=0 if head is None else head + 1,
                kind=inside.tag,
                attributes=tuple((name, inside.attributes.get(name, "")) for name, _ in SIZES[inside.tag]),
                position=(float(at[0]), float(at[1]), float(at[2])),
                rotation=tuple(map(tuple, rows.tolist())),
            )
        )

    def _numbers(self, element: Element, attribute: str, count: int, link: str, default: str = "") -> Floats:
        given = element.attributes.get(attribute, default)
        try:
            numbers = [float(word) for word in given.split()]
        except ValueError:
            numbers = []
        if len(numbers) != count or not all(map(math.isfinite, numbers)):
            expected = "a number" if count == 1 else f"{count} numbers"
            self._fault(element, link, f'{attribute}="{given}" of <{element.tag}> is not {expected}')
            return np.ones(count)
        return np.array(numbers)

    def _fault(self, element: Element, link: str, problem: str) -> None:
        self.faults.append(Fault(self.file, element.line, f"link {link}", problem))

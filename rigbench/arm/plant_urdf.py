"""Writing a plant as URDF, from the arrays of an Arm, for the physics engine to load."""

from __future__ import annotations

import math
from xml.sax.saxutils import quoteattr

import numpy as np

from rigbench.arm.arm import PRISMATIC, Arm, Floats
from rigbench.arm.collision import Shape
from rigbench.arm.physical import inertia

__all__ = ["plant_urdf"]

TRAVEL = 1e6
"""Limits of a prismatic joint [m]: the format demands some, the rig checks the arm's own."""


def plant_urdf(arm: Arm, shapes: tuple[Shape, ...] = ()) -> str:
    """Return the URDF text of an arm: a base link, then its joints and links in chain order.

    Joints keep their names and are ``continuous`` or ``prismatic`` without effective limits. Each
    inertial stands at the centre of gravity with rpy = 0 and the full tensor about it. Numbers are
    written in full (repr), so reading them back loses nothing. Looks, tool and drives are left out, and
    so are collision shapes unless ``shapes`` are given. The engine must be told to take the inertia from
    the file.
    """
    parts = ['<?xml version="1.0"?>', f"<robot name={quoteattr(arm.name)}>", _link("base", "", shapes, 0)]
    for i, name in enumerate(arm.joints):
        inertial = _inertial(arm.parameters[i])
        parts += [_link(f"link {i + 1}", inertial, shapes, i + 1), *_joint(arm, i, name)]
    return "\n".join([*parts, "</robot>", ""])


def _link(name: str, inertial: str, shapes: tuple[Shape, ...], number: int) -> str:
    inside = inertial + "".join(_collision(shape) for shape in shapes if shape.link == number)
    return f'<link name="{name}">{inside}</link>' if inside else f'<link name="{name}"/>'


def _inertial(parameters: Floats) -> str:
    mass, cog, tensor = inertia(parameters)
    (xx, xy, xz), (_, yy, yz), (_, _, zz) = tensor.tolist()
    entries = {"ixx": xx, "ixy": xy, "ixz": xz, "iyy": yy, "iyz": yz, "izz": zz}
    lines = [
        "<inertial>",
        f'<origin xyz="{_numbers(cog)}" rpy="0 0 0"/><mass value="{float(mass)!r}"/>',
        "<inertia " + " ".join(f'{key}="{value!r}"' for key, value in entries.items()) + "/>",
        "</inertial>",
    ]
    return "\n".join(lines)


def _collision(shape: Shape) -> str:
    origin = f'<origin xyz="{_numbers(shape.position)}" rpy="{_angles(np.array(shape.rotation))}"/>'
    size = " ".join(f'{key}="{value}"' for key, value in shape.attributes)
    return f"<collision>{origin}<geometry><{shape.kind} {size}/></geometry></collision>"


def _joint(arm: Arm, i: int, name: str) -> list[str]:
    slides = arm.kinds[i] == PRISMATIC
    limit = f'<limit lower="{-TRAVEL!r}" upper="{TRAVEL!r}" effort="0" velocity="0"/>' if slides else ""
    return [
        f'<joint name={quoteattr(name)} type="{"prismatic" if slides else "continuous"}">',
        f'<parent link="{f"link {i}" if i else "base"}"/><child link="link {i + 1}"/>',
        f'<origin xyz="{_numbers(arm.position[i])}" rpy="{_angles(arm.rotation[i])}"/>',
        f'<axis xyz="{_numbers(arm.axis[i])}"/>{limit}',
        "</joint>",
    ]


def _numbers(values: Floats | tuple[float, ...]) -> str:
    return " ".join(repr(float(value)) for value in values)


def _angles(rotation: Floats) -> str:
    """Return roll, pitch and yaw [rad] with rotation = Rz(yaw) Ry(pitch) Rx(roll).

    Roll is taken from what yaw leaves over, so the product is exact near pitch = +-90 degrees too,
    where roll and yaw by themselves are not.
    """
    r = rotation.tolist()
    yaw = math.atan2(r[1][0], r[0][0])
    pitch = math.atan2(-r[2][0], math.hypot(r[0][0], r[1][0]))
    c, s = math.cos(yaw), math.sin(yaw)
    roll = math.atan2(s * r[0][2] - c * r[1][2], c * r[1][1] - s * r[0][1])
    return f"{roll!r} {pitch!r} {yaw!r}"

"""From a robot's links and joints to one serial chain: fixed and locked joints merged, mass included."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass

import numpy as np

from rigbench.arm.arm import PRISMATIC, REVOLUTE, Floats
from rigbench.arm.physical import from_inertia, impossible, inertia, possible
from rigbench.arm.urdf import Joint, Robot
from rigbench.errors import Fault

__all__ = ["Chain", "carrier_of", "chain_of"]

ROUNDING = 1e-9
"""Share of a link's inertia by which its published digits may miss 0."""

POSSIBLE = "a mass above 0 and positive principal inertias, each at most the sum of the other two"


@dataclass(frozen=True, eq=False)
class Chain:
    """A serial chain of n joints; the arrays are those of the same names in Arm."""

    joints: tuple[Joint, ...]
    kinds: Floats
    rotation: Floats
    position: Floats
    parameters: Floats
    tool_rotation: Floats
    tool_position: Floats
    notes: tuple[Fault, ...]


def chain_of(robot: Robot, tool: str, lock: Mapping[str, float]) -> tuple[Chain | None, list[Fault]]:
    """Return the chain from the base link to the link ``tool``, with the joints in ``lock`` frozen.

    ``tool`` and the names in ``lock`` must exist. Returns None and the faults where there is no
    such chain: a loop, two bases, branches that move, a body that can't exist.
    """
    faults = _shape_faults(robot)
    if faults:
        return None, faults
    above = {joint.child: joint for joint in robot.joints.values()}
    path = _path(above, tool)
    moving = [joint for joint in path if joint.movable and joint.name not in lock]
    if not moving:
        problem = f"no joint moves between the base link and '{tool}'"
        return None, [Fault(robot.file, robot.line, "", problem, "a tool at the end of the chain")]
    faults = [*_path_faults(robot, path, moving, lock), *_branch_faults(robot, path, moving, lock)]
    if faults:
        return None, faults
    return _merge(robot, above, moving, tool, lock)


def _shape_faults(robot: Robot) -> list[Fault]:
    """Return what keeps the links from forming one tree."""
    faults: list[Fault] = []
    above: dict[str, Joint] = {}
    for joint in robot.joints.values():
        other = above.setdefault(joint.child, joint)
        if other is not joint:
            problem = f"its child '{joint.child}' hangs on joint {other.name} (line {other.line}) already"
            faults.append(robot.fault(joint, problem, "one parent for each link"))
    bases = [link for link in robot.links.values() if link.name not in above]
    for extra in bases[1:]:
        problem = f"no joint holds it, as none holds '{bases[0].name}' (line {bases[0].line})"
        faults.append(robot.fault(extra, problem, "one base link"))
    if faults:
        return faults
    for link in robot.links.values():
        if _path(above, link.name)[:1] == [] and link.name in above:
            problem = "the joints around it form a loop"
            return [robot.fault(above[link.name], problem, "a chain from one base link")]
    return []


def _path(above: Mapping[str, Joint], link: str) -> list[Joint]:
    """Return the joints from the base to ``link``, base first; none where they form a loop."""
    path: list[Joint] = []
    while link in above:
        path.insert(0, above[link])
        link = above[link].parent
        if len(path) > len(above):
            return []
    return path


def _path_faults(
    robot: Robot, path: list[Joint], moving: list[Joint], lock: Mapping[str, float]
) -> Iterable[Fault]:
    for joint in path:
        if joint.kind in ("floating", "planar"):
            yield robot.fault(
                joint, f"a {joint.kind} joint can't be part of an arm", "revolute, continuous or prismatic"
            )
    for joint in moving:
        if joint.follows is not None:
            problem = f"it follows joint '{joint.follows}' (mimic), so no drive of its own moves it"
            yield robot.fault(joint, problem, _lock_line([joint], lock))
        elif joint.lower == joint.upper:
            problem = f"its limits are both {joint.lower:g}, so it can't move"
            yield robot.fault(joint, problem, _lock_line([joint], lock))


def _lock_line(joints: Iterable[Joint], lock: Mapping[str, float]) -> str:
    """Return the line for the arm file that locks these joints too, ready to be pasted."""
    positions = {**lock, **{joint.name: joint.resting for joint in joints}}
    inside = ", ".join(f"{name}: {position!r}" for name, position in positions.items())
    return f"'lock: {{{inside}}}' in the arm file"


def _branch_faults(
    robot: Robot, path: list[Joint], moving: list[Joint], lock: Mapping[str, float]
) -> Iterable[Fault]:
    """Yield a fault for all movable joints off the path, and one for each place where the chain forks."""
    off = [
        joint
        for joint in robot.joints.values()
        if joint not in path and joint.kind != "fixed" and joint.name not in lock
    ]
    for joint in off:
        if not joint.movable:
            yield robot.fault(joint, f"a {joint.kind} joint can't be part of an arm", "a fixed joint")
    loose = [joint for joint in off if joint.movable]
    if not loose:
        return
    said = ", ".join(f"{joint.name} (line {joint.line})" for joint in loose)
    verb = "is not part" if len(loose) == 1 else "are not part"
    yield robot.fault(loose[0], f"{said} {verb} of the chain to the tool", _lock_line(loose, lock))
    carrier = _carriers(robot, moving + loose)
    for joint in moving:
        beside = [other for other in loose if carrier[other.parent] == carrier[joint.parent]]
        if beside:
            said = ", ".join(f"{other.name} (line {other.line})" for other in beside)
            problem = f"the chain branches: {said} moves on the same link"
            yield robot.fault(joint, problem, "one movable joint on each link; lock the others")


def _carriers(robot: Robot, moving: list[Joint]) -> dict[str, str]:
    """Return, for each link, the link at the root of the rigid body that it belongs to."""
    above = {joint.child: joint for joint in robot.joints.values()}
    carriers = {}
    for name in robot.links:
        root = name
        while root in above and above[root] not in moving:
            root = above[root].parent
        carriers[name] = root
    return carriers


def _merge(
    robot: Robot, above: Mapping[str, Joint], moving: list[Joint], tool: str, lock: Mapping[str, float]
) -> tuple[Chain | None, list[Fault]]:
    """Place every link in the body that carries it, and add up the bodies' parameters."""
    heads = {joint.child: i for i, joint in enumerate(moving)}
    n = len(moving)
    rotation, position, parameters = np.zeros((n, 3, 3)), np.zeros((n, 3)), np.zeros((n, 10))
    faults: list[Fault] = []
    notes: list[Fault] = []
    burdened: set[str] = set()
    for name, link in robot.links.items():
        head, turned, shifted = carrier_of(above, heads, name, lock)
        if link.inertial is None:
            continue
        if link.inertial.impossible:
            said, line = link.inertial.impossible, link.inertial.line
            if head is None:
                said += " (without effect: it is part of the base)"
            elif name not in heads and _adds_inertia(link.inertial.parameters):
                carrier = moving[head].child
                said += f" (added as it stands to link {carrier}, which carries it)"
                burdened.add(carrier)
            else:
                faults.append(Fault(robot.file, line, f"link {name}", said, POSSIBLE))
                continue
            notes.append(Fault(robot.file, line, f"link {name}", said))
        if head is not None:
            parameters[head] += moved(link.inertial.parameters, turned, shifted)
    for i, joint in enumerate(moving):
        _, turned, shifted = carrier_of(above, heads, joint.parent, lock)
        rotation[i], position[i] = turned @ joint.rotation, shifted + turned @ joint.position
    faults += [] if faults else _body_faults(robot, moving, parameters, burdened)
    if faults:
        return None, faults
    _, tool_rotation, tool_position = carrier_of(above, heads, tool, lock)
    kinds = np.array([PRISMATIC if joint.kind == "prismatic" else REVOLUTE for joint in moving])
    chain = Chain(
        tuple(moving), kinds, rotation, position, parameters, tool_rotation, tool_position, tuple(notes)
    )
    return chain, []


def _adds_inertia(parameters: Floats) -> bool:
    """Tell whether a link without mass has inertia that may be added to the body that carries it.

    Published files hold such links. They are no bodies, so all that is asked of them is that they take
    no inertia away; the body that they are added to is judged as any other.
    """
    mass, _, tensor = inertia(parameters)
    return bool(mass == 0 and np.linalg.eigvalsh(tensor)[0] >= -ROUNDING * np.trace(tensor))


def carrier_of(
    above: Mapping[str, Joint], heads: Mapping[str, int], link: str, lock: Mapping[str, float]
) -> tuple[int | None, Floats, Floats]:
    """Return the moving body that carries a link (None: the base) and the link's frame in the body's."""
    rotation, position = np.eye(3), np.zeros(3)
    while link in above and link not in heads:
        joint = above[link]
        turned, shifted = joint.at(lock.get(joint.name, 0.0))
        rotation, position = turned @ rotation, shifted + turned @ position
        link = joint.parent
    return heads.get(link), rotation, position


def moved(parameters: Floats, rotation: Floats, position: Floats) -> Floats:
    """Express a body's ten parameters in another frame.

    ``rotation`` (3, 3) and ``position`` (3,) [m] place the body's own frame in the new one:
    m' = m, c' = R c + p, I_c' = R I_c R^T.
    """
    mass, cog, tensor = inertia(parameters)
    return from_inertia(mass, rotation @ cog + position, rotation @ tensor @ rotation.T)


def _body_faults(robot: Robot, moving: list[Joint], parameters: Floats, burdened: set[str]) -> list[Fault]:
    """Return a fault for each moving body that has no mass, or no extent in some direction.

    ``burdened``: links to which inertia without mass was added, so they may be no body at all.
    """
    faults = []
    for joint, ten in zip(moving, parameters, strict=True):
        link = robot.links[joint.child]
        if ten[0] == 0:
            problem = f"it moves (joint {joint.name}) but has no mass, nor has what is fixed to it"
            faults.append(robot.fault(link, problem, "an <inertial> with a mass above 0"))
        elif not possible(ten):
            shape = impossible(ten) if joint.child in burdened else "it is a point, a rod or a lamina"
            problem = f"with all that is fixed to it, {shape}"
            faults.append(robot.fault(link, problem, "a body with extent in every direction"))
    return faults

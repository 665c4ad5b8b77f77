"""The motions of an experiment: made from their keys or files and held against the arm's limits."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

from rigbench.arm.arm import Arm
from rigbench.errors import InputFaults, nearest
from rigbench.experiment.findings import Findings, entries, unreadable
from rigbench.experiment.motion_keys import MotionKeys, PathKeys
from rigbench.experiment.positions import check_position
from rigbench.motion.chained import chained
from rigbench.motion.limits import check_motion, to_si
from rigbench.motion.motion import Motion
from rigbench.motion.path import circle, line, middle_of_limits
from rigbench.motion.reach import Unreachable
from rigbench.motion.read import read_table
from rigbench.motion.via import ViaMotion
from rigbench.yamlfile import KeyPath, read_text

__all__ = ["check_without_arm", "motions_of"]

MOST_TICKS = 5_000_000
"""Control ticks that a motion may have: what a run logs of them has to fit into memory."""

LEAST_TICKS = 2

KINDS = ("via_deg", "file", "circle", "line", "chain")

GO_WITH: Mapping[str, tuple[str, ...]] = {
    "leg_s": ("via_deg", "line"),
    "rest_s": ("via_deg", "circle", "line"),
}
"""Keys that not every kind of motion has."""

SLOWER = "a longer time or a lower pace_percent"


def motions_of(
    motions: Mapping[str, MotionKeys],
    findings: Findings,
    folder: Path,
    arm: Arm,
    control_hz: float,
    gain_pose: tuple[float, ...] | None = None,
) -> dict[str, Motion]:
    """Return the motions that are in order, by the user's names; what is not goes to ``findings``.

    ``gain_pose`` (n,) [rad or m], if it is declared, is the pose near which circles and lines start.
    """
    maker = _Maker(motions, findings, folder, arm, control_hz)
    maker.make("via_deg", "file")
    maker.near = gain_pose or maker.first_start()
    maker.make("circle", "line")
    maker.make("chain")
    return {name: maker.made[name] for name in motions if name in maker.made}


def check_without_arm(motions: Mapping[str, MotionKeys], findings: Findings, folder: Path) -> None:
    """Check what of the motions can be, while the arm is at fault."""
    for name, keys in motions.items():
        found = _declared(name, keys, findings)
        if found is not None:
            _check_alone(found, motions, findings, folder)


@dataclass(frozen=True)
class _Declared:
    """A motion's keys with their place."""

    name: str
    keys: MotionKeys
    kind: str

    @property
    def path(self) -> KeyPath:
        return ("motions", self.name)

    @property
    def pace(self) -> float:
        return self.keys.pace_percent / 100.0


def _declared(name: str, keys: MotionKeys, findings: Findings) -> _Declared | None:
    """Return the motion with its kind, if that is clear and its keys go with it."""
    path: KeyPath = ("motions", name)
    kinds = [kind for kind in KINDS if getattr(keys, kind) is not None]
    if not findings.clean(*path):
        return None
    if len(kinds) != 1:
        problem = f"both {' and '.join(kinds)} are given" if kinds else "its kind is not given"
        findings.fault(path, problem, f"one of {', '.join(KINDS)}")
        return None
    for key, with_ in GO_WITH.items():
        if key in keys.model_fields_set and kinds[0] not in with_:
            findings.fault((*path, key), f"does not go with {kinds[0]}", f"{' or '.join(with_)}")
    if keys.join_s is not None and kinds[0] != "chain" and keys.repeat == 1:
        findings.fault((*path, "join_s"), "joins nothing here", "chain, or repeat above 1")
    return _Declared(name, keys, kinds[0]) if findings.clean(*path) else None


def _check_alone(found: _Declared, names: Iterable[str], findings: Findings, folder: Path) -> None:
    """Check what of a motion needs no arm; ``names`` are those of all motions."""
    keys, path = found.keys, found.path
    if keys.file is not None:
        problem = unreadable(folder / keys.file)
        if problem is not None:
            expected = f"a CSV file, relative to {folder}"
            findings.fault((*path, "file"), f"'{keys.file}' {problem}", expected)
    way: PathKeys | None = keys.circle or keys.line
    if way is not None and way.orientation == "free" and way.tool_rpy_deg is not None:
        where = (*path, found.kind, "tool_rpy_deg")
        findings.fault(where, "does not go with orientation: free", "held")
    if keys.circle is not None and not any(keys.circle.normal):
        problem = "points nowhere"
        findings.fault((*path, "circle", "normal"), problem, "a direction, such as [0, 0, 1]")
    others = [other for other in names if other != found.name]
    for i, part in enumerate(keys.chain or ()):
        if part not in names:
            near = nearest(part, others)
            findings.fault(
                (*path, "chain", i), f"no motion is called '{part}'", "another motion's name", near
            )


class _Maker:
    """Makes the motions of one arm."""

    def __init__(
        self,
        motions: Mapping[str, MotionKeys],
        findings: Findings,
        folder: Path,
        arm: Arm,
        control_hz: float,
    ) -> None:
        self.findings, self.folder, self.arm, self.control_hz = findings, folder, arm, control_hz
        self.names = tuple(motions)
        self.near: tuple[float, ...] = ()
        self.made: dict[str, Motion] = {}
        declared = (_declared(name, keys, findings) for name, keys in motions.items())
        self.waiting = {found.name: found for found in declared if found is not None}

    def make(self, *kinds: str) -> None:
        """Make the motions of these kinds."""
        for found in [found for found in self.waiting.values() if found.kind in kinds]:
            if found.name in self.waiting:  # a chain may have been made with another one
                self._make(found, ())

    def first_start(self) -> tuple[float, ...]:
        """Return where the first motion that is made starts, or else the middle of the joints' limits."""
        first = next((self.made[name] for name in self.names if name in self.made), None)
        if first is None:
            return middle_of_limits(self.arm)
        start: list[float] = first.reference(np.zeros(1))[0][0].tolist()
        return tuple(start)

    def _make(self, found: _Declared, within: tuple[str, ...]) -> None:
        """Make one motion, which the chains ``within`` are waiting for."""
        del self.waiting[found.name]
        clean, path = self.findings.clean, found.path
        try:
            motion = self._of_kind(found, within)
            if motion is not None and found.keys.repeat > 1 and found.kind != "chain":
                parts = [(found.name, motion)]
                motion = chained(parts, self.arm, repeats=found.keys.repeat, join_s=self._join(found))
        except Unreachable as error:
            self.findings.fault(path, str(error), error.expected)
            return
        if motion is not None and clean(*path) and self._has_a_length(path, motion):
            self._check_limits(found, motion)
            if clean(*path):
                self.made[found.name] = motion

    def _of_kind(self, found: _Declared, within: tuple[str, ...]) -> Motion | None:
        _check_alone(found, self.names, self.findings, self.folder)
        if found.kind == "via_deg":
            return self._via(found)
        if found.kind == "file":
            return self._table(found)
        if found.kind == "chain":
            return self._chain(found, within)
        return self._path(found)

    def _join(self, found: _Declared) -> float | None:
        return None if found.keys.join_s is None else found.keys.join_s / found.pace

    def _via(self, found: _Declared) -> Motion | None:
        for i, point in enumerate(found.keys.via_deg or ()):
            self._check_point((*found.path, "via_deg", i), point)
        if not self.findings.clean(*found.path):
            return None
        scale = to_si(self.arm)
        rows = tuple(tuple((np.array(point) * scale).tolist()) for point in found.keys.via_deg or ())
        return ViaMotion(rows, found.keys.leg_s, found.keys.rest_s, found.pace)

    def _check_point(self, path: KeyPath, point: list[float]) -> None:
        if len(point) != self.arm.n:
            self.findings.fault(path, entries(len(point)), f"{self.arm.n}, one a joint")
        else:
            check_position(path, np.array(point), self.arm, self.findings)

    def _table(self, found: _Declared) -> Motion | None:
        if not self.findings.clean(*found.path):
            return None
        file = self.folder / (found.keys.file or "")
        try:
            return read_table(str(file), read_text(file, str(file)), self.arm, found.pace)
        except InputFaults as error:
            faults = error.faults
        try:  # is anything but speeds wrong with it?
            free = _without_speed_limits(self.arm)
            motion = read_table(str(file), read_text(file, str(file)), free, found.pace)
        except InputFaults:
            self.findings.take(faults)
            return None
        self.findings.passings += faults
        return motion

    def _path(self, found: _Declared) -> Motion | None:
        """Return the motion along a circle or line."""
        circle_keys, line_keys = found.keys.circle, found.keys.line
        keys: PathKeys | None = circle_keys or line_keys
        path: KeyPath = (*found.path, found.kind)
        assert keys is not None
        near = self.near
        if keys.near_deg is not None:
            self._check_point((*path, "near_deg"), keys.near_deg)
            if self.findings.clean(*path):
                near = tuple((np.array(keys.near_deg) * to_si(self.arm)).tolist())
        if not self.findings.clean(*path):
            return None
        given = keys.model_dump(exclude={"near_deg"}) | {"rest_s": found.keys.rest_s, "pace": found.pace}
        if circle_keys is not None:
            return circle(self.arm, near, **given)
        return line(self.arm, near, leg_s=found.keys.leg_s, **given)

    def _chain(self, found: _Declared, within: tuple[str, ...]) -> Motion | None:
        """Return the parts one after the other, once they are made themselves."""
        names = found.keys.chain or []
        within = (*within, found.name)
        for i, name in enumerate(names):
            path = (*found.path, "chain", i)
            if name in within:
                self.findings.fault(path, f"'{name}' would contain itself", "another motion's name")
            elif name in self.waiting:
                self._make(self.waiting[name], within)
        if any(name not in self.made for name in names):
            return None
        return chained(
            [(name, self.made[name]) for name in names],
            self.arm,
            repeats=found.keys.repeat,
            join_s=found.keys.join_s,
            pace=found.pace,
        )

    def _has_a_length(self, path: KeyPath, motion: Motion) -> bool:
        ticks = motion.duration_s * self.control_hz
        if not LEAST_TICKS <= ticks <= MOST_TICKS:
            problem = f"lasts {motion.duration_s:g} s, which is {ticks:.3g} control ticks"
            self.findings.fault(path, problem, f"{LEAST_TICKS} to {MOST_TICKS}")
            return False
        return True

    def _check_limits(self, found: _Declared, motion: Motion) -> None:
        """Hold the reference against the joints' limits; what is read from a file has been, as have parts."""
        told = {fault.key for fault in self.findings.passings}
        if found.kind == "file" or any(f"motions.{name}" in told for name in found.keys.chain or ()):
            return
        for passing in check_motion(motion, self.arm, self.control_hz):
            if passing.limit == "speed limit":
                self.findings.passing(found.path, str(passing), SLOWER)
            elif found.kind in ("circle", "line"):
                self.findings.fault(found.path, str(passing), "a way within the limits")


def _without_speed_limits(arm: Arm) -> Arm:
    return replace(arm, drives=replace(arm.drives, speed_limit=np.full(arm.n, np.inf)))

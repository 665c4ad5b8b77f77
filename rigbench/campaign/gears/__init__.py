"""Gear ratios of an arm: what each does to inertia, disturbance, damping and tracking, and what it costs."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

from rigbench.arm.arm import PRISMATIC, Arm
from rigbench.arm.declaration import ArmDeclaration, DriveDeclaration
from rigbench.arm.drive_changes import changed_drives
from rigbench.arm.files import ArmFiles
from rigbench.campaign.gears.demand import leg_seconds, quarter_motion, used
from rigbench.campaign.gears.result import Course, Geared, Gears, JointGears, Tracked
from rigbench.campaign.gears.tracking import Outcome, gains, track
from rigbench.campaign.gears.workspace import Workspace, workspace
from rigbench.motion.via import ViaMotion
from rigbench.rig.engine import Engine
from rigbench.rig.simulate import worker_engine
from rigbench.yamlfile import load, validate

__all__ = ["RATIOS", "Gears", "gears"]

RATIOS = (1.0, 2.0, 5.0, 10.0, 20.0, 50.0, 100.0, 200.0)
GRAVITY = (0.0, 0.0, -9.81)
POSES, SEED = 4096, 1
NATURAL_HZ, DAMPING = 5.0, 1.0  # as the laws' own defaults
CONTROL_HZ = 1000.0
REST_S = 0.2


def gears(
    files: ArmFiles,
    joints: Sequence[str],
    ratios: Sequence[float] = RATIOS,
    leg_s: float | None = None,
    engine: Engine | None = None,
) -> Gears:
    """Work out what each ratio does to ``joints``, all of them at it at once; the others stay as declared.

    As in a sweep, the motor (rotor_inertia, motor_*) and the friction at the joint stay as they are.
    ``leg_s``: time of the motion's leg [s], chosen by :func:`leg_seconds` if None. ``engine`` is this
    process's where none is given. Raises InputFaults for what is wrong with the files.
    """
    engine = worker_engine() if engine is None else engine
    arm, motors = files.arm(), _motors(files)
    motion = quarter_motion(arm, leg_seconds(arm) if leg_s is None else leg_s, REST_S)
    _, v, a = motion.reference(np.linspace(0.0, motion.duration_s, 2001))
    space = workspace(arm, GRAVITY, np.abs(v).max(axis=0), POSES, SEED)
    rows, tracked = [], []
    for ratio in ratios:
        changed = files.with_drives((joint, "gear_ratio", ratio) for joint in joints)
        middle = space.middle + changed.arm().drives.reflected
        outcome = track(engine, changed, *gains(middle, NATURAL_HZ, DAMPING), motion, CONTROL_HZ)
        tracked.append(Tracked(ratio, outcome.outcome, outcome.reason, outcome.tool_peak_mm))
        rows.append(_rows(changed.arm(), motors, space, motion, outcome))
    floors = np.abs(a).max(axis=0) / (2.0 * np.pi * NATURAL_HZ) ** 2
    found = tuple(
        JointGears(
            joint=joint,
            prismatic=bool(arm.kinds[i] == PRISMATIC),
            declared_ratio=motors[i].gear_ratio,
            rotor_inertia=motors[i].rotor_inertia,
            gear_efficiency=motors[i].gear_efficiency,
            motor_torque_limit=_torque_limit(motors[i]),
            motor_speed_limit=_speed_limit(motors[i]),
            link_least=float(space.least[i]),
            link_largest=float(space.largest[i]),
            floor=float(floors[i]),
            ratios=tuple(row[i] for row in rows),
        )
        for i, joint in enumerate(arm.joints)
        if joint in joints
    )
    start, end = motion.points
    course = Course(start, end, motion.leg_s, motion.rest_s)
    about = (files.path, arm.name, found, tuple(ratios), tuple(tracked), course)
    return Gears(*about, POSES, SEED, NATURAL_HZ, DAMPING, CONTROL_HZ)


def _motors(files: ArmFiles) -> list[DriveDeclaration]:
    """Return the drives as declared, in the order of the joints; the files are known to be in order."""
    declared = validate(load(files.path, files.text), ArmDeclaration)[0]
    assert declared is not None
    drives, _ = changed_drives(files.path, declared.drives, files.drive_changes)
    return [drives[joint] for joint in files.arm().joints]


def _torque_limit(motor: DriveDeclaration) -> float | None:
    limits = (motor.motor_torque_limit, motor.motor_stall_torque)
    return min((limit for limit in limits if limit is not None), default=None)


def _speed_limit(motor: DriveDeclaration) -> float | None:
    limits = (motor.motor_speed_limit, motor.motor_no_load_speed)
    return min((limit for limit in limits if limit is not None), default=None)


def _rows(
    arm: Arm, motors: Sequence[DriveDeclaration], space: Workspace, motion: ViaMotion, outcome: Outcome
) -> list[Geared]:
    """Return what the drives of ``arm``, at their ratios now, make of each joint."""
    drives = arm.drives
    speed_used, torque_used = used(arm, GRAVITY, motion)
    fastest = np.minimum(drives.speed_limit, drives.no_load_speed)
    ends = [inertia + drives.reflected for inertia in (space.least, space.largest)]
    middle = space.middle + drives.reflected
    found = []
    for i, ratio in enumerate(drives.gear_ratio.tolist()):
        least, largest = (float(end[i]) for end in ends)
        disturbance, limit = float(space.disturbance[i]) / ratio, _torque_limit(motors[i])
        found.append(
            Geared(
                ratio=ratio,
                inertia_least=least / ratio**2,
                inertia_largest=largest / ratio**2,
                damping_least=DAMPING * math.sqrt(middle[i] / largest),
                damping_largest=DAMPING * math.sqrt(middle[i] / least),
                disturbance=disturbance,
                disturbance_share=None if limit is None else disturbance / limit,
                reflected=float(drives.reflected[i]),
                speed_limit=float(fastest[i]) if math.isfinite(fastest[i]) else None,
                speed_used=speed_used[i],
                torque_used=torque_used[i],
                error_peak=None if outcome.errors is None else float(outcome.errors[i]),
            )
        )
    return found

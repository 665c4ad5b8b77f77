"""What gear ratios do to an arm, in words that text and picture share."""

from __future__ import annotations

import math

from rigbench.campaign.gears.result import Gears, JointGears

__all__ = [
    "angle_of",
    "floor_words",
    "how_words",
    "joint_words",
    "notes",
    "percent",
    "possible_words",
    "reserve",
]

LEAST_SHARE = -10.0
"""A reserve below this is only said to be so."""


def angle_of(joint: JointGears) -> tuple[str, float]:
    """Return the unit that people read a joint's position in, and how many of it make the SI unit."""
    return ("mm", 1e3) if joint.prismatic else ("deg", math.degrees(1.0))


def percent(share: float | None) -> str:
    """Return a share in percent with three digits, '-' where it is unknown."""
    if share is None:
        return "-"
    if share < LEAST_SHARE:
        return f"< {100 * LEAST_SHARE:.0f} %"
    return f"{100 * share:.3g} %" if abs(share) < 9.995 else f"{100 * share:.0f} %"


def reserve(used: float | None) -> float | None:
    """Return what is left of a limit, as a share: negative where more is asked for; None where unknown."""
    return None if used is None else 1.0 - used


def how_words(gears: Gears) -> str:
    """Say what was worked out, and how."""
    course = gears.course
    return (
        "The motor (rotor_inertia, motor_*) and the friction at the joint stay as declared. Inertia and "
        f"disturbance: ends over {gears.poses} poses within the joints' ranges (seed {gears.seed}); the "
        "disturbance is gravity, and Coriolis torque at the motion's peak speeds. Damping and error: "
        f"independent-joint control at {gears.control_hz:g} Hz, gains fixed for the middle inertia, "
        f"{gears.natural_hz:g} Hz and a damping ratio of {gears.damping:g}; the error is the engine's, of "
        "drives without limits, all joints listed at the same ratio. Motion: all joints at once from a "
        f"quarter to three quarters of their ranges, one quintic leg of {course.leg_s:g} s. Reserves: "
        "what the motion leaves of the limits; below 0, what is wanting."
    )


def joint_words(joint: JointGears) -> str:
    """Say what is declared of a joint, and what its links weigh."""
    unit = "kg" if joint.prismatic else "kg m^2"
    ratio = f"{joint.declared_ratio:g}" + (" rad/m" if joint.prismatic else "")
    links = f"{joint.link_least:.3g}"
    if f"{joint.link_largest:.3g}" != links:
        links += f" to {joint.link_largest:.3g}"
    rotor = f"a rotor of {joint.rotor_inertia:.3g} kg m^2" if joint.rotor_inertia else "no rotor inertia"
    loss = f", a gear that hands on {100 * joint.gear_efficiency:g} %" if joint.gear_efficiency < 1 else ""
    return f"{joint.joint} (declared ratio {ratio}): links of {links} {unit} about it, {rotor}{loss}"


def possible_words(joint: JointGears) -> str:
    """Say at which ratios the motion stays within the declared limits."""
    if all(row.speed_used is None and row.torque_used is None for row in joint.ratios):
        return "No limits are declared, so no reserve is known."
    ratios = [f"{row.ratio:g}" for row in joint.ratios if row.possible]
    if len(ratios) == len(joint.ratios):
        return "The motion is within its limits at each ratio."
    return (
        f"The motion is within its limits at {', '.join(ratios)}."
        if ratios
        else "At none is the motion within its limits."
    )


def floor_words(joint: JointGears) -> str:
    """Say what error a gear can't take away."""
    unit, scale = angle_of(joint)
    return (
        f"Whatever the ratio, the reference's own acceleration leaves about {scale * joint.floor:.2g} {unit}."
    )


def notes(gears: Gears) -> list[str]:
    """Return what keeps a gear's price or gain from showing."""
    found = []
    free = [j.joint for j in gears.joints if j.motor_torque_limit is None and j.motor_speed_limit is None]
    if free:
        found.append(
            f"no limit on the motor's side is declared for {', '.join(free)}: there a higher ratio costs no "
            "speed and gains no torque"
        )
    bare = [joint.joint for joint in gears.joints if joint.rotor_inertia == 0.0]
    if bare:
        found.append(
            f"no rotor inertia is declared for {', '.join(bare)}: there no ratio evens out the links' inertia"
        )
    return found

"""Made-up arms of any number of joints, turning and sliding."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from rigbench.arm.arm import PRISMATIC, REVOLUTE, Arm, Drives

__all__ = ["make_arm"]

KINDS = {"R": REVOLUTE, "P": PRISMATIC}
AXES = ((0.0, -1.0, 0.0), (0.0, 0.0, 1.0), (1.0, 0.0, 0.0))


def make_arm(kinds: str = "RR", limits: bool = True) -> Arm:
    """Return an arm with one joint for each letter, R to turn and P to slide, from the base on.

    Links of 0.2 m, 3 kg at the base and ever lighter outwards, joint axes along -y, z and x in turn; gears
    of 50, rotors of 2e-5 kg m^2, viscous and Coulomb friction. ``limits``: whether its drives have limits of
    torque and speed (inf where not). Joints have no limits of position. ValueError for other letters.
    """
    if not kinds or set(kinds) - set(KINDS):
        raise ValueError(f"an arm of joints {kinds!r}; expected letters R and P, one for each joint")
    n = len(kinds)
    mass = 3.0 / (1.0 + np.arange(n))
    about = mass * 0.1**2
    parameters = np.zeros((n, 10))
    parameters[:, 0], parameters[:, 1] = mass, 0.1 * mass
    parameters[:, 4], parameters[:, 6], parameters[:, 9] = 0.1 * about, 1.45 * about, 1.5 * about
    full = np.full(n, 1.0)
    drives = replace(
        Drives.ideal(n),
        gear_ratio=50.0 * full,
        rotor_inertia=2e-5 * full,
        viscous=0.5 * full,
        coulomb=0.4 * full,
        static=0.4 * full,
    )
    if limits:
        drives = replace(drives, torque_limit=80.0 * full, speed_limit=4.0 * full)
    return Arm(
        name=f"made of {kinds}",
        joints=tuple(f"j{i + 1}" for i in range(n)),
        links=tuple(f"link{i + 1}" for i in range(n)),
        kinds=np.array([KINDS[kind] for kind in kinds]),
        rotation=np.tile(np.eye(3), (n, 1, 1)),
        position=np.array([[0.2 * (i > 0), 0.0, 0.0] for i in range(n)]),
        axis=np.array([AXES[i % 3] for i in range(n)]),
        parameters=parameters,
        tool_rotation=np.eye(3),
        tool_position=np.array([0.2, 0.0, 0.0]),
        lower=-np.inf * full,
        upper=np.inf * full,
        drives=drives,
    )

"""The arm: a serial chain of links and the drives of its joints, as arrays."""

from __future__ import annotations

from dataclasses import dataclass, fields, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rigbench.errors import Fault

__all__ = ["PARAMETERS", "PRISMATIC", "REVOLUTE", "Arm", "Drives", "Floats"]

Floats = NDArray[np.float64]

REVOLUTE, PRISMATIC = 0.0, 1.0
"""Values of a chain's first column."""

PARAMETERS = ("m", "mcx", "mcy", "mcz", "Ixx", "Ixy", "Iyy", "Ixz", "Iyz", "Izz")
"""Order of a link's ten parameters: mass [kg], mass times centre of gravity [kg m], and the inertia
tensor about the link frame's origin [kg m^2]."""

ROTATION, POSITION, AXIS, LINK = slice(1, 10), slice(10, 13), slice(13, 16), slice(16, 26)
"""Columns of a chain array (see :meth:`Arm.chain`); column 0 is the joint's kind."""


def _protect(declared: Any) -> None:
    """Make the arrays of a data class read-only: one arm serves many runs, and laws are handed its parts."""
    for field in fields(declared):
        value = getattr(declared, field.name)
        if isinstance(value, np.ndarray):
            value.flags.writeable = False


@dataclass(frozen=True, eq=False)
class Drives:
    """Motor, gearbox, friction and encoder of every joint; arrays of shape (n,), at the joint unless said.

    Motor-side friction has been carried over the gear already (viscous by G^2, Coulomb by G), and of
    two limits the tighter one stands here. Units are rad, N m, s; for a prismatic joint m, N, s. The
    fields with a default in :meth:`ideal` are imperfections, off unless declared.
    """

    gear_ratio: Floats  # motor turns per joint turn (rad/m for a prismatic joint)
    rotor_inertia: Floats  # kg m^2, on the motor's side
    viscous: Floats  # N m s/rad
    coulomb: Floats  # N m
    static: Floats  # N m, breakaway; equals coulomb where none is declared
    stribeck_speed: Floats  # rad/s; 1 where static equals coulomb (then without effect)
    bristle_stiffness: Floats  # N m/rad, sigma0 of LuGre; 0 for dry friction without presliding
    bristle_damping: Floats  # N m s/rad, sigma1 of LuGre
    gear_loss: Floats  # share of the transmitted torque that acts as dry friction besides; 0 for none
    stiffness: Floats  # N m/rad, of the elastic transmission; inf for a rigid one
    spring_damping: Floats  # N m s/rad, of the elastic transmission
    torque_limit: Floats  # N m, inf where none is declared
    speed_limit: Floats  # rad/s, inf where none is declared
    stall_torque: Floats  # N m, of the motor's torque-speed line; inf for none
    no_load_speed: Floats  # rad/s, where that line reaches no torque; inf for none
    torque_lag: Floats  # s, time constant of the current loop; 0 for none
    torque_step: Floats  # N m, to which commands are rounded; 0 for none
    torque_gain: Floats  # torque given over torque asked for: the torque constant's error; 1 for none
    torque_bias: Floats  # N m, given without being asked for
    ripple: Floats  # N m, amplitude of a torque that goes with the motor's angle
    ripple_periods: Floats  # periods of it in a motor turn
    encoder_step: Floats  # rad, one count of the encoder; 0 for exact positions
    encoder_offset: Floats  # rad, by how much the encoder reads too much

    def __post_init__(self) -> None:
        _protect(self)

    @classmethod
    def ideal(cls, n: int) -> Drives:
        """Return n direct drives without rotors, friction, limits or imperfections."""
        given = {"gear_ratio": 1.0, "stribeck_speed": 1.0, "torque_gain": 1.0}
        given |= dict.fromkeys(
            ("stiffness", "torque_limit", "speed_limit", "stall_torque", "no_load_speed"), np.inf
        )
        return cls(**{field.name: np.full(n, given.get(field.name, 0.0)) for field in fields(cls)})

    @property
    def reflected(self) -> Floats:
        """Rotor inertia as the joint feels it: G^2 Jm [kg m^2], shape (n,)."""
        return self.gear_ratio**2 * self.rotor_inertia


@dataclass(frozen=True, eq=False)
class Arm:
    """A serial chain of n links and its drives; as a model or, with other numbers, as a plant.

    The frame of link i is that of its joint, as the URDF places it, turned by q_i about (or shifted
    along) ``axis[i]``. Fixed joints and locked joints are already merged into the link that carries
    them, mass included.
    """

    name: str
    joints: tuple[str, ...]
    links: tuple[str, ...]  # the moving link of each joint, as the URDF names it
    kinds: Floats  # (n,), REVOLUTE or PRISMATIC
    rotation: Floats  # (n, 3, 3), joint frame in the frame of the link before it, at q = 0
    position: Floats  # (n, 3) [m], likewise
    axis: Floats  # (n, 3), unit vector in the joint's frame
    parameters: Floats  # (n, 10), in the order of PARAMETERS
    tool_rotation: Floats  # (3, 3), tool frame in the last link's frame
    tool_position: Floats  # (3,) [m], likewise
    lower: Floats  # (n,) [rad or m], -inf where there is none
    upper: Floats  # (n,) [rad or m], inf where there is none
    drives: Drives
    notes: tuple[Fault, ...] = ()  # warnings: what was met on the way and needs no stop

    def __post_init__(self) -> None:
        _protect(self)

    @property
    def n(self) -> int:
        """Number of joints."""
        return len(self.joints)

    def replaced(self, parameters: Floats | None = None, drives: Drives | None = None) -> Arm:
        """Return the same chain with other link parameters (n, 10) or other drives."""
        return replace(
            self,
            parameters=self.parameters if parameters is None else parameters,
            drives=self.drives if drives is None else drives,
        )

    def chain(self, gravity: tuple[float, float, float]) -> Floats:
        """Pack the chain into the one array that the dynamics kernels read.

        Shape (n + 1, 26). Row i < n: kind, joint rotation (9, row-major), joint position (3), axis
        (3), link parameters (10). Row n: the tool's rotation and position in the same columns, and
        ``gravity`` [m/s^2, in the base frame] where the axis stands in the others.
        """
        n = self.n
        chain = np.zeros((n + 1, 26))
        chain[:n, 0] = self.kinds
        chain[:n, ROTATION] = self.rotation.reshape(n, 9)
        chain[:n, POSITION] = self.position
        chain[:n, AXIS] = self.axis
        chain[:n, LINK] = self.parameters
        chain[n, ROTATION] = self.tool_rotation.reshape(9)
        chain[n, POSITION] = self.tool_position
        chain[n, AXIS] = gravity
        return chain

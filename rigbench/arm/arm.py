"""The arm: a serial chain of links and the drives of its joints, as arrays."""

from __future__ import annotations

from dataclasses import dataclass, replace

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


@dataclass(frozen=True, eq=False)
class Drives:
    """Motor, gearbox and friction of every joint; arrays of shape (n,), at the joint unless said.

    Motor-side friction has been carried over the gear already (viscous by G^2, Coulomb by G), and of
    two limits the tighter one stands here. Units are rad, N m, s; for a prismatic joint m, N, s.
    """

    gear_ratio: Floats  # motor turns per joint turn (rad/m for a prismatic joint)
    rotor_inertia: Floats  # kg m^2, on the motor's side
    viscous: Floats  # N m s/rad
    coulomb: Floats  # N m
    static: Floats  # N m, breakaway; equals coulomb where none is declared
    stribeck_speed: Floats  # rad/s; 1 where static equals coulomb (then without effect)
    torque_limit: Floats  # N m, inf where none is declared
    speed_limit: Floats  # rad/s, inf where none is declared
    torque_lag: Floats  # s, time constant of the current loop; 0 for none

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

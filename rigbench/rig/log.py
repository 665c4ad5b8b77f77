"""The log of one run: true states and torques at every control tick."""

from __future__ import annotations

from dataclasses import dataclass

from numpy import bool_
from numpy.typing import NDArray

from rigbench.arm.arm import Arm, Floats

__all__ = ["RESIDUAL_LIMIT", "Log"]

RESIDUAL_LIMIT = 1e-6
"""A larger residual [rad/s] means that engine and drive disagree about the machine; such a
run comes to no verdict, unless it ran away. Not so where contacts push the arm."""


@dataclass(eq=False)
class Log:
    """What happened in a run; arrays end where the run did.

    True positions and velocities, not sensed ones, at control ticks. ``residual`` is the largest
    difference between the velocity that the drive foresaw and the one the engine reached [rad/s]. With
    ``contacts`` something may have touched the arm: then the difference holds the pushes of contacts,
    and a large one says that they reached the arm, not that engine and drive disagree.
    """

    t: Floats  # (N,) [s]
    q_ref: Floats  # (N, n) [rad]
    v_ref: Floats  # (N, n) [rad/s]
    q: Floats  # (N, n)
    v: Floats  # (N, n)
    torque: Floats  # (N, n) [N m], the motor's, at the joint
    limited: NDArray[bool_]  # (N, n), where the drive gave less than the law asked for
    plant: Arm
    outcome: str  # finished, diverged or hit-stop; running: of an attached rig before its end
    reason: str  # in words, empty if finished
    residual: float
    energy_j: float  # positive mechanical work of all motors, taken at every physics step [J]
    torque_peak: Floats  # (n,) [N m], largest size of the motor's torque at any physics step
    law_us: float  # median time of the law in a control tick [us], of this host
    control_hz: float
    gravity: tuple[float, float, float]
    contacts: bool = False

    @property
    def in_doubt(self) -> bool:
        """Whether the residual says that engine and drive disagree about the machine."""
        return not self.contacts and self.residual > RESIDUAL_LIMIT

"""The arm file as the user writes it, and the drives that its numbers make."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Annotated

import numpy as np
from pydantic import Field, model_validator
from pydantic_core import PydanticCustomError

from rigbench.arm.arm import Drives, Floats
from rigbench.yamlfile import Declared

__all__ = ["ArmDeclaration", "DriveDeclaration", "drives_of"]

AtLeastZero = Annotated[float, Field(ge=0, le=1e9)]
AboveZero = Annotated[float, Field(gt=0, le=1e9)]
Ratio = Annotated[float, Field(gt=0, le=1e6)]
Name = Annotated[str, Field(min_length=1)]


class DriveDeclaration(Declared):
    """Motor, gearbox and friction of one joint. Prismatic joints: m and N for rad and N m."""

    gear_ratio: Ratio = Field(1.0, description="motor turns per joint turn; 1 for a direct drive")
    rotor_inertia: AtLeastZero = Field(0.0, description="kg m^2, on the motor's side")
    motor_torque_limit: AboveZero | None = Field(
        None, description="N m, at the motor: times gear_ratio at the joint"
    )
    motor_speed_limit: AboveZero | None = Field(
        None, description="rad/s, at the motor: divided by gear_ratio at the joint"
    )
    motor_viscous: AtLeastZero = Field(
        0.0, description="N m s/rad, at the motor: times gear_ratio^2 at the joint"
    )
    motor_coulomb: AtLeastZero = Field(0.0, description="N m, at the motor: times gear_ratio at the joint")
    viscous: AtLeastZero = Field(0.0, description="N m s/rad, at the joint")
    coulomb: AtLeastZero = Field(0.0, description="N m, at the joint")
    static: AtLeastZero | None = Field(
        None, description="N m, breakaway at the joint; needs stribeck_speed; as coulomb if absent"
    )
    stribeck_speed: AboveZero | None = Field(
        None, description="rad/s, at the joint: how fast friction falls from static to coulomb"
    )
    torque_limit: AboveZero | None = Field(None, description="N m, at the joint: the gearbox's rating")
    speed_limit: AboveZero | None = Field(None, description="rad/s, at the joint")
    encoder_counts: Annotated[int, Field(ge=1)] | None = Field(
        None, description="counts per motor turn; exact positions if absent"
    )
    torque_lag_ms: AtLeastZero = Field(0.0, description="ms, time constant of the current loop; 0 for none")

    @model_validator(mode="after")
    def _breakaway(self) -> DriveDeclaration:
        if self.static is not None and self.stribeck_speed is None:
            raise _fault("static is given without stribeck_speed", "stribeck_speed in rad/s")
        if self.static is None and self.stribeck_speed is not None:
            raise _fault("stribeck_speed is given without static", "static in N m")
        if self.static is not None and self.static < self.coulomb:
            raise _fault(f"static {self.static:g} is below coulomb {self.coulomb:g}", "at least coulomb")
        return self


def _fault(problem: str, expected: str) -> PydanticCustomError:
    return PydanticCustomError("drive", "{said}", {"said": problem, "expected": expected})


class ArmDeclaration(Declared):
    """The arm file. SI units; paths relative to the file."""

    urdf: Name = Field(description="the URDF: link inertials, joint axes and limits come from there")
    tool: Name = Field(description="the URDF link whose origin is the tool point")
    lock: dict[str, float] = Field(
        default_factory=dict, description="movable joints to freeze, at this position [rad or m]"
    )
    drives: dict[str, DriveDeclaration] = Field(
        default_factory=dict, description="one per joint of the chain, in any order"
    )


def drives_of(declared: Sequence[DriveDeclaration], effort: Floats, velocity: Floats) -> Drives:
    """Return the drives of n joints, carried over to the joint's side.

    ``effort`` [N m] and ``velocity`` [rad/s], shape (n,), are the joints' own limits (the URDF's), inf
    for none. Of all limits the tightest acts: torque_limit, G motor_torque_limit, effort; speed_limit,
    motor_speed_limit / G, velocity. Friction adds up: viscous + G^2 motor_viscous, coulomb + G
    motor_coulomb and, where static is given, static + G motor_coulomb.
    """

    def array(*names: str) -> list[Floats]:
        rows = [[getattr(drive, name) for drive in declared] for name in names]
        return [np.array([np.inf if value is None else value for value in row], float) for row in rows]

    gear, rotor, lag = array("gear_ratio", "rotor_inertia", "torque_lag_ms")
    viscous, coulomb, motor_viscous, motor_coulomb = array(
        "viscous", "coulomb", "motor_viscous", "motor_coulomb"
    )
    torque, motor_torque, speed, motor_speed = array(
        "torque_limit", "motor_torque_limit", "speed_limit", "motor_speed_limit"
    )
    static, stribeck_speed = array("static", "stribeck_speed")
    static = np.where(np.isinf(static), coulomb, static)
    with np.errstate(over="ignore"):  # a gear_ratio next to 0 leaves no limit
        motor_speed = motor_speed / gear
    return Drives(
        gear_ratio=gear,
        rotor_inertia=rotor,
        viscous=viscous + gear**2 * motor_viscous,
        coulomb=coulomb + gear * motor_coulomb,
        static=static + gear * motor_coulomb,
        stribeck_speed=np.where(static > coulomb, stribeck_speed, 1.0),
        torque_limit=np.minimum(np.minimum(torque, gear * motor_torque), effort),
        speed_limit=np.minimum(np.minimum(speed, motor_speed), velocity),
        torque_lag=1e-3 * lag,
    )

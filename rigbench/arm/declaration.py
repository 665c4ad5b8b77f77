"""The arm file as the user writes it, and the drives that its numbers make."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
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


LUGRE = "Canudas de Wit, Olsson, Astrom, Lischinsky 1995, simulation set, from memory"


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
        None,
        description="N m, breakaway at the joint; needs stribeck_speed; as coulomb if absent; typical: 3 to "
        "6.5 percent of the largest joint torque (Armstrong, Khatib, Burdick 1986)",
    )
    stribeck_speed: AboveZero | None = Field(
        None,
        description="rad/s, at the joint: how fast friction falls from static to coulomb; typical: 0.01 "
        "to 0.1 (our choice)",
    )
    lugre_stiffness: AboveZero | None = Field(
        None,
        description="N m/rad, sigma0 of LuGre friction; dry friction without presliding if absent; typical: "
        f"1e5 for each N m of coulomb ({LUGRE})",
    )
    lugre_damping: AtLeastZero = Field(
        0.0,
        description="N m s/rad, sigma1 of LuGre friction; typical: the square root of lugre_stiffness "
        f"({LUGRE})",
    )
    gear_efficiency: Annotated[float, Field(gt=0, le=1)] = Field(
        1.0,
        description="share of the transmitted torque that arrives; the rest acts as dry friction; typical: "
        "0.8 (common practice)",
    )
    stiffness: AboveZero | None = Field(
        None,
        description="N m/rad, of an elastic transmission, at the joint; rigid if absent; typical: 1e4 to 1e5 "
        "(common practice, joints of some 100 N m)",
    )
    spring_damping: AtLeastZero = Field(
        0.0,
        description="N m s/rad, of the elastic transmission; typical: 1e-3 s times stiffness (our choice)",
    )
    torque_limit: AboveZero | None = Field(None, description="N m, at the joint: the gearbox's rating")
    speed_limit: AboveZero | None = Field(None, description="rad/s, at the joint")
    encoder_counts: Annotated[int, Field(ge=1, le=10**9)] | None = Field(
        None,
        description="counts per motor turn; exact positions if absent; typical: 4096 to 1048576 (common "
        "practice)",
    )
    torque_lag_ms: AtLeastZero = Field(
        0.0, description="ms, time constant of the current loop; 0 for none; typical: 0.5 (common practice)"
    )
    motor_stall_torque: AboveZero | None = Field(
        None, description="N m, at the motor: where its torque-speed line stands still"
    )
    motor_no_load_speed: AboveZero | None = Field(
        None, description="rad/s, at the motor: where its torque-speed line reaches no torque"
    )
    motor_torque_step: AtLeastZero = Field(
        0.0,
        description="N m, at the motor: commands are rounded to it; typical: motor_torque_limit / 2048 (12 "
        "bits with a sign; common practice)",
    )
    motor_ripple: AtLeastZero = Field(
        0.0,
        description="N m, at the motor: amplitude of a torque that goes with its angle; typical: 2 percent "
        "of motor_torque_limit (our choice)",
    )
    ripple_periods: Annotated[int, Field(ge=1, le=10**6)] = Field(
        1, description="periods of the ripple in a motor turn"
    )

    @model_validator(mode="after")
    def _breakaway(self) -> DriveDeclaration:
        if self.static is not None and self.stribeck_speed is None:
            raise _fault("static is given without stribeck_speed", "stribeck_speed in rad/s")
        if self.static is None and self.stribeck_speed is not None:
            raise _fault("stribeck_speed is given without static", "static in N m")
        if self.static is not None and self.static < self.coulomb:
            raise _fault(f"static {self.static:g} is below coulomb {self.coulomb:g}", "at least coulomb")
        return self

    @model_validator(mode="after")
    def _whole(self) -> DriveDeclaration:
        if (self.motor_stall_torque is None) != (self.motor_no_load_speed is None):
            raise _fault("half of a torque-speed line", "motor_stall_torque and motor_no_load_speed together")
        if self.lugre_stiffness is not None and self.coulomb + self.motor_coulomb == 0:
            raise _fault("lugre_stiffness is given without dry friction", "coulomb above 0")
        if self.stiffness is not None and self.rotor_inertia == 0:
            raise _fault(
                "stiffness is given without a rotor for the spring to act on", "rotor_inertia above 0"
            )
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

    gear, rotor, lag, efficiency = array("gear_ratio", "rotor_inertia", "torque_lag_ms", "gear_efficiency")
    viscous, coulomb, motor_viscous, motor_coulomb = array(
        "viscous", "coulomb", "motor_viscous", "motor_coulomb"
    )
    torque, motor_torque, speed, motor_speed, stall_torque, no_load_speed = array(
        "torque_limit", "motor_torque_limit", "speed_limit", "motor_speed_limit", "motor_stall_torque",
        "motor_no_load_speed",
    )  # fmt: skip
    static, stribeck_speed, stiffness, spring_damping = array(
        "static", "stribeck_speed", "stiffness", "spring_damping"
    )
    bristle_stiffness, bristle_damping = array("lugre_stiffness", "lugre_damping")
    torque_step, ripple, periods, counts = array(
        "motor_torque_step", "motor_ripple", "ripple_periods", "encoder_counts"
    )
    static = np.where(np.isinf(static), coulomb, static)
    with np.errstate(over="ignore"):  # a gear_ratio next to 0 leaves no limit
        motor_speed, no_load_speed = motor_speed / gear, no_load_speed / gear
    return replace(
        Drives.ideal(len(declared)),
        gear_ratio=gear,
        rotor_inertia=rotor,
        viscous=viscous + gear**2 * motor_viscous,
        coulomb=coulomb + gear * motor_coulomb,
        static=static + gear * motor_coulomb,
        stribeck_speed=np.where(static > coulomb, stribeck_speed, 1.0),
        bristle_stiffness=np.where(np.isinf(bristle_stiffness), 0.0, bristle_stiffness),
        bristle_damping=bristle_damping,
        gear_loss=1.0 - efficiency,
        stiffness=stiffness,
        spring_damping=spring_damping,
        torque_limit=np.minimum(np.minimum(torque, gear * motor_torque), effort),
        speed_limit=np.minimum(np.minimum(speed, motor_speed), velocity),
        stall_torque=gear * stall_torque,
        no_load_speed=no_load_speed,
        torque_lag=1e-3 * lag,
        torque_step=gear * torque_step,
        ripple=gear * ripple,
        ripple_periods=periods,
        encoder_step=2.0 * np.pi / (gear * counts),
    )

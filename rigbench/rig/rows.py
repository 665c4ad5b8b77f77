"""Names of the rows in the two arrays that the rig's kernels share with the loop.

``io`` (rows, n) holds what changes; its first seven rows are what a law sees (:mod:`rigbench.laws.law`).
``machine`` (rows, n) holds what stays for a run: the plant's drives, as the kernels want them.
"""

from __future__ import annotations

import numpy as np

from rigbench.arm.arm import Arm, Floats
from rigbench.laws.law import SEES

__all__ = ["delay_rows", "machine_array"]

(
    Q_ENGINE,  # position and velocity as the engine gives them
    V_ENGINE,
    Q_TRUE,  # position and velocity of the joint
    V_TRUE,
    MOTOR,  # motor torque at the joint [N m]
    LIMITED,  # 1 where the drive gave less than it was asked for
    TAU_ENGINE,  # torque for the engine
    V_NEXT,  # the velocity that the drive foresees
    A_LAST,  # acceleration of the step before
    SLIDE,  # which way the joint's friction slides: -1, 0 (sticks), 1
    ERROR,  # [0]: largest difference between foreseen and reached velocity [rad/s]
    LAGGED,  # torque within the current loop
    CARRIED,  # torque that the gear carried in the step before
    DRY,  # size of the dry friction in this step, before anything sticks
    BRISTLE,  # deflection of LuGre's bristles [rad]
    Q_ROTOR,  # rotor of an elastic joint, in the joint's measure: position half a step ahead, velocity
    V_ROTOR,
    LAST_SENSED,  # sensed position of the tick before
    EXTERNAL,  # torque that contacts gave the joint in the step before
    STEPS,  # [0]: physics steps done
    ENERGY,  # positive mechanical work of the motor so far [J]
    TORQUE_PEAK,  # largest size of the motor's torque so far [N m]
    DELAYED,  # first row of the delay line; as many as the delay takes
) = range(SEES, SEES + 23)

(
    REFLECTED,
    VISCOUS,
    COULOMB,
    STATIC,
    STRIBECK,
    BRISTLE_STIFFNESS,
    BRISTLE_DAMPING,
    GEAR_LOSS,
    STIFFNESS,  # 0 where the transmission is rigid
    SPRING_DAMPING,
    TORQUE_LIMIT,
    SPEED_LIMIT,
    STALL_TORQUE,
    NO_LOAD_SPEED,
    LAG,  # share of the way to its command that the current loop goes in a step
    TORQUE_STEP,
    TORQUE_GAIN,
    TORQUE_BIAS,
    RIPPLE,
    RIPPLE_PERIODS,  # per radian of the joint
    ENCODER_STEP,
    ENCODER_OFFSET,
    LOWER,
    UPPER,
    BOUND,  # speed beyond which a run has diverged
    STEP,  # [0]: the physics step [s]
    DELAY,  # [0]: the delay, in physics steps, whole and part
    VELOCITY_FILTER,  # [0]: share of the way to the new difference that the filter goes; 0: exact velocity
    CONTROL_PERIOD,  # [0]: [s]
    LINK_ENCODER,  # [0]: 1 where encoders sit on the link's side of an elastic joint
    CONTACTS,  # [0]: 1 where something may touch the arm
) = range(31)

MACHINE_ROWS = CONTACTS + 1

RUNAWAY = 10.0
"""A joint is beyond bounds at this many times its speed limit, or at 1000 rad/s where it has none."""


def delay_rows(delay_steps: float) -> int:
    """Return how many rows of the delay line a delay takes, in physics steps, whole and part."""
    return int(np.floor(delay_steps)) + 2 if delay_steps > 0 else 0


def machine_array(
    arm: Arm,
    dt: float,
    delay: float = 0.0,
    control_period: float | None = None,
    velocity_corner_hz: float | None = None,
    link_encoder: bool = False,
    contacts: bool = False,
) -> Floats:
    """Pack what the kernels need of ``arm`` (a plant), of sensing and of timing, shape (31, n).

    ``dt`` and ``delay`` in s; ``velocity_corner_hz`` None for exact velocities.
    """
    drives, n = arm.drives, arm.n
    machine = np.zeros((MACHINE_ROWS, n))
    for row, values in {
        REFLECTED: drives.reflected,
        VISCOUS: drives.viscous,
        COULOMB: drives.coulomb,
        STATIC: drives.static,
        STRIBECK: drives.stribeck_speed,
        BRISTLE_STIFFNESS: drives.bristle_stiffness,
        BRISTLE_DAMPING: drives.bristle_damping,
        GEAR_LOSS: drives.gear_loss,
        STIFFNESS: np.where(np.isfinite(drives.stiffness), drives.stiffness, 0.0),
        SPRING_DAMPING: drives.spring_damping,
        TORQUE_LIMIT: drives.torque_limit,
        SPEED_LIMIT: drives.speed_limit,
        STALL_TORQUE: drives.stall_torque,
        NO_LOAD_SPEED: drives.no_load_speed,
        TORQUE_STEP: drives.torque_step,
        TORQUE_GAIN: drives.torque_gain,
        TORQUE_BIAS: drives.torque_bias,
        RIPPLE: drives.ripple,
        RIPPLE_PERIODS: drives.ripple_periods * drives.gear_ratio,
        ENCODER_STEP: drives.encoder_step,
        ENCODER_OFFSET: drives.encoder_offset,
        LOWER: arm.lower,
        UPPER: arm.upper,
        BOUND: np.where(np.isfinite(drives.speed_limit), RUNAWAY * drives.speed_limit, 1000.0),
    }.items():
        machine[row] = values
    lagged = drives.torque_lag > 0
    machine[LAG] = 1.0
    machine[LAG, lagged] = 1.0 - np.exp(-dt / drives.torque_lag[lagged])
    period = dt if control_period is None else control_period
    machine[STEP, 0], machine[DELAY, 0], machine[CONTROL_PERIOD, 0] = dt, delay / dt, period
    if velocity_corner_hz is not None:
        machine[VELOCITY_FILTER, 0] = 1.0 - np.exp(-2.0 * np.pi * velocity_corner_hz * period)
    machine[LINK_ENCODER, 0], machine[CONTACTS, 0] = float(link_encoder), float(contacts)
    return machine

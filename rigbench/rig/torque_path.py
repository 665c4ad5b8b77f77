"""From the torque that the law asks for to the torque that the motor gives, as a numba kernel.

In this order: rounding to the drive's step, hold, delay in whole and part steps, torque constant's
error, bias and ripple, first-order current loop, limits.
"""

from __future__ import annotations

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.arm.kernel import kernel
from rigbench.laws.law import TAU
from rigbench.rig.rows import (
    DELAY,
    DELAYED,
    LAG,
    LAGGED,
    LIMITED,
    MOTOR,
    NO_LOAD_SPEED,
    Q_TRUE,
    RIPPLE,
    RIPPLE_PERIODS,
    SPEED_LIMIT,
    STALL_TORQUE,
    STEPS,
    TORQUE_BIAS,
    TORQUE_GAIN,
    TORQUE_LIMIT,
    TORQUE_STEP,
    V_TRUE,
)

__all__ = ["motor_torques"]

SPEED_FOLDBACK = 0.02
"""Driving torque falls linearly to nothing over the last 2 % below the speed limit (our choice: a drive
must not push past its limit, and a sudden cut would chatter). Braking torque stays whole."""


@kernel
def motor_torques(machine: Floats, io: Floats) -> None:
    """Fill each joint's motor torque [N m, at the joint], and whether it fell short of what was asked."""
    for i in range(io.shape[1]):
        asked = io[TAU, i]
        if machine[TORQUE_STEP, i] > 0.0:
            asked = np.round(asked / machine[TORQUE_STEP, i]) * machine[TORQUE_STEP, i]
        if machine[DELAY, 0] > 0.0:
            asked = _delayed(machine, io, i, asked)
        asked = machine[TORQUE_GAIN, i] * asked + machine[TORQUE_BIAS, i]
        if machine[RIPPLE, i] != 0.0:
            asked += machine[RIPPLE, i] * np.sin(machine[RIPPLE_PERIODS, i] * io[Q_TRUE, i])
        if machine[LAG, i] < 1.0:
            asked = _lagged(machine, io, i, asked)
        v, limit = io[V_TRUE, i], machine[TORQUE_LIMIT, i]
        driving = min(limit, _on_line(machine[STALL_TORQUE, i], machine[NO_LOAD_SPEED, i], abs(v)))
        given = _limited(asked, v, limit, driving, machine[SPEED_LIMIT, i])
        io[MOTOR, i] = given
        io[LIMITED, i] = 0.0 if given == asked else 1.0


@kernel
def _delayed(machine: Floats, io: Floats, i: int, asked: float) -> float:
    """Return the command of ``DELAY`` physics steps ago, a part step by the mean over the step.

    Before the first command the drive held that same command: a run starts from a standing arm.
    """
    whole = int(machine[DELAY, 0])
    part = machine[DELAY, 0] - whole
    length, step = whole + 2, int(io[STEPS, 0])
    if step == 0:
        for row in range(length):
            io[DELAYED + row, i] = asked
    io[DELAYED + step % length, i] = asked
    older = io[DELAYED + (step - whole - 1) % length, i]
    return float((1.0 - part) * io[DELAYED + (step - whole) % length, i] + part * older)


@kernel
def _lagged(machine: Floats, io: Floats, i: int, asked: float) -> float:
    """Return the mean over the step of the current loop's torque on its way to what is asked.

    The mean, not the value at the end, keeps the rig of second order in time. A run starts with the
    loop settled on the first command, as the delay does.
    """
    before, share = io[LAGGED, i], machine[LAG, i]
    if io[STEPS, 0] == 0.0:
        before = asked
    io[LAGGED, i] = before + share * (asked - before)
    return float(asked + (before - asked) * share / -np.log(1.0 - share))


# What is called for every joint takes numbers, not arrays: handing an array to a kernel that the compiler
# does not inline costs more than these compute.


@kernel
def _limited(asked: float, v: float, limit: float, driving: float, fastest: float) -> float:
    """Cut a torque to what limits and ``fastest``, the speed limit, leave; braking keeps the limit."""
    if np.isfinite(fastest):
        share = (fastest - abs(v)) / (SPEED_FOLDBACK * fastest)
        if share < 1.0:
            # without a torque limit the torque asked for is itself what folds back
            whole = driving if np.isfinite(driving) else abs(asked)
            driving = whole * max(share, 0.0)
    upper = driving if v >= 0.0 else limit
    lower = driving if v <= 0.0 else limit
    return float(min(max(asked, -lower), upper))


@kernel
def _on_line(stall: float, no_load: float, speed: float) -> float:
    """Return the torque that the motor's torque-speed line leaves at ``speed``; inf without one."""
    if np.isfinite(no_load):
        return float(stall * max(1.0 - speed / no_load, 0.0))
    return stall

"""From the engine's state to the machine's, and from there to what the law senses; numba kernels."""

from __future__ import annotations

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.arm.kernel import kernel
from rigbench.laws.law import Q, V
from rigbench.rig.rows import (
    BOUND,
    CONTROL_PERIOD,
    ENCODER_OFFSET,
    ENCODER_STEP,
    ERROR,
    LAST_SENSED,
    LINK_ENCODER,
    LOWER,
    Q_ENGINE,
    Q_ROTOR,
    Q_TRUE,
    STEP,
    STEPS,
    STIFFNESS,
    UPPER,
    V_ENGINE,
    V_NEXT,
    V_ROTOR,
    V_TRUE,
    VELOCITY_FILTER,
)

__all__ = ["BEYOND_BOUNDS", "HIT_STOP", "NOT_FINITE", "OK", "read_state", "sense"]

OK, NOT_FINITE, BEYOND_BOUNDS, HIT_STOP = range(4)


@kernel
def read_state(machine: Floats, io: Floats) -> int:
    """Turn the engine's state into the machine's: q = q_engine - dt/2 v. Return a status.

    Also keeps the largest difference between the velocity that the drive foresaw and the engine's.
    """
    half = 0.5 * machine[STEP, 0]
    status = OK
    for i in range(io.shape[1]):
        v = io[V_ENGINE, i]
        q = io[Q_ENGINE, i] - half * v
        io[Q_TRUE, i], io[V_TRUE, i] = q, v
        if not (np.isfinite(q) and np.isfinite(v)):
            return NOT_FINITE
        error = abs(v - io[V_NEXT, i])
        io[ERROR, 0] = max(io[ERROR, 0], error)
        if abs(v) > machine[BOUND, i]:
            status = BEYOND_BOUNDS
        elif status == OK and (q < machine[LOWER, i] or q > machine[UPPER, i]):
            status = HIT_STOP
    return status


@kernel
def sense(machine: Floats, io: Floats, noise: Floats) -> None:
    """Fill what the law sees, ``io[Q]`` and ``io[V]``, from the true state.

    Position: the rotor's on an elastic joint (unless encoders sit on the links), plus the encoder's
    offset and ``noise`` (n,) [rad], rounded to counts. Velocity:
    exact, or the sensed positions' difference over the control period through a first-order filter.
    """
    half, filtered = 0.5 * machine[STEP, 0], machine[VELOCITY_FILTER, 0]
    for i in range(io.shape[1]):
        q, v = io[Q_TRUE, i], io[V_TRUE, i]
        if machine[STIFFNESS, i] > 0.0 and machine[LINK_ENCODER, 0] == 0.0:
            q, v = io[Q_ROTOR, i] - half * io[V_ROTOR, i], io[V_ROTOR, i]
        q += machine[ENCODER_OFFSET, i] + noise[i]
        if machine[ENCODER_STEP, i] > 0.0:
            q = np.round(q / machine[ENCODER_STEP, i]) * machine[ENCODER_STEP, i]
        io[Q, i] = q
        if filtered > 0.0:
            if io[STEPS, 0] == 0.0:
                io[LAST_SENSED, i], io[V, i] = q, 0.0
            difference = (q - io[LAST_SENSED, i]) / machine[CONTROL_PERIOD, 0]
            io[V, i] += filtered * (difference - io[V, i])
            io[LAST_SENSED, i] = q
        else:
            io[V, i] = v

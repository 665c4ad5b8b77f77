"""What happens around the law in one physics step, as two kernels: few calls, since each costs."""

from __future__ import annotations

from rigbench.arm.arm import Floats
from rigbench.arm.kernel import kernel
from rigbench.laws.law import A_REF, CLOCK, Q_REF, V_REF
from rigbench.rig.drive import step_drive
from rigbench.rig.rows import LIMITED, MOTOR, Q_TRUE, V_TRUE
from rigbench.rig.sensing import OK, read_state, sense

__all__ = [
    "LOGGED", "NOISE", "RECORD_ROWS", "TORQUE_NOT_FINITE", "WANTED", "begin_step", "end_step",
]  # fmt: skip

TORQUE_NOT_FINITE = -1
"""The status of a step whose law gave no torque; beside those of :mod:`rigbench.rig.sensing`."""

WANTED, NOISE, LOGGED, RECORD_ROWS = 0, 3, 4, 8
"""Rows of one tick in a run's record, (N, 8, n): the reference's three; the noise on sensed positions
[rad]; what is logged, true position and velocity, motor torque at the joint, 1 where limited."""


@kernel
def begin_step(machine: Floats, io: Floats, record: Floats, tick: int, t: float) -> int:
    """Read the engine's state; return a status.

    Where the law is about to be called, at ``tick`` of 0 or more and time ``t`` [s], also fill what it
    sees: the reference of that tick and the sensed state.
    """
    status = read_state(machine, io)
    if tick >= 0:
        now = record[tick]
        io[CLOCK, 0] = t
        for i in range(io.shape[1]):
            io[Q_REF, i] = now[WANTED, i]
            io[V_REF, i] = now[WANTED + 1, i]
            io[A_REF, i] = now[WANTED + 2, i]
        sense(machine, io, now[NOISE])
    return status


@kernel
def end_step(chain: Floats, machine: Floats, io: Floats, record: Floats, tick: int) -> int:
    """Take the law's torque through the drive; log the tick unless ``tick`` is below 0.

    Returns OK, or TORQUE_NOT_FINITE if the law's torque is not.
    """
    if not step_drive(chain, machine, io):
        return TORQUE_NOT_FINITE
    if tick >= 0:
        now = record[tick]
        for i in range(io.shape[1]):
            now[LOGGED, i] = io[Q_TRUE, i]
            now[LOGGED + 1, i] = io[V_TRUE, i]
            now[LOGGED + 2, i] = io[MOTOR, i]
            now[LOGGED + 3, i] = io[LIMITED, i]
    return OK

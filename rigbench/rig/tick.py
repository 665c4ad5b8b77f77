"""What happens around the law in one physics step, as two kernels: few calls, since each costs."""

from __future__ import annotations

from rigbench.arm.arm import Floats
from rigbench.arm.kernel import kernel
from rigbench.laws.law import A_REF, Q_REF, V_REF
from rigbench.rig.drive import step_drive
from rigbench.rig.rows import LIMITED, MOTOR, Q_TRUE, V_TRUE
from rigbench.rig.sensing import read_state, sense

__all__ = ["LOG_ROWS", "begin_step", "end_step"]

LOG_ROWS = 4
"""Rows of one tick in the log: true position and velocity, motor torque at the joint, 1 where limited."""


@kernel
def begin_step(machine: Floats, io: Floats, reference: Floats, noise: Floats, tick: int) -> int:
    """Read the engine's state; return a status.

    Where the law is about to be called, at ``tick`` of 0 or more, also fill what it sees: the reference
    (N, 3, n) of that tick and the sensed state (``noise`` as in :func:`rigbench.rig.sensing.sense`).
    """
    status = read_state(machine, io)
    if tick >= 0:
        for i in range(io.shape[1]):
            io[Q_REF, i] = reference[tick, 0, i]
            io[V_REF, i] = reference[tick, 1, i]
            io[A_REF, i] = reference[tick, 2, i]
        sense(machine, io, noise, tick)
    return status


@kernel
def end_step(chain: Floats, machine: Floats, io: Floats, log: Floats, tick: int) -> bool:
    """Take the law's torque through the drive; log the tick (N, 4, n) unless ``tick`` is below 0.

    Returns False if the torque is not finite.
    """
    if not step_drive(chain, machine, io):
        return False
    if tick >= 0:
        for i in range(io.shape[1]):
            log[tick, 0, i] = io[Q_TRUE, i]
            log[tick, 1, i] = io[V_TRUE, i]
            log[tick, 2, i] = io[MOTOR, i]
            log[tick, 3, i] = io[LIMITED, i]
    return True

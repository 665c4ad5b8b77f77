"""Compile the kernels that every run needs, before workers start."""

from __future__ import annotations

import numpy as np

from rigbench.arm.arm import Arm, Drives
from rigbench.arm.dynamics import tool_path
from rigbench.laws.model import Model
from rigbench.rig.rows import DELAYED, machine_array
from rigbench.rig.tick import RECORD_ROWS, begin_step, end_step

__all__ = ["warm_up"]

GRAVITY = (0.0, 0.0, -9.81)


def warm_up() -> None:
    """Call the rig's own kernels once, on an arm of one joint; they are then compiled, here and on disk.

    Ten seconds or so when nothing is cached, a fraction of one otherwise. Those of a law are compiled as it
    is first run: nobody waits for the laws that an experiment doesn't have.
    """
    arm = _one_joint()
    model, io, machine = Model(arm, GRAVITY), np.zeros((DELAYED, 1)), machine_array(arm, 1e-3)
    record = np.zeros((1, RECORD_ROWS, 1))
    begin_step(machine, io, record, 0, 0.0)
    end_step(model.chain, machine, io, record, 0)
    tool_path(model.chain, np.zeros((1, 1)))
    model.mass_matrix(np.zeros(1))


def _one_joint() -> Arm:
    zero, one = np.zeros(1), np.ones(1)
    return Arm(
        name="one joint",
        joints=("joint",),
        links=("link",),
        kinds=zero,
        rotation=np.eye(3)[None],
        position=np.zeros((1, 3)),
        axis=np.array([[0.0, 0.0, 1.0]]),
        parameters=np.array([[1.0, 0, 0, 0, 1, 0, 1, 0, 0, 1]]),
        tool_rotation=np.eye(3),
        tool_position=np.zeros(3),
        lower=-one,
        upper=one,
        drives=Drives.ideal(1),
    )

"""Compile every kernel that a run needs, before workers start."""

from __future__ import annotations

import contextlib

import numpy as np

from rigbench.arm.arm import Arm, Drives
from rigbench.arm.dynamics import tool_path
from rigbench.laws.law import SEES, Setup
from rigbench.laws.model import Model
from rigbench.laws.registry import registered
from rigbench.rig.fused import NOT_DUE, fused
from rigbench.rig.rows import DELAYED, machine_array
from rigbench.rig.tick import RECORD_ROWS, begin_step, end_step

__all__ = ["warm_up"]


def warm_up() -> None:
    """Call every kernel once on an arm of one joint; they are then compiled, here and on disk.

    Seconds when nothing is cached, a fraction of one otherwise. A law whose kernels fail here is left
    to fail in its own runs, where the reason is kept.
    """
    arm = _one_joint()
    gravity = (0.0, 0.0, -9.81)
    model, io, machine = Model(arm, gravity), np.zeros((DELAYED, 1)), machine_array(arm, 1e-3)
    record = np.zeros((1, RECORD_ROWS, 1))
    begin_step(machine, io, record, 0, 0.0)
    end_step(model.chain, machine, io, record, 0)
    tool_path(model.chain, np.zeros((1, 1)))
    limits = arm.drives.torque_limit, arm.drives.speed_limit
    setup = Setup(arm.joints, model, 1000.0, np.zeros(1), *limits)
    model.inverse_dynamics(*np.zeros((3, 1)))
    for entry in registered().laws.values():
        with contextlib.suppress(Exception):
            law = entry.cls()
            law.start(setup)
            compiled = law.compiled()
            if compiled is not None:
                seen, held = io[:SEES], np.zeros(compiled.held_size)
                own = np.ascontiguousarray(compiled.own)
                if compiled.model_term is not None:
                    compiled.model_term(seen, held, model.chain, own)
                compiled.torque(seen, held, model.chain, own)
                step = fused(compiled)
                if step is not None:
                    chains, bench = np.stack([model.chain, model.chain]), np.vstack([machine, io])
                    step(chains, bench, record, held, own, 0, 0.0, NOT_DUE, 0)


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

"""A plant in the engine behind its drive, without a law."""

from __future__ import annotations

import numpy as np
import pytest

from rigbench.arm import dynamics
from rigbench.laws.law import TAU, Q, V
from rigbench.rig.drive import step_drive
from rigbench.rig.engine import Engine
from rigbench.rig.rows import (
    DELAYED,
    Q_ENGINE,
    Q_ROTOR,
    Q_TRUE,
    TAU_ENGINE,
    V_ENGINE,
    V_NEXT,
    V_ROTOR,
    V_TRUE,
    delay_rows,
    machine_array,
)
from rigbench.rig.sensing import read_state, sense

GRAVITY = (0.0, 0.0, -9.81)


@pytest.fixture(scope="module")
def engine():
    made = Engine()
    yield made
    made.close()


class Bench:
    """Torque in, state out. ``timing`` goes to machine_array (delay, velocity_corner_hz ...)."""

    def __init__(self, engine, arm, q0, v0=None, dt=1e-3, gravity=GRAVITY, **timing):
        self.engine, self.arm, self.dt = engine, arm, dt
        v0 = np.zeros(arm.n) if v0 is None else np.asarray(v0, float)
        q0 = np.asarray(q0, float)
        self.io = np.zeros((DELAYED + delay_rows(timing.get("delay", 0.0) / dt), arm.n))
        self.io[V_NEXT] = self.io[V_ROTOR] = v0
        self.chain, self.machine = arm.chain(gravity), machine_array(arm, dt, **timing)
        self.io[Q_ROTOR] = q0 + dt / 2 * v0 + dynamics.gravity_torque(self.chain, q0) / arm.drives.stiffness
        engine.load(arm, q0 + dt / 2 * v0, v0, gravity, dt)
        self.status = self.read()

    def read(self):
        states = self.engine.read()
        self.io[Q_ENGINE], self.io[V_ENGINE] = [s[0] for s in states], [s[1] for s in states]
        return read_state(self.machine, self.io)

    def sensed(self, noise=None):
        """What a law would see now: position and velocity."""
        sense(self.machine, self.io, np.zeros(self.arm.n) if noise is None else noise)
        return self.io[Q].copy(), self.io[V].copy()

    def step(self, torque):
        self.io[TAU] = torque
        assert step_drive(self.chain, self.machine, self.io)
        self.engine.apply(self.io[TAU_ENGINE].tolist())
        self.engine.step()
        self.status = self.read()
        return self.io[Q_TRUE].copy(), self.io[V_TRUE].copy()


@pytest.fixture
def bench(engine):
    """Build a Bench in the module's engine: bench(arm, q0, v0, dt=..., gravity=...)."""

    def build(arm, q0, v0=None, **given):
        return Bench(engine, arm, q0, v0, **given)

    return build

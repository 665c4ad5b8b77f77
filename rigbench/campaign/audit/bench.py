"""A plant in the engine behind its drive, without a law: torque in, states out."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from rigbench.arm.arm import Arm, Floats
from rigbench.arm.dynamics import forward_kinematics, gravity_torque, mass_matrix
from rigbench.laws.law import TAU
from rigbench.rig.drive import step_drive
from rigbench.rig.engine import Engine
from rigbench.rig.rows import (
    DELAYED,
    ERROR,
    Q_ENGINE,
    Q_ROTOR,
    Q_TRUE,
    TAU_ENGINE,
    V_ENGINE,
    V_NEXT,
    V_ROTOR,
    V_TRUE,
    machine_array,
)
from rigbench.rig.sensing import read_state

__all__ = ["Path", "energies", "momenta", "watch"]


@dataclass(frozen=True, eq=False)
class Path:
    """States from the start on, step by step; a stiff joint's rotor (``r``, ``w``) moves as its link does."""

    t: Floats  # (N,) [s]
    q: Floats  # (N, n)
    v: Floats
    r: Floats
    w: Floats
    residual: float  # [rad/s]


def watch(
    engine: Engine, arm: Arm, start: tuple[Floats, Floats], torque: Floats, hz: float, seconds: float,
    gravity: tuple[float, float, float],
) -> Path:  # fmt: skip
    """Let the arm go from position and velocity ``start`` under a constant motor torque (n,) [N m].

    Springs start in balance with gravity. Stops where the state is no longer finite.
    """
    q0, v0 = start
    dt, count = 1.0 / hz, round(seconds * hz)
    chain, machine = arm.chain(gravity), machine_array(arm, dt)
    io = np.zeros((DELAYED, arm.n))
    io[V_NEXT] = io[V_ROTOR] = v0
    io[Q_ROTOR] = q0 + dt / 2 * v0 + gravity_torque(chain, q0) / arm.drives.stiffness
    engine.load(arm, q0 + dt / 2 * v0, v0, gravity, dt)
    elastic = np.isfinite(arm.drives.stiffness)
    found = np.empty((count + 1, 4, arm.n))
    for k in range(count + 1):
        states = engine.read()
        io[Q_ENGINE], io[V_ENGINE] = [s[0] for s in states], [s[1] for s in states]
        read_state(machine, io)
        found[k, 0], found[k, 1] = io[Q_TRUE], io[V_TRUE]
        found[k, 2] = np.where(elastic, io[Q_ROTOR] - dt / 2 * io[V_ROTOR], io[Q_TRUE])
        found[k, 3] = np.where(elastic, io[V_ROTOR], io[V_TRUE])
        if not np.isfinite(found[k]).all():
            found = found[:k]
            break
        if k < count:
            io[TAU] = torque
            step_drive(chain, machine, io)
            engine.apply(io[TAU_ENGINE].tolist())
            engine.step()
    q, v, r, w = found.transpose(1, 0, 2)
    return Path(np.arange(len(q), dtype=np.float64) * dt, q, v, r, w, float(io[ERROR, 0]))


def energies(arm: Arm, gravity: tuple[float, float, float], path: Path) -> tuple[Floats, Floats]:
    """Return kinetic and whole energy (N,) [J] of links, rotors and springs.

    1/2 v' M v + 1/2 w' Jr w, and with it -g . sum(m p + R m c) + 1/2 K (r - q)^2.
    """
    chain, drives = arm.chain(gravity), arm.drives
    stiffness = np.where(np.isfinite(drives.stiffness), drives.stiffness, 0.0)
    kinetic, whole = np.empty(len(path.t)), np.empty(len(path.t))
    mass, first = arm.parameters[:, 0], arm.parameters[:, 1:4]
    for k, (q, v, r, w) in enumerate(zip(path.q, path.v, path.r, path.w, strict=True)):
        poses = forward_kinematics(chain, q)[:-1]
        rotations, positions = poses[:, :9].reshape(-1, 3, 3), poses[:, 9:]
        moment = mass @ positions + np.einsum("ijk,ik->j", rotations, first)
        kinetic[k] = 0.5 * (v @ mass_matrix(chain, q) @ v + drives.reflected @ w**2)
        whole[k] = kinetic[k] - np.array(gravity) @ moment + 0.5 * stiffness @ (r - q) ** 2
    return kinetic, whole


def momenta(arm: Arm, gravity: tuple[float, float, float], path: Path) -> tuple[Floats, float]:
    """Return the momentum (N,) that belongs to the first joint, and the largest size of its parts.

    p1 = sum over j of M_1j v_j + Jr_1 w_1: about the joint's axis [N m s], or along it [N s].
    """
    chain = arm.chain(gravity)
    parts = np.array([mass_matrix(chain, q)[0] * v for q, v in zip(path.q, path.v, strict=True)])
    parts[:, 0] += arm.drives.reflected[0] * path.w[:, 0]
    return parts.sum(axis=1), float(np.abs(parts).sum(axis=1).max())

"""The drive and the second-order reading of the engine, as a numba kernel.

Symbols: M(q) link inertia, Jr reflected rotor inertia [kg m^2], h(q, v) Coriolis, centripetal and
gravity torque [N m], B viscous friction [N m s/rad], F the size of dry friction [N m], dt the physics
step [s]. The engine knows links alone, so every step works out the velocity v+ at the step's end from

    (M + Jr) (v+ - v)/dt + h + B (v + v+)/2 + f = tau,    |f_i| <= F_i, f_i = F_i sign(v+_i) if v+_i != 0

and hands the engine the torque that makes its own forward dynamics arrive at the same v+.

The engine's integrator is semi-implicit Euler: its position runs half a step ahead of its velocity.
Read that way (a leapfrog), it is of second order: start at q0 + dt/2 v0, take q = q_engine - dt/2 v for
law and log alike, and take h at the velocity of the step's middle, v + dt/2 a, with a from the step
before. Dry friction's stops and starts fall on steps and stay of first order.

Elastic joints have a rotor of their own, with position r (as staggered as the engine's) and velocity w;
motor torque and all friction act on it, and the link feels the spring alone. In relative position
d = r - q_engine and velocity D = w - v the spring's torque over a step is

    K (d + dt/4 (D+ - D)) + C (D + D+)/2,

the leapfrog's implicit form (Newmark with beta 1/4), stable whatever K and of second order.

LuGre's bristles z (Canudas de Wit, Olsson, Astrom, Lischinsky 1995), with |v| of the step's start in
their relaxation: z+ = (z + dt v+)/(1 + dt sigma0 |v|/F), torque sigma0 z+ + sigma1 (z+ - z)/dt: linear in
v+, so it enters the inertia and the momentum as friction of its own, without a box.

Contacts push the links within the engine's step, out of the drive's sight. What they gave the joints
beyond the torque e that was foreseen, M (v - v+)/dt with v the speed reached, is added to e, which stands
beside tau in the next step. So a steady load acts on rotors and dry friction as on the links. Of a blow the
rotors' share passes over the next (M + Jr)/M steps or so, whole but for one step's torque: what rotors
gain for nothing, Jr (v - v+) a step, adds up to dt Jr/M times what e has changed by. It is stable, since
in the metric of M rotors answer a push by less than all of it, and what is touched by no more.

Left out: the rotor's gyroscopic coupling to the other links, of order 1/G.
"""

from __future__ import annotations

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.arm.dynamics import composite_inertia, newton_euler, place
from rigbench.arm.kernel import kernel
from rigbench.laws.law import TAU
from rigbench.rig.friction import solve_friction
from rigbench.rig.rows import (
    A_LAST,
    BRISTLE,
    BRISTLE_DAMPING,
    BRISTLE_STIFFNESS,
    CARRIED,
    CONTACTS,
    COULOMB,
    DRY,
    ENERGY,
    EXTERNAL,
    GEAR_LOSS,
    MOTOR,
    Q_ENGINE,
    Q_ROTOR,
    REFLECTED,
    SLIDE,
    SPRING_DAMPING,
    STATIC,
    STEP,
    STEPS,
    STIFFNESS,
    STRIBECK,
    TAU_ENGINE,
    TORQUE_PEAK,
    V_NEXT,
    V_ROTOR,
    V_TRUE,
    VISCOUS,
)
from rigbench.rig.torque_path import motor_torques

__all__ = ["step_drive"]

MOVING = 1e-9
"""Speed [rad/s] above which the last velocity, not the last verdict, is the first guess at who slides."""


@kernel
def step_drive(chain: Floats, machine: Floats, io: Floats) -> bool:
    """Take the commanded torque ``io[TAU]`` through the drive; fill ``io[TAU_ENGINE]`` for one step.

    ``chain`` is the plant's. Returns False, and does nothing, if the command is not finite.
    """
    n = io.shape[1]
    dt = machine[STEP, 0]
    elastic = 0
    for i in range(n):
        if not np.isfinite(io[TAU, i]):
            return False
        if machine[STIFFNESS, i] > 0.0:
            elastic += 1
    size = n + elastic
    placed, mass, vectors = np.empty((n, 12)), np.zeros((size, size)), np.empty((7, size))
    h_engine, h_middle, middle = vectors[0, :n], vectors[1, :n], vectors[2, :n]
    momentum, dry, v_next, f = vectors[3], vectors[4], vectors[5], vectors[6]
    slide = np.ones(size)
    v = io[V_TRUE]
    motor_torques(machine, io)
    for i in range(n):
        middle[i] = v[i] + 0.5 * dt * io[A_LAST, i]
    place(chain, io[Q_ENGINE], placed)
    composite_inertia(chain, placed, mass)
    newton_euler(chain, placed, v, v, False, h_engine)
    newton_euler(chain, placed, middle, middle, False, h_middle)
    if machine[CONTACTS, 0] > 0.0:
        _feel_contacts(io, mass, n, dt)
    for i in range(n):
        if machine[STIFFNESS, i] == 0.0:
            mass[i, i] += machine[REFLECTED, i]
    for i in range(n):
        total = dt * (io[EXTERNAL, i] - h_middle[i])
        for j in range(n):
            total += mass[i, j] * v[j]
        momentum[i] = total
        dry[i] = 0.0
        if machine[STIFFNESS, i] == 0.0:
            momentum[i] += dt * io[MOTOR, i]
    if elastic > 0:
        _join_springs(machine, io, mass, momentum)
    _join_friction(machine, io, mass, momentum, dry, slide)
    solve_friction(mass, momentum, dry, dt, slide, v_next, f)
    _keep(machine, io, slide, f, v_next)
    for i in range(n):
        io[TAU_ENGINE, i] += h_engine[i] - h_middle[i]
    io[STEPS, 0] += 1.0
    return True


@kernel
def _feel_contacts(io: Floats, mass: Floats, n: int, dt: float) -> None:
    """Add to ``io[EXTERNAL]`` what contacts gave the joints beyond what was foreseen for the last step."""
    for i in range(n):
        for j in range(n):
            io[EXTERNAL, i] += mass[i, j] * (io[V_TRUE, j] - io[V_NEXT, j]) / dt


@kernel
def _join_springs(machine: Floats, io: Floats, mass: Floats, momentum: Floats) -> None:
    """Put the rotors and springs of elastic joints into the inertia and the momentum."""
    dt, rotor = machine[STEP, 0], io.shape[1]
    for i in range(io.shape[1]):
        if machine[STIFFNESS, i] > 0.0:
            stiff = 0.25 * dt * dt * machine[STIFFNESS, i]
            damped = 0.5 * dt * machine[SPRING_DAMPING, i]
            apart = io[V_ROTOR, i] - io[V_TRUE, i]
            stretch = io[Q_ROTOR, i] - io[Q_ENGINE, i]
            push = dt * machine[STIFFNESS, i] * stretch - (stiff - damped) * apart
            mass[i, i] += stiff + damped
            mass[i, rotor] = mass[rotor, i] = -(stiff + damped)
            mass[rotor, rotor] = machine[REFLECTED, i] + stiff + damped
            momentum[i] += push
            momentum[rotor] = machine[REFLECTED, i] * io[V_ROTOR, i] + dt * io[MOTOR, i] - push
            rotor += 1


@kernel
def _dry_size(coulomb: float, static: float, stribeck: float, gear_loss: float, v: float) -> float:
    """Return the size of a joint's dry friction [N m]: Stribeck's curve, plus the gear's loss by load."""
    size = coulomb + gear_loss
    if static != coulomb:
        slip = v / stribeck
        size += (static - coulomb) * np.exp(-slip * slip)
    return size


@kernel
def _join_friction(
    machine: Floats, io: Floats, mass: Floats, momentum: Floats, dry: Floats, slide: Floats
) -> None:
    """Put friction on the links, or on the rotors of elastic joints, where it acts."""
    dt, rotor = machine[STEP, 0], io.shape[1]
    for i in range(io.shape[1]):
        at, v = i, io[V_TRUE, i]
        if machine[STIFFNESS, i] > 0.0:
            at, v = rotor, io[V_ROTOR, i]
            rotor += 1
        drag = 0.5 * dt * machine[VISCOUS, i]
        momentum[at] -= drag * v
        mass[at, at] += drag
        carried = io[MOTOR, i] if io[STEPS, 0] == 0.0 else io[CARRIED, i]
        loss = machine[GEAR_LOSS, i] * abs(carried)
        size = _dry_size(machine[COULOMB, i], machine[STATIC, i], machine[STRIBECK, i], loss, v)
        io[DRY, i] = size
        if machine[BRISTLE_STIFFNESS, i] > 0.0:
            dry[at] = 0.0
            stiff, damped = machine[BRISTLE_STIFFNESS, i], machine[BRISTLE_DAMPING, i]
            relaxed = 1.0 + dt * stiff * abs(v) / size
            mass[at, at] += dt * (stiff * dt + damped) / relaxed
            z = io[BRISTLE, i]
            momentum[at] -= dt * ((stiff + damped / dt) * z / relaxed - damped * z / dt)
        else:
            dry[at] = size
            if abs(v) > MOVING:
                slide[at] = np.sign(v)
            else:
                slide[at] = io[SLIDE, i]


@kernel
def _keep(machine: Floats, io: Floats, slide: Floats, f: Floats, v_next: Floats) -> None:
    """Keep what the next step starts from; fill the torque on the links, of motor, spring and friction."""
    n, dt = io.shape[1], machine[STEP, 0]
    rotor = n
    for i in range(n):
        v = io[V_TRUE, i]
        a = (v_next[i] - v) / dt
        at, motor, motor_next = i, v, v_next[i]
        if machine[STIFFNESS, i] > 0.0:
            at, motor, motor_next = rotor, io[V_ROTOR, i], v_next[rotor]
            rotor += 1
        turning = 0.5 * (motor + motor_next)
        io[SLIDE, i] = slide[at]
        if machine[BRISTLE_STIFFNESS, i] > 0.0:
            stiff, z = machine[BRISTLE_STIFFNESS, i], io[BRISTLE, i]
            z_next = (z + dt * motor_next) / (1.0 + dt * stiff * abs(motor) / io[DRY, i])
            f[at] = stiff * z_next + machine[BRISTLE_DAMPING, i] * (z_next - z) / dt
            io[BRISTLE, i] = z_next
        if at == i:
            carried = io[MOTOR, i] - machine[REFLECTED, i] * a
            io[TAU_ENGINE, i] = carried - machine[VISCOUS, i] * turning - f[i]
        else:
            carried = _spring_torque(machine, io, i, v_next[i], motor_next)
            io[TAU_ENGINE, i] = carried
            io[V_ROTOR, i] = motor_next
            io[Q_ROTOR, i] += dt * motor_next
        io[A_LAST, i], io[V_NEXT, i], io[CARRIED, i] = a, v_next[i], carried
        io[ENERGY, i] += dt * max(io[MOTOR, i] * turning, 0.0)
        io[TORQUE_PEAK, i] = max(io[TORQUE_PEAK, i], abs(io[MOTOR, i]))


@kernel
def _spring_torque(machine: Floats, io: Floats, i: int, v_next: float, w_next: float) -> float:
    """Return the torque [N m] that the spring of joint i gives the link over this step."""
    dt = machine[STEP, 0]
    before, after = io[V_ROTOR, i] - io[V_TRUE, i], w_next - v_next
    stretch = io[Q_ROTOR, i] - io[Q_ENGINE, i] + 0.25 * dt * (after - before)
    return float(machine[STIFFNESS, i] * stretch + 0.5 * machine[SPRING_DAMPING, i] * (before + after))

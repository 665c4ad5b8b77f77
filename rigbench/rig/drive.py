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
from rigbench.rig.torque_path import motor_torque

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
    for i in range(n):
        motor_torque(machine, io, i)
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
    rotor = n
    for i in range(n):
        if machine[STIFFNESS, i] > 0.0:
            _join_spring(machine, io, mass, momentum, i, rotor)
            _join_friction(machine, io, mass, momentum, dry, slide, i, rotor)
            rotor += 1
        else:
            momentum[i] += dt * io[MOTOR, i]
            _join_friction(machine, io, mass, momentum, dry, slide, i, i)
    solve_friction(mass, momentum, dry, dt, slide, v_next, f)
    rotor = n
    for i in range(n):
        a = (v_next[i] - v[i]) / dt
        io[A_LAST, i], io[V_NEXT, i] = a, v_next[i]
        if machine[STIFFNESS, i] > 0.0:
            _keep_friction(machine, io, slide, f, i, rotor, io[V_ROTOR, i], v_next[rotor])
            carried = _spring_torque(machine, io, i, v_next[i], v_next[rotor])
            turning = 0.5 * (io[V_ROTOR, i] + v_next[rotor])
            io[V_ROTOR, i] = v_next[rotor]
            io[Q_ROTOR, i] += dt * v_next[rotor]
            io[TAU_ENGINE, i] = carried + h_engine[i] - h_middle[i]
            rotor += 1
        else:
            _keep_friction(machine, io, slide, f, i, i, v[i], v_next[i])
            turning = 0.5 * (v[i] + v_next[i])
            drag = machine[VISCOUS, i] * turning
            carried = io[MOTOR, i] - machine[REFLECTED, i] * a
            io[TAU_ENGINE, i] = carried - drag - f[i] + h_engine[i] - h_middle[i]
        io[CARRIED, i] = carried
        io[ENERGY, i] += dt * max(io[MOTOR, i] * turning, 0.0)
        io[TORQUE_PEAK, i] = max(io[TORQUE_PEAK, i], abs(io[MOTOR, i]))
    io[STEPS, 0] += 1.0
    return True


@kernel
def _feel_contacts(io: Floats, mass: Floats, n: int, dt: float) -> None:
    """Add to ``io[EXTERNAL]`` what contacts gave the joints beyond what was foreseen for the last step."""
    for i in range(n):
        for j in range(n):
            io[EXTERNAL, i] += mass[i, j] * (io[V_TRUE, j] - io[V_NEXT, j]) / dt


@kernel
def _join_spring(machine: Floats, io: Floats, mass: Floats, momentum: Floats, i: int, rotor: int) -> None:
    """Put the rotor and the spring of elastic joint i into the inertia and the momentum."""
    dt = machine[STEP, 0]
    stiff = 0.25 * dt * dt * machine[STIFFNESS, i]
    damped = 0.5 * dt * machine[SPRING_DAMPING, i]
    apart = io[V_ROTOR, i] - io[V_TRUE, i]
    push = dt * machine[STIFFNESS, i] * (io[Q_ROTOR, i] - io[Q_ENGINE, i]) - (stiff - damped) * apart
    mass[i, i] += stiff + damped
    mass[i, rotor] = mass[rotor, i] = -(stiff + damped)
    mass[rotor, rotor] = machine[REFLECTED, i] + stiff + damped
    momentum[i] += push
    momentum[rotor] = machine[REFLECTED, i] * io[V_ROTOR, i] + dt * io[MOTOR, i] - push


@kernel
def _spring_torque(machine: Floats, io: Floats, i: int, v_next: float, w_next: float) -> float:
    """Return the torque [N m] that the spring of joint i gives the link over this step."""
    dt = machine[STEP, 0]
    before, after = io[V_ROTOR, i] - io[V_TRUE, i], w_next - v_next
    stretch = io[Q_ROTOR, i] - io[Q_ENGINE, i] + 0.25 * dt * (after - before)
    return float(machine[STIFFNESS, i] * stretch + 0.5 * machine[SPRING_DAMPING, i] * (before + after))


@kernel
def _dry_size(machine: Floats, io: Floats, i: int, speed: float) -> float:
    """Return the size of joint i's dry friction [N m]: Stribeck's curve, plus the gear's loss by load."""
    size = float(machine[COULOMB, i])
    if machine[STATIC, i] != machine[COULOMB, i]:
        slip = speed / machine[STRIBECK, i]
        size += (machine[STATIC, i] - machine[COULOMB, i]) * np.exp(-slip * slip)
    if machine[GEAR_LOSS, i] > 0.0:
        carried = io[MOTOR, i] if io[STEPS, 0] == 0.0 else io[CARRIED, i]
        size += machine[GEAR_LOSS, i] * abs(carried)
    return size


@kernel
def _join_friction(
    machine: Floats, io: Floats, mass: Floats, momentum: Floats, dry: Floats, slide: Floats, i: int, at: int
) -> None:
    """Put joint i's friction on coordinate ``at``: the link's, or the rotor's of an elastic joint."""
    dt = machine[STEP, 0]
    speed = io[V_TRUE, i] if at == i else io[V_ROTOR, i]
    momentum[at] -= 0.5 * dt * machine[VISCOUS, i] * speed
    mass[at, at] += 0.5 * dt * machine[VISCOUS, i]
    size = _dry_size(machine, io, i, speed)
    if machine[BRISTLE_STIFFNESS, i] > 0.0:
        dry[at] = 0.0
        stiff, damped = machine[BRISTLE_STIFFNESS, i], machine[BRISTLE_DAMPING, i]
        relaxed = 1.0 + dt * stiff * abs(speed) / size
        mass[at, at] += dt * (stiff * dt + damped) / relaxed
        z = io[BRISTLE, i]
        momentum[at] -= dt * ((stiff + damped / dt) * z / relaxed - damped * z / dt)
        return
    dry[at] = size
    if speed > MOVING:
        slide[at] = 1.0
    elif speed < -MOVING:
        slide[at] = -1.0
    else:
        slide[at] = io[SLIDE, i]


@kernel
def _keep_friction(
    machine: Floats, io: Floats, slide: Floats, f: Floats, i: int, at: int, speed: float, speed_next: float
) -> None:
    """Keep joint i's stick or slide for the next step; let its bristles follow, and fill their torque."""
    io[SLIDE, i] = slide[at]
    if machine[BRISTLE_STIFFNESS, i] > 0.0:
        dt, z = machine[STEP, 0], io[BRISTLE, i]
        stiff = machine[BRISTLE_STIFFNESS, i]
        z_next = (z + dt * speed_next) / (1.0 + dt * stiff * abs(speed) / _dry_size(machine, io, i, speed))
        f[at] = stiff * z_next + machine[BRISTLE_DAMPING, i] * (z_next - z) / dt
        io[BRISTLE, i] = z_next

"""The drive and the second-order reading of the engine, as numba kernels.

Symbols: M(q) link inertia, Jr reflected rotor inertia [kg m^2], h(q, v) Coriolis, centripetal and
gravity torque [N m], B viscous friction [N m s/rad], F the size of dry friction [N m], dt the physics
step [s]. The engine knows links alone, so every step works out the velocity v+ at the step's end from

    (M + Jr) (v+ - v)/dt + h + B (v + v+)/2 + f = tau,    |f_i| <= F_i, f_i = F_i sign(v+_i) if v+_i != 0

and hands the engine the torque that makes its own forward dynamics arrive at the same v+.

The engine's integrator is semi-implicit Euler: its position runs half a step ahead of its velocity.
Read that way (a leapfrog), it is of second order: start at q0 + dt/2 v0, take q = q_engine - dt/2 v for
law and log alike, and take h at the velocity of the step's middle, v + dt/2 a, with a from the step
before. Dry friction's stops and starts fall on steps and stay of first order.

Left out: the rotor's gyroscopic coupling to the other links, of order 1/G.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from rigbench.arm.arm import Arm, Floats
from rigbench.arm.dynamics import composite_inertia, newton_euler, place
from rigbench.arm.kernel import kernel
from rigbench.laws.law import TAU, Q, V

__all__ = [
    "BEYOND_BOUNDS",
    "HIT_STOP",
    "LIMITED",
    "MOTOR",
    "NOT_FINITE",
    "OK",
    "Q_ENGINE",
    "ROWS",
    "TAU_ENGINE",
    "machine_array",
    "read_state",
    "solve_friction",
    "step_drive",
]

Q_ENGINE, V_ENGINE, MOTOR, LIMITED, TAU_ENGINE, V_NEXT, A_LAST, SLIDE, ERROR = range(7, 16)
"""Rows of ``io`` below those that the law sees: the engine's position and velocity as read; motor torque
at the joint; 1 where the drive cut the torque; torque for the engine; the velocity foreseen; the last
step's acceleration; the sliding sign (-1, 0, 1) of the step before; ``io[ERROR, 0]`` the largest
difference between foreseen and actual velocity [rad/s]."""
ROWS = 16

REFLECTED, VISCOUS, COULOMB, STATIC, STRIBECK, TORQUE_LIMIT, SPEED_LIMIT, LAG, LOWER, UPPER, BOUND, STEP = (
    range(12)
)
"""Rows of ``machine`` (12, n); ``machine[STEP, 0]`` is dt, BOUND the speed beyond which a run diverged."""

OK, NOT_FINITE, BEYOND_BOUNDS, HIT_STOP = range(4)

SPEED_FOLDBACK = 0.02
"""Driving torque falls linearly to nothing over the last 2 % below the speed limit (our choice: a drive
must not push past its limit, and a sudden cut would chatter). Braking torque stays whole."""

RUNAWAY = 10.0
"""A joint is beyond bounds at this many times its speed limit, or at 1000 rad/s where it has none."""


def machine_array(arm: Arm, dt: float) -> Floats:
    """Pack what the drive kernels need of ``arm`` (a plant), shape (12, n)."""
    drives, n = arm.drives, arm.n
    machine = np.zeros((12, n))
    machine[REFLECTED] = drives.reflected
    machine[VISCOUS], machine[COULOMB], machine[STATIC] = drives.viscous, drives.coulomb, drives.static
    machine[STRIBECK] = drives.stribeck_speed
    machine[TORQUE_LIMIT], machine[SPEED_LIMIT] = drives.torque_limit, drives.speed_limit
    lagged = drives.torque_lag > 0
    machine[LAG] = 1.0
    machine[LAG, lagged] = 1.0 - np.exp(-dt / drives.torque_lag[lagged])
    machine[LOWER], machine[UPPER] = arm.lower, arm.upper
    machine[BOUND] = np.where(np.isfinite(drives.speed_limit), RUNAWAY * drives.speed_limit, 1000.0)
    machine[STEP, 0] = dt
    return machine


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
        io[Q, i], io[V, i] = q, v
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
def step_drive(chain: Floats, machine: Floats, io: Floats) -> bool:
    """Take the commanded torque ``io[TAU]`` through the drive; fill ``io[TAU_ENGINE]`` for one step.

    ``chain`` is the plant's. Returns False, and does nothing, if the command is not finite.
    """
    n = io.shape[1]
    dt = machine[STEP, 0]
    for i in range(n):
        if not np.isfinite(io[TAU, i]):
            return False
    placed, mass, vectors = np.empty((n, 12)), np.empty((n, n)), np.empty((6, n))
    h_engine, h_middle, middle, momentum, size, f = (
        vectors[0], vectors[1], vectors[2], vectors[3], vectors[4], vectors[5],
    )  # fmt: skip
    v, v_next, slide = io[V], io[V_NEXT], io[SLIDE]
    for i in range(n):
        _limit(machine, io, i)
        middle[i] = v[i] + 0.5 * dt * io[A_LAST, i]
    place(chain, io[Q_ENGINE], placed)
    composite_inertia(chain, placed, mass)
    newton_euler(chain, placed, v, v, False, h_engine)
    newton_euler(chain, placed, middle, middle, False, h_middle)
    for i in range(n):
        mass[i, i] += machine[REFLECTED, i]
    for i in range(n):
        drag = 0.5 * machine[VISCOUS, i]
        total = dt * (io[MOTOR, i] - h_middle[i] - drag * v[i])
        for j in range(n):
            total += mass[i, j] * v[j]
        momentum[i] = total
        slip = v[i] / machine[STRIBECK, i]
        size[i] = machine[COULOMB, i]
        if machine[STATIC, i] != machine[COULOMB, i]:
            size[i] += (machine[STATIC, i] - machine[COULOMB, i]) * np.exp(-slip * slip)
        if v[i] > MOVING:
            slide[i] = 1.0
        elif v[i] < -MOVING:
            slide[i] = -1.0
    for i in range(n):
        mass[i, i] += 0.5 * dt * machine[VISCOUS, i]
    solve_friction(mass, momentum, size, dt, slide, v_next, f)
    for i in range(n):
        a = (v_next[i] - v[i]) / dt
        io[A_LAST, i] = a
        drag = 0.5 * machine[VISCOUS, i] * (v[i] + v_next[i])
        held_back = drag + f[i] + machine[REFLECTED, i] * a
        io[TAU_ENGINE, i] = io[MOTOR, i] - held_back + h_engine[i] - h_middle[i]
    return True


MOVING = 1e-9
"""Speed [rad/s] above which the last velocity, not the last verdict, is the first guess at who slides."""


@kernel
def _limit(machine: Floats, io: Floats, i: int) -> None:
    """Cut joint i's command to what the drive can give, and pass it through the current loop's lag."""
    wanted, v, limit = io[TAU, i], io[V, i], machine[TORQUE_LIMIT, i]
    upper = lower = limit
    fastest = machine[SPEED_LIMIT, i]
    if np.isfinite(fastest):
        share = (fastest - abs(v)) / (SPEED_FOLDBACK * fastest)
        if share < 1.0:
            # without a torque limit the wanted torque itself is what folds back
            whole = limit if np.isfinite(limit) else abs(wanted)
            if v > 0.0:
                upper = whole * max(share, 0.0)
            else:
                lower = whole * max(share, 0.0)
    given = min(max(wanted, -lower), upper)
    io[LIMITED, i] = 0.0 if given == wanted else 1.0
    io[MOTOR, i] += machine[LAG, i] * (given - io[MOTOR, i])


@kernel
def solve_friction(
    mass: Floats, momentum: Floats, size: Floats, dt: float, slide: Floats, v: Floats, f: Floats
) -> None:
    """Solve mass v + dt f = momentum with |f_i| <= size_i, f_i = size_i sign(v_i) where v_i is not 0.

    An active set over stick or slide, started from ``slide`` (-1, 0, 1) and left in it: a Cholesky
    solution on the sliding joints, then the worst violator changes sides. The problem is that of a
    strictly convex quadratic with one box a joint, so it has one solution. Where the set has not
    settled after 4 n + 4 turns, projected Gauss-Seidel finishes.
    """
    n = mass.shape[0]
    factor, moving = np.empty((n, n)), np.empty(n, dtype=np.int64)
    for i in range(n):
        if size[i] == 0.0:
            slide[i] = 1.0
    for _ in range(4 * n + 4):
        count = 0
        for i in range(n):
            v[i] = 0.0
            f[i] = size[i] * slide[i]
            if slide[i] != 0.0:
                moving[count] = i
                count += 1
        _solve_block(mass, momentum, f, dt, moving, count, factor, v)
        worst, who = 0.0, -1
        for i in range(n):
            if slide[i] == 0.0:
                left = momentum[i]
                for k in range(count):
                    left -= mass[i, moving[k]] * v[moving[k]]
                f[i] = left / dt
                excess = abs(f[i]) - size[i]
                if excess > worst and excess > 1e-12 * size[i]:
                    worst, who = excess, i
            elif size[i] > 0.0 and v[i] * slide[i] < 0.0:
                excess = abs(v[i]) * mass[i, i] / dt
                if excess > worst:
                    worst, who = excess, i
        if who < 0:
            return
        if slide[who] == 0.0:
            slide[who] = 1.0 if f[who] > 0.0 else -1.0
        else:
            slide[who] = 0.0
    _gauss_seidel(mass, momentum, size, dt, slide, v, f)


@kernel
def _solve_block(
    mass: Floats,
    momentum: Floats,
    f: Floats,
    dt: float,
    moving: NDArray[np.int64],
    count: int,
    factor: Floats,
    v: Floats,
) -> None:
    """Solve the sliding joints' block by Cholesky; the others' velocities are 0."""
    for a in range(count):
        for b in range(a + 1):
            total = mass[moving[a], moving[b]]
            for c in range(b):
                total -= factor[a, c] * factor[b, c]
            factor[a, b] = np.sqrt(total) if a == b else total / factor[b, b]
        total = momentum[moving[a]] - dt * f[moving[a]]
        for c in range(a):
            total -= factor[a, c] * v[moving[c]]
        v[moving[a]] = total / factor[a, a]
    for a in range(count - 1, -1, -1):
        total = v[moving[a]]
        for c in range(a + 1, count):
            total -= factor[c, a] * v[moving[c]]
        v[moving[a]] = total / factor[a, a]


@kernel
def _gauss_seidel(
    mass: Floats, momentum: Floats, size: Floats, dt: float, slide: Floats, v: Floats, f: Floats
) -> None:
    """Finish by projected Gauss-Seidel, joint by joint; converges for every positive definite mass."""
    n = mass.shape[0]
    for _ in range(10000):
        change = 0.0
        for i in range(n):
            left = momentum[i]
            for j in range(n):
                if j != i:
                    left -= mass[i, j] * v[j]
            dry = min(max(left / dt, -size[i]), size[i])
            new = (left - dt * dry) / mass[i, i] if abs(left) > dt * size[i] else 0.0
            change = max(change, abs(new - v[i]))
            v[i], f[i] = new, dry
        if change < 1e-13:
            break
    for i in range(n):
        slide[i] = np.sign(v[i])

"""Dry friction of coupled joints: who sticks, who slides, and with what torque, as numba kernels."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from rigbench.arm.arm import Floats
from rigbench.arm.kernel import kernel

__all__ = ["solve_friction"]


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

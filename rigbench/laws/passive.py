"""M(q) a_r + C(q, v) v_r + g(q) for a velocity v_r beside the true one, as numba kernels.

Of the many matrices with C(q, v) v = Coriolis and centripetal torque this is the one of Christoffel symbols,
so M' - 2 C is skew-symmetric: what PD+ and the adaptive law rest on. It is the recursion of Newton and Euler
with the mixed second derivative of a body's points along v and v_r in place of their acceleration,

    a(x) = a_o + b x x + w_r x (w x x),    F = m a_o + b x mc + w_r x (w x mc),
    N = mc x a_o + I b + w x (I w_r) - tr(I)/2 w x w_r,

w, w_r [rad/s] the link's turning rates under v and v_r, b [rad/s^2] the rate of w_r along v, all in the
link's frame and about its origin. The idea of two velocities: Niemeyer, Slotine 1991 (from memory); this form
of it was derived here. Arrays as in :mod:`rigbench.arm.dynamics`; linear in the ten parameters, too.
"""

from __future__ import annotations

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.arm.kernel import kernel

__all__ = ["joint_torques", "link_forces", "link_motion", "parameter_power", "passive_torque", "regressor"]

MOVED = 12
"""Columns of ``moved``: w, w_r [rad/s], b [rad/s^2], a_o [m/s^2], each in three components."""


@kernel
def link_motion(chain: Floats, placed: Floats, v: Floats, v_r: Floats, a_r: Floats, moved: Floats) -> None:
    """Fill ``moved`` (n, 12) at the placement ``placed`` (see :func:`rigbench.arm.dynamics.place`).

    Gravity enters as an upward acceleration of the base.
    """
    n = placed.shape[0]
    wx = wy = wz = 0.0
    sx = sy = sz = 0.0  # the turning rate under v_r
    bx = by = bz = 0.0
    ax, ay, az = -chain[n, 13], -chain[n, 14], -chain[n, 15]
    for i in range(n):
        px, py, pz = placed[i, 9], placed[i, 10], placed[i, 11]
        ux, uy, uz = wy * pz - wz * py, wz * px - wx * pz, wx * py - wy * px
        ax, ay, az = (
            ax + by * pz - bz * py + sy * uz - sz * uy,
            ay + bz * px - bx * pz + sz * ux - sx * uz,
            az + bx * py - by * px + sx * uy - sy * ux,
        )
        r0, r1, r2 = placed[i, 0], placed[i, 1], placed[i, 2]
        r3, r4, r5 = placed[i, 3], placed[i, 4], placed[i, 5]
        r6, r7, r8 = placed[i, 6], placed[i, 7], placed[i, 8]
        ax, ay, az = r0 * ax + r3 * ay + r6 * az, r1 * ax + r4 * ay + r7 * az, r2 * ax + r5 * ay + r8 * az
        wx, wy, wz = r0 * wx + r3 * wy + r6 * wz, r1 * wx + r4 * wy + r7 * wz, r2 * wx + r5 * wy + r8 * wz
        sx, sy, sz = r0 * sx + r3 * sy + r6 * sz, r1 * sx + r4 * sy + r7 * sz, r2 * sx + r5 * sy + r8 * sz
        bx, by, bz = r0 * bx + r3 * by + r6 * bz, r1 * bx + r4 * by + r7 * bz, r2 * bx + r5 * by + r8 * bz
        zx, zy, zz = chain[i, 13], chain[i, 14], chain[i, 15]
        rate, rate_r, push = v[i], v_r[i], a_r[i]
        if chain[i, 0] == 0.0:
            bx += (wy * zz - wz * zy) * rate_r + zx * push
            by += (wz * zx - wx * zz) * rate_r + zy * push
            bz += (wx * zy - wy * zx) * rate_r + zz * push
            wx, wy, wz = wx + zx * rate, wy + zy * rate, wz + zz * rate
            sx, sy, sz = sx + zx * rate_r, sy + zy * rate_r, sz + zz * rate_r
        else:
            ax += (wy * zz - wz * zy) * rate_r + (sy * zz - sz * zy) * rate + zx * push
            ay += (wz * zx - wx * zz) * rate_r + (sz * zx - sx * zz) * rate + zy * push
            az += (wx * zy - wy * zx) * rate_r + (sx * zy - sy * zx) * rate + zz * push
        moved[i, 0], moved[i, 1], moved[i, 2] = wx, wy, wz
        moved[i, 3], moved[i, 4], moved[i, 5] = sx, sy, sz
        moved[i, 6], moved[i, 7], moved[i, 8] = bx, by, bz
        moved[i, 9], moved[i, 10], moved[i, 11] = ax, ay, az


@kernel
def link_forces(ten: Floats, moved: Floats, force: Floats) -> None:
    """Fill ``force`` (n, 6), force [N] and moment [N m] about the link's origin, for ``ten`` (n, 10)."""
    for i in range(ten.shape[0]):
        m, cx, cy, cz = ten[i, 0], ten[i, 1], ten[i, 2], ten[i, 3]
        ixx, ixy, iyy, ixz, iyz, izz = ten[i, 4], ten[i, 5], ten[i, 6], ten[i, 7], ten[i, 8], ten[i, 9]
        wx, wy, wz = moved[i, 0], moved[i, 1], moved[i, 2]
        sx, sy, sz = moved[i, 3], moved[i, 4], moved[i, 5]
        bx, by, bz = moved[i, 6], moved[i, 7], moved[i, 8]
        ax, ay, az = moved[i, 9], moved[i, 10], moved[i, 11]
        ux, uy, uz = wy * cz - wz * cy, wz * cx - wx * cz, wx * cy - wy * cx
        force[i, 0] = m * ax + by * cz - bz * cy + sy * uz - sz * uy
        force[i, 1] = m * ay + bz * cx - bx * cz + sz * ux - sx * uz
        force[i, 2] = m * az + bx * cy - by * cx + sx * uy - sy * ux
        half = 0.5 * (ixx + iyy + izz)
        hx = ixx * sx + ixy * sy + ixz * sz - half * sx
        hy = ixy * sx + iyy * sy + iyz * sz - half * sy
        hz = ixz * sx + iyz * sy + izz * sz - half * sz
        force[i, 3] = ixx * bx + ixy * by + ixz * bz + wy * hz - wz * hy + cy * az - cz * ay
        force[i, 4] = ixy * bx + iyy * by + iyz * bz + wz * hx - wx * hz + cz * ax - cx * az
        force[i, 5] = ixz * bx + iyz * by + izz * bz + wx * hy - wy * hx + cx * ay - cy * ax


@kernel
def joint_torques(chain: Floats, placed: Floats, force: Floats, tau: Floats) -> None:
    """Fill ``tau`` (n,) [N m] with what the joints carry of the links' ``force`` (n, 6), which is used up."""
    for i in range(placed.shape[0] - 1, -1, -1):
        fx, fy, fz = force[i, 0], force[i, 1], force[i, 2]
        gx, gy, gz = force[i, 3], force[i, 4], force[i, 5]
        if chain[i, 0] == 0.0:
            tau[i] = chain[i, 13] * gx + chain[i, 14] * gy + chain[i, 15] * gz
        else:
            tau[i] = chain[i, 13] * fx + chain[i, 14] * fy + chain[i, 15] * fz
        if i > 0:
            px, py, pz = placed[i, 9], placed[i, 10], placed[i, 11]
            kx = placed[i, 0] * fx + placed[i, 1] * fy + placed[i, 2] * fz
            ky = placed[i, 3] * fx + placed[i, 4] * fy + placed[i, 5] * fz
            kz = placed[i, 6] * fx + placed[i, 7] * fy + placed[i, 8] * fz
            force[i - 1, 0] += kx
            force[i - 1, 1] += ky
            force[i - 1, 2] += kz
            force[i - 1, 3] += placed[i, 0] * gx + placed[i, 1] * gy + placed[i, 2] * gz + py * kz - pz * ky
            force[i - 1, 4] += placed[i, 3] * gx + placed[i, 4] * gy + placed[i, 5] * gz + pz * kx - px * kz
            force[i - 1, 5] += placed[i, 6] * gx + placed[i, 7] * gy + placed[i, 8] * gz + px * ky - py * kx


@kernel
def passive_torque(
    chain: Floats, placed: Floats, v: Floats, v_r: Floats, a_r: Floats, ten: Floats, tau: Floats
) -> None:
    """Fill ``tau`` (n,) [N m] with M a_r + C(q, v) v_r + g of links with the parameters ``ten`` (n, 10)."""
    n = placed.shape[0]
    moved, force = np.empty((n, MOVED)), np.empty((n, 6))
    link_motion(chain, placed, v, v_r, a_r, moved)
    link_forces(ten, moved, force)
    joint_torques(chain, placed, force, tau)


@kernel
def parameter_power(chain: Floats, placed: Floats, moved: Floats, s: Floats, power: Floats) -> None:
    """Fill ``power`` (n, 10) with Y^T s for joint speeds s (n,): row i, column k is of parameter k of link i.

    Y is the regressor of ``moved``, M a_r + C v_r + g = Y p. So each entry is the power [W] that a unit of
    the parameter takes at the speeds s, which one pass along the chain gives.
    """
    kx = ky = kz = 0.0  # turning rate and velocity of the link's origin at the speeds s
    lx = ly = lz = 0.0
    for i in range(placed.shape[0]):
        px, py, pz = placed[i, 9], placed[i, 10], placed[i, 11]
        lx, ly, lz = lx + ky * pz - kz * py, ly + kz * px - kx * pz, lz + kx * py - ky * px
        r0, r1, r2 = placed[i, 0], placed[i, 1], placed[i, 2]
        r3, r4, r5 = placed[i, 3], placed[i, 4], placed[i, 5]
        r6, r7, r8 = placed[i, 6], placed[i, 7], placed[i, 8]
        lx, ly, lz = r0 * lx + r3 * ly + r6 * lz, r1 * lx + r4 * ly + r7 * lz, r2 * lx + r5 * ly + r8 * lz
        kx, ky, kz = r0 * kx + r3 * ky + r6 * kz, r1 * kx + r4 * ky + r7 * kz, r2 * kx + r5 * ky + r8 * kz
        if chain[i, 0] == 0.0:
            kx, ky, kz = kx + chain[i, 13] * s[i], ky + chain[i, 14] * s[i], kz + chain[i, 15] * s[i]
        else:
            lx, ly, lz = lx + chain[i, 13] * s[i], ly + chain[i, 14] * s[i], lz + chain[i, 15] * s[i]
        wx, wy, wz = moved[i, 0], moved[i, 1], moved[i, 2]
        sx, sy, sz = moved[i, 3], moved[i, 4], moved[i, 5]
        bx, by, bz = moved[i, 6], moved[i, 7], moved[i, 8]
        ax, ay, az = moved[i, 9], moved[i, 10], moved[i, 11]
        power[i, 0] = ax * lx + ay * ly + az * lz
        # l x b + (l x w_r) x w + a x k
        ux, uy, uz = ly * sz - lz * sy, lz * sx - lx * sz, lx * sy - ly * sx
        power[i, 1] = ly * bz - lz * by + uy * wz - uz * wy + ay * kz - az * ky
        power[i, 2] = lz * bx - lx * bz + uz * wx - ux * wz + az * kx - ax * kz
        power[i, 3] = lx * by - ly * bx + ux * wy - uy * wx + ax * ky - ay * kx
        # k . I b + (k x w) . I w_r - tr(I)/2 (k x w) . w_r
        ux, uy, uz = ky * wz - kz * wy, kz * wx - kx * wz, kx * wy - ky * wx
        half = 0.5 * (ux * sx + uy * sy + uz * sz)
        power[i, 4] = kx * bx + ux * sx - half
        power[i, 5] = kx * by + ky * bx + ux * sy + uy * sx
        power[i, 6] = ky * by + uy * sy - half
        power[i, 7] = kx * bz + kz * bx + ux * sz + uz * sx
        power[i, 8] = ky * bz + kz * by + uy * sz + uz * sy
        power[i, 9] = kz * bz + uz * sz - half


def regressor(chain: Floats, placed: Floats, v: Floats, v_r: Floats, a_r: Floats) -> Floats:
    """Return Y, (n, n, 10): torque of joint j for a unit of parameter k of link i, at [j, i, k].

    One call of :func:`passive_torque` for each parameter.
    """
    n = placed.shape[0]
    columns = np.zeros((n, n, 10))
    for i in range(n):
        for k in range(10):
            unit, tau = np.zeros((n, 10)), np.zeros(n)
            unit[i, k] = 1.0
            passive_torque(chain, placed, v, v_r, a_r, unit, tau)
            columns[:, i, k] = tau
    return columns

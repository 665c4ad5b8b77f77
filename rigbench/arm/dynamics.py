"""Dynamics of a serial chain, as numba kernels on flat arrays.

Every kernel takes ``chain``, shape (n + 1, 26), from :meth:`rigbench.arm.arm.Arm.chain`. Joint vectors
have shape (n,): q [rad or m], v [rad/s or m/s], a [rad/s^2 or m/s^2], torques [N m or N]. Rotor inertia
and friction are not in here: they belong to the drive.

Methods: recursive Newton-Euler (Luh, Walker, Paul 1980) and composite rigid body (Walker, Orin 1982),
both in link frames, as in Featherstone, "Rigid Body Dynamics Algorithms" (2008), ch. 5 and 6; written
for the ten parameters about the link frame's origin, in which both are linear.
"""

from __future__ import annotations

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.arm.kernel import kernel

__all__ = [
    "bias_torque",
    "composite_inertia",
    "forward_kinematics",
    "gravity_torque",
    "inverse_dynamics",
    "mass_matrix",
    "newton_euler",
    "place",
    "tool_jacobian",
    "tool_path",
]


@kernel
def place(chain: Floats, q: Floats, placed: Floats) -> None:
    """Fill ``placed`` (n, 12): rotation (9, row-major) and position (3) of link i in link i - 1 at q."""
    for i in range(placed.shape[0]):
        x, y, z = chain[i, 13], chain[i, 14], chain[i, 15]
        if chain[i, 0] == 0.0:
            c, s = np.cos(q[i]), np.sin(q[i])
            d = 1.0 - c
            t00, t01, t02 = c + d * x * x, d * x * y - s * z, d * x * z + s * y
            t10, t11, t12 = d * x * y + s * z, c + d * y * y, d * y * z - s * x
            t20, t21, t22 = d * x * z - s * y, d * y * z + s * x, c + d * z * z
            for r in range(3):
                f0, f1, f2 = chain[i, 1 + 3 * r], chain[i, 2 + 3 * r], chain[i, 3 + 3 * r]
                placed[i, 3 * r] = f0 * t00 + f1 * t10 + f2 * t20
                placed[i, 3 * r + 1] = f0 * t01 + f1 * t11 + f2 * t21
                placed[i, 3 * r + 2] = f0 * t02 + f1 * t12 + f2 * t22
                placed[i, 9 + r] = chain[i, 10 + r]
        else:
            for r in range(3):
                f0, f1, f2 = chain[i, 1 + 3 * r], chain[i, 2 + 3 * r], chain[i, 3 + 3 * r]
                placed[i, 3 * r], placed[i, 3 * r + 1], placed[i, 3 * r + 2] = f0, f1, f2
                placed[i, 9 + r] = chain[i, 10 + r] + (f0 * x + f1 * y + f2 * z) * q[i]


@kernel
def newton_euler(chain: Floats, placed: Floats, v: Floats, a: Floats, turned: bool, tau: Floats) -> None:
    """Fill ``tau`` (n,) with the inverse dynamics at the placement ``placed``.

    ``turned`` False leaves out ``a`` (taken as zero). Gravity enters as an upward acceleration of the base.
    """
    n = placed.shape[0]
    force = np.empty((n, 6))
    wx = wy = wz = 0.0
    bx = by = bz = 0.0  # angular acceleration
    ax, ay, az = -chain[n, 13], -chain[n, 14], -chain[n, 15]
    for i in range(n):
        px, py, pz = placed[i, 9], placed[i, 10], placed[i, 11]
        # acceleration of this link's origin, still in the parent's frame
        ux, uy, uz = wy * pz - wz * py, wz * px - wx * pz, wx * py - wy * px
        ax, ay, az = (
            ax + by * pz - bz * py + wy * uz - wz * uy,
            ay + bz * px - bx * pz + wz * ux - wx * uz,
            az + bx * py - by * px + wx * uy - wy * ux,
        )
        r0, r1, r2 = placed[i, 0], placed[i, 1], placed[i, 2]
        r3, r4, r5 = placed[i, 3], placed[i, 4], placed[i, 5]
        r6, r7, r8 = placed[i, 6], placed[i, 7], placed[i, 8]
        ax, ay, az = r0 * ax + r3 * ay + r6 * az, r1 * ax + r4 * ay + r7 * az, r2 * ax + r5 * ay + r8 * az
        wx, wy, wz = r0 * wx + r3 * wy + r6 * wz, r1 * wx + r4 * wy + r7 * wz, r2 * wx + r5 * wy + r8 * wz
        bx, by, bz = r0 * bx + r3 * by + r6 * bz, r1 * bx + r4 * by + r7 * bz, r2 * bx + r5 * by + r8 * bz
        zx, zy, zz = chain[i, 13], chain[i, 14], chain[i, 15]
        rate = v[i]
        push = a[i] if turned else 0.0
        if chain[i, 0] == 0.0:
            bx += (wy * zz - wz * zy) * rate + zx * push
            by += (wz * zx - wx * zz) * rate + zy * push
            bz += (wx * zy - wy * zx) * rate + zz * push
            wx, wy, wz = wx + zx * rate, wy + zy * rate, wz + zz * rate
        else:
            ax += 2.0 * (wy * zz - wz * zy) * rate + zx * push
            ay += 2.0 * (wz * zx - wx * zz) * rate + zy * push
            az += 2.0 * (wx * zy - wy * zx) * rate + zz * push
        m, cx, cy, cz = chain[i, 16], chain[i, 17], chain[i, 18], chain[i, 19]
        ixx, ixy, iyy = chain[i, 20], chain[i, 21], chain[i, 22]
        ixz, iyz, izz = chain[i, 23], chain[i, 24], chain[i, 25]
        ux, uy, uz = wy * cz - wz * cy, wz * cx - wx * cz, wx * cy - wy * cx
        force[i, 0] = m * ax + by * cz - bz * cy + wy * uz - wz * uy
        force[i, 1] = m * ay + bz * cx - bx * cz + wz * ux - wx * uz
        force[i, 2] = m * az + bx * cy - by * cx + wx * uy - wy * ux
        hx, hy, hz = (
            ixx * wx + ixy * wy + ixz * wz,
            ixy * wx + iyy * wy + iyz * wz,
            ixz * wx + iyz * wy + izz * wz,
        )
        force[i, 3] = ixx * bx + ixy * by + ixz * bz + wy * hz - wz * hy + cy * az - cz * ay
        force[i, 4] = ixy * bx + iyy * by + iyz * bz + wz * hx - wx * hz + cz * ax - cx * az
        force[i, 5] = ixz * bx + iyz * by + izz * bz + wx * hy - wy * hx + cx * ay - cy * ax
    for i in range(n - 1, -1, -1):
        fx, fy, fz = force[i, 0], force[i, 1], force[i, 2]
        gx, gy, gz = force[i, 3], force[i, 4], force[i, 5]
        zx, zy, zz = chain[i, 13], chain[i, 14], chain[i, 15]
        if chain[i, 0] == 0.0:
            tau[i] = zx * gx + zy * gy + zz * gz
        else:
            tau[i] = zx * fx + zy * fy + zz * fz
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
def composite_inertia(chain: Floats, placed: Floats, mass: Floats) -> None:
    """Fill ``mass`` (n, n) with the links' joint-space inertia matrix at the placement ``placed``."""
    n = placed.shape[0]
    whole = np.empty((n, 10))  # parameters of everything from link i outwards, in frame i
    for i in range(n):
        for k in range(10):
            whole[i, k] = chain[i, 16 + k]
    for i in range(n - 1, -1, -1):
        m, cx, cy, cz = whole[i, 0], whole[i, 1], whole[i, 2], whole[i, 3]
        ixx, ixy, iyy = whole[i, 4], whole[i, 5], whole[i, 6]
        ixz, iyz, izz = whole[i, 7], whole[i, 8], whole[i, 9]
        zx, zy, zz = chain[i, 13], chain[i, 14], chain[i, 15]
        if chain[i, 0] == 0.0:
            fx, fy, fz = zy * cz - zz * cy, zz * cx - zx * cz, zx * cy - zy * cx
            gx, gy, gz = (
                ixx * zx + ixy * zy + ixz * zz,
                ixy * zx + iyy * zy + iyz * zz,
                ixz * zx + iyz * zy + izz * zz,
            )
            mass[i, i] = zx * gx + zy * gy + zz * gz
        else:
            fx, fy, fz = m * zx, m * zy, m * zz
            gx, gy, gz = cy * zz - cz * zy, cz * zx - cx * zz, cx * zy - cy * zx
            mass[i, i] = zx * fx + zy * fy + zz * fz
        for j in range(i, 0, -1):
            kx = placed[j, 0] * fx + placed[j, 1] * fy + placed[j, 2] * fz
            ky = placed[j, 3] * fx + placed[j, 4] * fy + placed[j, 5] * fz
            kz = placed[j, 6] * fx + placed[j, 7] * fy + placed[j, 8] * fz
            px, py, pz = placed[j, 9], placed[j, 10], placed[j, 11]
            gx, gy, gz = (
                placed[j, 0] * gx + placed[j, 1] * gy + placed[j, 2] * gz + py * kz - pz * ky,
                placed[j, 3] * gx + placed[j, 4] * gy + placed[j, 5] * gz + pz * kx - px * kz,
                placed[j, 6] * gx + placed[j, 7] * gy + placed[j, 8] * gz + px * ky - py * kx,
            )
            fx, fy, fz = kx, ky, kz
            yx, yy, yz = chain[j - 1, 13], chain[j - 1, 14], chain[j - 1, 15]
            if chain[j - 1, 0] == 0.0:
                mass[i, j - 1] = yx * gx + yy * gy + yz * gz
            else:
                mass[i, j - 1] = yx * fx + yy * fy + yz * fz
            mass[j - 1, i] = mass[i, j - 1]
        if i > 0:
            px, py, pz = placed[i, 9], placed[i, 10], placed[i, 11]
            r0, r1, r2 = placed[i, 0], placed[i, 1], placed[i, 2]
            r3, r4, r5 = placed[i, 3], placed[i, 4], placed[i, 5]
            r6, r7, r8 = placed[i, 6], placed[i, 7], placed[i, 8]
            dx, dy, dz = r0 * cx + r1 * cy + r2 * cz, r3 * cx + r4 * cy + r5 * cz, r6 * cx + r7 * cy + r8 * cz
            # I R^T, then R (I R^T)
            a00, a01, a02 = (
                ixx * r0 + ixy * r1 + ixz * r2,
                ixx * r3 + ixy * r4 + ixz * r5,
                ixx * r6 + ixy * r7 + ixz * r8,
            )
            a10, a11, a12 = (
                ixy * r0 + iyy * r1 + iyz * r2,
                ixy * r3 + iyy * r4 + iyz * r5,
                ixy * r6 + iyy * r7 + iyz * r8,
            )
            a20, a21, a22 = (
                ixz * r0 + iyz * r1 + izz * r2,
                ixz * r3 + iyz * r4 + izz * r5,
                ixz * r6 + iyz * r7 + izz * r8,
            )
            dot = 2.0 * (px * dx + py * dy + pz * dz) + m * (px * px + py * py + pz * pz)
            whole[i - 1, 0] += m
            whole[i - 1, 1] += dx + m * px
            whole[i - 1, 2] += dy + m * py
            whole[i - 1, 3] += dz + m * pz
            whole[i - 1, 4] += r0 * a00 + r1 * a10 + r2 * a20 + dot - 2.0 * px * dx - m * px * px
            whole[i - 1, 5] += r0 * a01 + r1 * a11 + r2 * a21 - px * dy - py * dx - m * px * py
            whole[i - 1, 6] += r3 * a01 + r4 * a11 + r5 * a21 + dot - 2.0 * py * dy - m * py * py
            whole[i - 1, 7] += r0 * a02 + r1 * a12 + r2 * a22 - px * dz - pz * dx - m * px * pz
            whole[i - 1, 8] += r3 * a02 + r4 * a12 + r5 * a22 - py * dz - pz * dy - m * py * pz
            whole[i - 1, 9] += r6 * a02 + r7 * a12 + r8 * a22 + dot - 2.0 * pz * dz - m * pz * pz


@kernel
def inverse_dynamics(chain: Floats, q: Floats, v: Floats, a: Floats) -> Floats:
    """Return the joint torques (n,) [N m] of the links: M(q) a + h(q, v)."""
    placed, tau = np.empty((q.shape[0], 12)), np.empty(q.shape[0])
    place(chain, q, placed)
    newton_euler(chain, placed, v, a, True, tau)
    return tau


@kernel
def mass_matrix(chain: Floats, q: Floats) -> Floats:
    """Return the links' inertia matrix M(q), (n, n) [kg m^2], symmetric; rotors are not in it."""
    placed, mass = np.empty((q.shape[0], 12)), np.empty((q.shape[0], q.shape[0]))
    place(chain, q, placed)
    composite_inertia(chain, placed, mass)
    return mass


@kernel
def bias_torque(chain: Floats, q: Floats, v: Floats) -> Floats:
    """Return h(q, v), (n,) [N m]: Coriolis, centripetal and gravity torque of the links."""
    placed, tau = np.empty((q.shape[0], 12)), np.empty(q.shape[0])
    place(chain, q, placed)
    newton_euler(chain, placed, v, v, False, tau)
    return tau


@kernel
def gravity_torque(chain: Floats, q: Floats) -> Floats:
    """Return g(q) = h(q, 0), (n,) [N m]."""
    return bias_torque(chain, q, np.zeros(q.shape[0]))


@kernel
def forward_kinematics(chain: Floats, q: Floats) -> Floats:
    """Return poses in the base frame, (n + 1, 12): rotation (9, row-major) and position (3) [m].

    Row i < n is link i, row n the tool.
    """
    n = q.shape[0]
    placed, poses = np.empty((n, 12)), np.empty((n + 1, 12))
    place(chain, q, placed)
    poses[0] = placed[0]
    for i in range(1, n + 1):
        for r in range(3):
            b0, b1, b2 = poses[i - 1, 3 * r], poses[i - 1, 3 * r + 1], poses[i - 1, 3 * r + 2]
            for c in range(3):
                if i < n:
                    poses[i, 3 * r + c] = b0 * placed[i, c] + b1 * placed[i, 3 + c] + b2 * placed[i, 6 + c]
                else:
                    poses[i, 3 * r + c] = b0 * chain[n, 1 + c] + b1 * chain[n, 4 + c] + b2 * chain[n, 7 + c]
            if i < n:
                step = b0 * placed[i, 9] + b1 * placed[i, 10] + b2 * placed[i, 11]
            else:
                step = b0 * chain[n, 10] + b1 * chain[n, 11] + b2 * chain[n, 12]
            poses[i, 9 + r] = poses[i - 1, 9 + r] + step
    return poses


@kernel
def tool_jacobian(chain: Floats, q: Floats) -> Floats:
    """Return J(q), (6, n): the tool point's velocity [m/s] and the tool's turning rate [rad/s] are J v.

    Both in the base frame, linear part first; geometric Jacobian.
    """
    n = q.shape[0]
    poses, jacobian = forward_kinematics(chain, q), np.zeros((6, n))
    for i in range(n):
        axis = np.empty(3)
        for r in range(3):
            axis[r] = (
                poses[i, 3 * r] * chain[i, 13]
                + poses[i, 3 * r + 1] * chain[i, 14]
                + poses[i, 3 * r + 2] * chain[i, 15]
            )
        if chain[i, 0] == 0.0:
            dx, dy, dz = poses[n, 9] - poses[i, 9], poses[n, 10] - poses[i, 10], poses[n, 11] - poses[i, 11]
            jacobian[0, i] = axis[1] * dz - axis[2] * dy
            jacobian[1, i] = axis[2] * dx - axis[0] * dz
            jacobian[2, i] = axis[0] * dy - axis[1] * dx
            jacobian[3:, i] = axis
        else:
            jacobian[:3, i] = axis
    return jacobian


@kernel
def tool_path(chain: Floats, q: Floats) -> tuple[Floats, Floats]:
    """Return the tool's positions (N, 3) [m] and rotations (N, 3, 3) in the base frame, for q (N, n)."""
    positions, rotations = np.empty((q.shape[0], 3)), np.empty((q.shape[0], 3, 3))
    n = q.shape[1]
    for k in range(q.shape[0]):
        pose = forward_kinematics(chain, q[k])[n]
        positions[k] = pose[9:]
        rotations[k] = pose[:9].reshape(3, 3)
    return positions, rotations

"""Joint torques as a matrix times the parameters: tau = Y(q, v, a) x."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from rigbench.arm.arm import Arm, Floats
from rigbench.arm.dynamics import newton_euler, place
from rigbench.arm.kernel import kernel
from rigbench.arm.vector import vector_labels, vector_of

__all__ = ["LINKS_ALONE", "Terms", "link_regressor", "parameter_labels", "parameter_values", "regressor"]


@dataclass(frozen=True)
class Terms:
    """Which terms of a joint's drive are parameters too; the links' ten always are.

    ``rotor``: inertia as the joint feels it, G^2 Jm [kg m^2], times a. ``viscous`` [N m s/rad] times v.
    ``coulomb`` [N m] times the sign of v. ``offset`` [N m]: a constant, as of a torque sensor's zero.
    """

    rotor: bool = True
    viscous: bool = True
    coulomb: bool = True
    offset: bool = False

    @property
    def names(self) -> tuple[str, ...]:
        """The terms that are in, in the order of their columns."""
        return tuple(name for name in ("rotor", "viscous", "coulomb", "offset") if getattr(self, name))


LINKS_ALONE = Terms(rotor=False, viscous=False, coulomb=False)
"""No drives: links alone."""


@kernel
def link_regressor(chain: Floats, q: Floats, v: Floats, a: Floats) -> Floats:
    """Return Y (N, n, 10 n) of the links for q, v, a (N, n): torques [N m] are Y times their parameters.

    Column 10 i + k is the inverse dynamics of a chain whose only parameter is the k-th of link i, at 1. It
    is of links i and before alone, for what is beyond has no mass.
    """
    count, n = q.shape
    result = np.zeros((count, n, 10 * n))
    placed, tau = np.empty((n, 12)), np.empty(n)
    for i in range(n):
        short = np.zeros((i + 2, chain.shape[1]))
        short[: i + 1, :16] = chain[: i + 1, :16]
        short[i + 1, 13:16] = chain[n, 13:16]  # gravity
        for s in range(count):
            place(chain, q[s], placed)
            for k in range(10):
                short[i, 16 + k] = 1.0
                newton_euler(short, placed[: i + 1], v[s, : i + 1], a[s, : i + 1], True, tau[: i + 1])
                short[i, 16 + k] = 0.0
                for j in range(i + 1):
                    result[s, j, 10 * i + k] = tau[j]
    return result


def regressor(
    arm: Arm,
    gravity: tuple[float, float, float],
    q: Floats,
    v: Floats,
    a: Floats,
    terms: Terms,
    sign: Callable[[Floats], Floats] = np.sign,
) -> Floats:
    """Return Y (N, n, p) for q, v, a (N, n): joint torques [N m] are Y times the p parameters.

    The parameters are those of :func:`parameter_labels`: the links' 10 n, then n for each of ``terms``.
    ``sign`` is what Coulomb friction goes with.
    """
    n = arm.n
    links = link_regressor(arm.chain(gravity), *(np.ascontiguousarray(x, float) for x in (q, v, a)))
    factor = {"rotor": a, "viscous": v, "coulomb": sign(v), "offset": np.ones_like(q)}
    drives = [factor[name][:, :, None] * np.eye(n) for name in terms.names]
    return np.concatenate([links, *drives], axis=2)


def parameter_labels(arm: Arm, terms: Terms) -> tuple[str, ...]:
    """Name the parameters: 'Ixx.<link>' and so on, then '<term>.<joint>'."""
    return vector_labels(arm.links, arm.joints, terms.names)


def parameter_values(arm: Arm, terms: Terms) -> Floats:
    """Return the arm's own values of the parameters, shape (p,)."""
    return vector_of(arm, terms.names)

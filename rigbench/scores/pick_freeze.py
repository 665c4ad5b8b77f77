"""The points at which to run a law in order to share its variance out among sources."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from rigbench.arm.arm import Floats

__all__ = ["PickFreeze", "pick_freeze"]


@dataclass(frozen=True, eq=False)
class PickFreeze:
    """Points of n rows and d parameters, each parameter uniform in [-1, 1).

    ``a`` and ``b`` (n, d) are independent; page g of ``mixed`` (G, n, d) is ``a`` with the parameters of
    group g from ``b``. So n (G + 2) runs. ``parameters`` names the d columns, ``groups`` the G pages.
    """

    parameters: tuple[str, ...]
    groups: tuple[str, ...]
    a: Floats
    b: Floats
    mixed: Floats


def pick_freeze(groups: Mapping[str, Sequence[str]], points: int, seed: int) -> PickFreeze:
    """Return the design for ``groups``, which name the parameters of each source, with n = ``points`` rows.

    a and b are the halves of one scrambled Sobol' sequence in 2 d dimensions (Owen's scrambling), as
    Saltelli and others 2010 advise (section 5). Whoever wants a source as one quantity, whatever the number
    of its parameters, takes them as a group: they change together. Raises ValueError unless ``points`` is
    a power of 2, without which the sequence loses its balance; and if a parameter stands twice.
    """
    from scipy.stats import qmc

    parameters = tuple(name for names in groups.values() for name in names)
    if points < 1 or points & (points - 1):
        raise ValueError(f"{points} points: a Sobol' sequence is balanced at powers of 2")
    if len(set(parameters)) < len(parameters):
        raise ValueError("a parameter belongs to one group")
    d = len(parameters)
    unit = qmc.Sobol(2 * d, scramble=True, seed=seed).random(points) if d else np.empty((points, 0))
    a, b = 2.0 * unit[:, :d] - 1.0, 2.0 * unit[:, d:] - 1.0
    mixed = np.repeat(a[None], len(groups), axis=0)
    first = 0
    for page, names in zip(mixed, groups.values(), strict=True):
        page[:, first : first + len(names)] = b[:, first : first + len(names)]
        first += len(names)
    return PickFreeze(parameters, tuple(groups), a, b, mixed)

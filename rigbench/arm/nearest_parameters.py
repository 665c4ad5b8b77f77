"""The parameters of a machine that can exist which come nearest to given base parameters."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.arm.bounded_fit import bounded_fit
from rigbench.arm.log_cholesky import Coordinates
from rigbench.arm.vector import LINK

__all__ = ["nearest_parameters"]


def nearest_parameters(
    about: Coordinates,
    combination: Floats,
    target: Floats,
    whitened: Callable[[Floats], Floats],
    spreads: Floats,
    positive: int,
    tolerance: float,
    steps: int | None = None,
) -> Floats:
    """Return x (p,) at the coordinates z of least |W (K x(z) - t)|^2 + |z / spreads|^2.

    K is the ``combination`` (b, p), t the ``target`` (b,), W what ``whitened`` does to its errors,
    ``spreads`` (p,) how far z may be from 0. The first so many ``positive`` terms of drives are not below 0.
    ``tolerance`` and ``steps`` as in :func:`rigbench.arm.bounded_fit.bounded_fit`.
    """
    hold = np.diag(1 / spreads)

    def misfit(z: Floats) -> Floats:
        return np.concatenate([whitened(combination @ about.values(z) - target), z / spreads])

    def slope(z: Floats) -> Floats:
        return np.vstack([whitened(combination @ about.slope(z)), hold])

    split = LINK * about.links
    bounded = slice(split, split + positive)
    least = np.full(len(about.origin), -np.inf)
    least[bounded] = -about.origin[bounded] / about.scales[:positive]
    values = about.values(bounded_fit(misfit, slope, least, tolerance, steps))
    values[bounded] = np.maximum(values[bounded], 0.0)
    return values

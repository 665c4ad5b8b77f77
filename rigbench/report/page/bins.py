"""How the draws of a cell spread over a score: counts in bins, none of which reaches across the limit."""

from __future__ import annotations

from dataclasses import dataclass
from math import ceil

import numpy as np

from rigbench.arm.arm import Floats

__all__ = ["Bins", "binned"]

BINS = 40
LEAST = 1e-12
"""An axis does not end below it: no score is known so exactly."""


@dataclass(frozen=True)
class Bins:
    """Counts of values; each bin holds what is above its lower edge and at most its upper one.

    The first ``below`` bins share 0 to ``limit`` equally; each further one is ``width`` wide. Without a limit
    both are 0. ``endless`` counts the infinite values: runs that did not finish.
    """

    below: int
    limit: float
    width: float
    counts: tuple[int, ...]
    endless: int


def binned(values: Floats, limit: float | None) -> Bins | None:
    """Return the counts of values (n,), each at least 0, some perhaps infinite; None without a value.

    A value that is the limit counts below it ('at most'). Bins are alike, some 40 of them, unless the largest
    value exceeds 40 times the limit: then all that keeps it is one narrower bin.
    """
    if len(values) == 0:
        return None
    finite = values[np.isfinite(values)]
    limit = limit or 0.0
    most = max(float(finite.max(initial=0.0)), 1.1 * limit)
    most = most if most > LEAST else 1.0
    below = max(1, round(BINS * limit / most)) if limit else 0
    width = limit / below if limit and most <= BINS * limit else (most - limit) / (BINS - below)
    above = max(1, ceil((most - limit) / width - 1e-9))
    under = finite <= limit if limit else np.zeros(len(finite), dtype=bool)
    inner = np.ceil(finite * (below / limit if limit else 0.0)) - 1
    outer = below + np.ceil((finite - limit) / width) - 1
    place = np.where(under, np.clip(inner, 0, below - 1), np.clip(outer, below, below + above - 1))
    counts = np.bincount(place.astype(np.int64), minlength=below + above)
    return Bins(below, limit, width, tuple(counts.tolist()), len(values) - len(finite))

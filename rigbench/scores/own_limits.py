"""The tolerated level from each draw's own limit, as bisection finds it."""

from __future__ import annotations

from dataclasses import dataclass
from math import inf

import numpy as np
from numpy.typing import NDArray

from rigbench.arm.arm import Floats
from rigbench.scores.intervals import quantile_interval
from rigbench.scores.results import Tolerated

__all__ = ["FoundLevel", "OwnLimits", "own_limits", "tolerated_of_limits"]


@dataclass(frozen=True, eq=False)
class OwnLimits:
    """Between which levels each of n draws stops keeping the tolerance.

    ``low`` (n,) is the largest level shown to keep below the first miss, -inf if not even the lowest run
    does; ``high`` (n,) the smallest that misses, inf if none does. ``keeps_again`` (n,) marks draws that keep
    at a level above one that misses: their limit is the first miss all the same.
    """

    low: Floats
    high: Floats
    keeps_again: NDArray[np.bool_]


@dataclass(frozen=True)
class FoundLevel:
    """The tolerated level over ``draws``, of which so many miss nowhere and so many keep again.

    ``left_open``: so many were left with a wider bracket than was asked for.
    """

    tolerated: Tolerated
    draws: int
    never_miss: int
    keep_again: int
    left_open: int = 0


def own_limits(levels: Floats, kept: NDArray[np.bool_]) -> OwnLimits:
    """Return each draw's bracket from the ``levels`` (n, K) run and whether it ``kept`` there (n, K).

    In any order; a NaN level was not run. A draw without any level has the bracket (-inf, inf).
    """
    run = ~np.isnan(levels)
    high = np.min(np.where(run & ~kept, levels, inf), axis=1, initial=inf)
    passed = np.where(run & kept, levels, -inf)
    low = np.max(np.where(passed < high[:, None], passed, -inf), axis=1, initial=-inf)
    return OwnLimits(low, high, np.any(passed > high[:, None], axis=1))


def tolerated_of_limits(limits: OwnLimits, required_share: float) -> FoundLevel:
    """Return the tolerated level of a law from its draws' own limits.

    The tolerated level is the largest up to which the required share p of the draws keep: the quantile of
    the limits at 1 - p. Its interval is the order-statistic one at 95 % with the conservative end of each
    bracket: ``low`` by the brackets' low ends (0 if the draws are too few to show any, or show none),
    ``high`` by their high ends (inf where the draws that miss are too few to show one). It agrees with the
    pass share's verdict: at ``low`` the Wilson interval reaches p, at ``high`` it lies below. ``value`` is
    the middle of the bracket of the quantile, never outside low and high; None where that bracket has no
    end, or without a draw. All are 0 where the required share misses at level 0 itself.
    """
    n = len(limits.low)
    if n == 0:
        return FoundLevel(Tolerated(None, 0.0, inf), 0, 0, 0)
    # The quantile at 1 - p from below is the one at p of the negated limits, whose ends are turned about.
    least, _, low = (-end for end in quantile_interval(-limits.low, required_share, least=-inf))
    most, high, _ = (-end for end in quantile_interval(-limits.high, required_share, least=-inf))
    low, high = max(low, 0.0), max(high, 0.0)
    middle = (max(least, 0.0) + max(most, 0.0)) / 2.0
    value = None if most == inf else min(max(middle, low), high)
    counts = (int(np.sum(limits.high == inf)), int(np.sum(limits.keeps_again)))
    return FoundLevel(Tolerated(value, low, high), n, *counts)

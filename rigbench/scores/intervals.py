"""How sure a share or a quantile is, from a number of draws; every interval is at 95 %."""

from __future__ import annotations

from functools import lru_cache
from math import ceil, sqrt

import numpy as np
from scipy.special import bdtr

from rigbench.arm.arm import Floats

__all__ = [
    "MEDIAN",
    "P95",
    "SCORE_LIMIT",
    "draws_needed",
    "draws_to_decide",
    "misses_allowed",
    "quantile_interval",
    "quantiles",
    "sign_test",
    "wilson",
]

MEDIAN, P95 = 0.5, 0.95

TAIL = 0.025
"""What each end of an interval may miss."""

SCORE_LIMIT = 1.959963984540054
"""The normal quantile at 0.975."""


def wilson(passed: int, draws: int) -> tuple[float, float]:
    """Return the Wilson score interval of a share, (low, high).

    All shares p with abs(passed / draws - p) <= z sqrt(p (1 - p) / draws), z = 1.96 (Wilson 1927).
    (0, 1) for no draws.
    """
    if draws == 0:
        return 0.0, 1.0
    share, z2 = passed / draws, SCORE_LIMIT**2 / draws
    centre = share + z2 / 2.0
    half = sqrt(z2 * (share * (1.0 - share) + z2 / 4.0))
    low = 0.0 if passed == 0 else (centre - half) / (1.0 + z2)
    high = 1.0 if passed == draws else (centre + half) / (1.0 + z2)
    return low, high


def draws_needed(required_share: float, misses: int = 0) -> int | None:
    """Return the smallest number of draws that shows ``required_share`` in spite of so many misses.

    That is, the Wilson interval's low end reaches it: 73 for 0.95 without a miss. None for a share of
    1, which no number of draws can show.
    """
    if required_share >= 1.0:
        return None
    enough = max(1, misses)
    while wilson(enough - misses, enough)[0] < required_share:
        enough *= 2
    short = enough // 2
    while enough - short > 1:
        middle = (short + enough) // 2
        if middle >= misses and wilson(middle - misses, middle)[0] >= required_share:
            enough = middle
        else:
            short = middle
    return enough


def misses_allowed(required_share: float, draws: int) -> int | None:
    """Return how many of ``draws`` may miss and still show the share; None if even none is too many."""
    allowed = None
    for misses in range(draws + 1):
        if wilson(draws - misses, draws)[0] < required_share or draws == 0:
            break
        allowed = misses
    return allowed


def draws_to_decide(share: float, required_share: float) -> int | None:
    """Return how many draws would settle an open cell if its pass share stays at ``share``.

    n = z^2 r (1 - r) / (share - r)^2 with r the required share: where the Wilson interval's end meets
    r. None if they are equal, or if a share of 1 is to be shown.
    """
    gap = share - required_share
    variance = required_share * (1.0 - required_share)
    if gap == 0.0 or (gap > 0.0 and variance == 0.0):
        return None
    return max(1, ceil(SCORE_LIMIT**2 * variance / gap**2 - 1e-9))


def sign_test(ahead: int, behind: int) -> bool:
    """Whether ``ahead`` outnumbers ``behind`` beyond chance: the exact sign test, tail 0.025.

    Equal to: the Clopper-Pearson interval of ahead / (ahead + behind) lies above one half.
    """
    return ahead > behind and float(bdtr(behind, ahead + behind, 0.5)) <= TAIL


@lru_cache(maxsize=4096)
def _ranks(n: int, share: float) -> tuple[int, int, int]:
    """Return the ranks (from 1) of the quantile and of its interval's ends; 0 or n + 1 where there is none.

    X(r) bounds the quantile from below if P(B < r) <= 0.025, and X(s) from above if P(B >= s) <= 0.025,
    with B binomial (n, share): whatever the scores' distribution, ties included. To agree with the pass
    share's verdict, an end must hold by the Wilson interval too (this alone makes 73 of 72 draws).
    """
    point = min(n, max(1, ceil(share * n)))
    counts = np.arange(n + 1)
    below = bdtr(counts, n, share)  # P(B <= k)
    low = int(np.sum(below[:n] <= TAIL))
    high = int(np.sum(below < 1.0 - TAIL)) + 1
    while low > 0 and wilson(low - 1, n)[1] >= share:
        low -= 1
    while high <= n and wilson(high, n)[0] < share:
        high += 1
    return point, low, high


def quantile_interval(values: Floats, share: float, least: float = 0.0) -> tuple[float, float, float]:
    """Return a quantile of ``values`` (n,) and its 95 % interval: (point, low, high).

    All three are order statistics, so values may be inf. The point is the smallest value that at
    least ``share`` of the values do not exceed (the inverted distribution function; of an even number
    the median is thus the lower of the middle two). The interval is the binomial one and covers at
    least 95 % for any distribution. Where the draws don't reach, its high end is inf (fewer than 73
    for the 95th percentile, fewer than 6 for the median) and its low end ``least``, the lowest value
    that there can be: 0 for a score, -inf for a difference.
    """
    table = quantiles(values[:, None], (share,), least)[0]
    return float(table[0]), float(table[1]), float(table[2])


def quantiles(values: Floats, shares: tuple[float, ...] = (MEDIAN, P95), least: float = 0.0) -> Floats:
    """Return point, low and high of each of ``shares`` for each column of ``values``.

    (n, S) to (S, 3 len(shares)), as :func:`quantile_interval` for each column. NaN marks a value that
    is absent: it does not count; a column without any value gives NaN.
    """
    ordered = np.sort(values, axis=0)  # NaN last
    present = np.sum(~np.isnan(values), axis=0)
    table = np.full((values.shape[1], 3 * len(shares)), np.nan)
    for n in np.unique(present[present > 0]):
        columns = present == n
        framed = np.vstack(
            (np.full((1, values.shape[1]), least), ordered[:n], np.full((1, values.shape[1]), np.inf))
        )
        ranks = [rank for share in shares for rank in _ranks(int(n), share)]
        table[columns] = framed[ranks][:, columns].T
    return table

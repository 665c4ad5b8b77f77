"""Sobol indices: the part that each group of parameters has in the variance of a score."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np

from rigbench.arm.arm import Floats

__all__ = ["VarianceShares", "variance_shares"]

RESAMPLES = 1000
ROUNDING = 1e-15
"""Variances up to this part of the squared range come from rounding."""


@dataclass(frozen=True, eq=False)
class VarianceShares:
    """First-order and total index of each of G groups, (G, 3): value, low and high of the 95 % interval.

    ``scale`` says of what: the 'score', or its 'rank' where some runs have an infinite one. ``points`` is the
    number of rows that count. NaN where there is no variance to share, and where no row counts.
    """

    first: Floats
    total: Floats
    scale: Literal["score", "rank"]
    points: int


def variance_shares(a: Floats, b: Floats, mixed: Floats, seed: int = 0) -> VarianceShares:
    """Return the variance shares of G groups from the outputs at the points of a design.

    ``a`` and ``b`` (n,), ``mixed`` (G, n): as :func:`rigbench.scores.pick_freeze.pick_freeze` lays them out.
    The first-order index is the part of the variance that goes when the group is known, the total index
    the part that stays when all others are; both are 1 for a lone group. Estimators: mean of
    b (mixed - a) over the variance (Saltelli and others 2010, Computer Physics Communications 181,
    table 2 b), and half the mean of (a - mixed)^2 over it (Jansen 1999; there f), both from memory; outputs
    are taken from their mean, the variance is that of a and b. A first-order value may fall below 0 by
    chance.

    A row with a NaN (a run of which the machine has no verdict) does not count. Infinite outputs (a run that
    did not finish) have no variance: if there are any, all outputs are replaced by their ranks among all
    (ties share their mean rank), so the shares are of the variance of the rank, in which a failed run is
    merely worse than any other. Give pass or fail as 0 or 1 to share that variance instead.

    The intervals are the percentile bootstrap's over rows, 1000 times. They are meant for independent rows;
    those of a Sobol' sequence vary less, so the intervals are then on the wide side.
    """
    table = np.vstack((a[None], b[None], mixed))
    table = table[:, ~np.any(np.isnan(table), axis=0)]
    scale: Literal["score", "rank"] = "score" if np.all(np.isfinite(table)) else "rank"
    if scale == "rank":
        from scipy.stats import rankdata

        table = rankdata(table, axis=None).reshape(table.shape)
    n, nothing = table.shape[1], np.full((len(mixed), 3), np.nan)
    if n == 0 or np.ptp(table[:2]) == 0.0:
        return VarianceShares(nothing, nothing, scale, n)
    # An output's unit and size say nothing, and squares of either could overflow.
    table = (table - np.mean(table[:2])) / np.ptp(table)
    value = _indices(np.full((1, n), 1.0), table)[0]
    if np.all(np.isnan(value)):  # what a and b vary by is rounding beside what the groups make of it
        return VarianceShares(nothing, nothing, scale, n)
    again = _indices(_resampled(n, seed), table)
    low, high = np.nanquantile(again, (0.025, 0.975), axis=0)
    found = np.stack((value, np.minimum(low, value), np.maximum(high, value)), axis=2)
    return VarianceShares(found[0], found[1], scale, n)


def _resampled(n: int, seed: int) -> Floats:
    """Return how often each of n rows is in each resample, (1000, n)."""
    taken = np.random.default_rng(seed).integers(n, size=(RESAMPLES, n)) + n * np.arange(RESAMPLES)[:, None]
    return np.bincount(taken.ravel(), minlength=RESAMPLES * n).reshape(RESAMPLES, n).astype(float)


def _indices(weights: Floats, table: Floats) -> Floats:
    """Return first and total indices, (R, 2, G), of rows weighed by each of ``weights`` (R, n)."""
    a, b, mixed = table[0], table[1], table[2:]
    terms = (a, b, a**2, b**2, *(b * (mixed - a)), *(0.5 * (a - mixed) ** 2))
    means = weights @ np.stack(terms, axis=1) / weights.sum(axis=1, keepdims=True)
    variance = (means[:, 2] + means[:, 3]) / 2.0 - ((means[:, 0] + means[:, 1]) / 2.0) ** 2
    variance = np.where(variance > ROUNDING, variance, np.nan)
    shares: Floats = (means[:, 4:] / variance[:, None]).reshape(len(weights), 2, len(mixed))
    return shares

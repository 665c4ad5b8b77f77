"""How much larger each score of a cell is than in the nominal one: its degradation."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.scores.cell import CountedDraws
from rigbench.scores.comparison import Comparison, paired_ratio
from rigbench.scores.intervals import MEDIAN, quantiles
from rigbench.scores.pairs import CLEAR
from rigbench.scores.results import Cell

__all__ = ["ratios_to_nominal"]

Counted = tuple[Cell, CountedDraws, bool]
"""A cell, its draws that count with all scores, and whether anything in it is random."""


def ratios_to_nominal(names: Sequence[str], of: Counted, nominal: Counted) -> Mapping[str, Comparison]:
    """Return the median ratio of each score that both cells have to nominal's, with its interval.

    Draw by draw where nominal is random too, by :func:`paired_ratio` with an order-statistic interval; else
    the score's median and its interval over nominal's one exact run, and none where that run has no finite
    value. Where nominal's score is 0 the ratio is inf, or 1 if both are 0. Scores are those of ``names``, in
    order.
    """
    (cell, here, random), (foot, foot_here, foot_random) = of, nominal
    if not foot_random:
        return dict(_over_one_run(cell, foot, random))
    if not random:  # one exact run over a random nominal: no pairs, and no one value to divide by
        return {}
    _, mine, theirs = np.intersect1d(here.draws, foot_here.draws, assume_unique=True, return_indices=True)
    one, other = here.worst[mine], foot_here.worst[theirs]
    absent = np.isnan(one) | np.isnan(other)
    table = quantiles(np.where(absent, np.nan, paired_ratio(one, other)), (MEDIAN,))
    draws = np.sum(~absent, axis=0)
    return {
        name: Comparison(value, low, high, n, low <= 1.0 <= high)
        for name, n, (value, low, high) in zip(names, draws.tolist(), table.tolist(), strict=True)
        if n and name in cell.measures and name in foot.measures
    }


def _over_one_run(cell: Cell, foot: Cell, random: bool) -> Mapping[str, Comparison]:
    found = {}
    for name, measure in cell.measures.items():
        least = foot.measures[name].median if name in foot.measures else np.inf
        if not np.isfinite(least):
            continue
        ends: Floats = np.array([measure.median, measure.median_low, measure.median_high])
        value, low, high = paired_ratio(ends, np.full(3, least)).tolist()
        slack = 0.0 if random else CLEAR
        tie = low <= 1.0 + slack and (1.0 - slack) <= high
        found[name] = Comparison(value, low, high, cell.draws, tie)
    return found

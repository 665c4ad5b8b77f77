"""Two sets of scores of the same draws compared, draw by draw."""

from __future__ import annotations

from dataclasses import dataclass
from math import inf

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.scores.intervals import MEDIAN, quantile_interval
from rigbench.scores.pairs import CLEAR, paired_difference

__all__ = ["Comparison", "compare_by_difference", "paired_ratio"]


@dataclass(frozen=True)
class Comparison:
    """A median of paired differences or ratios with its 95 % interval, over so many ``draws``.

    ``tie`` says that neither side is shown to be lower: the interval holds 0 (a ratio's: 1).
    """

    value: float
    low: float
    high: float
    draws: int
    tie: bool


def paired_ratio(one: Floats, other: Floats) -> Floats:
    """Return one / other, draw by draw, of scores at least 0.

    1 where they are equal to rounding, or both infinite, or both 0; inf where only the other is 0.
    """
    tie = paired_difference(one, other) == 0.0
    with np.errstate(invalid="ignore", divide="ignore"):
        ratio = one / other
    return np.where(tie, 1.0, ratio)


def compare_by_difference(one: Floats, other: Floats, random: bool = True) -> Comparison | None:
    """Return the median of one - other over the same draws, (n,) each; None without a draw.

    Its interval is the order-statistic one, for the reasons and by the rule of
    :func:`rigbench.scores.pairs.better`, so what is no tie here decides there. It covers at least 95 %
    for any distribution and number of draws (below 6 it has no ends), and values may be inf. Where
    nothing is ``random`` the one difference is exact, and a tie if it is within 1 % of the larger score.
    """
    pairs = paired_difference(one, other)
    if len(pairs) == 0:
        return None
    if not random:
        value, mine, theirs = (float(scores[0]) for scores in (pairs, one, other))
        tie = not (mine < (1.0 - CLEAR) * theirs or theirs < (1.0 - CLEAR) * mine)
        return Comparison(value, value, value, 1, tie)
    value, low, high = quantile_interval(pairs, MEDIAN, -inf)
    return Comparison(value, low, high, len(pairs), low <= 0.0 <= high)

"""Two sets of scores of the same draws compared, draw by draw; and a cell with the nominal one."""

from __future__ import annotations

from dataclasses import dataclass
from math import inf

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.scores.intervals import MEDIAN, quantile_interval
from rigbench.scores.pairs import CLEAR, paired_difference

__all__ = ["Comparison", "compare_by_difference", "compare_by_ratio", "degradation", "paired_ratio"]


@dataclass(frozen=True)
class Comparison:
    """A quantile of paired differences or ratios with its 95 % interval, over so many ``draws``.

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
    return _compared(paired_difference(one, other), MEDIAN, 0.0, -inf, None if random else (one, other))


def compare_by_ratio(one: Floats, other: Floats, random: bool = True) -> Comparison | None:
    """Return the median of one / other over the same draws, as :func:`compare_by_difference` does."""
    return _compared(paired_ratio(one, other), MEDIAN, 1.0, 0.0, None if random else (one, other))


def degradation(values: Floats, nominal: Floats, share: float = MEDIAN) -> Comparison | None:
    """Return by how much a cell's score is larger than nominal: a quantile of the ratios, draw by draw.

    ``values`` (n,) are the cell's; ``nominal`` (n,) those of the same draws in the nominal cell, or (1,)
    its one exact run, and then the result is the quantile ``share`` of the cell's score over nominal's. An
    order-statistic interval. None without a draw, and where the one nominal run did not finish: of an
    infinite error there is no multiple. Where nominal's score is 0 the ratio is inf, or 1 if both are 0.
    """
    if len(nominal) == 0 or (len(nominal) == 1 and not np.isfinite(nominal[0])):
        return None
    return _compared(paired_ratio(values, np.broadcast_to(nominal, values.shape)), share, 1.0, 0.0, None)


def _compared(
    pairs: Floats, share: float, same: float, least: float, exact: tuple[Floats, Floats] | None
) -> Comparison | None:
    """Return the quantile of what was paired; ``same`` is a tie's value, ``least`` the lowest there is."""
    if len(pairs) == 0:
        return None
    if exact is not None:
        one, other = (float(scores[0]) for scores in exact)
        tie = not (one < (1.0 - CLEAR) * other or other < (1.0 - CLEAR) * one)
        value = float(pairs[0])
        return Comparison(value, value, value, 1, tie)
    value, low, high = quantile_interval(pairs, share, least)
    return Comparison(value, low, high, len(pairs), low <= same <= high)

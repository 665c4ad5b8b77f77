"""A share's interval that holds after every draw at once, so that one may look and stop at any time.

A 95 % interval is wrong in 5 % of the campaigns if one looks once, and far more often if one stops
at the first look that pleases. A confidence sequence is wrong at any time at all in 5 % at most.
"""

from __future__ import annotations

from functools import lru_cache
from math import log

from scipy.optimize import brentq
from scipy.special import betaln, xlog1py, xlogy

__all__ = ["anytime_interval", "draws_to_settle", "settled"]

RARE = log(20.0)
"""Of the evidence against a share: what one in 20 campaigns ever reaches, if the share is the true one."""


def evidence_against(share: float, passed: float, draws: int) -> float:
    """Return the logarithm of the evidence that the draws hold against a pass share.

    log of M = B(k + 1, n - k + 1) / (p^k (1 - p)^(n - k)), k of n passed, B the beta function: the
    likelihood of a uniformly distributed share, Beta(1, 1), over that of p. Under p it is a martingale of
    mean 1, so by Ville's inequality (1939) it ever reaches 20 with probability 1/20 at most (Robbins 1970,
    "Statistical methods related to the law of the iterated logarithm"; Howard, Ramdas, McAuliffe, Sekhon
    2021, "Time-uniform, nonparametric, nonasymptotic confidence sequences"; from memory).
    """
    missed = draws - passed
    return float(betaln(passed + 1, missed + 1) - xlogy(passed, share) - xlog1py(missed, -share))


def anytime_interval(passed: int, draws: int) -> tuple[float, float]:
    """Return the 95 % interval of a share that holds for all numbers of draws at once: (low, high).

    All shares against which the evidence is below 20. (0, 1) for no draws.
    """

    def excess(share: float) -> float:
        return evidence_against(share, passed, draws) - RARE

    share = passed / draws if draws else 0.5
    low = 0.0 if passed == 0 else float(brentq(excess, 1e-300, share, xtol=1e-12))
    high = 1.0 if passed == draws else float(brentq(excess, share, 1.0 - 2.0**-53, xtol=1e-12))
    return low, high


def settled(passed: int, draws: int, required_share: float) -> str:
    """Return 'keeps' or 'misses' once the anytime interval lies on one side of the share, until then 'open'.

    It may be asked after every draw, and acted on at once: over all the times asked together it calls
    a law wrong in 5 % of the campaigns at most.
    """
    if required_share <= 0.0:
        return "keeps"
    if draws == 0 or evidence_against(required_share, passed, draws) < RARE:
        return "open"
    return "keeps" if passed > required_share * draws else "misses"


@lru_cache(maxsize=1024)
def draws_to_settle(required_share: float, share: float = 1.0) -> int | None:
    """Return how many draws settle a law whose pass share stays at ``share``; None if no number does.

    Without a miss, a share of 1, that is the price of looking at any time: 158 for 0.95, where a single look
    needs 73. The evidence falls at first and then rises with the draws, so it reaches 20 once.
    """
    if share == required_share or share >= required_share >= 1.0:
        return None

    def enough(draws: int) -> bool:
        return evidence_against(required_share, share * draws, draws) >= RARE

    high = 1
    while not enough(high):
        high *= 2
    low = high // 2
    while high - low > 1:
        middle = (low + high) // 2
        low, high = (low, middle) if enough(middle) else (middle, high)
    return high

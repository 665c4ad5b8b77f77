"""How much of its limits a run uses up: the largest of its scores over their limits."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass

from rigbench.scores.row import MACHINE_OUTCOMES, Row

__all__ = ["LimitShare", "limit_share"]


@dataclass(frozen=True)
class LimitShare:
    """``share`` of a limit that is used up: above 1 where the run misses the tolerance.

    ``score`` is that with the largest share and ``value`` what it came to. Of a run that did not finish the
    share and the value are inf, and the score is ''.
    """

    share: float
    score: str
    value: float


def limit_share(row: Row, limits: Mapping[str, float]) -> LimitShare | None:
    """Return how much of ``limits`` ('at most', by score) a run uses up; None where it has no verdict.

    A score above a limit of 0 has the share inf. Scores that the motion does not have are left out; 0 where
    it has none of them.
    """
    if row.outcome not in MACHINE_OUTCOMES:
        return None
    if row.outcome != "finished":
        return LimitShare(math.inf, "", math.inf)
    shares = [
        LimitShare(_share(row.scores[score], most), score, row.scores[score])
        for score, most in limits.items()
        if score in row.scores
    ]
    return max(shares, key=lambda each: each.share, default=LimitShare(0.0, "", 0.0))


def _share(value: float, most: float) -> float:
    if most == 0.0:
        return math.inf if value > 0.0 else 0.0
    return value / most

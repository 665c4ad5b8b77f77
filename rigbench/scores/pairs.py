"""Two laws on the same draws: which is better.

The rule by which law A is *better* than law B in a column, on the draws that count for both:

- Pass shares come first. If more draws pass under A alone than under B alone, beyond what chance does
  (exact sign test, that is: the 95 % Clopper-Pearson interval of A's part of these draws lies above one
  half), A is better; the other way round it is not.
- If the pass shares can't be told apart, A is better when at least as many draws pass under it and the
  whole 95 % order-statistic interval of the paired median difference of the main score lies below 0.
- Where nothing is random, A is better when it passes and B doesn't; or, if both pass or both fail, when its
  main score is more than 1 % lower.

A law is the *best* of its column when it is better than every other law there. So a law of which no draw
counts, or too few, leaves its column without a best one; a tie is a tie.
"""

from __future__ import annotations

from collections.abc import Mapping
from math import inf

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.scores.cell import CountedDraws
from rigbench.scores.intervals import MEDIAN, quantile_interval, sign_test

__all__ = ["CLEAR", "best_law", "better", "paired_difference"]

SAME = 1e-9
"""Scores that differ by less than this part of the larger are equal: rounding decides nothing."""

CLEAR = 0.01
"""The part by which one exact score must lie below another to count as lower."""


def paired_difference(one: Floats, other: Floats) -> Floats:
    """Return one - other, draw by draw; 0 where they are equal to rounding, or both infinite."""
    larger = np.maximum(np.abs(one), np.abs(other))
    with np.errstate(invalid="ignore"):
        difference = one - other
    # The negated comparison is also true of inf - inf, which is not a number.
    tie = ~(np.abs(difference) > SAME * np.where(np.isfinite(larger), larger, 0.0))
    return np.where(tie, 0.0, difference)


def better(one: CountedDraws, other: CountedDraws, main: int, random: bool) -> bool:
    """Whether ``one`` is better than ``other``, by the rule above; ``main`` is the main score's column."""
    _, mine, theirs = np.intersect1d(one.draws, other.draws, assume_unique=True, return_indices=True)
    passed, theirs_passed = one.passed[mine], other.passed[theirs]
    ahead, behind = int(np.sum(passed & ~theirs_passed)), int(np.sum(theirs_passed & ~passed))
    score, their_score = one.worst[mine, main], other.worst[theirs, main]
    if not random:
        lower = np.any(score < (1.0 - CLEAR) * their_score)
        return len(mine) > 0 and (ahead > behind or (ahead == behind and bool(lower)))
    if sign_test(ahead, behind):
        return True
    if ahead < behind:
        return False
    difference = paired_difference(score, their_score)
    return len(mine) > 0 and quantile_interval(difference, MEDIAN, least=-inf)[2] < 0.0


def best_law(column: Mapping[str, CountedDraws], main: int, random: bool) -> str | None:
    """Return the law that is better than every other one of its column, if there is one."""
    for law, draws in column.items():
        others = [other for name, other in column.items() if name != law]
        if others and all(better(draws, other, main, random) for other in others):
            return law
    return None

"""Two laws on the same draws: which is better, and where that changes.

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

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from functools import lru_cache
from itertools import combinations
from math import inf

import numpy as np
from numpy.typing import NDArray

from rigbench.arm.arm import Floats
from rigbench.scores.cell import CountedDraws
from rigbench.scores.intervals import MEDIAN, quantile_interval, sign_test
from rigbench.scores.results import Column

__all__ = ["BreakEven", "best_law", "better", "break_even_levels", "paired_difference"]

RESAMPLES = 1000
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


@dataclass(frozen=True)
class BreakEven:
    """Where two laws change places: ``below`` it, that law has the lower score."""

    laws: tuple[str, str]
    value: float
    low: float
    high: float
    below: str


def break_even_levels(
    ladders: Mapping[str, Sequence[tuple[Column, CountedDraws]]], main: int
) -> Iterator[BreakEven]:
    """Yield the break-even level of each pair of laws whose order by the main score changes.

    ``ladders`` holds each law's columns of rising level with the draws that count. The break-even level
    is the lowest at which the median over draws of the paired difference changes sign, linear between
    levels, or midway between two if the difference is infinite at either. Its 95 % interval is the
    bootstrap's over draws: 1000 times as many draws are taken anew, each with all its levels, always by
    the same random numbers. Its high end is inf where more than 2.5 % of these don't show the change.
    """
    for one, other in combinations(ladders, 2):
        levels, differences = _on_common_draws(ladders[one], ladders[other], main)
        if not differences.size:
            continue
        medians = _median(differences.T)
        low, high, before = _sign_change(levels, medians[None, :], 0.0)
        if np.isinf(high[0]):
            continue
        again = _resampled(len(differences))
        samples = np.stack([_median(values[again]) for values in differences.T], axis=1)
        lows, highs, _ = _sign_change(levels, samples, before[0])
        value = float(low[0] + high[0]) / 2.0
        yield BreakEven(
            laws=(one, other),
            value=value,
            low=min(value, float(np.quantile(lows, 0.025, method="inverted_cdf"))),
            high=max(value, float(np.quantile(highs, 0.975, method="inverted_cdf"))),
            below=one if before[0] < 0.0 else other,
        )


def _on_common_draws(
    one: Sequence[tuple[Column, CountedDraws]], other: Sequence[tuple[Column, CountedDraws]], main: int
) -> tuple[Floats, Floats]:
    """Return the levels (L,) that both laws have, and their differences (D, L) on the draws that all share.

    A level where nothing is random has one difference, which stands for every draw.
    """
    pairs = [
        (column, mine, theirs)
        for (column, mine), (_, theirs) in zip(one, other, strict=True)
        if len(mine.draws) and len(theirs.draws)
    ]
    numbers = [set(cell.draws.tolist()) for column, *cells in pairs if column.random for cell in cells]
    common = np.array(sorted(set.intersection(*numbers)) if numbers else [0], dtype=np.int64)
    differences = np.empty((len(common), len(pairs)))
    for place, (column, mine, theirs) in enumerate(pairs):
        scores = [
            cell.worst[np.searchsorted(cell.draws, common) if column.random else 0, main]
            for cell in (mine, theirs)
        ]
        differences[:, place] = paired_difference(*scores)
    return np.array([column.level or 0.0 for column, *_ in pairs]), differences


@lru_cache(maxsize=1)
def _resampled(draws: int) -> NDArray[np.int64]:
    """Return the places of the draws in each resample (1000, draws), the same at every call."""
    return np.random.default_rng(0).integers(draws, size=(RESAMPLES, draws))


def _median(values: Floats) -> Floats:
    """Return the median of each row; where its middle two are -inf and inf, a tie: 0."""
    n = values.shape[1]
    ordered = np.partition(values, ((n - 1) // 2, n // 2), axis=1)
    with np.errstate(invalid="ignore"):
        middle = (ordered[:, (n - 1) // 2] + ordered[:, n // 2]) / 2.0
    return np.where(np.isnan(middle), 0.0, middle)


def _sign_change(levels: Floats, medians: Floats, expected: float) -> tuple[Floats, Floats, Floats]:
    """Return between which levels each row of ``medians`` (B, L) first changes sign, and its sign before.

    Both levels are the same where the crossing is exact. A zero has no sign of its own. Where a row
    never changes, it crosses beyond all levels (inf); or at the lowest if it has the sign that comes
    after the change ``expected`` (the sign before it) all along.
    """
    signs = np.sign(medians)
    for step in range(1, signs.shape[1]):
        signs[:, step] = np.where(signs[:, step] == 0.0, signs[:, step - 1], signs[:, step])
    changes = signs[:, :-1] * signs[:, 1:] < 0.0
    rows = np.arange(len(medians))
    k = np.argmax(changes, axis=1) if changes.shape[1] else np.zeros(len(medians), dtype=np.int64)
    after = np.minimum(k + 1, len(levels) - 1)
    start, end = medians[rows, k], medians[rows, after]
    exact = np.isfinite(start) & np.isfinite(end)
    with np.errstate(invalid="ignore", divide="ignore"):
        crossing = levels[k] + start / (start - end) * (levels[after] - levels[k])
    never = np.where((signs[:, -1] == -expected) & (expected != 0.0), levels[0], np.inf)
    changed = np.any(changes, axis=1)
    low = np.where(changed, np.where(exact, crossing, levels[k]), never)
    high = np.where(changed, np.where(exact, crossing, levels[after]), never)
    return low, high, signs[rows, k]

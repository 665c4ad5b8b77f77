"""The break-even level: where one law's error equals another's."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from itertools import combinations
from math import inf

import numpy as np
from numpy.typing import NDArray

from rigbench.arm.arm import Floats
from rigbench.scores.cell import CountedDraws
from rigbench.scores.medians import median_bounds
from rigbench.scores.pairs import paired_difference
from rigbench.scores.results import Column

__all__ = ["BreakEven", "Crossing", "break_even_levels", "crossing_level"]

START, MIDDLE, END = 0.0, 0.5, 1.0
"""Which point between two levels stands for a crossing that can't be interpolated."""


@dataclass(frozen=True)
class Crossing:
    """The level at which a median difference changes sign, and its 95 % interval.

    inf stands for beyond the largest level (if anywhere), -inf for below the smallest. ``before`` is the
    sign that the difference has below the crossing: -1 or 1.
    """

    value: float
    low: float
    high: float
    before: int


@dataclass(frozen=True)
class BreakEven:
    """Where two laws change places: ``below`` it, that law has the lower score."""

    laws: tuple[str, str]
    value: float
    low: float
    high: float
    below: str


def crossing_level(
    levels: Floats, differences: Floats, exact: NDArray[np.bool_] | None = None, before: int = 0
) -> Crossing | None:
    """Return the lowest level at which the median over draws of a paired difference changes sign.

    ``levels`` (L,) rise; ``differences`` (D, L) are one law's score less the other's, of the same draws at
    all levels; they may be infinite, and 0 is a tie. Where ``exact`` (L,), nothing is random and the first
    draw's difference is the median, without doubt. ``before`` is the sign below the crossing that is asked
    for; 0: the one met first. None where there is no draw, or where every median is a tie and no sign is
    asked for.

    The median is taken as linear between levels; where it is infinite at one of two, it crosses midway.
    The interval is where the sign can't be told from the opposite one: from where the high end of the
    median's own 95 % interval first reaches 0 to where its low end first leaves it, linear likewise (a
    sign test at every level, inverted). So it covers 95 % for any distribution if one draw's differences
    go together from level to level, and more if they don't.
    """
    if not differences.size:
        return None
    middle, low, high = median_bounds(differences)
    if exact is not None:
        middle, low, high = (np.where(exact, differences[0], curve) for curve in (middle, low, high))
    signs = np.sign(middle[middle != 0.0])
    if before == 0 and not signs.size:
        return None
    before = before or int(signs[0])
    if before > 0:
        middle, low, high = -middle, -high, -low
    value = _leaves_zero(levels, middle, MIDDLE)
    start = min(_reaches_zero(levels, high), value)
    return Crossing(value, start, max(_leaves_zero(levels, low, END), value), before)


def _reaches_zero(levels: Floats, curve: Floats) -> float:
    """Return the lowest level at which the curve is 0 or above."""
    above = np.flatnonzero(curve >= 0.0)
    if not above.size:
        return inf
    k = int(above[0])
    if k == 0:
        return -inf if curve[0] > 0.0 else float(levels[0])
    return _zero_between(levels, curve, k, START)


def _leaves_zero(levels: Floats, curve: Floats, otherwise: float) -> float:
    """Return the level from which on the curve is first above 0."""
    above = np.flatnonzero(curve > 0.0)
    if not above.size:
        return inf
    return -inf if above[0] == 0 else _zero_between(levels, curve, int(above[0]), otherwise)


def _zero_between(levels: Floats, curve: Floats, k: int, otherwise: float) -> float:
    """Return where the curve, at most 0 at level k - 1 and at least 0 at k, crosses 0."""
    start, end = float(curve[k - 1]), float(curve[k])
    part = -start / (end - start) if np.isfinite(start) and np.isfinite(end) else otherwise
    return float(levels[k - 1] + part * (levels[k] - levels[k - 1]))


def break_even_levels(
    ladders: Mapping[str, Sequence[tuple[Column, CountedDraws]]], main: int
) -> Iterator[BreakEven]:
    """Yield the break-even level of each pair of laws whose order by the main score changes.

    ``ladders`` holds each law's columns of rising level with the draws that count; the draws that count
    for both laws at all levels are compared, as :func:`crossing_level` says.
    """
    for one, other in combinations(ladders, 2):
        levels, differences, exact = _on_common_draws(ladders[one], ladders[other], main)
        found = crossing_level(levels, differences, exact)
        if found is not None and found.value < inf:
            below = one if found.before < 0 else other
            # There is no level below the lowest that was run, which is 0: nominal.
            yield BreakEven((one, other), found.value, max(found.low, float(levels[0])), found.high, below)


def _on_common_draws(
    one: Sequence[tuple[Column, CountedDraws]], other: Sequence[tuple[Column, CountedDraws]], main: int
) -> tuple[Floats, Floats, NDArray[np.bool_]]:
    """Return the levels (L,) that both laws have, their differences (D, L) on the draws that all share,
    and which levels are exact (L,).

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
    levels = np.array([column.level or 0.0 for column, *_ in pairs])
    return levels, differences, np.array([not column.random for column, *_ in pairs], dtype=bool)

"""What a search for each draw's own limit has shown, joined with the ladder of the matrix."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from rigbench.arm.arm import Floats
from rigbench.scores.cell import CountedDraws
from rigbench.scores.own_limits import FoundLevel, OwnLimits, own_limits, tolerated_of_limits
from rigbench.scores.results import Column, LevelSearch

__all__ = ["Searched", "found_level"]


@dataclass(frozen=True, eq=False)
class Searched(LevelSearch):
    """A search with what it has run: by sheet and law, the levels (n, K) of each draw, NaN for none, and
    whether the draw kept there (n, K)."""

    levels: Mapping[tuple[str, str], tuple[Floats, NDArray[np.bool_]]]


def found_level(
    search: Searched,
    place: tuple[str, str],
    rungs: Iterable[tuple[Column, CountedDraws]],
    required_share: float,
) -> tuple[FoundLevel, OwnLimits]:
    """Return the tolerated level of a law in a sheet, ``place``, by its draws' own limits.

    The draws of the search count, with whatever the ladder's ``rungs`` show of them besides. A draw that the
    host's trouble left without a bracket as fine as was asked for is counted as left open; its limit
    may lie anywhere in the bracket that it has, and the interval allows for that.
    """
    nothing = np.full((search.draws, 0), np.nan), np.zeros((search.draws, 0), dtype=bool)
    levels, kept = search.levels.get(place, nothing)
    parts = [(levels, kept), *(_rung(column, here, search.draws) for column, here in rungs)]
    limits = own_limits(*(np.concatenate(each, axis=1) for each in zip(*parts, strict=True)))
    wide = limits.high - limits.low > search.finest * (1.0 + 1e-9)
    left_open = wide & (limits.low < search.most) & (limits.high > 0.0)
    found = tolerated_of_limits(limits, required_share)
    return replace(found, left_open=int(np.sum(left_open))), limits


def _rung(column: Column, here: CountedDraws, draws: int) -> tuple[Floats, NDArray[np.bool_]]:
    """Return a rung's level and whether it is kept, (n, 1) each; an exact run holds for all draws."""
    level = column.level or 0.0
    if not column.random:
        known = len(here.draws) > 0
        return (
            np.full((draws, 1), level if known else np.nan),
            np.full((draws, 1), known and bool(here.passed[0])),
        )
    levels, kept = np.full((draws, 1), np.nan), np.zeros((draws, 1), dtype=bool)
    mine = here.draws < draws
    levels[here.draws[mine], 0] = level
    kept[here.draws[mine], 0] = here.passed[mine]
    return levels, kept

"""Every pair of laws on the same draws, at each level of all sources together."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from itertools import combinations
from math import inf

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.scores.cell import CountedDraws
from rigbench.scores.comparison import Comparison, compare_by_difference
from rigbench.scores.gather import CellKey, Frame
from rigbench.scores.intervals import MEDIAN, quantiles
from rigbench.scores.levels import ladder
from rigbench.scores.pairs import paired_difference
from rigbench.scores.results import Column, LawComparison

__all__ = ["compare_laws"]


def compare_laws(
    frame: Frame, count: Mapping[CellKey, CountedDraws], score: str, place: int
) -> Iterator[LawComparison]:
    """Yield how each pair of laws compares under each condition of the ladder, sheet by sheet.

    ``place`` is the column of ``score`` among the draws' scores. The differences are those of
    :func:`compare_by_difference` on the draws that count for both laws; pairs without such a draw are left
    out.
    """
    for sheet in frame.sheets:
        for column in ladder(frame.columns):
            keys = {law: (sheet, law, column.name) for law in frame.laws}
            cells = {law: count[key] for law, key in keys.items() if key in count and len(count[key].draws)}
            for laws, found in _differences(cells, place, column):
                yield LawComparison(sheet, column.name, column.level or 0.0, laws, score, found)


def _differences(
    cells: Mapping[str, CountedDraws], place: int, column: Column
) -> Iterator[tuple[tuple[str, str], Comparison]]:
    pairs = list(combinations(cells, 2))
    if not column.random:
        for one, other in pairs:
            mine, theirs = (cells[law].worst[:1, place] for law in (one, other))
            found = compare_by_difference(mine, theirs, random=False)
            if found is not None:
                yield (one, other), found
        return
    if not pairs:
        return
    table = _by_draw(list(cells.values()), place)
    column_of = {law: k for k, law in enumerate(cells)}
    for one in cells:
        # All pairs of one law at once, and no more: with 20 laws all would be 190 columns of every draw.
        own = [pair for pair in pairs if pair[0] == one]
        mine, theirs = table[:, [column_of[one]]], table[:, [column_of[other] for _, other in own]]
        absent = np.isnan(mine) | np.isnan(theirs)
        gaps = np.where(absent, np.nan, paired_difference(mine, theirs)) if own else np.empty((0, 0))
        draws = np.sum(~absent, axis=0).tolist()
        for pair, n, (value, low, high) in zip(
            own, draws, quantiles(gaps, (MEDIAN,), -inf).tolist(), strict=True
        ):
            if n:
                yield pair, Comparison(value, low, high, n, low <= 0.0 <= high)


def _by_draw(cells: Sequence[CountedDraws], place: int) -> Floats:
    """Return the score of each cell on every draw that any of them has, (D, cells); NaN where it has none."""
    draws = np.unique(np.concatenate([cell.draws for cell in cells]))
    table = np.full((len(draws), len(cells)), np.nan)
    for k, cell in enumerate(cells):
        table[np.searchsorted(draws, cell.draws), k] = cell.worst[:, place]
    return table

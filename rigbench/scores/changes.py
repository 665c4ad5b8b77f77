"""What changed from one store of an experiment to another, cell by cell."""

from __future__ import annotations

from collections.abc import Collection, Mapping
from dataclasses import dataclass, field

import numpy as np

from rigbench.scores.cell import CountedDraws
from rigbench.scores.comparison import Comparison, compare_by_difference
from rigbench.scores.pairs import better
from rigbench.scores.results import Cell, CellKey, Column, Results

__all__ = ["KINDS", "CellChange", "Changes", "changes_since"]

KINDS = ("better", "worse", "unchanged", "not comparable", "no result", "new")
"""What a cell can be, compared with the earlier store."""


@dataclass(frozen=True)
class CellChange:
    """One cell in both stores; ``before`` is None if the earlier one doesn't have it ('new').

    'better' and 'worse' are shown on the draws that count in both; 'unchanged' is not shown to be either;
    'not comparable': nothing is random in one of the two, or they have no draw in common; 'no result': no
    draw counts in one of the two. ``difference`` is the score now less the score then, None without draws
    in common.
    """

    kind: str
    before: Cell | None
    after: Cell
    difference: Comparison | None = None


@dataclass(frozen=True)
class Changes:
    """All cells of the later store against the earlier one, by ``score``; and what only one of them has.

    ``only_after`` and ``only_before`` hold the names of sheets, laws and conditions, by what they are.
    """

    score: str
    cells: Mapping[CellKey, CellChange]
    only_after: Mapping[str, tuple[str, ...]] = field(default_factory=dict)
    only_before: Mapping[str, tuple[str, ...]] = field(default_factory=dict)

    def count(self, kind: str) -> int:
        """Return how many cells are of a kind."""
        return sum(change.kind == kind for change in self.cells.values())


def changes_since(before: Results, after: Results, score: str | None = None) -> Changes:
    """Return what changed, where both results have the same name.

    Without a ``score`` a cell is better or worse by the rule by which laws are compared (see
    :mod:`rigbench.scores.pairs`): pass shares first, then the main score, on the same draws. With one, where
    the 95 % interval of its paired median difference does not hold 0; where nothing is random, where it is
    more than 1 % off. Draws of the same number are the same machine if seed and mismatch are the same; if not
    they are independent pairs, and the tests hold as well, only less sharply. ``score`` must be among those
    that both results were made to compare.
    """
    name = score or after.compared[0]
    known = {cell.key: cell for cell in before.cells}
    columns = {column.name: column for column in before.columns}
    cells = {}
    for cell in after.cells:
        column = next(column for column in after.columns if column.name == cell.condition)
        earlier = known.get(cell.key)
        same = columns.get(cell.condition)
        if earlier is None or same is None:
            cells[cell.key] = CellChange("new", None, cell)
        else:
            cells[cell.key] = _change(before, after, (earlier, cell), (same, column), name, score is None)
    return Changes(name, cells, _only(after, before), _only(before, after))


def _change(
    before: Results,
    after: Results,
    cells: tuple[Cell, Cell],
    columns: tuple[Column, Column],
    score: str,
    by_share: bool,
) -> CellChange:
    earlier, cell = cells
    if not (earlier.draws and cell.draws):
        return CellChange("no result", earlier, cell)
    random = columns[1].random
    if columns[0].random != random:
        return CellChange("not comparable", earlier, cell)
    then, now = (_of(results, cell.key, score) for results in (before, after))
    _, mine, theirs = np.intersect1d(now.draws, then.draws, assume_unique=True, return_indices=True)
    if not len(mine):
        return CellChange("not comparable", earlier, cell)
    known = ~(np.isnan(now.worst[mine, 0]) | np.isnan(then.worst[theirs, 0]))
    mine, theirs = mine[known], theirs[known]
    found = compare_by_difference(now.worst[mine, 0], then.worst[theirs, 0], random)
    if by_share:
        forth, back = better(now, then, 0, random), better(then, now, 0, random)
    elif found is None:
        return CellChange("not comparable", earlier, cell)
    else:
        forth, back = (not found.tie and found.value < 0.0), (not found.tie and found.value > 0.0)
    return CellChange("better" if forth else "worse" if back else "unchanged", earlier, cell, found)


def _of(results: Results, key: CellKey, score: str) -> CountedDraws:
    """Return the draws that count of a cell, with one score alone."""
    here, place = results.counted[key], results.compared.index(score)
    return CountedDraws(here.draws, here.finished, here.passed, here.worst[:, place : place + 1])


def _only(one: Results, other: Results) -> Mapping[str, tuple[str, ...]]:
    """Return the names that only the first of two results has."""

    def missing(mine: Collection[str], theirs: Collection[str]) -> tuple[str, ...]:
        return tuple(name for name in mine if name not in theirs)

    found = {
        "sheet": missing(one.sheets, other.sheets),
        "law": missing(one.laws, other.laws),
        "condition": missing([c.name for c in one.columns], [c.name for c in other.columns]),
    }
    return {what: names for what, names in found.items() if names}

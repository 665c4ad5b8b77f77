"""How the laws compare draw by draw: each against the first one, by their main score."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from rigbench.report.cells import Grid
from rigbench.report.words import signed
from rigbench.scores.comparison import Comparison
from rigbench.scores.levels import ladder
from rigbench.scores.names import score_words

__all__ = ["Pairs", "pairs_of"]


@dataclass(frozen=True)
class Pairs:
    """How laws compare with the first one; ``columns`` are (condition, words for each of the others)."""

    said: str
    others: Sequence[str]
    columns: Sequence[tuple[str, Sequence[str]]]


def pairs_of(grid: Grid, sheet: str, laws: Sequence[str]) -> Pairs | None:
    """Return how the laws of a sheet compare with the first of them, at each level of all sources together.

    Median of the differences over the draws that both have, with its 95 % interval. None for one law, or
    without draws in common.
    """
    results = grid.results
    found = {(one.condition, one.laws): one for one in results.comparisons if one.sheet == sheet}
    if not found or len(laws) < 2:
        return None
    first, others = laws[0], list(laws[1:])
    columns = []
    for column in ladder(results.columns):
        cells = []
        for law in others:
            one, turned = found.get((column.name, (law, first))), found.get((column.name, (first, law)))
            gap = one.difference if one else _turned(turned.difference) if turned else None
            cells.append("no result" if gap is None else _words(gap, column.random))
        columns.append((column.name, cells))
    name, unit = score_words(results.comparisons[0].score)
    said = (
        f"Draw by draw against '{first}': the {name} less its own{f' [{unit}]' if unit else ''}, median "
        "over the draws (95 % interval); a tie where the interval holds 0."
    )
    return Pairs(said, others, columns)


def _turned(one: Comparison) -> Comparison:
    return Comparison(-one.value, -one.high, -one.low, one.draws, one.tie)


def _words(gap: Comparison, random: bool) -> str:
    said = signed(gap.value)
    if random:
        said += f" ({signed(gap.low)} to {signed(gap.high)})"
    return f"{said} tie" if gap.tie else said

"""How the laws compare draw by draw, as a table: each against the one in the first row."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from rich.cells import cell_len

from rigbench.report.cells import Grid
from rigbench.report.table import blocks, laws_column
from rigbench.report.words import signed
from rigbench.report.wrapping import wrap
from rigbench.scores.comparison import Comparison
from rigbench.scores.levels import ladder
from rigbench.scores.names import score_words

__all__ = ["pairs_text"]


def pairs_text(grid: Grid, laws: Sequence[str], width: int) -> Iterator[str]:
    """Yield a table of a single sheet: by how much each law's main score exceeds that of the first law.

    Median of the differences over the draws that both have, with its 95 % interval. Nothing for one law, or
    without draws in common.
    """
    results = grid.results
    found = {(one.condition, one.laws): one for one in results.comparisons if one.sheet == results.sheets[0]}
    first, others = laws[0], list(laws[1:])
    columns = []
    for column in ladder(results.columns):
        cells = []
        for law in others:
            one, turned = found.get((column.name, (law, first))), found.get((column.name, (first, law)))
            gap = one.difference if one else _turned(turned.difference) if turned else None
            cells.append(["no result"] if gap is None else _words(gap, column.random))
        columns.append([[column.name], *cells])
    if not found or not others:
        return
    name, unit = score_words(results.comparisons[0].score)
    said = (
        f"Draw by draw against '{first}': the {name} less its own{f' [{unit}]' if unit else ''}, median "
        "over the draws (95 % interval); a tie where the interval holds 0."
    )
    yield "\n".join(wrap(said, width, cell_len))
    yield from blocks(laws_column(others, width), columns, width)


def _turned(one: Comparison) -> Comparison:
    return Comparison(-one.value, -one.high, -one.low, one.draws, one.tie)


def _words(gap: Comparison, random: bool) -> list[str]:
    said = signed(gap.value)
    if random:
        said += f" ({signed(gap.low)} to {signed(gap.high)})"
    return [f"{said} tie" if gap.tie else said]

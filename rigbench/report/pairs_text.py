"""How the laws compare draw by draw, as a table: each against the one in the first row."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from rich.cells import cell_len

from rigbench.report.cells import Grid
from rigbench.report.pairs_words import pairs_of
from rigbench.report.table import blocks, laws_column
from rigbench.report.wrapping import wrap

__all__ = ["pairs_text"]


def pairs_text(grid: Grid, laws: Sequence[str], width: int) -> Iterator[str]:
    """Yield a table of a single sheet; nothing for one law, or without draws in common."""
    pairs = pairs_of(grid, grid.results.sheets[0], laws)
    if pairs is None:
        return
    columns = [[[name], *([words] for words in cells)] for name, cells in pairs.columns]
    yield "\n".join(wrap(pairs.said, width, cell_len))
    yield from blocks(laws_column(pairs.others, width), columns, width)

"""How the laws compare draw by draw, sheet by sheet."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from typing import Any

from rigbench.report.cells import Grid
from rigbench.report.pairs_words import pairs_of

__all__ = ["pairs_tables"]


def pairs_tables(grid: Grid, laws: Sequence[str]) -> Iterator[dict[str, Any]]:
    """Yield a table for each sheet in which two laws have a draw in common."""
    for sheet in grid.results.sheets:
        pairs = pairs_of(grid, sheet, [law for law in laws if grid.possible(sheet, law)])
        if pairs is not None:
            cells = [cells for _, cells in pairs.columns]
            yield {
                "sheet": sheet,
                "said": pairs.said,
                "heads": [name for name, _ in pairs.columns],
                "rows": list(zip(pairs.others, zip(*cells, strict=True), strict=True)),
            }

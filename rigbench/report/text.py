"""The results matrix as text for a terminal: no frames, no colours, no wider than asked."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from typing import Any

from rich.cells import cell_len

from rigbench.report.cells import EXACT, SHARES, CellWords, Grid
from rigbench.report.limits_words import ENDS, limits_words, tolerated_reading
from rigbench.report.order import laws_in_order
from rigbench.report.pairs_text import pairs_text
from rigbench.report.table import Lines, blocks, laws_column, sheets_column
from rigbench.report.view import P95, RATIO, View
from rigbench.report.words import (
    any_random,
    arm_words,
    has_levels,
    level_words,
    runs_words,
    tolerance_words,
)
from rigbench.report.wrapping import wrap
from rigbench.scores.changes import Changes
from rigbench.scores.names import score_words
from rigbench.scores.results import Results

__all__ = ["matrix_text"]

NARROWEST = 40
FEW, SOME = 4, 12
"""So many sheets have their matrices printed always, and so many if each fits side by side."""


def matrix_text(
    results: Results, width: int = 80, view: View = SHARES, changes: Changes | None = None, more: bool = False
) -> str:
    """Return the results matrix as lines of at most ``width`` columns (40 at least).

    Rows are laws, best tolerated level first. Conditions that don't fit side by side follow in blocks
    below, each with the laws' names again; the last column holds the tolerated levels. Break-even levels
    stand beneath. Of several sheets there is first one table, sheets down and laws across; their matrices
    follow where they are few, or narrow. The advice is not in it. ``more`` adds how the laws compare draw by
    draw; ``changes`` what was otherwise in another store.
    """
    width = max(width, NARROWEST)
    grid = Grid(results, view, changes)
    laws = laws_in_order(grid)
    head = list(_head(results, width))
    limits = ["\n".join(_wrap(said, width)) for said in (limits_words(results),) if said]
    if len(results.sheets) == 1:
        reading = _wrap(_reading(grid, has_levels(results)), width)
        told = pairs_text(grid, laws, width) if more and changes is None else ()
        parts = ["\n".join([*head, *reading]), *_matrices(grid, laws, width), *told]
        return "\n\n".join([*parts, *limits])
    parts = ["\n".join(head), *_across_sheets(grid, laws, width)]
    if has_levels(results) or len(results.columns) > 1:
        parts += _of_sheets(grid, laws, width)
    return "\n\n".join([*parts, *limits])


def _head(results: Results, width: int) -> Iterator[str]:
    yield from _wrap(results.title, width)
    yield from _wrap(f"{arm_words(results)} {runs_words(results)}", width)
    yield from _wrap(tolerance_words(results), width)


def _reading(grid: Grid, levels: bool) -> str:
    """Say what the cells hold."""
    name, ratio = grid.score_name, grid.view.show == RATIO
    was = " Was: in the other store." if grid.changes else ""
    if not any_random(grid.results):
        return f"In each cell: the {name} of one exact run{', times nominal' if ratio else ''}.{was}"
    if not grid.shares:
        of = {P95: "95th percentile over the draws", RATIO: "median ratio to nominal, draw by draw"}
        shown = of.get(grid.view.show, "median over the draws")
        return f"In each cell: the {name}, {shown} (95 % interval).{was}"
    kind = "95 % interval, at any number of draws" if grid.results.stop_early else "95 % interval"
    said = f"In each cell: share of the draws that keep it ({kind}); beneath it the median {name}.{was}"
    if levels and grid.results.level_search is not None:
        return f"{said} {tolerated_reading(grid.results)}"
    return f"{said} Tolerated level: where the share falls below the required one {ENDS}." if levels else said


def _across_sheets(grid: Grid, laws: Sequence[str], width: int) -> Iterator[str]:
    """Yield a table of what matters most, sheets down and laws across: tolerated levels, if there are any."""
    results, column = grid.results, grid.results.columns[0]
    if has_levels(results):
        said = tolerated_reading(results)
        columns = [[[law], *([grid.level(sheet, law)] for sheet in results.sheets)] for law in laws]
    else:
        said = f"{_reading(grid, False)} Under '{column.name}':"
        if not column.random:
            said = f"The {grid.score_name} under '{column.name}', of one exact run:"
        words = (
            (law, (grid.words(sheet, law, column, full=False) for sheet in results.sheets)) for law in laws
        )
        columns = [[[law], *(_without_count(_cell_lines(cell)) for cell in cells)] for law, cells in words]
    yield "\n".join(_wrap(said, width))
    yield from blocks(sheets_column(results.sheets, width), columns, width)


def _without_count(lines: Sequence[str]) -> list[str]:
    """Leave out that a run is the only one, where the head of the table says so."""
    return [line for line in lines if line not in EXACT]


def _of_sheets(grid: Grid, laws: Sequence[str], width: int) -> Iterator[str]:
    """Yield the sheets' matrices, or where they are."""
    results = grid.results
    number, narrow = len(results.sheets), len(list(_blocks(grid, results.sheets[0], laws, width))) == 1
    if number <= (SOME if narrow else FEW):
        yield "\n".join(_wrap(_reading(grid, False), width))
        yield from _matrices(grid, laws, width)
        return
    said = f"The matrices of the {number} sheets are in the picture, which 'rigbench matrix STORE' draws"
    crossings = len(results.break_even)
    if crossings:
        said += f"; {crossings} break-even level{'s are' if crossings > 1 else ' is'} in the output of --json"
    yield "\n".join(_wrap(f"{said}.", width))


def _matrices(grid: Grid, laws: Sequence[str], width: int) -> Iterator[str]:
    """Yield the matrix of each sheet and the break-even levels."""
    for sheet in grid.results.sheets:
        if sheet:
            yield "\n".join(_wrap(f"Sheet: {sheet}", width))
        yield from _blocks(grid, sheet, laws, width)
    crossings = [line for item in grid.results.break_even for line in _break_even(item, width)]
    if crossings:
        yield "\n".join(crossings)


def _blocks(grid: Grid, sheet: str, laws: Sequence[str], width: int) -> Iterator[str]:
    """Yield the blocks of columns of one sheet that fit beside the laws' names."""
    columns: list[Lines] = []
    for column in grid.results.columns:
        head = [line for line in (column.name, level_words(column)) if line]
        cells = (_cell_lines(grid.words(sheet, law, column, full=False)) for law in laws)
        columns.append([head, *cells])
    if has_levels(grid.results):
        columns.append([["tolerated level"], *([grid.level(sheet, law)] for law in laws)])
    yield from blocks(laws_column(laws, width), columns, width)


def _cell_lines(words: CellWords) -> list[str]:
    """Lay out a cell: '97 % (93-99) keeps', then the small lines."""
    if not words.possible:
        return [*words.lines]
    figure = f"{words.figure} {words.unit}".strip()
    if words.interval:
        figure += f" ({words.interval.replace(' to ', '-')})"
    lines = [f"{figure} {words.verdict}".strip(), *words.lines]
    if words.best:
        lines[min(1, len(lines) - 1)] += ", best"
    if words.change:
        lines.insert(1, words.change)
    return lines


def _break_even(found: Mapping[str, Any], width: int) -> list[str]:
    """Say where two laws change places."""
    one, other = found["laws"]
    below, above = (one, other) if found["better_below"] == one else (other, one)
    at, low, high = (found["level"][key] for key in ("value", "low", "high"))
    ends = " to ".join("no end" if math.isinf(end) else f"{end:.2g}" for end in (low, high))
    where = f", {found['sheet']}" if found["sheet"] else ""
    return _wrap(
        f"Break-even level {at:.2g} ({ends}){where}: below it {below} has the lower "
        f"{score_words(found['score'])[0]}, above it {above}.",
        width,
    )


def _wrap(text: str, width: int) -> list[str]:
    return wrap(text, width, cell_len)

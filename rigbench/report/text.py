"""The results matrix as text for a terminal: no frames, no colours, no wider than asked."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from typing import Any

from rich.cells import cell_len, set_cell_size

from rigbench.report.cells import CellWords, Grid, laws_in_order
from rigbench.report.words import (
    any_random,
    arm_words,
    has_levels,
    level_words,
    runs_words,
    score_words,
    tolerance_words,
    tolerated_words,
)
from rigbench.report.wrapping import wrap, wrap_name
from rigbench.scores.results import Results

__all__ = ["matrix_text"]

Column = tuple[int, list[list[str]]]
"""Width; then the lines of the head and of each row."""

BETWEEN = 2
HEAD_WIDTH = 15
NARROWEST = 40
LAW_PART = 0.25
"""The most that the laws' names take of the width before they are broken."""


def matrix_text(results: Results, width: int = 80) -> str:
    """Return the results matrix as lines of at most ``width`` columns (40 at least).

    Rows are laws, best tolerated level first. Conditions that don't fit side by side follow in blocks
    below, each with the laws' names again; the last column holds the tolerated levels. Break-even levels
    stand beneath. The advice is not in it.
    """
    width = max(width, NARROWEST)
    parts = ["\n".join(_head(results, width))]
    grid = Grid(results)
    for sheet in results.sheets:
        if sheet:
            parts.append("\n".join(_wrap(f"Sheet: {sheet}", width)))
        parts += _blocks(grid, sheet, width)
    crossings = [line for item in results.break_even for line in _break_even(item, width)]
    if crossings:
        parts.append("\n".join(crossings))
    return "\n\n".join(parts)


def _head(results: Results, width: int) -> Iterator[str]:
    yield from _wrap(results.title, width)
    yield from _wrap(f"{arm_words(results)} {runs_words(results)}", width)
    yield from _wrap(tolerance_words(results), width)
    yield from _wrap(_reading(Grid(results)), width)


def _reading(grid: Grid) -> str:
    """Say what the cells hold."""
    name = grid.score_name
    if not any_random(grid.results):
        return f"In each cell: the {name} of one exact run."
    if grid.results.tolerance is None:
        return f"In each cell: the {name}, median over the draws (95 % interval)."
    said = f"In each cell: share of the draws that keep it (95 % interval); beneath it the median {name}."
    if has_levels(grid.results):
        said += " Tolerated level: where the share falls below it (shown to keep at, shown to miss from)."
    return said


def _blocks(grid: Grid, sheet: str, width: int) -> Iterator[str]:
    """Yield the blocks of columns of one sheet that fit beside the laws' names."""
    laws = laws_in_order(grid.results, sheet)
    names = [wrap_name(law, int(LAW_PART * width), cell_len) for law in laws]
    first = max(_widest(lines) for lines in names)
    room = width - first - BETWEEN
    columns = [_fit(column, room) for column in _columns(grid, sheet, laws)]
    start = 0
    while start < len(columns):
        end, used = start, first
        while end < len(columns) and (end == start or used + BETWEEN + columns[end][0] <= width):
            used += BETWEEN + columns[end][0]
            end += 1
        yield _table([(first, [[""], *names]), *columns[start:end]])
        start = end


def _columns(grid: Grid, sheet: str, laws: Sequence[str]) -> Iterator[list[list[str]]]:
    """Yield the columns: lines of the head, then lines of each law's cell."""
    for column in grid.results.columns:
        head = [column.name, level_words(column)]
        yield [
            [line for line in head if line],
            *(_cell_lines(grid.words(sheet, law, column, full=False)) for law in laws),
        ]
    if has_levels(grid.results):
        standings = {standing.law: standing for standing in grid.results.standings if standing.sheet == sheet}
        levels = [tolerated_words(standings[law].tolerated) if law in standings else "" for law in laws]
        yield [["tolerated level"], *([said] for said in levels)]


def _cell_lines(words: CellWords) -> list[str]:
    """Lay out a cell: '97 % (93-99) keeps', then the small lines."""
    figure = f"{words.figure} {words.unit}".strip()
    if words.interval:
        figure += f" ({words.interval.replace(' to ', '-')})"
    lines = [f"{figure} {words.verdict}".strip(), *words.lines]
    if words.best:
        lines[min(1, len(lines) - 1)] += ", best"
    return lines


def _fit(column: list[list[str]], room: int) -> Column:
    """Return a column with its width; what is too wide for it, or for the room there is, is broken."""
    limit = min(max(_widest(lines) for lines in column[1:]), room)
    limit = max(limit, min(HEAD_WIDTH, room))
    broken = [[part for line in lines for part in _wrap(line, limit)] for lines in column]
    return max(_widest(lines) for lines in broken), broken


def _table(columns: Sequence[Column]) -> str:
    """Set columns side by side: heads end on one line, the cells of a row start on one."""
    rows = []
    for place in range(len(columns[0][1])):
        cells = [(width, lines[place]) for width, lines in columns]
        high = max(len(lines) for _, lines in cells)
        for number in range(high):
            parts = []
            for width, lines in cells:
                line = number - (high - len(lines)) if place == 0 else number
                parts.append(set_cell_size(lines[line] if 0 <= line < len(lines) else "", width))
            rows.append((" " * BETWEEN).join(parts).rstrip())
        rows.append("")
    return "\n".join(rows[:-1])


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


def _widest(lines: Sequence[str]) -> int:
    return max((cell_len(line) for line in lines), default=0)


def _wrap(text: str, width: int) -> list[str]:
    return wrap(text, width, cell_len)

"""Columns of text set side by side, broken where they are too wide, in blocks where they are too many."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from rich.cells import cell_len, set_cell_size

from rigbench.report.wrapping import wrap, wrap_list, wrap_name

__all__ = ["Lines", "blocks", "laws_column", "sheets_column"]

Lines = list[list[str]]
"""A column: the lines of its head, then those of its cell in each row."""

Fitted = tuple[int, Lines]
"""Its width, and what it holds when it is broken to that."""

BETWEEN = 2
HEAD_WIDTH = 15
LAW_PART, SHEET_PART = 0.25, 0.4
"""The most that the rows' names take of the width before they are broken."""


def laws_column(laws: Sequence[str], width: int) -> Lines:
    """Return the first column of a table of that width: the names of laws."""
    return [[""], *(wrap_name(law, int(LAW_PART * width), cell_len) for law in laws)]


def sheets_column(sheets: Sequence[str], width: int) -> Lines:
    """Return the first column of a table of that width: the names of sheets."""
    return [[""], *(wrap_list(sheet, int(SHEET_PART * width), cell_len) for sheet in sheets)]


def blocks(first: Lines, columns: Sequence[Lines], width: int) -> Iterator[str]:
    """Yield tables no wider than ``width``: as many columns as fit beside the first, which each has anew."""
    names = max(_widest(lines) for lines in first)
    fitted = [_fit(column, width - names - BETWEEN) for column in columns]
    start = 0
    while start < len(fitted):
        end, used = start, names
        while end < len(fitted) and (end == start or used + BETWEEN + fitted[end][0] <= width):
            used += BETWEEN + fitted[end][0]
            end += 1
        yield _table([(names, first), *fitted[start:end]])
        start = end


def _fit(column: Lines, room: int) -> Fitted:
    """Return a column with its width; what is too wide for it, or for the room there is, is broken."""
    limit = min(max(_widest(lines) for lines in column[1:]), room)
    limit = max(limit, min(HEAD_WIDTH, room))
    head, *cells = column
    broken = [[part for line in head for part in wrap_name(line, limit, cell_len)]]
    broken += [[part for line in lines for part in wrap(line, limit, cell_len)] for lines in cells]
    return max(_widest(lines) for lines in broken), broken


def _table(columns: Sequence[Fitted]) -> str:
    """Set columns side by side: heads end on one line, the cells of a row start on one."""
    rows, tall = [], any(len(lines) > 1 for _, column in columns for lines in column[1:])
    for place in range(len(columns[0][1])):
        cells = [(width, lines[place]) for width, lines in columns]
        high = max(len(lines) for _, lines in cells)
        for number in range(high):
            parts = []
            for width, lines in cells:
                line = number - (high - len(lines)) if place == 0 else number
                parts.append(set_cell_size(lines[line] if 0 <= line < len(lines) else "", width))
            rows.append((" " * BETWEEN).join(parts).rstrip())
        if tall or place == 0:
            rows.append("")
    return "\n".join(rows).rstrip("\n")


def _widest(lines: Sequence[str]) -> int:
    return max((cell_len(line) for line in lines), default=0)

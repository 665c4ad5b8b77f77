"""What the sections of the page show, in words and places: the templates only set it."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from rigbench.report.axis import LevelAxis
from rigbench.report.cells import CellWords, Grid
from rigbench.report.words import level_words, percent
from rigbench.scores.levels import ladder
from rigbench.scores.names import score_words
from rigbench.scores.results import Cell, Column

__all__ = [
    "STEPS",
    "Evidence",
    "Row",
    "Shown",
    "Strip",
    "break_even_rows",
    "evidence",
    "heads",
    "matrix_rows",
    "overview",
]

STEPS = 10
"""So many steps the scale of the cells' shades has."""

DECIDING, SHEETS = 5, 2
"""The evidence names so many laws of so many sheets; the others are in the matrix."""


@dataclass(frozen=True)
class Strip:
    """A tolerated level drawn on the axis of levels, 0 to 100 wide; ``dot`` None: it crosses nowhere."""

    low: float
    high: float
    open_end: bool
    dot: float | None
    rails: Sequence[float]


@dataclass(frozen=True)
class Shown:
    """One cell of the matrix; ``number`` is its place among all cells, ``shade`` 0 to STEPS or None."""

    number: int
    words: CellWords
    lines: Sequence[str]  # the small ones, no number of them parted from its unit
    shade: int | None
    condition: str
    wait: bool  # the first cell of its matrix, which the tabulator reaches


@dataclass(frozen=True)
class Row:
    """One law of the matrix."""

    law: str
    cells: Sequence[Shown]
    level: str
    strip: Strip | None


@dataclass(frozen=True)
class Evidence:
    """What the draws show of one law; ``cells`` are (number of the cell, what it shows in words)."""

    sheet: str
    law: str
    level: str
    cells: Sequence[tuple[int, str]]


def heads(grid: Grid) -> list[tuple[str, str]]:
    """Return name and level of each column."""
    return [(column.name, level_words(column)) for column in grid.results.columns]


def matrix_rows(grid: Grid, sheet: str, laws: Sequence[str], levels: bool) -> Iterator[Row]:
    """Yield the rows of one sheet's matrix."""
    number = _numbers(grid)
    for place, law in enumerate(laws):
        cells = []
        for k, column in enumerate(grid.results.columns):
            words = grid.words(sheet, law, column)
            shade = None if words.ink is None else round(STEPS * min(max(words.ink, 0.0), 1.0))
            at = number[sheet, law, column.name]
            lines = ["\u00a0".join(line.rsplit(" ", 1)) for line in words.lines]
            cells.append(Shown(at, words, lines, shade, column.name, place == 0 and k == 0))
        yield Row(
            law, cells, grid.level(sheet, law) if levels else "", _strip(grid, sheet, law) if levels else None
        )


def _numbers(grid: Grid) -> Mapping[tuple[str, str, str], int]:
    return {(cell.sheet, cell.law, cell.condition): n for n, cell in enumerate(grid.results.cells)}


def _strip(grid: Grid, sheet: str, law: str) -> Strip | None:
    tolerated, axis = grid.tolerated(sheet, law), LevelAxis(grid.results)
    if tolerated is None or axis.steps == 0:
        return None

    def place(at: float) -> float:
        return round(min(4 + 84 * axis.place(at) / axis.steps, 100.0), 1)

    low, high = sorted((tolerated.low, tolerated.high))
    dot = None if tolerated.value is None else place(tolerated.value)
    return Strip(place(low), place(high), math.isinf(high), dot, [place(at) for at in axis.levels])


def evidence(grid: Grid, laws: Sequence[str], levels: bool) -> list[Evidence]:
    """Return what the sentence of advice rests on: the cells up to which a law keeps, and where it misses.

    Laws and sheets that the sentence names come first.
    """
    numbers, found, advice = _numbers(grid), [], grid.results.advice

    def unnamed(name: str) -> bool:
        return f"'{name}'" not in advice

    for sheet in sorted(grid.results.sheets, key=unnamed)[:SHEETS]:
        possible = [law for law in laws if grid.possible(sheet, law)]
        for law in sorted(possible, key=unnamed)[:DECIDING]:
            columns = _deciding(grid, sheet, law)
            cells = [
                (numbers[sheet, law, column.name], _cell_words(grid, grid.cell(sheet, law, column), column))
                for column in columns
            ]
            found.append(Evidence(sheet, law, grid.level(sheet, law) if levels else "", cells))
    return found


def _deciding(grid: Grid, sheet: str, law: str) -> list[Column]:
    """Return the columns of the largest level kept, of the next one, and of the smallest missed."""
    steps = ladder(grid.results.columns) or grid.results.columns[:1]
    tolerated = grid.tolerated(sheet, law)
    if tolerated is None:
        return list(steps[-1:])
    kept = [step for step in steps if (step.level or 0.0) <= tolerated.low][-1:]
    beyond = [step for step in steps if tolerated.low < (step.level or 0.0) <= tolerated.high][:1]
    missed = [step for step in steps if (step.level or 0.0) >= tolerated.high][:1]
    return list(dict.fromkeys([*kept, *beyond, *missed]))


def _cell_words(grid: Grid, cell: Cell, column: Column) -> str:
    """Say a cell in one line: "72 of 80 draws keep under 'all at 2' (81 to 95 %)"."""
    if cell.draws == 0:
        return f"no result under '{column.name}'"
    words = grid.words(cell.sheet, cell.law, column)
    if not column.random or grid.results.tolerance is None:
        figure = f"{grid.score_name} {words.figure} {words.unit}".rstrip()
        return f"{figure} under '{column.name}'" + (f" ({words.interval})" if words.interval else "")
    required = grid.results.tolerance.required_share
    ends = [percent(end, required) for end in (cell.pass_low, cell.pass_high) if end is not None]
    return f"{cell.passed} of {cell.draws} draws keep under '{column.name}' ({' to '.join(ends)} %)"


def overview(grid: Grid, laws: Sequence[str], levels: bool) -> list[tuple[str, list[str]]] | None:
    """Return the tolerated level of each law in each sheet; None with one sheet alone, or without levels."""
    sheets = grid.results.sheets
    if len(sheets) == 1 or not levels:
        return None
    return [(sheet, [grid.level(sheet, law) for law in laws]) for sheet in sheets]


def break_even_rows(grid: Grid) -> Iterator[dict[str, Any]]:
    """Yield the break-even levels with what is below and above them."""
    found: Any
    for number, found in enumerate(grid.results.break_even, 1):
        one, other = found["laws"]
        below = found["better_below"]
        low, high = found["level"]["low"], found["level"]["high"]
        yield {
            "number": number,
            "sheet": found["sheet"],
            "below": below,
            "above": other if below == one else one,
            "score": score_words(found["score"])[0],
            "level": f"{found['level']['value']:.2g}",
            "interval": f"{low:.2g} to {'no end' if math.isinf(high) else f'{high:.2g}'}",
        }

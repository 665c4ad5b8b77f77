"""One sheet of the matrix: rows are laws, columns are conditions, measured before it is drawn."""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cached_property

from rigbench.report.cells import CellWords, Grid, laws_in_order
from rigbench.report.paper import LINE, Paper
from rigbench.report.shades import GAUGE_WIDTH, draw_gauge, shade
from rigbench.report.strip import LevelStrip
from rigbench.report.words import has_levels, level_words
from rigbench.report.wrapping import wrap_name

__all__ = ["ROOMY", "TIGHT", "Block", "Style"]


@dataclass(frozen=True)
class Style:
    """Sizes of type and widths [pt] of a matrix; ``full`` names the main score in every cell."""

    figure: float
    small: float
    head: float
    law: float
    cell_most: float
    law_most: float
    pad: float
    full: bool


ROOMY = Style(figure=17, small=8.5, head=9.5, law=11, cell_most=96, law_most=130, pad=5, full=True)
TIGHT = Style(figure=15, small=7.5, head=8.5, law=10, cell_most=54, law_most=120, pad=4, full=False)

SHEET_SIZE = 12.0
GAP = 3.0
GROUP_GAP = 9.0
RULE = "#c9d3dd"


class Block:
    """The rows and columns of one sheet, all cells equally large."""

    def __init__(self, paper: Paper, grid: Grid, sheet: str, style: Style) -> None:
        self.paper, self.grid, self.sheet, self.style = paper, grid, sheet, style
        self.laws = laws_in_order(grid.results, sheet)
        self.columns = grid.results.columns
        self.said = {
            (law, column.name): _fitted(grid.words(sheet, law, column, style.full), style)
            for law in self.laws
            for column in self.columns
        }
        self.strip = LevelStrip(paper, grid.results, style.small) if has_levels(grid.results) else None

    @cached_property
    def text_width(self) -> float:
        """Width that a cell's text gets: the widest line, up to the style's most; what is wider is broken."""
        style, paper = self.style, self.paper
        most = 40.0
        for words in self.said.values():
            most = max(most, self._figure_width(words), paper.width(words.head, style.small))
            most = max(most, min(paper.widest(_small(words), style.small), style.cell_most))
        for column in self.columns:
            longest = paper.widest(column.name.split(), style.head, bold=True)
            most = max(most, min(longest - GAUGE_WIDTH - style.pad, style.cell_most))
        return most

    def _figure_width(self, words: CellWords) -> float:
        figure = self.paper.width(words.figure, self.style.figure, bold=True)
        return figure + self.paper.width(" " + words.unit, self.style.small + 1)

    @property
    def cell_width(self) -> float:
        """Width of a cell, gauge and padding included."""
        return GAUGE_WIDTH + self.text_width + 2 * self.style.pad

    @cached_property
    def small_lines(self) -> dict[tuple[str, str], list[str]]:
        """The lines beneath each cell's figure, broken to its width."""
        width, size, wrap = self.text_width, self.style.small, self.paper.wrap
        return {
            key: [part for line in _small(words) for part in wrap(line, width, size)]
            for key, words in self.said.items()
        }

    @cached_property
    def law_lines(self) -> dict[str, list[str]]:
        """The laws' names, broken."""
        style = self.style
        return {
            law: wrap_name(law, style.law_most, lambda line: self.paper.width(line, style.law, bold=True))
            for law in self.laws
        }

    @cached_property
    def head_lines(self) -> list[list[str]]:
        """The conditions' names, broken."""
        style, width = self.style, self.cell_width - self.style.pad
        return [self.paper.wrap(column.name, width, style.head, bold=True) for column in self.columns]

    @cached_property
    def law_width(self) -> float:
        """Width of the column of laws' names."""
        return max(self.paper.widest(lines, self.style.law, bold=True) for lines in self.law_lines.values())

    @cached_property
    def row_height(self) -> float:
        """Height of a row: as many lines as its fullest cell, or its longest name, takes."""
        style = self.style
        lines = max(len(lines) for lines in self.small_lines.values())
        heads = any(words.head for words in self.said.values())
        cell = LINE * (style.figure + style.small * (lines + heads))
        law = max(len(lines) for lines in self.law_lines.values()) * LINE * style.law
        return max(cell, law) + 2 * style.pad

    @cached_property
    def head_height(self) -> float:
        """Height of the columns' heads."""
        style = self.style
        levels = [level_words(column) for column in self.columns]
        names = max(
            len(lines) * LINE * style.head + bool(line) * LINE * style.small
            for lines, line in zip(self.head_lines, levels, strict=True)
        )
        return max(names, LINE * (style.head + style.small)) + 4

    @cached_property
    def places(self) -> list[float]:
        """Where each column starts, from the block's left edge; groups of columns stand a little apart."""
        x, places = self.law_width + 12, []
        for number, column in enumerate(self.columns):
            if number:
                apart = column.ladder != self.columns[number - 1].ladder
                x += self.cell_width + (GROUP_GAP if apart else GAP)
            places.append(x)
        return places

    @property
    def width(self) -> float:
        """Width of the block."""
        right = self.places[-1] + self.cell_width
        return right + 10 + self.strip.width if self.strip else right

    def draw(self, x: float, top: float, number: int) -> float:
        """Draw the block with its upper left corner at (x, top) and return where it ends."""
        if self.sheet:
            lines = self.paper.wrap(self.sheet, self.width, SHEET_SIZE, bold=True)
            top = self.paper.lines(x, top, lines, SHEET_SIZE, bold=True) + 6
        top += self.head_height
        self._draw_heads(x, top - 4)
        strip_x = x + self.places[-1] + self.cell_width + 10
        standings = {one.law: one for one in self.grid.results.standings if one.sheet == self.sheet}
        if self.strip:
            self.strip.head(strip_x, top - 4, self.style.head)
            self.strip.rails(strip_x, top - 2, top + len(self.laws) * (self.row_height + GAP) - GAP)
        for row, law in enumerate(self.laws):
            self._draw_row(x, top, law, f"{number}-{row}")
            tolerated = standings[law].tolerated if law in standings else None
            if self.strip and tolerated:
                self.strip.row((strip_x, top), self.row_height, tolerated, f"{number}-{row}")
            top += self.row_height + GAP
        return top - GAP

    def _draw_heads(self, x: float, bottom: float) -> None:
        style = self.style
        for place, lines, column in zip(self.places, self.head_lines, self.columns, strict=True):
            line = level_words(column)
            top = bottom - len(lines) * LINE * style.head - bool(line) * LINE * style.small
            top = self.paper.lines(x + place, top, lines, style.head, bold=True)
            self.paper.text(x + place, top, line, style.small)

    def _draw_row(self, x: float, top: float, law: str, name: str) -> None:
        lines, style = self.law_lines[law], self.style
        middle = top + (self.row_height - len(lines) * LINE * style.law) / 2
        self.paper.lines(x, middle, lines, style.law, bold=True, name=f"law-{name}")
        for number, (place, column) in enumerate(zip(self.places, self.columns, strict=True)):
            self._draw_cell(x + place, top, (law, column.name), f"{name}-{number}")

    def _draw_cell(self, x: float, top: float, key: tuple[str, str], name: str) -> None:
        words, style, paper = self.said[key], self.style, self.paper
        paper.box(
            x, top, self.cell_width, self.row_height,
            fill=shade(words.ink), edge="none" if words.ink is not None else RULE, name=f"cell-{name}",
        )  # fmt: skip
        draw_gauge(paper, (x, top), self.row_height, words.verdict, f"gauge-{name}")
        left, y = x + GAUGE_WIDTH + style.pad, top + style.pad
        if words.head:
            paper.text(left, y, words.head, style.small, name=f"text-{name}-head")
            y += LINE * style.small
        paper.text(left, y, words.figure, style.figure, bold=True, name=f"text-{name}-figure")
        unit = left + paper.width(words.figure, style.figure, bold=True) + paper.width(" ", style.small + 1)
        fall = 0.98 * (style.figure - style.small - 1)  # onto the same baseline
        paper.text(unit, y + fall, words.unit, style.small + 1, name=f"text-{name}-unit")
        y += LINE * style.figure
        paper.lines(left, y, self.small_lines[key], style.small, name=f"text-{name}-small")


def _small(words: CellWords) -> tuple[str, ...]:
    return (words.interval, *words.lines) if words.interval else words.lines


def _fitted(words: CellWords, style: Style) -> CellWords:
    """Return the words as they are, but in a tight style with the unit beneath the figure, not beside it."""
    if style.full or words.unit in {"", "%"}:
        return words
    first = ", ".join((words.unit, *words.lines[:1]))
    return replace(words, unit="", lines=(first, *words.lines[1:]))

"""The matrices of all sheets: rows are laws, columns are conditions, measured once before any is drawn."""

from __future__ import annotations

from functools import cached_property

from rigbench.report.cell_box import draw_cell, figure_width, fitted, small_words
from rigbench.report.cells import Grid
from rigbench.report.order import laws_in_order
from rigbench.report.paper import LINE, Paper
from rigbench.report.shades import GAUGE_WIDTH
from rigbench.report.strip import LevelStrip
from rigbench.report.style import SHEET_SIZE, Style
from rigbench.report.words import has_levels, level_words
from rigbench.report.wrapping import wrap_list, wrap_name

__all__ = ["Block"]

GAP = 3.0
GROUP_GAP = 9.0
STRIP_GAP = 8.0


class Block:
    """The rows and columns that every sheet has, each in the same place; all cells are equally large."""

    def __init__(self, paper: Paper, grid: Grid, style: Style) -> None:
        self.paper, self.grid, self.style = paper, grid, style
        self.laws = laws_in_order(grid)
        self.columns = grid.results.columns
        self.said = {
            (sheet, law, column.name): fitted(grid.words(sheet, law, column, style.full), style)
            for sheet in grid.results.sheets
            for law in self.laws
            for column in self.columns
        }
        levels = has_levels(grid.results)
        self.strip = LevelStrip(paper, grid, style.small, style.strip) if levels else None

    @cached_property
    def text_width(self) -> float:
        """Width that a cell's text gets: the widest line, up to the style's most; what is wider is broken."""
        style, paper = self.style, self.paper
        most = style.cell_least
        for words in self.said.values():
            most = max(most, figure_width(paper, words, style), paper.width(words.head, style.small))
            most = max(most, min(paper.widest(small_words(words), style.small), style.cell_most))
        for column in self.columns:
            longest = paper.widest(column.name.split(), style.head, bold=True)
            most = max(most, min(longest - GAUGE_WIDTH - style.pad, style.cell_most))
        return most

    @property
    def cell_width(self) -> float:
        """Width of a cell, gauge and padding included."""
        return GAUGE_WIDTH + self.text_width + 2 * self.style.pad

    @cached_property
    def small_lines(self) -> dict[tuple[str, str, str], list[str]]:
        """The lines beneath each cell's figure, broken to its width."""
        width, size, wrap = self.text_width, self.style.small, self.paper.wrap
        return {
            key: [part for line in small_words(words) for part in wrap(line, width, size)]
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
        style, width = self.style, self.cell_width - max(self.style.pad, 4)
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
        return max(names, LINE * (style.head + style.small) if self.strip else 0.0) + 4

    @cached_property
    def places(self) -> list[float]:
        """Where each column starts, from the block's left edge; groups of columns stand a little apart."""
        x, places = self.law_width + 10, []
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
        return right + STRIP_GAP + self.strip.width if self.strip else right

    @property
    def height(self) -> float:
        """Height of the block without its sheet's name."""
        return self.head_height + len(self.laws) * (self.row_height + GAP) - GAP

    def name_lines(self, sheet: str) -> list[str]:
        """Return the sheet's name, broken to the block's width."""
        return wrap_list(sheet, self.width, lambda line: self.paper.width(line, SHEET_SIZE, bold=True))

    def draw(self, sheet: str, x: float, top: float, number: int) -> None:
        """Draw one sheet's matrix with its upper left corner at (x, top), its name not included."""
        top += self.head_height
        self._draw_heads(x, top - 4)
        strip_x = x + self.places[-1] + self.cell_width + STRIP_GAP
        if self.strip:
            self.strip.head(strip_x, top - 4, self.style.head)
            self.strip.rails(strip_x, top - 2, top + self.height - self.head_height)
        for row, law in enumerate(self.laws):
            name = f"{number}-{row}"
            self._draw_row(x, top, (sheet, law), name)
            if self.strip:
                self.strip.row((strip_x, top), self.row_height, (sheet, law), name)
            top += self.row_height + GAP

    def _draw_heads(self, x: float, bottom: float) -> None:
        style = self.style
        for place, lines, column in zip(self.places, self.head_lines, self.columns, strict=True):
            line = level_words(column)
            top = bottom - len(lines) * LINE * style.head - bool(line) * LINE * style.small
            top = self.paper.lines(x + place, top, lines, style.head, bold=True)
            self.paper.text(x + place, top, line, style.small)

    def _draw_row(self, x: float, top: float, of: tuple[str, str], name: str) -> None:
        lines, style = self.law_lines[of[1]], self.style
        middle = top + (self.row_height - len(lines) * LINE * style.law) / 2
        self.paper.lines(x, middle, lines, style.law, bold=True, name=f"law-{name}")
        size = self.cell_width, self.row_height
        for number, (place, column) in enumerate(zip(self.places, self.columns, strict=True)):
            key, corner = (*of, column.name), (x + place, top)
            small = self.small_lines[key]
            draw_cell(self.paper, style, self.said[key], small, corner, size, f"{name}-{number}")

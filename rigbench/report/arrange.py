"""How the sheets stand on the paper: side by side while there is room, then in further rows."""

from __future__ import annotations

import math
from dataclasses import dataclass

from rigbench.report.block import Block
from rigbench.report.cells import Grid
from rigbench.report.curves import Curves
from rigbench.report.paper import LINE, Paper
from rigbench.report.style import ROOMY, SHEET_SIZE, STYLES, TIGHT
from rigbench.report.words import has_levels

__all__ = ["MARGIN", "Arrangement", "arrange"]

MARGIN = 26.0
ROOMY_UP_TO = 1140.0  # the longer side of an A3 sheet less its margins
WIDE, HIGH = 1684.0 - 2 * MARGIN, 1191.0 - 2 * MARGIN  # an A2 sheet, lying, less its margins
WIDER, HIGHER = 1.06, 1.15  # a little more will do
HEAD_AND_LEGEND = 230.0  # what they mostly take of its height
BETWEEN = 32.0
BELOW = 24.0


@dataclass(frozen=True)
class Arrangement:
    """The block that all sheets share, how many of it stand side by side, and the curves beneath, if any."""

    block: Block
    abreast: int
    curves: Curves | None

    @property
    def sheets(self) -> tuple[str, ...]:
        """The sheets' names."""
        return self.block.grid.results.sheets

    @property
    def width(self) -> float:
        """Width of all."""
        grid = self.abreast * (self.block.width + BETWEEN) - BETWEEN
        return max(grid, self.curves.width) if self.curves else grid

    @property
    def height(self) -> float:
        """Height of all."""
        rows = sum(self._row_height(start) for start in range(0, len(self.sheets), self.abreast))
        return rows + (self.curves.height if self.curves else 0.0)

    def _name_height(self, start: int) -> float:
        lines = [self.block.name_lines(sheet) for sheet in self.sheets[start : start + self.abreast] if sheet]
        return max((len(part) * LINE * SHEET_SIZE + 6 for part in lines), default=0.0)

    def _row_height(self, start: int) -> float:
        return self._name_height(start) + self.block.height + BELOW

    def draw(self, x: float, top: float) -> float:
        """Draw the matrices, the upper left corner at (x, top), and return where they end."""
        for start in range(0, len(self.sheets), self.abreast):
            for place, sheet in enumerate(self.sheets[start : start + self.abreast]):
                left = x + place * (self.block.width + BETWEEN)
                lines = self.block.name_lines(sheet)
                self.block.paper.lines(left, top, lines, SHEET_SIZE, bold=True, name=f"name-{start + place}")
                self.block.draw(sheet, left, top + self._name_height(start), start + place)
            top += self._row_height(start)
        return top - BELOW


def arrange(paper: Paper, grid: Grid) -> Arrangement:
    """Return the roomiest arrangement that fits a lying A2 sheet, or the one that exceeds it least.

    Where there is one sheet alone its width decides: roomy up to that of A3.
    """
    if len(grid.results.sheets) == 1:
        block = Block(paper, grid, ROOMY)
        return Arrangement(block if block.width <= ROOMY_UP_TO else Block(paper, grid, TIGHT), 1, None)
    found = []
    for style in STYLES:
        found.append(_of_block(Block(paper, grid, style)))
        if _excess(found[-1]) <= 1:
            break
    return min(found, key=_excess)


def _of_block(block: Block) -> Arrangement:
    """Return the sheets as many abreast as fit the width, in rows that are as full as each other."""
    sheets = len(block.grid.results.sheets)
    abreast = min(sheets, max(1, int((WIDER * WIDE + BETWEEN) / (block.width + BETWEEN))))
    abreast = math.ceil(sheets / math.ceil(sheets / abreast))
    width = abreast * (block.width + BETWEEN) - BETWEEN
    levels = has_levels(block.grid.results)
    curves = Curves(block.paper, block.grid, block.laws, width, WIDE) if levels else None
    return Arrangement(block, abreast, curves)


def _excess(one: Arrangement) -> float:
    return max(one.width / (WIDER * WIDE), (one.height + HEAD_AND_LEGEND) / (HIGHER * HIGH))

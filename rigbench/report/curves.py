"""Each law's tolerated level across the sheets, as curves."""

from __future__ import annotations

import math
from collections.abc import Sequence

from rigbench.report.axis import LevelAxis
from rigbench.report.cells import Grid
from rigbench.report.paper import LINE, Paper
from rigbench.report.plot import ARROW, BEYOND_WORD, DODGE, KEY, LEAD, PAD, SIZE, Plot
from rigbench.report.style import SHEET_SIZE
from rigbench.report.words import level
from rigbench.report.wrapping import clean, settings, wrap, wrap_name

__all__ = ["Curves"]

TITLE_HEIGHT = LINE * SHEET_SIZE + 8
BELOW = 14.0
SLOT_PAD = 13.0
LEAST_SLOT, MOST_SLOT = 64.0, 190.0
NAME_MOST = 90.0  # a name of a sheet is not broken within its words below this width
LAW_MOST = 150.0
LEAST_STEP, MOST_STEP, STEPS = 26.0, 100.0, 200.0  # a step between levels, and all of them by preference


class Curves:
    """Measured first, then drawn: as many plots below each other as the sheets need within ``most``.

    They take the ``width`` of the matrices above as far as that does them good.
    """

    def __init__(self, paper: Paper, grid: Grid, laws: Sequence[str], width: float, most: float) -> None:
        self.paper, self.sheets = paper, grid.results.sheets
        axis = LevelAxis(grid.results)
        self.left = paper.widest([*(level(at) for at in axis.levels), BEYOND_WORD], SIZE) + 6
        law_lines = {law: wrap_name(law, LAW_MOST, self._measure) for law in laws}
        right = LEAD + KEY + max(paper.widest(lines, SIZE) for lines in law_lines.values())
        least = self._least_slot(len(laws))
        fit = max(1, int((most - self.left - right) / least))
        self.abreast = math.ceil(len(self.sheets) / math.ceil(len(self.sheets) / fit))
        slot = max(least, min((width - self.left - right) / self.abreast, MOST_SLOT))
        self.width = self.left + slot * self.abreast + right
        names = sum(len(lines) * LINE * SIZE + 3 for lines in law_lines.values())
        step = min(max(STEPS / axis.steps, LEAST_STEP), MOST_STEP)
        step = max(step, (names - PAD - ARROW) / axis.steps)
        sheet_lines = self._sheet_lines(slot - 8)
        self.plot = Plot(paper, grid, axis, law_lines, sheet_lines, slot, step)

    def _sheet_lines(self, width: float) -> dict[str, list[str]]:
        """Return the sheets' names: one line each, or if that is too long for any, one for each setting."""
        lines = {sheet: [clean(sheet)] for sheet in self.sheets}
        if all(self._measure(line) <= width for (line,) in lines.values()):
            return lines
        for sheet in self.sheets:
            *others, last = settings(sheet)
            parts = [*(f"{part}," for part in others), last]
            lines[sheet] = [line for part in parts for line in wrap(part, width, self._measure)]
        return lines

    def _measure(self, line: str) -> float:
        return self.paper.width(line, SIZE)

    def _least_slot(self, laws: int) -> float:
        """Return the least width of a sheet's part, for each law's marker and for the words of its name."""
        words = [word for sheet in self.sheets for word in sheet.split()]
        names = min(self.paper.widest(words, SIZE) + 8, NAME_MOST)
        return max(LEAST_SLOT, (laws - 1) * DODGE + 2 * SLOT_PAD, names)

    @property
    def title_height(self) -> float:
        """Height of the name above."""
        return TITLE_HEIGHT

    @property
    def height(self) -> float:
        """Height of everything."""
        starts = range(0, len(self.sheets), self.abreast)
        return TITLE_HEIGHT + sum(self._height(start) + BELOW for start in starts) - BELOW

    def _height(self, start: int) -> float:
        """Return the height of a plot with the names beneath it."""
        names = (self.plot.sheets[sheet] for sheet in self.sheets[start : start + self.abreast])
        return self.plot.height + 5 + max(len(lines) for lines in names) * LINE * SIZE

    def draw(self, x: float, top: float) -> float:
        """Draw all with the upper left corner at (x, top) and return where it ends."""
        self.paper.text(x, top, "Tolerated level across the sheets", SHEET_SIZE, bold=True)
        top += TITLE_HEIGHT
        for start in range(0, len(self.sheets), self.abreast):
            self.plot.draw(x + self.left, top, self.sheets[start : start + self.abreast], start)
            top += self._height(start) + BELOW
        return top - BELOW

"""The strip beside the rows: each law's tolerated level with its interval, on an axis of levels."""

from __future__ import annotations

import math

from rigbench.report.axis import LevelAxis
from rigbench.report.cells import Grid
from rigbench.report.paper import INK, LINE, QUIET, Paper, Point
from rigbench.report.shades import GAUGE
from rigbench.report.words import level

__all__ = ["BAR", "RAIL", "LevelStrip"]

RAIL = "#c9d3dd"
BAR = "#7fa3c7"
ARROW = 9.0
END = 14.0  # beyond the greatest level, where the arrow of an open end goes
LEFT = 8.0


class LevelStrip:
    """Measured once for all rows, then drawn beside each."""

    def __init__(self, paper: Paper, grid: Grid, size: float, least: float = 130) -> None:
        self.paper, self.grid, self.size, results = paper, grid, size, grid.results
        self.axis = LevelAxis(results)
        said = [grid.level(sheet, law) for sheet in results.sheets for law in results.laws]
        widest = paper.widest([level(at) for at in self.axis.levels], size)
        figures = self.axis.steps * (widest + 5)
        self.width = max(least, paper.widest(said, size) + LEFT, figures + LEFT + END)

    def place(self, x: float, at: float) -> float:
        """Return where a level lies on the axis of a strip that starts at ``x``."""
        step = (self.width - LEFT - END) / self.axis.steps
        return x + LEFT + step * self.axis.place(at)

    def head(self, x: float, bottom: float, head_size: float) -> None:
        """Draw the strip's name and the figures of the axis so that they end at ``bottom``."""
        top = bottom - LINE * (self.size + head_size)
        self.paper.text(x + LEFT - 2, top, "tolerated level", head_size, bold=True)
        for at in self.axis.levels:
            self.paper.text(self.place(x, at), bottom - LINE * self.size, level(at), self.size, at="center")

    def rails(self, x: float, top: float, bottom: float) -> None:
        """Draw a fine line down the rows at each level."""
        for at in self.axis.levels:
            self.paper.stroke((self.place(x, at), top), (self.place(x, at), bottom), color=RAIL, line=0.6)

    def row(self, corner: Point, height: float, of: tuple[str, str], name: str) -> None:
        """Draw the level of a law in a sheet, ``of`` (sheet, law): the bar with its dot, and the figures."""
        (x, top), tolerated, said = corner, self.grid.tolerated(*of), self.grid.level(*of)
        if tolerated is None:
            self._said(x, top + (height - LINE * self.size) / 2, said, QUIET, f"level-{name}")
            return
        depth = 12 + LINE * self.size
        middle = top + (height - depth) / 2 + 5
        low, high = sorted((tolerated.low, tolerated.high))
        left = self.place(x, low)
        right = x + self.width if math.isinf(high) else self.place(x, high)
        self.bar(left, right, middle, open_end=math.isinf(high), name=f"bar-{name}")
        if tolerated.value is not None:
            self.paper.marker(self.place(x, tolerated.value), middle, 8, "o", fill=GAUGE, edge="white")
        self._said(x, middle + 7, said, INK, f"level-{name}")

    def _said(self, x: float, top: float, said: str, ink: str, name: str) -> None:
        """Write over the rails, so that none runs through the figures."""
        wide = self.paper.width(said, self.size) + 4
        self.paper.box(x + LEFT - 2, top, wide, LINE * self.size, fill="white", order=1.8)
        self.paper.text(x + LEFT, top, said, self.size, name=name, ink=ink)

    def bar(self, left: float, right: float, middle: float, *, open_end: bool, name: str = "") -> None:
        """Draw a bar between two places; an open end is an arrow, a closed one a stop."""
        head = right - ARROW if open_end else right
        self.paper.box(left, middle - 2, head - left, 4, fill=BAR, name=name, order=2)
        self._stop(left, middle)
        if open_end:
            self.paper.shape([(head, middle - 5), (right, middle), (head, middle + 5)], BAR)
        else:
            self._stop(right, middle)

    def _stop(self, x: float, middle: float) -> None:
        self.paper.box(x - 0.9, middle - 5, 1.8, 10, fill=GAUGE, order=2.1)

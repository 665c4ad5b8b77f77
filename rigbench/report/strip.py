"""The strip beside the rows: each law's tolerated level with its interval, on an axis of levels."""

from __future__ import annotations

import math

import numpy as np

from rigbench.report.paper import LINE, Paper, Point
from rigbench.report.shades import GAUGE
from rigbench.report.words import level, tolerated_words
from rigbench.scores.results import Results, Tolerated

__all__ = ["LevelStrip"]

RAIL = "#c9d3dd"
BAR = "#7fa3c7"
ARROW = 9.0
END = 14.0  # beyond the greatest level, where the arrow of an open end goes
LEFT = 8.0


class LevelStrip:
    """Measured once for all rows, then drawn beside each."""

    def __init__(self, paper: Paper, results: Results, size: float) -> None:
        self.paper, self.size = paper, size
        self.levels = sorted({column.level or 0.0 for column in results.columns if column.ladder} | {0.0})
        said = [tolerated_words(standing.tolerated) for standing in results.standings]
        figures = (len(self.levels) - 1) * (paper.widest([level(at) for at in self.levels], size) + 5)
        self.width = max(130.0, paper.widest(said, size) + LEFT, figures + LEFT + END)

    def place(self, x: float, at: float) -> float:
        """Return where a level lies on the axis of a strip that starts at ``x``.

        The levels that were run stand at equal distances, as the columns do, and others between them in
        proportion: levels mostly double from one to the next and would crowd at the low end.
        """
        step = (self.width - LEFT - END) / (len(self.levels) - 1)
        return x + LEFT + step * float(np.interp(at, self.levels, range(len(self.levels))))

    def head(self, x: float, bottom: float, head_size: float) -> None:
        """Draw the strip's name and the figures of the axis so that they end at ``bottom``."""
        top = bottom - LINE * (self.size + head_size)
        self.paper.text(x + LEFT - 2, top, "tolerated level", head_size, bold=True)
        for at in self.levels:
            self.paper.text(self.place(x, at), bottom - LINE * self.size, level(at), self.size, at="center")

    def rails(self, x: float, top: float, bottom: float) -> None:
        """Draw a fine line down the rows at each level."""
        for at in self.levels:
            self.paper.stroke((self.place(x, at), top), (self.place(x, at), bottom), color=RAIL, line=0.6)

    def row(self, corner: Point, height: float, tolerated: Tolerated, name: str) -> None:
        """Draw one law's level: the bar with its dot, and the figures beneath."""
        x, top = corner
        depth = 12 + LINE * self.size
        middle = top + (height - depth) / 2 + 5
        low, high = sorted((tolerated.low, tolerated.high))
        left = self.place(x, low)
        right = x + self.width if math.isinf(high) else self.place(x, high)
        said = tolerated_words(tolerated)
        self.bar(left, right, middle, open_end=math.isinf(high), name=f"bar-{name}")
        if tolerated.value is not None:
            self.paper.dot(self.place(x, tolerated.value), middle, 8, GAUGE)
        beneath = middle + 7
        wide = self.paper.width(said, self.size) + 4
        # Over the rails, so that none runs through the figures.
        self.paper.box(x + LEFT - 2, beneath, wide, LINE * self.size, fill="white", order=1.8)
        self.paper.text(x + LEFT, beneath, said, self.size, name=f"level-{name}")

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

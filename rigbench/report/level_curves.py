"""A score, or the pass share, against the level of the mismatch: a curve with its band for every law."""

from __future__ import annotations

import datetime
from collections.abc import Iterator, Sequence
from pathlib import Path

from matplotlib.figure import Figure

from rigbench.report.arrange import MARGIN
from rigbench.report.cautions import CAUTION
from rigbench.report.cells import SHARES, Grid
from rigbench.report.level_plot import HEIGHT, SIZE, LevelPlot
from rigbench.report.marks import mark_of
from rigbench.report.matrix import draw_head
from rigbench.report.order import laws_in_order
from rigbench.report.paper import LINE, Paper, steady_settings
from rigbench.report.picture import save_picture
from rigbench.report.spreading import spread
from rigbench.report.style import SHEET_SIZE
from rigbench.report.view import RATIO, View
from rigbench.report.words import percent
from rigbench.report.wrapping import wrap_list, wrap_name
from rigbench.scores.results import Results

__all__ = ["level_curves_figure", "level_curves_picture"]

PLOT_LEAST, PLOT_MOST, STEP = 230.0, 470.0, 62.0
WIDE = 1050.0  # plots stand beside each other up to this width
LAW_MOST, LEAD, KEY = 150.0, 24.0, 15.0
BETWEEN, BELOW = 22.0, 16.0
READING = 900.0
TIGHT = 2.0


def level_curves_picture(results: Results, path: Path, date: datetime.date, view: View = SHARES) -> None:
    """Draw the curves into a .png, .svg or .pdf file; see :func:`level_curves_figure`."""
    save_picture(path, results.title, lambda: level_curves_figure(results, date, view))


def level_curves_figure(results: Results, date: datetime.date, view: View = SHARES) -> Figure:
    """Return what ``view`` shows against the levels of all sources together, one plot a sheet.

    Bands are the 95 % intervals; a dashed line is the tolerance's limit or the required share; a ring marks
    a break-even level of two laws with its interval. What is infinite stands at the upper edge.
    """
    with steady_settings():
        return _Page(results, view).figure(date)


class _Page:
    def __init__(self, results: Results, view: View) -> None:
        self.paper, self.results = Paper(), results
        self.grid = Grid(results, view)
        self.laws = laws_in_order(self.grid)
        self.plot = LevelPlot(self.paper, self.grid, self.laws)
        measure = lambda line: self.paper.width(line, SIZE)  # noqa: E731 - a name for what is measured
        self.law_lines = [wrap_name(law, LAW_MOST, measure) for law in self.laws]
        self.names = LEAD + KEY + max(self.paper.widest(lines, SIZE) for lines in self.law_lines)
        wide = min(max(PLOT_LEAST, STEP * self.plot.axis.steps), PLOT_MOST)
        whole = self.plot.left + wide + self.names
        sheets = len(results.sheets)
        self.abreast = min(sheets, max(1, int((WIDE + BETWEEN) / (whole + BETWEEN))))
        self.plot.width, self.slot = wide, whole + BETWEEN
        stacked = sum(len(lines) * LINE * SIZE + TIGHT for lines in self.law_lines)
        self.plot.height = max(HEIGHT, stacked)

    def figure(self, date: datetime.date) -> Figure:
        paper, width = self.paper, max(470.0, self.abreast * self.slot - BETWEEN)
        reading = min(width, READING)
        y = draw_head(paper, self.results, self._said(), date, reading) + 20
        sheets = self.results.sheets
        for start in range(0, len(sheets), self.abreast):
            y = self._row(sheets[start : start + self.abreast], y, start) + BELOW
        y = self._legend(y, reading)
        return paper.figure(width + 2 * MARGIN, y + MARGIN)

    def _said(self) -> str:
        return (
            f"{self.plot.title[0].upper()}{self.plot.title[1:]}, against the level of all sources together."
        )

    def _row(self, sheets: Sequence[str], top: float, first: int) -> float:
        paper, size = self.paper, SHEET_SIZE
        heads = [
            wrap_list(sheet, self.slot - BETWEEN, lambda t: paper.width(t, size, True)) for sheet in sheets
        ]
        if any(sheets):
            deep = max(len(lines) for lines in heads) * LINE * size + 6
            for place, lines in enumerate(heads):
                paper.lines(
                    MARGIN + place * self.slot, top, lines, size, bold=True, name=f"name-{first + place}"
                )
            top += deep
        for place, sheet in enumerate(sheets):
            x = MARGIN + place * self.slot + self.plot.left
            ends = self.plot.draw(sheet, x, top, first + place)
            self._names(x + self.plot.width, top, ends, first + place)
        return top + self.plot.height + self.plot.below

    def _names(self, x: float, top: float, ends: dict[int, float], number: int) -> None:
        """Write the laws' names where their curves end, or as near as the others let them."""
        if not ends:
            self.paper.text(x - self.plot.width + 8, top + 8, "no result", SIZE, name=f"nothing-{number}")
            return
        heights = [len(self.law_lines[law]) * LINE * SIZE + TIGHT for law in ends]
        places = spread(list(ends.values()), heights, top, top + self.plot.height)
        for (law, y), at in zip(ends.items(), places, strict=True):
            self.paper.stroke((x + 2, y), (x + LEAD - 4, at), color="#c9d3dd", line=0.7)
            mark_of(law).point(self.paper, x + LEAD + 3, at, filled=True)
            lines = self.law_lines[law]
            self.paper.lines(
                x + LEAD + KEY, at - len(lines) * LINE * SIZE / 2, lines, SIZE, name=f"law-{number}-{law}"
            )

    def _legend(self, top: float, width: float) -> float:
        for entry in [*self._entries(), CAUTION]:
            top = self.paper.lines(MARGIN, top, self.paper.wrap(entry, width, 8.0), 8.0) + 3
        return top

    def _entries(self) -> Iterator[str]:
        grid, tolerance = self.grid, self.results.tolerance
        yield "Curves are straight between the levels run, which are marked; bands are 95 % intervals."
        if self.plot.scale.logarithmic:
            yield "The axis of values is logarithmic."
        if grid.shares and tolerance:
            yield f"Dashed line: the required share, {percent(tolerance.required_share)} %."
        elif self.plot.limits:
            yield "Dashed line: the tolerance's limit."
        if self.plot.has_endless:
            no = "has no number (nominal's is 0)" if grid.view.show == RATIO else "did not finish or settle"
            yield f"A hollow mark on the upper edge: the score {no}. A band that reaches it has no upper end."
        if self.plot.crossings:
            yield (
                "Ring: break-even level of two laws, on the curve of the one that is better below; the bar "
                "through it is its 95 % interval, with an arrow where that has no end."
            )
        silent = [
            law for law in self.laws if not any(self.plot.known(sheet, law) for sheet in self.results.sheets)
        ]
        if silent:
            yield f"Without a result, or not possible: {', '.join(silent)}."

"""The draws' own limits: under each law, the share of the draws that keep the tolerance up to a level."""

from __future__ import annotations

import datetime
import math
from collections.abc import Iterator, Sequence
from pathlib import Path

import numpy as np
from matplotlib.figure import Figure

from rigbench.report.arrange import MARGIN
from rigbench.report.cautions import CAUTION
from rigbench.report.cells import Grid
from rigbench.report.limits_words import limits_words
from rigbench.report.marks import mark_of
from rigbench.report.matrix import draw_head
from rigbench.report.order import laws_in_order
from rigbench.report.paper import INK, LINE, QUIET, Paper, Point, steady_settings
from rigbench.report.picture import save_picture
from rigbench.report.style import SHEET_SIZE
from rigbench.report.words import level, percent
from rigbench.report.wrapping import wrap_list, wrap_name
from rigbench.scores.own_limits import OwnLimits
from rigbench.scores.results import LevelSearch, Results

__all__ = ["limits_figure", "limits_picture"]

SIZE = 8.5
LEFT, WIDE, HIGH = 40.0, 430.0, 190.0
RIGHT = 62.0  # for the words beside the required share's line
FOOT = 2 * LINE * SIZE + 8
BETWEEN = 24.0
KEY = 22.0
READING = 900.0
ABREAST = 2
RAIL = "#c9d3dd"
TICKS = 8
"""So many levels are written along the axis at most."""


def limits_picture(results: Results, path: Path, date: datetime.date) -> None:
    """Draw the limits into a .png, .svg or .pdf file; see :func:`limits_figure`."""
    save_picture(path, results.title, lambda: limits_figure(results, date))


def limits_figure(results: Results, date: datetime.date) -> Figure:
    """Return the distribution of the draws' own limits, a stair a law, one plot a sheet.

    A stair falls by one draw at the middle of that draw's bracket, so it shows the share of the draws that
    keep up to a level; where it meets the dashed line of the required share is the tolerated level, whose
    interval is the bar on that line. ValueError if the results hold no search for limits.
    """
    if results.level_search is None or results.tolerance is None:
        raise ValueError("no search for own limits is in these results")
    with steady_settings():
        return _Page(results, results.level_search, results.tolerance.required_share).figure(date)


class _Page:
    def __init__(self, results: Results, search: LevelSearch, required: float) -> None:
        self.paper, self.results, self.search, self.required = Paper(), results, search, required
        self.grid = Grid(results)
        self.laws = laws_in_order(self.grid)
        self.limits = {(s.sheet, s.law): s.limits for s in results.standings if s.limits is not None}
        self.top_level = max([search.most, *(c.level or 0.0 for c in results.columns if c.ladder)])
        self.abreast = min(ABREAST, len(results.sheets))
        self.slot = LEFT + WIDE + RIGHT

    def figure(self, date: datetime.date) -> Figure:
        width = self.abreast * (self.slot + BETWEEN) - BETWEEN
        reading = min(width, READING)
        said = "Share of the draws that keep the tolerance up to a level of all sources together."
        y = draw_head(self.paper, self.results, said, date, reading) + 14
        y = self._key(y, reading) + 12
        for start in range(0, len(self.results.sheets), self.abreast):
            y = self._row(self.results.sheets[start : start + self.abreast], y, start) + BETWEEN
        for entry in self._entries():
            y = self.paper.lines(MARGIN, y, self.paper.wrap(entry, reading, 8.0), 8.0) + 3
        return self.paper.figure(width + 2 * MARGIN, y + MARGIN)

    def _key(self, top: float, width: float) -> float:
        """Draw each law's mark with its name, side by side as far as they go; return where they end."""
        x, deep = MARGIN, 0.0
        for number, law in enumerate(self.laws):
            lines = wrap_name(law, width - KEY, lambda line: self.paper.width(line, SIZE))
            wide = KEY + self.paper.widest(lines, SIZE) + 18
            if x > MARGIN and x + wide > MARGIN + width:
                x, top, deep = MARGIN, top + deep + 3, 0.0
            middle, mark = top + LINE * SIZE / 2, mark_of(number)
            mark.path(self.paper, [(x, middle), (x + KEY - 5, middle)])
            mark.point(self.paper, x + (KEY - 5) / 2, middle, filled=True)
            self.paper.lines(x + KEY, top, lines, SIZE, name=f"key-{number}")
            x, deep = x + wide, max(deep, len(lines) * LINE * SIZE)
        return top + deep

    def _row(self, sheets: Sequence[str], top: float, first: int) -> float:
        measure = lambda line: self.paper.width(line, SHEET_SIZE, True)  # noqa: E731 - a name for what is measured
        heads = [wrap_list(sheet, self.slot, measure) if sheet else [] for sheet in sheets]
        deep = max(map(len, heads)) * LINE * SHEET_SIZE
        for place, (sheet, lines) in enumerate(zip(sheets, heads, strict=True)):
            x = MARGIN + place * (self.slot + BETWEEN)
            self.paper.lines(x, top, lines, SHEET_SIZE, bold=True, name=f"sheet-{first + place}")
            self._plot(sheet, x + LEFT, top + deep + 6, first + place)
        return top + deep + 6 + HIGH + FOOT

    def _plot(self, sheet: str, x: float, top: float, number: int) -> None:
        self._axes(x, top)
        for place, law in enumerate(self.laws):
            limits = self.limits.get((sheet, law))
            if limits is not None:
                self._stair(limits, place, (x, top), f"{number}-{place}")
                self._tolerated(sheet, law, place, (x, top), f"{number}-{place}")

    def _axes(self, x: float, top: float) -> None:
        paper, bottom = self.paper, top + HIGH
        for share in (0.0, 0.25, 0.5, 0.75, 1.0):
            y = self._y(top, share)
            paper.stroke((x, y), (x + WIDE, y), color=RAIL, line=0.5)
            paper.text(x - 5, y - LINE * SIZE / 2, f"{100 * share:g} %", SIZE, at="right")
        for at in _ticks(self.top_level):
            across = self._x(x, at)
            paper.stroke((across, top), (across, bottom), color=RAIL, line=0.5)
            paper.text(across, bottom + 4, level(at), SIZE, at="center")
        paper.text(x + WIDE / 2, bottom + 4 + LINE * SIZE, "level", SIZE, at="center", ink=QUIET)
        y = self._y(top, self.required)
        paper.stroke((x, y), (x + WIDE, y), color=INK, line=0.9, dashes=(5, 3), order=1.7)
        said = f"{percent(self.required)} % required"
        lines = paper.wrap(said, RIGHT - 6, SIZE)
        paper.lines(x + WIDE + 5, y - len(lines) * LINE * SIZE / 2, lines, SIZE, ink=QUIET)

    def _stair(self, limits: OwnLimits, law: int, corner: Point, name: str) -> None:
        """Draw a law's stair, with a mark where it ends."""
        (x, top), n, share = corner, len(limits.low), 1.0
        points = [(x, self._y(top, 1.0))]
        for at, gone in _falls(limits, self.top_level):
            points.append((self._x(x, at), points[-1][1]))
            share -= gone / n
            points.append((points[-1][0], self._y(top, share)))
        points.append((x + WIDE, points[-1][1]))
        mark_of(law).path(self.paper, points, f"stair-{name}")

    def _tolerated(self, sheet: str, law: str, place: int, corner: Point, name: str) -> None:
        """Draw the tolerated level on the required share's line: its interval, and its point if any."""
        found, (x, top) = self.grid.tolerated(sheet, law), corner
        if found is None:
            return
        y, mark = self._y(top, self.required), mark_of(place)
        end = self.top_level if math.isinf(found.high) else found.high
        self.paper.stroke(
            (self._x(x, found.low), y), (self._x(x, end), y), color=mark.tone, line=2.2, name=f"bar-{name}"
        )
        if found.value is not None:
            mark.point(self.paper, self._x(x, found.value), y, filled=True, name=f"point-{name}")

    def _x(self, left: float, at: float) -> float:
        return left + WIDE * min(at / self.top_level, 1.0)

    def _y(self, top: float, share: float) -> float:
        return top + HIGH * (1.0 - share)

    def _entries(self) -> Iterator[str]:
        yield limits_words(self.results)
        yield (
            "Mark: the tolerated level, where the stair meets the required share. Bar through it: its 95 % "
            "interval, which is open where it reaches the right edge."
        )
        silent = [law for law in self.laws if all((s, law) not in self.limits for s in self.results.sheets)]
        if silent:
            yield f"Without a limit: {', '.join(silent)}."
        found = {law: [self.grid.tolerated(s, law) for s in self.results.sheets] for law in self.laws}
        none = [law for law in self.laws if all(one is not None and one.high == 0.0 for one in found[law])]
        if none:
            yield f"Shown to miss at level 0 already: {', '.join(none)}."
        yield CAUTION


def _falls(limits: OwnLimits, top: float) -> list[tuple[float, int]]:
    """Return the levels at which a stair falls, in order, and by how many draws; not those beyond all levels.

    A draw that misses at level 0 falls there.
    """
    low, high = np.maximum(limits.low, 0.0), np.maximum(limits.high, 0.0)
    middles = (low + high)[np.isfinite(high)] / 2.0
    levels, counts = np.unique(np.minimum(middles, top), return_counts=True)
    return list(zip(levels.tolist(), counts.tolist(), strict=True))


def _ticks(most: float) -> list[float]:
    """Return round numbers from 0 up: steps of 1, 2 or 5 times a power of ten."""
    step = 10.0 ** math.floor(math.log10(most / TICKS))
    step *= next(part for part in (1, 2, 5, 10) if most / (part * step) <= TICKS)
    return [k * step for k in range(int(most / step * (1.0 + 1e-9)) + 1)]

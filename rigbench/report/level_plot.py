"""One plot of curves against the level: axes, bands, curves, limits and break-even levels."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from itertools import pairwise
from typing import Any

import numpy as np

from rigbench.report.axis import LevelAxis
from rigbench.report.cells import Grid
from rigbench.report.marks import band_opacity, mark_of
from rigbench.report.paper import INK, LINE, QUIET, Paper
from rigbench.report.spreading import lanes
from rigbench.report.view import MEDIAN, P95, RATIO, Shown
from rigbench.report.words import level, main_score
from rigbench.scores.levels import ladder
from rigbench.scores.names import score_words

__all__ = ["HEIGHT", "SIZE", "LevelPlot"]

SIZE = 8.5
HEIGHT = 250.0
RAIL = "#c9d3dd"
PAD = 10.0  # from the outermost values to the edges
DECADES = 1.3  # of values beyond which the axis is logarithmic
KINDS = {P95: "95th percentile", RATIO: "median ratio to nominal"}


@dataclass(frozen=True)
class Point:
    """What a law shows at a level; ``value`` is inf where it has no number."""

    level: float
    value: float
    low: float
    high: float


class LevelPlot:
    """What all plots of a picture have in common; ``width`` and ``height`` are set before any is drawn."""

    def __init__(self, paper: Paper, grid: Grid, laws: Sequence[str]) -> None:
        self.paper, self.grid, self.laws = paper, grid, laws
        results = grid.results
        self.axis = LevelAxis(results)
        self.width, self.height = 0.0, HEIGHT
        self.points = {(sheet, law): self._points(sheet, law) for sheet in results.sheets for law in laws}
        tolerance = results.tolerance
        self.limits: tuple[float, ...] = tuple(dict.fromkeys(grid.limits))
        if grid.shares and tolerance:
            self.limits = (100 * tolerance.required_share,)
        on_main = grid.view.show == MEDIAN and grid.score == main_score(results)
        self.crossings: list[Mapping[str, Any]] = list(results.break_even) if on_main else []
        every = [point for points in self.points.values() for point in points]
        self.has_endless = any(math.isinf(end) for point in every for end in (point.value, point.high))
        self.scale = Scale.of(every, self.limits, grid.shares)
        self.left = paper.widest([said for _, said in self.scale.ticks], SIZE) + 8

    @property
    def below(self) -> float:
        """Height of the figures beneath a plot."""
        return 2 * LINE * SIZE + 6

    @property
    def title(self) -> str:
        """What is drawn, with its unit."""
        if self.grid.shares:
            return "share of the draws that keep the tolerance [%]"
        name, unit = score_words(self.grid.score)
        kind = KINDS.get(self.grid.view.show, "median")
        unit = "times" if self.grid.view.show == RATIO else unit
        return f"{name}, {kind} over the draws" + (f" [{unit}]" if unit else "")

    def known(self, sheet: str, law: str) -> bool:
        """Tell whether a law has anything to draw in a sheet."""
        return bool(self.points[sheet, law])

    def _points(self, sheet: str, law: str) -> list[Point]:
        found = []
        for column in ladder(self.grid.results.columns):
            cell = self.grid.cell(sheet, law, column)
            if not cell.draws or not cell.planned:
                continue
            shown = self.grid.view.of(cell, self.grid.score)
            if self.grid.shares and cell.pass_share is not None:
                ends = (cell.pass_share, cell.pass_low, cell.pass_high)
                shown = Shown(*(100 * (end or 0.0) for end in ends))
            if shown is not None:
                found.append(Point(column.level or 0.0, shown.value, shown.low, shown.high))
        return found

    def draw(self, sheet: str, x: float, top: float, number: int) -> dict[int, float]:
        """Draw one sheet's plot, its upper left corner at (x, top); return where each law's curve ends."""
        self._axes(x, top, number)
        ends = {}
        for law, name in enumerate(self.laws):
            points = self.points[sheet, name]
            if points:
                self._band(points, x, top, law)
                ends[law] = self._marks(points, x, top, law, number)
        self._curves(sheet, x, top, number)
        for place, found in enumerate(self.crossings):
            if found["sheet"] == sheet:
                self._crossing(sheet, found, x, top, f"ring-{number}-{place}")
        return ends

    def _x(self, left: float, at: float) -> float:
        steps = max(self.axis.steps, 1)
        place = min(float(self.axis.place(max(at, 0.0))), float(steps))
        return left + PAD + (self.width - 2 * PAD) * place / steps

    def _y(self, top: float, value: float) -> float:
        """Return the height of a value; what is infinite stands on the upper edge."""
        if math.isinf(value):
            return top
        return top + PAD + (self.height - 2 * PAD) * (1.0 - self.scale.part(value))

    def _axes(self, x: float, top: float, number: int) -> None:
        paper, bottom = self.paper, top + self.height
        paper.box(
            x,
            top,
            self.width,
            self.height,
            fill="#fafbfd",
            edge=RAIL,
            line=0.6,
            name=f"plot-{number}",
            order=0.4,
        )
        for value, said in self.scale.ticks:
            y = self._y(top, value)
            paper.stroke((x, y), (x + self.width, y), color=RAIL, line=0.5)
            paper.text(x - 5, y - LINE * SIZE / 2, said, SIZE, at="right", name=f"tick-{number}")
        for at in self.axis.levels:
            across = self._x(x, at)
            paper.stroke((across, top), (across, bottom), color=RAIL, line=0.5)
            paper.text(across, bottom + 4, level(at), SIZE, at="center", name=f"level-{number}")
        paper.text(x + self.width / 2, bottom + 4 + LINE * SIZE, "level", SIZE, at="center", ink=QUIET)
        for limit in self.limits:
            y = self._y(top, limit)
            paper.stroke(
                (x, y), (x + self.width, y), color=INK, line=1.1, dashes=(5, 3), name=f"limit-{number}"
            )

    def _band(self, points: Sequence[Point], x: float, top: float, law: int) -> None:
        """Draw the band of the intervals; one point alone gets a bar."""
        upper = [(self._x(x, p.level), self._y(top, p.high)) for p in points]
        lower = [(self._x(x, p.level), self._y(top, p.low)) for p in points]
        if len(points) > 1:
            opacity = band_opacity(len(self.laws))
            self.paper.shape(
                [*upper, *reversed(lower)], mark_of(law).tone, opacity=opacity, name=f"band-{law}"
            )
        elif points[0].high > points[0].low:
            self.paper.stroke(lower[0], upper[0], color=mark_of(law).tone, line=1.0, name=f"band-{law}")

    def _curves(self, sheet: str, x: float, top: float, number: int) -> None:
        """Draw all laws' lines from level to level; those that coincide run beside each other."""
        pieces: dict[tuple[float, float], dict[int, tuple[float, float]]] = {}
        for law, name in enumerate(self.laws):
            for one, other in pairwise(self.points[sheet, name]):
                heights = self._y(top, one.value), self._y(top, other.value)
                pieces.setdefault((one.level, other.level), {})[law] = heights
        for (here, there), found in pieces.items():
            for (law, (start, end)), aside in zip(found.items(), lanes(list(found.values())), strict=True):
                ends = (self._x(x, here), start + aside), (self._x(x, there), end + aside)
                mark_of(law).line(self.paper, *ends, f"curve-{number}-{law}")

    def _marks(self, points: Sequence[Point], x: float, top: float, law: int, number: int) -> float:
        """Draw a law's markers and return the height of the last."""
        for point in points:
            across, y = self._x(x, point.level), self._y(top, point.value)
            mark_of(law).point(self.paper, across, y, math.isfinite(point.value), f"point-{number}-{law}")
        return self._y(top, points[-1].value)

    def _crossing(self, sheet: str, found: Mapping[str, Any], x: float, top: float, name: str) -> None:
        at, low, high = (float(found["level"][key]) for key in ("value", "low", "high"))
        points = self.points[sheet, found["better_below"]]
        if not points or math.isinf(at):
            return
        heights = [self._y(top, point.value) for point in points]
        y = float(np.interp(self.axis.place(at), self.axis.places([p.level for p in points]), heights))
        left = self._x(x, low)
        right = x + self.width - 2 if math.isinf(high) else self._x(x, high)
        self.paper.stroke((left, y), (right, y), color=INK, line=1.0, order=2.3, name=f"{name}-bar")
        for end in (left, right):
            if end == right and math.isinf(high):
                self.paper.shape([(right - 5, y - 3), (right + 1, y), (right - 5, y + 3)], INK)
            else:
                self.paper.stroke((end, y - 3), (end, y + 3), color=INK, line=1.0, order=2.3)
        self.paper.marker(self._x(x, at), y, 9.0, "o", fill="none", edge=INK, name=name)


@dataclass(frozen=True)
class Scale:
    """The axis of values: linear from 0, or logarithmic where they span more than a factor of 20."""

    low: float
    high: float
    logarithmic: bool
    ticks: tuple[tuple[float, str], ...]

    @classmethod
    def of(cls, points: Sequence[Point], limits: Sequence[float], shares: bool) -> Scale:
        """Return the scale on which all points, their intervals and limits can be seen."""
        if shares:
            return cls(
                0.0, 100.0, False, tuple((at, f"{at:.0f}") for at in (0.0, 20.0, 40.0, 60.0, 80.0, 100.0))
            )
        middles = [p.value for p in points if math.isfinite(p.value)]
        seen = [end for p in points for end in (p.value, p.low, p.high) if math.isfinite(end)] + list(limits)
        high = max(seen, default=1.0) or 1.0
        least = min([*middles, *limits], default=0.0)
        if least > 0.0 and math.log10(high / least) > DECADES:
            low = min((end for end in seen if end > 0.01 * least), default=least)
            return cls._on_decades(low, high)
        step = _step(high / 5.0)
        top = math.ceil(high / step - 1e-9) * step
        ticks = [round(k * step, 12) for k in range(round(top / step) + 1)]
        return cls(0.0, top, False, tuple((at, f"{at:g}") for at in ticks))

    @classmethod
    def _on_decades(cls, low: float, high: float) -> Scale:
        first, last = math.floor(math.log10(low)), math.ceil(math.log10(high))
        parts = (1, 2, 5) if last - first <= 3 else (1,)
        ticks = [part * 10.0**power for power in range(first, last + 1) for part in parts]
        inner = [at for at in ticks if low <= at <= high]
        least, most = min(low, *inner[:1] or [low]), max(high, *inner[-1:] or [high])
        every = math.ceil(len(inner) / 9)
        return cls(least, most, True, tuple((at, f"{at:g}") for at in inner[::every]))

    def part(self, value: float) -> float:
        """Return where a finite value lies between the ends, 0 to 1."""
        if not self.logarithmic:
            return min(max((value - self.low) / (self.high - self.low), 0.0), 1.0)
        value = max(value, self.low)
        return math.log(value / self.low) / math.log(self.high / self.low)


def _step(least: float) -> float:
    """Return the smallest of 1, 2, 5 times a power of ten that is at least so large."""
    power = 10.0 ** math.floor(math.log10(least))
    return next(part * power for part in (1, 2, 5, 10) if part * power >= least * (1 - 1e-9))

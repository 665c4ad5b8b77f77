"""One plot of curves: sheets from left to right, levels upwards, the laws' names at the curves' ends."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

from rigbench.report.axis import LevelAxis
from rigbench.report.cells import Grid
from rigbench.report.marks import mark_of
from rigbench.report.paper import LINE, Paper
from rigbench.report.spreading import lanes, spread
from rigbench.report.strip import RAIL
from rigbench.report.words import level
from rigbench.report.wrapping import settings

__all__ = ["ARROW", "BEYOND_WORD", "DODGE", "KEY", "LEAD", "PAD", "SIZE", "Plot", "neighbours"]

SIZE = 8.5
DODGE = 12.0  # between the markers of two laws in one sheet
LEAD = 26.0  # from the plot to the laws' names
KEY = 15.0  # for the marker before each
PAD = 9.0  # from the lowest level to the plot's edge
ARROW = 30.0  # beyond the greatest level, where the arrow of an open end goes
BEYOND = 15.0  # and where a curve goes that crosses beyond it
BEYOND_WORD = "beyond"
STRIPE = "#f5f7fa"


@dataclass(frozen=True)
class Spot:
    """Where a law stands in a sheet, by heights above level 0; hollow if it crosses at no level run."""

    at: float
    low: float
    high: float
    open_end: bool
    filled: bool


@dataclass(frozen=True)
class Plot:
    """What all plots of a picture have in common: names, broken to lines, and distances [pt].

    ``slot`` is the width of a sheet's part, ``step`` the height from one level to the next.
    """

    paper: Paper
    grid: Grid
    axis: LevelAxis
    laws: Mapping[str, Sequence[str]]
    sheets: Mapping[str, Sequence[str]]
    slot: float
    step: float

    @property
    def top_level(self) -> float:
        """Height of the greatest level above level 0."""
        return self.step * self.axis.steps

    @property
    def height(self) -> float:
        """Height of the plot without the names beneath it."""
        return PAD + self.top_level + ARROW

    def draw(self, x: float, top: float, sheets: Sequence[str], first: int) -> None:
        """Draw the plot of these sheets, numbered from ``first`` on, its upper left corner at (x, top)."""
        base = top + self.height - PAD
        self._draw_slots(x, top, sheets, first)
        spots = [[self._spot(sheet, law) for sheet in sheets] for law in self.laws]
        heights = [(place * self.step, level(at)) for place, at in enumerate(self.axis.levels)]
        for height, _ in heights:
            ends = (x, base - height), (x + self.slot * len(sheets), base - height)
            self.paper.stroke(*ends, color=RAIL, line=0.6)
        if any(spot.at > self.top_level for row in spots for spot in row if spot):
            heights.append((self.top_level + BEYOND, BEYOND_WORD))
        for height, said in heights:
            self.paper.text(x - 5, base - height - LINE * SIZE / 2, said, SIZE, at="right", name="axis")
        self._draw_spots(spots, x, base, first)
        self._draw_lines(spots, sheets, x, base)
        self._draw_names(spots, x + self.slot * len(sheets), base)

    def _draw_slots(self, x: float, top: float, sheets: Sequence[str], first: int) -> None:
        for number, sheet in enumerate(sheets):
            left, below = x + number * self.slot, top + self.height
            if number % 2 == 0:
                name = f"slot-{first + number}"
                self.paper.box(left, top, self.slot, self.height, fill=STRIPE, name=name, order=0.5)
            if number and not neighbours(sheets[number - 1], sheet):
                self.paper.stroke((left, top), (left, below), color=RAIL, line=1.2)
            middle, names = left + self.slot / 2, self.sheets[sheet]
            self.paper.lines(middle, below + 5, names, SIZE, at="center", name=f"sheet-{first + number}")

    def _spot(self, sheet: str, law: str) -> Spot | None:
        found, crossing = self.grid.tolerated(sheet, law), self.grid.crossing(sheet, law)
        if found is None or crossing is None:
            return None
        beyond, (low, high) = self.top_level + BEYOND, sorted((found.low, found.high))
        at, low, high = (
            beyond if math.isinf(end) else self.step * self.axis.place(end) for end in (crossing, low, high)
        )
        return Spot(at, low, high, open_end=math.isinf(found.high), filled=found.value is not None)

    def _x(self, left: float, sheet: int, law: int) -> float:
        return left + (sheet + 0.5) * self.slot + (law - (len(self.laws) - 1) / 2) * DODGE

    def _draw_spots(
        self, spots: Sequence[Sequence[Spot | None]], left: float, base: float, first: int
    ) -> None:
        """Draw each law's markers and bars, those of one sheet beside each other in the order of the laws."""
        for law, row in enumerate(spots):
            mark = mark_of(law)
            for number, spot in enumerate(row):
                if spot is None:
                    continue
                x, high = self._x(left, number, law), self.top_level + ARROW - 3
                if spot.high > spot.low:
                    ends = base - spot.low, base - (high if spot.open_end else spot.high)
                    mark.bar(self.paper, x, ends, spot.open_end)
                mark.point(self.paper, x, base - spot.at, spot.filled, f"point-{first + number}-{law}")

    def _draw_lines(
        self, spots: Sequence[Sequence[Spot | None]], sheets: Sequence[str], left: float, base: float
    ) -> None:
        """Join each law's markers from sheet to sheet; curves that coincide run beside each other."""
        for number in range(len(sheets) - 1):
            if not neighbours(sheets[number], sheets[number + 1]):
                continue
            pieces = {law: (base - one.at, base - other.at) for law, one, other in _pairs(spots, number)}
            for (law, (start, end)), aside in zip(pieces.items(), lanes(list(pieces.values())), strict=True):
                here, there = self._x(left, number, law), self._x(left, number + 1, law)
                mark_of(law).line(self.paper, (here, start + aside), (there, end + aside), f"curve-{law}")

    def _draw_names(self, spots: Sequence[Sequence[Spot | None]], x: float, base: float) -> None:
        """Write each law's name at the height at which its curve ends, or as near as the others let it."""
        last = {law: found[-1] for law, row in enumerate(spots) if (found := [s for s in row if s])}
        lines = list(self.laws.values())
        wanted = [base - spot.at for spot in last.values()]
        heights = [len(lines[law]) * LINE * SIZE + 3 for law in last]
        places = spread(wanted, heights, base - self.top_level - ARROW, base + PAD)
        for law, y, at in zip(last, wanted, places, strict=True):
            self.paper.stroke((x + 2, y), (x + LEAD - 8, at), color=RAIL, line=0.7)
            self.paper.stroke((x + LEAD - 8, at), (x + LEAD - 2, at), color=RAIL, line=0.7)
            mark_of(law).point(self.paper, x + LEAD + 4, at, filled=True)
            above = at - len(lines[law]) * LINE * SIZE / 2
            self.paper.lines(x + LEAD + KEY, above, lines[law], SIZE, name=f"curve-name-{law}")


def neighbours(one: str, other: str) -> bool:
    """Tell whether two sheets differ in one setting at most, so that a curve may go from one to the other."""
    pairs = list(zip(settings(one), settings(other), strict=False))
    return sum(mine != theirs for mine, theirs in pairs) < 2


def _pairs(spots: Sequence[Sequence[Spot | None]], number: int) -> Iterator[tuple[int, Spot, Spot]]:
    """Yield the laws whose curve goes from that sheet to the next, with both ends."""
    for law, row in enumerate(spots):
        one, other = row[number], row[number + 1]
        if one and other:
            yield law, one, other

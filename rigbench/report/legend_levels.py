"""How to read the tolerated levels: the entries of the legend for strips and curves."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator
from itertools import pairwise

from rigbench.report.cells import Grid
from rigbench.report.marks import mark_of
from rigbench.report.paper import Paper
from rigbench.report.plot import neighbours
from rigbench.report.shades import GAUGE
from rigbench.report.strip import LevelStrip
from rigbench.scores.results import Tolerated

__all__ = ["GLYPH_HEIGHT", "Entry", "Glyph", "curve_entries", "level_entries"]

Glyph = Callable[[float, float], None]
Entry = tuple[float, Glyph | None, str]
"""Width of the glyph, what draws it, and its meaning."""

GLYPH_HEIGHT = 10.0


def level_entries(paper: Paper, grid: Grid, strip: LevelStrip, required: str) -> Iterator[Entry]:
    """Yield what explains the strips."""
    dot = f"dot where the share crosses {required} %"
    if grid.results.level_search is not None:
        dot = f"dot at the own limit that {required} % of the draws reach"
    said = f"tolerated level: left end shown to keep, right end shown to miss, {dot}"
    yield 40, _level(paper, strip, False), said
    if any(math.isinf(one.high) for one in _levels(grid)):
        yield 40, _level(paper, strip, True), "not shown to miss at any level run"


def curve_entries(paper: Paper, grid: Grid, required: str) -> Iterator[Entry]:
    """Yield what explains the curves."""
    yield (
        12,
        _point(paper, True),
        (
            f"curves: where the share crosses {required} %; the bar goes up from shown to keep to shown to "
            "miss, with an arrow where no level is shown to miss"
        ),
    )
    results = grid.results
    if any(one.value is None for one in _levels(grid)):
        yield 12, _point(paper, False), "it crosses at no level run"
    if any(grid.crossing(sheet, law) is None for sheet in results.sheets for law in results.laws):
        yield 0, None, "A curve is broken where its law is not possible or has no result."
    if not all(neighbours(one, other) for one, other in pairwise(results.sheets)):
        yield 0, None, "No curve goes from one sheet to another that differs in more than one setting."


def _levels(grid: Grid) -> Iterator[Tolerated]:
    """Yield all tolerated levels that are shown."""
    for sheet in grid.results.sheets:
        found = (grid.tolerated(sheet, law) for law in grid.results.laws)
        yield from (one for one in found if one is not None)


def _point(paper: Paper, filled: bool) -> Glyph:
    def draw(x: float, top: float) -> None:
        mark, middle = mark_of(0), top + GLYPH_HEIGHT / 2
        if filled:
            mark.bar(paper, x + 6, (top + GLYPH_HEIGHT + 1, top - 1), open_end=False)
        mark.point(paper, x + 6, middle, filled)

    return draw


def _level(paper: Paper, strip: LevelStrip, open_end: bool) -> Glyph:
    def draw(x: float, top: float) -> None:
        middle = top + GLYPH_HEIGHT / 2
        strip.bar(x + 1, x + 39, middle, open_end=open_end)
        if not open_end:
            paper.marker(x + 18, middle, 8, "o", fill=GAUGE, edge="white")

    return draw

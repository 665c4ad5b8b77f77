"""How to read the matrix, beneath it: only what occurs on the sheet is explained."""

from __future__ import annotations

from collections.abc import Iterator

from rigbench.report.arrange import Arrangement
from rigbench.report.cautions import CAUTION
from rigbench.report.cells import Grid
from rigbench.report.legend_levels import GLYPH_HEIGHT, Entry, Glyph, curve_entries, level_entries
from rigbench.report.paper import LINE, Paper, Point
from rigbench.report.shades import GAUGE, GAUGE_WIDTH, draw_gauge, shade
from rigbench.report.words import any_random, percent, quantity

__all__ = ["draw_legend"]

SIZE = 8.0
APART = 20.0


def draw_legend(paper: Paper, grid: Grid, arrangement: Arrangement, corner: Point, width: float) -> float:
    """Draw the legend from its upper left corner on, no wider than ``width``, and return where it ends."""
    x, top = corner
    pen = x
    for glyph_width, glyph, said in entries(paper, grid, arrangement):
        indent = glyph_width + 5 if glyph else 0.0
        lines = paper.wrap(said, width - indent, SIZE)
        wide = indent + paper.widest(lines, SIZE)
        if pen > x and pen + wide > x + width:
            pen, top = x, top + LINE * SIZE + 5
        if glyph:
            glyph(pen, top)
        paper.lines(pen + indent, top, lines, SIZE)
        top += (len(lines) - 1) * LINE * SIZE
        pen += wide + APART if len(lines) == 1 else width + APART
    top += LINE * SIZE + 5
    return paper.lines(x, top, paper.wrap(CAUTION, width, SIZE), SIZE)


def entries(paper: Paper, grid: Grid, arrangement: Arrangement) -> Iterator[Entry]:
    """Yield what the legend explains: a glyph with its width, and its meaning."""
    results = grid.results
    random = any_random(results)
    if results.tolerance is None:
        yield from _scale_entries(paper, grid, random)
    else:
        yield from _share_entries(paper, grid, percent(results.tolerance.required_share), random)
    if not all(column.random for column in results.columns):
        yield 0, None, f"Where nothing is random, one exact run shows its {grid.score_name}."
    if any(cell.best for cell in results.cells):
        yield 0, None, "best: better than every other law of its column, beyond the interval."
    if any(cell.incomplete for cell in results.cells):
        yield (
            0,
            None,
            "incomplete: draws not run yet, or ended by an error or a time limit; they don't count.",
        )
    if any(not cell.planned for cell in results.cells):
        yield 0, None, "not possible: the experiment's settings leave the law out of this sheet."
    if arrangement.block.strip and results.tolerance:
        required = percent(results.tolerance.required_share)
        yield from level_entries(paper, grid, arrangement.block.strip, required)
        if arrangement.curves:
            yield from curve_entries(paper, grid, required)


def _share_entries(paper: Paper, grid: Grid, required: str, random: bool) -> Iterator[Entry]:
    if not random:
        yield GAUGE_WIDTH, _gauge(paper, "keeps"), "keeps the tolerance"
        if any(cell.verdict == "open" and cell.planned for cell in grid.results.cells):
            yield GAUGE_WIDTH, _gauge(paper, "open"), "open: no result"
        yield GAUGE_WIDTH, _gauge(paper, "misses"), "misses the tolerance"
        return
    yield GAUGE_WIDTH, _gauge(paper, "keeps"), f"keeps: the interval's low end reaches {required} %"
    yield GAUGE_WIDTH, _gauge(paper, "open"), "open: the draws so far show neither"
    yield GAUGE_WIDTH, _gauge(paper, "misses"), f"misses: the interval's high end lies below {required} %"
    yield 90, _ramp(paper), "share of the draws that keep the tolerance, 0 to 100 %"
    yield (
        0,
        None,
        (
            "Large: that share. Beneath it: its 95 % interval (Wilson), and the "
            f"{grid.score_name} of the worst motion, median over the draws."
        ),
    )


def _scale_entries(paper: Paper, grid: Grid, random: bool) -> Iterator[Entry]:
    least, most = (quantity(value, grid.score) for value in (grid.least, grid.most))
    kind = ", logarithmic" if grid.least > 0 else ""
    yield 90, _ramp(paper), f"{grid.score_name}, {least} to {most}{kind}"
    if random:
        yield (
            0,
            None,
            (
                f"Large: the {grid.score_name} of the worst motion, median over the draws. "
                "Beneath it: its 95 % interval."
            ),
        )


def _gauge(paper: Paper, verdict: str) -> Glyph:
    return lambda x, top: draw_gauge(paper, (x, top), GLYPH_HEIGHT, verdict)


def _ramp(paper: Paper) -> Glyph:
    steps = 6

    def draw(x: float, top: float) -> None:
        for step in range(steps):
            paper.box(x + 15 * step, top, 15, GLYPH_HEIGHT, fill=shade(step / (steps - 1)))
        paper.box(x, top, 90, GLYPH_HEIGHT, edge=GAUGE, line=0.5)

    return draw

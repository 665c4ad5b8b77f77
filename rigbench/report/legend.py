"""How to read the matrix, beneath it: only what occurs on the sheet is explained."""

from __future__ import annotations

from collections.abc import Iterator

from rigbench.report.arrange import Arrangement
from rigbench.report.cautions import CAUTION
from rigbench.report.cell_box import draw_frame
from rigbench.report.cells import Grid
from rigbench.report.legend_levels import GLYPH_HEIGHT, Entry, Glyph, curve_entries, level_entries
from rigbench.report.limits_words import limits_words
from rigbench.report.paper import LINE, Paper, Point
from rigbench.report.shades import GAUGE, GAUGE_WIDTH, draw_gauge, shade
from rigbench.report.view import MEDIAN, P95, RATIO
from rigbench.report.words import any_random, figure, percent, quantity
from rigbench.scores.changes import Changes
from rigbench.scores.names import score_words

__all__ = ["draw_legend"]

SIZE = 8.0
APART = 20.0
VIEW_WORDS = {
    MEDIAN: "median over the draws",
    P95: "95th percentile over the draws",
    RATIO: "draw by draw over nominal's, median of these ratios",
}


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
    if results.tolerance is not None:
        yield from _verdict_entries(paper, grid, percent(results.tolerance.required_share), random)
    if not grid.shares:
        yield from _scale_entries(paper, grid, random)
    elif random:
        yield from _share_entries(paper, grid)
    if not all(column.random for column in results.columns):
        yield 0, None, f"Where nothing is random, one exact run shows {_exact(grid)}."
    if grid.changes:
        yield from _change_entries(paper, grid.changes)
    elif grid.marks_best and any(cell.best for cell in results.cells):
        yield 0, None, "best: better than every other law of its column, beyond the interval."
    if any(cell.incomplete for cell in results.cells):
        yield (
            0,
            None,
            "incomplete: draws not run yet, or ended by an error or a time limit; they don't count.",
        )
    if any(cell.settled for cell in results.cells):
        yield 0, None, "settled: after so many draws all laws of the column were, and it got no more."
    if any(not cell.planned for cell in results.cells):
        yield 0, None, "not possible: the experiment's settings leave the law out of this sheet."
    if arrangement.block.strip and results.tolerance:
        required = percent(results.tolerance.required_share)
        yield from level_entries(paper, grid, arrangement.block.strip, required)
        if results.level_search is not None:
            yield 0, None, limits_words(results)
        if arrangement.curves:
            yield from curve_entries(paper, grid, required)


def _exact(grid: Grid) -> str:
    return f"the ratio of its {grid.score_name}" if grid.view.show == RATIO else f"its {grid.score_name}"


def _verdict_entries(paper: Paper, grid: Grid, required: str, random: bool) -> Iterator[Entry]:
    if not random:
        yield GAUGE_WIDTH, _gauge(paper, "keeps"), "keeps the tolerance"
        if any(cell.verdict == "open" and cell.planned for cell in grid.results.cells):
            yield GAUGE_WIDTH, _gauge(paper, "open"), "open: no result"
        yield GAUGE_WIDTH, _gauge(paper, "misses"), "misses the tolerance"
        return
    share = "interval" if grid.shares else "share's interval"
    yield GAUGE_WIDTH, _gauge(paper, "keeps"), f"keeps: the {share}'s low end reaches {required} %"
    yield GAUGE_WIDTH, _gauge(paper, "open"), "open: the draws so far show neither"
    yield GAUGE_WIDTH, _gauge(paper, "misses"), f"misses: the {share}'s high end lies below {required} %"


def _share_entries(paper: Paper, grid: Grid) -> Iterator[Entry]:
    kind = "valid at any number of draws" if grid.results.stop_early else "Wilson"
    yield 90, _ramp(paper), "share of the draws that keep the tolerance, 0 to 100 %"
    yield (
        0,
        None,
        (
            f"Large: that share. Beneath it: its 95 % interval ({kind}), and the "
            f"{grid.score_name} of the worst motion, median over the draws."
        ),
    )


def _scale_entries(paper: Paper, grid: Grid, random: bool) -> Iterator[Entry]:
    ratio = grid.view.show == RATIO
    ends = (grid.least, grid.most)
    least, most = (figure(end) if ratio else quantity(end, grid.score) for end in ends)
    kind = ", logarithmic" if grid.least > 0 else ""
    name = f"{grid.score_name}, times nominal" if ratio else grid.score_name
    yield 90, _ramp(paper), f"{name}, {least} to {most}{kind}"
    if random:
        of = VIEW_WORDS.get(grid.view.show, VIEW_WORDS[MEDIAN])
        yield (
            0,
            None,
            f"Large: the {grid.score_name} of the worst motion, {of}. Beneath it: its 95 % interval.",
        )


def _change_entries(paper: Paper, changes: Changes) -> Iterator[Entry]:
    name = score_words(changes.score)[0]
    yield 14, _frame(paper), "better, worse: shown on the same draws, beyond the 95 % interval of the change"
    yield (
        0,
        None,
        f"was: in the other store; beneath it by how much the {name} changed, median over the draws.",
    )
    if changes.count("not comparable"):
        yield (
            0,
            None,
            "not comparable: nothing is random in one of the stores, or they have no draw in common.",
        )


def _frame(paper: Paper) -> Glyph:
    return lambda x, top: draw_frame(paper, (x, top), (14, GLYPH_HEIGHT))


def _gauge(paper: Paper, verdict: str) -> Glyph:
    return lambda x, top: draw_gauge(paper, (x, top), GLYPH_HEIGHT, verdict)


def _ramp(paper: Paper) -> Glyph:
    steps = 6

    def draw(x: float, top: float) -> None:
        for step in range(steps):
            paper.box(x + 15 * step, top, 15, GLYPH_HEIGHT, fill=shade(step / (steps - 1)))
        paper.box(x, top, 90, GLYPH_HEIGHT, edge=GAUGE, line=0.5)

    return draw

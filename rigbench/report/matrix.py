"""The results matrix as a picture."""

from __future__ import annotations

import datetime
from pathlib import Path

from matplotlib.figure import Figure

from rigbench.report.arrange import MARGIN, Arrangement, arrange
from rigbench.report.cells import SHARES, Grid
from rigbench.report.changes_words import changes_words
from rigbench.report.legend import draw_legend
from rigbench.report.paper import Paper, steady_settings, text_boxes
from rigbench.report.picture import save_picture
from rigbench.report.view import View
from rigbench.report.words import arm_words, runs_words, tolerance_words
from rigbench.scores.changes import Changes
from rigbench.scores.results import Results

__all__ = ["draw_head", "matrix_figure", "matrix_picture", "text_boxes"]

NARROWEST = 470.0
READING = 900.0  # the longest lines of text
BESIDE, LEAST_LEGEND = 40.0, 400.0  # the legend's distance from the curves, and the width it takes there


def matrix_picture(
    results: Results,
    path: Path,
    date: datetime.date,
    view: View = SHARES,
    changes: Changes | None = None,
    other: str = "",
) -> None:
    """Draw the results matrix into a file whose suffix says the format: .png, .svg or .pdf.

    Rows are laws, best tolerated level first; columns are conditions. The sheets of a sweep stand side by
    side, and beneath them the laws' tolerated levels as curves. ``view`` says which number the cells show,
    ``changes`` what was otherwise in the store named ``other``. The same results and date
    give the same bytes. Missing folders are made.

    Raises InputFaults for another suffix and StoreError if the file can't be written.
    """
    save_picture(path, results.title, lambda: matrix_figure(results, date, view, changes, other))


def matrix_figure(
    results: Results,
    date: datetime.date,
    view: View = SHARES,
    changes: Changes | None = None,
    other: str = "",
) -> Figure:
    """Return the results matrix as a figure just as large as what is on it."""
    with steady_settings():
        paper, grid = Paper(), Grid(results, view, changes)
        arrangement = arrange(paper, grid)
        width = max(NARROWEST, arrangement.width)
        reading = min(width, READING)
        said = results.advice if changes is None else changes_words(changes, other)
        y = draw_head(paper, results, said, date, reading)
        y = arrangement.draw(MARGIN, y + 20)
        y = _draw_foot(paper, grid, arrangement, y, width)
        return paper.figure(width + 2 * MARGIN, y + MARGIN)


def _draw_foot(paper: Paper, grid: Grid, arrangement: Arrangement, top: float, width: float) -> float:
    """Draw the curves, if there are any, and the legend: beside them where there is room; return the end."""
    left, below, curves = 0.0, top, arrangement.curves
    if curves:
        top += 30
        below = curves.draw(MARGIN, top)
        if width - curves.width - BESIDE >= LEAST_LEGEND:
            left, top = curves.width + BESIDE, top + curves.title_height
        else:
            top = below
    end = draw_legend(paper, grid, arrangement, (MARGIN + left, top + 18), min(width - left, READING))
    return max(end, below)


def draw_head(paper: Paper, results: Results, said: str, date: datetime.date, width: float) -> float:
    """Draw title, what is ``said``, and what was run under which tolerance; return where it ends."""
    facts = (arm_words(results), tolerance_words(results), f"{runs_words(results)} {date.isoformat()}.")
    top = paper.lines(MARGIN, MARGIN, paper.wrap(results.title, width, 16, bold=True), 16, bold=True) + 3
    top = paper.lines(MARGIN, top, paper.wrap(said, width, 11), 11) + 6
    for fact in facts:
        top = paper.lines(MARGIN, top, paper.wrap(fact, width, 9), 9) + 2
    return top

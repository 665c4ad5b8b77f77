"""The results matrix as a picture."""

from __future__ import annotations

import datetime
import math
from io import BytesIO
from pathlib import Path
from typing import Any

from matplotlib.figure import Figure

from rigbench.errors import InputFaults, StoreError
from rigbench.report.arrange import MARGIN, Arrangement, arrange
from rigbench.report.cells import Grid
from rigbench.report.legend import draw_legend
from rigbench.report.paper import Paper, steady_settings, text_boxes
from rigbench.report.words import arm_words, runs_words, tolerance_words
from rigbench.scores.results import Results

__all__ = ["FORMATS", "matrix_figure", "matrix_picture", "text_boxes"]

FORMATS = ("png", "svg", "pdf")
NARROWEST = 470.0
READING = 900.0  # the longest lines of text
BESIDE, LEAST_LEGEND = 40.0, 400.0  # the legend's distance from the curves, and the width it takes there
DPI = 180
MOST_PIXELS = 60e6  # what a viewer opens without pain
MOST_SIDE = 60_000  # the rasteriser takes less than 2^16


def matrix_picture(results: Results, path: Path, date: datetime.date) -> None:
    """Draw the results matrix into a file whose suffix says the format: .png, .svg or .pdf.

    Rows are laws, best tolerated level first; columns are conditions. The sheets of a sweep stand side by
    side, and beneath them the laws' tolerated levels as curves. The same results and date give the same
    bytes. Missing folders are made.

    Raises InputFaults for another suffix and StoreError if the file can't be written.
    """
    suffix = path.suffix.lower().removeprefix(".")
    if suffix not in FORMATS:
        raise InputFaults.one(path, "", f"'{path.suffix}' is no format of a picture", ".png, .svg or .pdf")
    metadata: dict[str, dict[str, Any]] = {
        "png": {"Software": "rigbench", "Title": results.title},
        "svg": {"Creator": "rigbench", "Title": results.title, "Date": None},
        "pdf": {"Creator": "rigbench", "Producer": None, "Title": results.title, "CreationDate": None},
    }
    drawn = BytesIO()
    with steady_settings():
        figure = matrix_figure(results, date)
        figure.savefig(drawn, format=suffix, dpi=_resolution(figure), metadata=metadata[suffix])
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_bytes(drawn.getvalue())
    except OSError as error:
        raise StoreError(str(path), f"the picture can't be written: {error.strerror}") from error


def _resolution(figure: Figure) -> float:
    wide, high = figure.get_size_inches()
    return float(min(DPI, MOST_SIDE / max(wide, high), math.sqrt(MOST_PIXELS / (wide * high))))


def matrix_figure(results: Results, date: datetime.date) -> Figure:
    """Return the results matrix as a figure just as large as what is on it."""
    with steady_settings():
        paper, grid = Paper(), Grid(results)
        arrangement = arrange(paper, grid)
        width = max(NARROWEST, arrangement.width)
        reading = min(width, READING)
        y = _draw_head(paper, results, date, reading)
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


def _draw_head(paper: Paper, results: Results, date: datetime.date, width: float) -> float:
    """Draw title, advice, and what was run under which tolerance; return where it ends."""
    facts = (arm_words(results), tolerance_words(results), f"{runs_words(results)} {date.isoformat()}.")
    top = paper.lines(MARGIN, MARGIN, paper.wrap(results.title, width, 16, bold=True), 16, bold=True) + 3
    top = paper.lines(MARGIN, top, paper.wrap(results.advice, width, 11), 11) + 6
    for fact in facts:
        top = paper.lines(MARGIN, top, paper.wrap(fact, width, 9), 9) + 2
    return top

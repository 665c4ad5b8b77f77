"""The results matrix as a picture."""

from __future__ import annotations

import datetime
import math
from io import BytesIO
from pathlib import Path
from typing import Any

from matplotlib.figure import Figure

from rigbench.errors import InputFaults, StoreError
from rigbench.report.block import ROOMY, TIGHT, Block
from rigbench.report.cells import Grid
from rigbench.report.legend import draw_legend
from rigbench.report.paper import Paper, steady_settings, text_boxes
from rigbench.report.words import arm_words, runs_words, tolerance_words
from rigbench.scores.results import Results

__all__ = ["FORMATS", "matrix_figure", "matrix_picture", "text_boxes"]

FORMATS = ("png", "svg", "pdf")
MARGIN = 26.0
NARROWEST = 470.0
ROOMY_UP_TO = 1140.0  # the longer side of an A3 sheet less its margins
DPI = 180
MOST_PIXELS = 60e6  # what a viewer opens without pain
MOST_SIDE = 60_000  # the rasteriser takes less than 2^16


def matrix_picture(results: Results, path: Path, date: datetime.date) -> None:
    """Draw the results matrix into a file whose suffix says the format: .png, .svg or .pdf.

    Rows are laws, best tolerated level first; columns are conditions; each sheet is a matrix of its own
    below the last. The same results and date give the same bytes. Missing folders are made.

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
        blocks = [Block(paper, grid, sheet, ROOMY) for sheet in results.sheets]
        if max(block.width for block in blocks) > ROOMY_UP_TO:
            blocks = [Block(paper, grid, sheet, TIGHT) for sheet in results.sheets]
        width = max(NARROWEST, *(block.width for block in blocks))
        reading = min(width, 900.0)
        y = _draw_head(paper, results, date, reading)
        for number, block in enumerate(blocks):
            y = block.draw(MARGIN, y + 20, number)
        y = draw_legend(paper, grid, blocks[0].strip, (MARGIN, y + 18), reading)
        return paper.figure(width + 2 * MARGIN, y + MARGIN)


def _draw_head(paper: Paper, results: Results, date: datetime.date, width: float) -> float:
    """Draw title, advice, and what was run under which tolerance; return where it ends."""
    facts = (arm_words(results), tolerance_words(results), f"{runs_words(results)} {date.isoformat()}.")
    top = paper.lines(MARGIN, MARGIN, paper.wrap(results.title, width, 16, bold=True), 16, bold=True) + 3
    top = paper.lines(MARGIN, top, paper.wrap(results.advice, width, 11), 11) + 6
    for fact in facts:
        top = paper.lines(MARGIN, top, paper.wrap(fact, width, 9), 9) + 2
    return top

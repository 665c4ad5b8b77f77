"""One cell on paper: its shade, its gauge and its words."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

from rigbench.report.cells import CHANGED, CellWords
from rigbench.report.paper import INK, LINE, QUIET, Paper, Point
from rigbench.report.shades import ABSENT, GAUGE_WIDTH, draw_gauge, shade
from rigbench.report.style import Style

__all__ = ["draw_cell", "draw_frame", "figure_width", "fitted", "small_words"]

RULE = "#c9d3dd"
FRAME_WIDTH = 1.6
"""Of the frame around a cell that changed: within its edges."""


def fitted(words: CellWords, style: Style) -> CellWords:
    """Return the words as they are, but in a tight style with the unit beneath the figure, not beside it."""
    if style.full or words.unit in {"", "%"}:
        return words
    first = ", ".join((words.unit, *words.lines[:1]))
    return replace(words, unit="", lines=(first, *words.lines[1:]))


def small_words(words: CellWords) -> tuple[str, ...]:
    """Return what stands in small type beneath the figure."""
    return (words.interval, *words.lines) if words.interval else words.lines


def figure_width(paper: Paper, words: CellWords, style: Style) -> float:
    """Return the width of the figure with its unit."""
    figure = paper.width(words.figure, style.figure, bold=True)
    return figure + paper.width(" " + words.unit, style.small + 1)


def draw_frame(paper: Paper, corner: Point, size: Point, name: str = "") -> None:
    """Draw the frame of a cell that got better or worse."""
    (x, top), (width, height), inset = corner, size, FRAME_WIDTH / 2
    inner = width - 2 * inset, height - 2 * inset
    paper.box(x + inset, top + inset, *inner, edge=INK, line=FRAME_WIDTH, name=name, order=1.6)


def draw_cell(
    paper: Paper, style: Style, words: CellWords, small: Sequence[str], corner: Point, size: Point, name: str
) -> None:
    """Draw a cell of that size; ``small`` are the small lines, broken to its width."""
    (x, top), (width, height) = corner, size
    left = x + GAUGE_WIDTH + style.pad
    if not words.possible:
        paper.box(x, top, width, height, fill=ABSENT, name=f"cell-{name}")
        y = top + (height - len(small) * LINE * style.small) / 2
        paper.lines(left, y, small, style.small, name=f"text-{name}-small", ink=QUIET)
        return
    edge = "none" if words.ink is not None else RULE
    paper.box(x, top, width, height, fill=shade(words.ink), edge=edge, name=f"cell-{name}")
    draw_gauge(paper, (x, top), height, words.verdict, f"gauge-{name}")
    if words.change in CHANGED:
        draw_frame(paper, corner, size, f"frame-{name}")
    y = top + style.pad
    if words.head:
        paper.text(left, y, words.head, style.small, name=f"text-{name}-head")
        y += LINE * style.small
    paper.text(left, y, words.figure, style.figure, bold=True, name=f"text-{name}-figure")
    unit = left + paper.width(words.figure, style.figure, bold=True) + paper.width(" ", style.small + 1)
    fall = 0.98 * (style.figure - style.small - 1)  # onto the same baseline
    paper.text(unit, y + fall, words.unit, style.small + 1, name=f"text-{name}-unit")
    y += LINE * style.figure
    paper.lines(left, y, small, style.small, name=f"text-{name}-small")

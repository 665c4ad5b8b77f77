"""The worst cases found, as a picture: a block for each law, with its levels and the direction."""

from __future__ import annotations

import datetime
import math
from collections.abc import Sequence
from pathlib import Path

from matplotlib.figure import Figure

from rigbench.report.cautions import CAUTION
from rigbench.report.paper import INK, LINE, QUIET, Paper, steady_settings
from rigbench.report.picture import save_picture
from rigbench.report.words import level
from rigbench.report.worst_words import READING, LawWorst, smallest_words

__all__ = ["worst_figure", "worst_picture"]

MARGIN = 24.0
SIZE, SMALL, HEAD, TITLE = 8.5, 7.5, 11.0, 16.0
AXIS, PLOT, HIGH = 40.0, 260.0, 150.0  # room of the left axis; the plot's width and height
APART = 34.0
NAME, BAR, TURNED = 150.0, 100.0, 90.0  # least width of the names; those of bars and shares
BESIDE = 10.0  # between bars, amounts and shares
ROW = 17.0
SHOWN = 8
"""Parameters of a direction that are drawn."""

MOST = 3.0
"""Share of a limit up to which the axis goes at most; what lies beyond stands at its upper end."""

MARKERS = "Filled: searched; hollow: tried along the directions found; a triangle lies beyond the axis."

RAIL, STRIPE, TONE, PALE = "#c9d3de", "#f5f7fa", "#1d4a75", "#9bbfe2"


def worst_picture(laws: Sequence[LawWorst], title: str, path: Path, date: datetime.date) -> None:
    """Draw what was found into a file whose suffix says the format: .png, .svg or .pdf.

    The same bytes each time. InputFaults for another suffix, StoreError if the file can't be written.
    """
    save_picture(path, title, lambda: worst_figure(laws, title, date))


def worst_figure(laws: Sequence[LawWorst], title: str, date: datetime.date) -> Figure:
    """Return a page just as high as what is on it."""
    with steady_settings():
        paper = Paper()
        shown = [one.drawn for law in laws for one in law.departures[:SHOWN]]
        name = max(NAME, paper.widest([one.words for one in shown], SMALL) + 10)
        amount = paper.widest([one.amount for one in shown], SMALL)
        width = AXIS + PLOT + APART + name + BAR + 2 * BESIDE + amount + TURNED
        y = paper.lines(MARGIN, MARGIN, paper.wrap(title, width, TITLE, bold=True), TITLE, bold=True)
        said = f"The worst cases found, by level of the mismatch. {date.isoformat()}."
        y = paper.lines(MARGIN, y + 4, paper.wrap(said, width, SIZE), SIZE)
        for number, law in enumerate(laws):
            y = _block(paper, law, y + 16, width, (name, amount), f"law-{number}")
        y += 12
        for text in (f"{MARKERS} {READING}", CAUTION):
            y = paper.lines(MARGIN, y + 4, paper.wrap(text, width, SMALL), SMALL, ink=QUIET)
        return paper.figure(width + 2 * MARGIN, y + MARGIN)


def _block(
    paper: Paper, law: LawWorst, top: float, width: float, words: tuple[float, float], name: str
) -> float:
    """Draw a law's block, its parameters' names and amounts as wide as ``words``; return where it ends."""
    heading = f"{law.law} ({law.sheet})" if law.sheet else law.law
    y = paper.lines(MARGIN, top, paper.wrap(heading, width, HEAD, bold=True), HEAD, bold=True, name=name)
    found = smallest_words(law)
    y = paper.lines(MARGIN, y + 1, paper.wrap(f"{found[0].upper()}{found[1:]}.", width, SIZE), SIZE)
    below = _levels(paper, law, y + 18, name)
    beside = _direction(paper, law, MARGIN + AXIS + PLOT + APART, y + 4, *words)
    return max(below, beside)


def _levels(paper: Paper, law: LawWorst, top: float, name: str) -> float:
    """Draw the share of a limit that the worst machine uses up against the level."""
    left, base = MARGIN + AXIS, top + HIGH
    points = [(one.level, one.used.share, one.searched) for one in law.levels if one.used is not None]
    widest = max([level_ for level_, _, _ in points], default=1.0) * 1.08
    finite = [share for _, share, _ in points if math.isfinite(share)]
    highest = min(max([1.25, *(1.1 * share for share in finite)]), MOST)

    def place(at: float, share: float) -> tuple[float, float]:
        return left + PLOT * at / widest, base - HIGH * min(share / highest, 1.0)

    paper.text(MARGIN, top - 15, "largest share of a limit [%]", SMALL, ink=QUIET)
    paper.box(left, top, PLOT, HIGH, fill=STRIPE, order=0.5)
    for share in [tick / 4 for tick in range(int(4 * highest) + 1) if highest <= 1.5 or tick % 2 == 0]:
        y = place(0.0, share)[1]
        if share != 1.0:
            paper.stroke((left, y), (left + PLOT, y), color=RAIL, line=0.6)
        paper.text(left - 5, y - LINE * SIZE / 2, f"{100 * share:g}", SIZE, at="right")
    y = place(0.0, 1.0)[1]
    paper.stroke((left, y), (left + PLOT, y), color=INK, line=1.2, dashes=(5, 2), name=f"{name}-tolerance")
    # beside the field: points may lie anywhere in it
    paper.text(left + PLOT + 5, y - LINE * SMALL / 2, "limit", SMALL)
    ends = -math.inf
    for at in sorted({one.level for one in law.levels if one.searched} | {0.0}):
        x, said = place(at, 0.0)[0], level(at)
        if x - paper.width(said, SIZE) / 2 > ends:
            paper.text(x, base + 3, said, SIZE, at="center")
            ends = x + paper.width(said, SIZE) / 2 + 4
    paper.text(left + PLOT / 2, base + 3 + LINE * SIZE, "level", SMALL, at="center", ink=QUIET)
    for number, (at, share, searched) in enumerate(points):
        x, y = place(at, share)
        shape = "^" if share > highest else "o"
        paper.marker(
            x, y, 6.5, shape, fill=TONE if searched else "white", edge=TONE, name=f"{name}-level-{number}"
        )
    return base + 3 + LINE * (SIZE + SMALL)


def _direction(paper: Paper, law: LawWorst, left: float, top: float, names: float, amounts: float) -> float:
    """Draw in what the worst machine departs most, from -1 to 1."""
    if not law.departures:
        return top
    width = names + BAR + 2 * BESIDE + amounts + TURNED
    said = (
        f"worst found at level {level(law.told.level)}: u, what that comes to, and what each by itself "
        "makes of the limit"
    )
    y = paper.lines(left, top, paper.wrap(said, width, SMALL), SMALL, ink=QUIET) + 4
    middle = left + names + BAR / 2
    shown = law.departures[:SHOWN]
    for number, one in enumerate(shown):
        at = y + number * ROW
        line = at + (ROW - LINE * SMALL) / 2
        paper.text(left, line, one.drawn.words, SMALL)
        start, end = sorted((middle, middle + one.drawn.u * BAR / 2))
        paper.box(start, at + 3, max(end - start, 0.5), ROW - 6, fill=PALE)
        right = left + names + BAR + BESIDE + amounts
        paper.text(right, line, one.drawn.amount, SMALL, at="right")
        paper.text(right + BESIDE, line, _difference(one.difference), SMALL)
    bottom = y + len(shown) * ROW
    for x, tick in ((middle - BAR / 2, "-1"), (middle, "0"), (middle + BAR / 2, "1")):
        paper.stroke((x, y), (x, bottom), color=RAIL, line=0.8)
        paper.text(x, bottom + 1, tick, SMALL, at="center", ink=QUIET)
    more = len(law.departures) - len(shown)
    if more:
        paper.text(left, bottom + 1, f"and {more} more", SMALL, ink=QUIET)
    return bottom + LINE * SMALL + 2


def _difference(difference: float | None) -> str:
    if difference is None:
        return "not run"
    return "finishing or not" if math.isinf(difference) else f"{100.0 * difference:.3g} %"

"""What the study ``needs`` shows, as a picture: shares as bars, tolerated levels on an axis of multiples."""

from __future__ import annotations

import datetime
import math
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from matplotlib.figure import Figure

from rigbench.report.cautions import CAUTION
from rigbench.report.needs_words import READING, advice, cut, kept_words, notes, own_unit, subject_words
from rigbench.report.paper import INK, LINE, Paper, steady_settings
from rigbench.report.picture import save_picture
from rigbench.report.shades import GAUGE, shade
from rigbench.report.words import level, percent, tolerated_words
from rigbench.scores.limit_search import LADDER
from rigbench.scores.names import score_words
from rigbench.scores.needs import LawNeeds, SourceNeed
from rigbench.scores.needs_design import NeedsDesign
from rigbench.scores.results import Tolerated

__all__ = ["needs_figure", "needs_picture"]

MARGIN = 24.0
SIZE, HEAD, TITLE = 8.0, 9.5, 16.0
NAME, SHARE, LEVEL, SAID = 130.0, 190.0, 190.0, 130.0  # widths of the columns
APART = 22.0
WIDTH = NAME + SHARE + LEVEL + SAID + 3 * APART
ROW = 24.0  # least height of a row
BEYOND = 16.0  # room on the axis of multiples for what lies beyond its ends
RAIL = "#c9d3de"
PALE, DARKER = shade(1.0), "#5b93c9"
STRIPE = "#f5f7fa"


def needs_picture(
    found: Sequence[LawNeeds], design: NeedsDesign, title: str, path: Path, date: datetime.date
) -> None:
    """Draw the needs into a file whose suffix says the format: .png, .svg or .pdf; the same bytes each time.

    Raises InputFaults for another suffix and StoreError if the file can't be written.
    """
    save_picture(path, title, lambda: needs_figure(found, design, title, date))


def needs_figure(found: Sequence[LawNeeds], design: NeedsDesign, title: str, date: datetime.date) -> Figure:
    """Return a page just as high as what is on it, a block for each law and sheet."""
    with steady_settings():
        paper = Paper()
        y = paper.lines(MARGIN, MARGIN, paper.wrap(title, WIDTH, TITLE, bold=True), TITLE, bold=True)
        said = (
            f"What must be known, and how well: what to identify first stands first. Variance of the "
            f"{score_words(design.score)[0]} at level {level(design.level)}; of {design.draws} draws "
            f"{percent(design.required_share)} % must keep the tolerance. {date.isoformat()}."
        )
        y = paper.lines(MARGIN, y + 4, paper.wrap(said, WIDTH, HEAD), HEAD)
        for number, needs in enumerate(found):
            y = _Block(paper, needs, design, number).draw(y + 18)
        y = _draw_key(paper, y + 14)
        for text in (READING, CAUTION):
            y = paper.lines(MARGIN, y + 5, paper.wrap(text, WIDTH, SIZE), SIZE)
        return paper.figure(WIDTH + 2 * MARGIN, y + MARGIN)


@dataclass(frozen=True)
class _Block:
    """One law in one sheet: its table of bars."""

    paper: Paper
    needs: LawNeeds
    design: NeedsDesign
    number: int

    @property
    def _shares(self) -> float:
        return MARGIN + NAME + APART

    @property
    def _levels(self) -> float:
        return self._shares + SHARE + APART

    @property
    def _said(self) -> float:
        return self._levels + LEVEL + APART

    def draw(self, top: float) -> float:
        """Draw it from ``top`` on, and return where it ends."""
        paper = self.paper
        for text, size in ((subject_words(self.needs), 12.0), (advice(self.needs, self.design), HEAD)):
            bold = size > HEAD
            top = paper.lines(MARGIN, top, paper.wrap(text, WIDTH, size, bold=bold), size, bold=bold) + 2
        for note in notes(self.needs, self.design):
            top = paper.lines(MARGIN, top, paper.wrap(note, WIDTH, SIZE), SIZE) + 2
        top = self._draw_heads(top + 8)
        begin = top
        for number, need in enumerate(self.needs.sources):
            top = self._draw_row(top, number, need)
        top = self._draw_together(top)
        self._draw_rails(begin, top)
        return top + LINE * SIZE + 4

    def _draw_heads(self, top: float) -> float:
        heads = (
            (self._shares, "Share of the variance", SHARE),
            (self._levels, "Tolerated level alone, x declared", LEVEL),
            (self._said, "Shown to keep up to", SAID),
        )
        ends = [
            self.paper.lines(x, top, self.paper.wrap(said, wide, SIZE, bold=True), SIZE, bold=True)
            for x, said, wide in heads
        ]
        return max(ends) + 4

    def _draw_row(self, top: float, number: int, need: SourceNeed) -> float:
        paper, said = self.paper, kept_words(need)
        names = paper.wrap(need.group.name, NAME, SIZE)
        lines = paper.wrap("not shown" if said == "-" else said, SAID, SIZE)
        lines += paper.wrap(f"declared {own_unit(need.group, 1.0)}", SAID, SIZE)
        high = max(ROW, (max(len(names), len(lines)) * LINE * SIZE) + 6)
        if number % 2 == 0:
            paper.box(MARGIN - 6, top, WIDTH + 12, high, fill=STRIPE, order=0.3)
        middle = top + high / 2
        name = f"need-{self.number}-{number}"
        paper.lines(MARGIN, middle - len(names) * LINE * SIZE / 2, names, SIZE, name=name)
        self._draw_shares(middle, need, name)
        self._draw_level(middle, need.alone.found.tolerated, name)
        paper.lines(self._said, middle - len(lines) * LINE * SIZE / 2, lines, SIZE, name=f"{name}-said")
        return top + high

    def _draw_together(self, top: float) -> float:
        paper, middle = self.paper, top + ROW / 2
        paper.stroke((MARGIN - 6, top), (MARGIN + WIDTH + 6, top), color=GAUGE, line=0.8)
        paper.text(MARGIN, middle - LINE * SIZE / 2, "all together", SIZE, bold=True)
        tolerated = self.needs.together.found.tolerated
        self._draw_level(middle, tolerated, f"need-{self.number}-together")
        lines = paper.wrap(tolerated_words(tolerated), SAID, SIZE)
        high = max(ROW, len(lines) * LINE * SIZE + 6)
        paper.lines(self._said, middle - len(lines) * LINE * SIZE / 2, lines, SIZE)
        return top + high

    def _draw_shares(self, middle: float, need: SourceNeed, name: str) -> None:
        """Draw the total share, in it that of first order, darker; thin lines are their intervals."""
        if math.isnan(need.total[0]):
            self.paper.text(self._shares + 3, middle - LINE * SIZE / 2, "no value", SIZE)
            return
        for share, fill, half, at in ((need.total, PALE, 7.0, -4.0), (need.first, DARKER, 3.0, 4.0)):
            value, low, high = (SHARE * cut(part) for part in share)
            order = 1.0 if fill == PALE else 1.2
            centre = middle if fill == PALE else middle + at
            self.paper.box(self._shares, centre - half, value, 2 * half, fill=fill, name=name, order=order)
            y = middle + at
            self.paper.stroke(
                (self._shares + low, y), (self._shares + high, y), color=INK, line=0.8, order=1.6
            )
            for end in (low, high):
                x = self._shares + end
                self.paper.stroke((x, y - 2), (x, y + 2), color=INK, line=0.8, order=1.6)

    def _draw_level(self, middle: float, tolerated: Tolerated, name: str) -> None:
        """Draw what is shown to keep, the interval, and the value; an arrow where it has no end."""
        low, high = self._x(tolerated.low), self._x(tolerated.high)
        paper = self.paper
        paper.stroke((low, middle), (high, middle), color=GAUGE, line=2.4, order=1.6, name=f"{name}-level")
        if math.isinf(tolerated.high):
            paper.shape([(high, middle - 4), (high + 6, middle), (high, middle + 4)], GAUGE)
        else:
            paper.stroke((high, middle - 4), (high, middle + 4), color=GAUGE, line=1.2, order=1.6)
        paper.stroke((low, middle - 4), (low, middle + 4), color=GAUGE, line=1.2, order=1.6)
        if tolerated.value is not None and not math.isinf(tolerated.high):
            paper.marker(self._x(tolerated.value), middle, 6, "o", fill="white", edge=GAUGE)

    def _x(self, at: float) -> float:
        """Return where a level lies: logarithmic between the ladder's ends, beyond them in the margins."""
        multiple = at / self.design.level
        if multiple < LADDER[0] * 0.999:
            return self._levels + 4
        if math.isinf(multiple):
            return self._levels + LEVEL - 6
        share = math.log(multiple / LADDER[0]) / math.log(LADDER[-1] / LADDER[0])
        return self._levels + BEYOND + (LEVEL - 2 * BEYOND) * min(share, 1.0)

    def _draw_rails(self, top: float, end: float) -> None:
        """Draw both axes behind the rows, with their numbers beneath."""
        marks = [(self._shares + SHARE * part / 100, f"{part} %") for part in (0, 25, 50, 75, 100)]
        for multiple in (0.2, 0.5, 1.0, 2.0, 5.0):
            at = multiple * self.design.level
            marks.append((self._x(at), level(at)))
        for x, said in marks:
            declared = said == "1" and x > self._levels
            self.paper.stroke((x, top), (x, end), color=INK if declared else RAIL, line=0.7, order=0.6)
            self.paper.text(x, end + 2, said, SIZE, at="center", name="axis")


def _draw_key(paper: Paper, top: float) -> float:
    """Explain the glyphs in one line; return where it ends."""
    x, middle = MARGIN, top + LINE * SIZE / 2
    for said in ("total share", "first-order share", "95 % interval", "tolerated level with its interval"):
        if said == "total share":
            paper.box(x, middle - 5, 22, 10, fill=PALE)
        elif said == "first-order share":
            paper.box(x, middle - 3, 22, 6, fill=DARKER)
        else:
            line, color = (0.8, INK) if said.startswith("95") else (2.4, GAUGE)
            paper.stroke((x, middle), (x + 22, middle), color=color, line=line)
        if said.startswith("tolerated"):
            paper.marker(x + 11, middle, 6, "o", fill="white", edge=GAUGE)
        paper.text(x + 28, top, said, SIZE)
        x += 28 + paper.width(said, SIZE) + 18
    return top + LINE * SIZE

"""The parameters of a draw that depart most, as bars with their names and amounts."""

from __future__ import annotations

from collections.abc import Sequence

from matplotlib.figure import Figure

from rigbench.report.drawn import Drawn
from rigbench.report.paper import LINE, QUIET, Paper
from rigbench.report.time_axes import STROKES, Panel, plain_axes
from rigbench.report.trace_words import shortened

__all__ = ["DrawnBars"]

TITLE, SIZE, SMALL = 12.0, 8.0, 7.0
ROW = 12.5  # from one bar to the next
LEAST_BARS = 70.0  # width that names leave to the bars


class DrawnBars:
    """Words are written on the paper first, the bars drawn on the page afterwards."""

    def __init__(self, paper: Paper, panel: Panel, drawn: Sequence[Drawn]) -> None:
        self.shown: Sequence[Drawn] = drawn[: max(1, int((panel.height - TITLE) / ROW))]
        left, right = panel.x, panel.x + panel.width
        if not drawn:
            paper.text(left, panel.top, "Drawn parameters", SIZE, bold=True, name="title")
            said = "none: nothing is random in this run"
            paper.text(left, panel.top + TITLE + 4, said, SMALL, name="note", ink=QUIET)
            return
        paper.text(left, panel.top, "Departs most", SIZE, bold=True, name="title")
        of = f"{len(self.shown)} of {len(drawn)}" if len(self.shown) < len(drawn) else f"all {len(drawn)}"
        x = left + paper.width("Departs most", SIZE, True) + 6
        paper.text(x, panel.top + SIZE - SMALL, f"{of} drawn; bars: u", SMALL, name="note", ink=QUIET)
        amounts = paper.widest([one.amount for one in self.shown], SMALL)
        most = panel.width - amounts - LEAST_BARS
        names = [shortened(one.words, most, lambda line: paper.width(line, SMALL)) for one in self.shown]
        widest = paper.widest(names, SMALL)
        for number, (one, name) in enumerate(zip(self.shown, names, strict=True)):
            y = panel.top + TITLE + number * ROW + (ROW - LINE * SMALL) / 2
            paper.text(left + widest, y, name, SMALL, at="right", name="parameter")
            paper.text(right, y, one.amount, SMALL, at="right", name="amount")
        start = left + widest + 6
        width = right - amounts - 6 - start
        self.bars = Panel(start, panel.top + TITLE, width, len(self.shown) * ROW)

    def draw(self, page: Figure) -> None:
        """Draw the bars, if anything was drawn."""
        if not self.shown:
            return
        axes = plain_axes(page, self.bars)
        axes.barh(
            range(len(self.shown)),
            [one.u for one in self.shown],
            height=0.6,
            color=STROKES["actual"][0],
            gid="bar",
        )
        axes.axvline(0, color=STROKES["reference"][0], linewidth=0.6)
        axes.set_xlim(-1, 1)
        axes.set_ylim(len(self.shown) - 0.5, -0.5)
        axes.set_yticks([])
        axes.set_xticks([-1, 0, 1])
        axes.spines["left"].set_visible(False)

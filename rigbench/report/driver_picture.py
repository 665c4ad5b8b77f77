"""The strip of draws: a law's draws by rising score, and what each source was in them."""

from __future__ import annotations

import datetime
import math
from pathlib import Path

import numpy as np
from matplotlib.figure import Figure

from rigbench.arm.arm import Floats
from rigbench.report.arrange import MARGIN
from rigbench.report.cautions import CAUTION
from rigbench.report.driver_data import DriverStrip, SourceStrip
from rigbench.report.driver_text import MATTERS, driver_words, parameter_said, source_words, strength_words
from rigbench.report.matrix import draw_head
from rigbench.report.paper import INK, LINE, QUIET, Paper, steady_settings
from rigbench.report.picture import save_picture
from rigbench.report.shades import GAUGE, shade
from rigbench.report.words import limits_of, quantity
from rigbench.scores.names import score_words
from rigbench.scores.results import Results

__all__ = ["driver_figure", "driver_picture"]

SIZE, SMALL = 9.0, 7.5
NAME_MOST = 150.0
BAR, STRIP, APART = 70.0, 480.0, 12.0  # widths
ROW, DEEP, TALL = 30.0, 17.0, 74.0  # from row to row; height of a strip, and of the scores above
LEAST_CELL = 2.0  # the width of a draw below which several share one
RULE = "#c9d3dd"


def driver_picture(results: Results, strip: DriverStrip, path: Path, date: datetime.date) -> None:
    """Draw the strip into a .png, .svg or .pdf file; see :func:`driver_figure`."""
    save_picture(path, results.title, lambda: driver_figure(results, strip, date))


def driver_figure(results: Results, strip: DriverStrip, date: datetime.date) -> Figure:
    """Return the draws from left to right by rising score; beneath, a strip for each source.

    A strip is shaded by the value of the source's parameter that goes with the score most; before it stands
    how strongly the whole source does, as a bar that is filled where that is shown.
    """
    with steady_settings():
        return _Page(results, strip).figure(date)


class _Page:
    def __init__(self, results: Results, strip: DriverStrip) -> None:
        self.paper, self.results, self.strip = Paper(), results, strip
        names = [source_words(one.by_score.source) for one in strip.sources]
        self.lines = [self.paper.wrap(name, NAME_MOST, SIZE, bold=True) for name in names]
        wide = max((self.paper.widest(lines, SIZE, bold=True) for lines in self.lines), default=0.0)
        self.bar = MARGIN + max(wide, 60.0) + APART
        said = max(
            (self.paper.width(strength_words(one.by_score), SMALL) for one in strip.sources), default=0.0
        )
        self.left = self.bar + max(BAR, said) + APART
        n = len(strip.draws)
        self.groups = np.array_split(np.arange(n), min(n, int(STRIP / LEAST_CELL))) if n else []
        self.cell = STRIP / max(len(self.groups), 1)

    def figure(self, date: datetime.date) -> Figure:
        width = self.left + STRIP - MARGIN
        y = draw_head(self.paper, self.results, driver_words(self.strip), date, width) + 18
        if self.groups:
            y = self._scores(y) + 14
            for number, source in enumerate(self.strip.sources):
                y = self._source(source, number, y)
            y = self._legend(y + 6, width)
        end = self.paper.lines(MARGIN, y + 3, self.paper.wrap(CAUTION, width, 8.0), 8.0)
        return self.paper.figure(width + 2 * MARGIN, end + MARGIN)

    def _scores(self, top: float) -> float:
        """Draw the scores as columns, dark where the draw fails, and the limit; return where they end."""
        paper, strip, bottom = self.paper, self.strip, top + TALL
        name, unit = score_words(strip.score)
        limits = limits_of(self.results, strip.score)
        finite = strip.worst[np.isfinite(strip.worst)]
        most = max([*finite.tolist(), *limits], default=0.0) or 1.0
        for number, group in enumerate(self.groups):
            worst = float(np.median(strip.worst[group]))
            failing = float(np.mean(~strip.passed[group])) if self.results.tolerance else 0.0
            endless = math.isinf(worst)
            height = TALL if endless else max(TALL * worst / most * 0.94, 0.5)
            fill = "white" if endless else GAUGE if failing >= 0.5 else shade(0.55)
            x = self.left + number * self.cell
            edge = GAUGE if endless else "none"
            gap = min(0.6, 0.2 * self.cell)
            paper.box(x, bottom - height, self.cell - gap, height, fill=fill, edge=edge, line=0.5,
                      name=f"score-{number}")  # fmt: skip
        for limit in limits:
            y = bottom - TALL * limit / most * 0.94
            ends = (self.left, y), (self.left + STRIP, y)
            paper.stroke(*ends, color="white", line=2.2)
            paper.stroke(*ends, color=INK, line=1.0, dashes=(5, 3), name="limit")
        paper.stroke((self.left, bottom), (self.left + STRIP, bottom), color=RULE, line=0.8)
        label = [f"{name} [{unit}]" if unit else name]
        label.append(f"{quantity(float(strip.worst[0]), strip.score)} to")
        label.append(quantity(float(strip.worst[-1]), strip.score))
        wrapped = [part for line in label for part in paper.wrap(line, self.left - MARGIN - APART, SIZE)]
        paper.lines(MARGIN, top, wrapped[:1], SIZE, bold=True, name="score-name")
        paper.lines(MARGIN, top + LINE * SIZE, wrapped[1:], SIZE, name="score-ends")
        return max(bottom, top + len(wrapped) * LINE * SIZE)

    def _source(self, source: SourceStrip, number: int, top: float) -> float:
        """Draw one source's name, bar and strip; return where the next one goes."""
        paper, lines, driver = self.paper, self.lines[number], source.by_score
        paper.lines(MARGIN, top, lines, SIZE, bold=True, name=f"source-{number}")
        shown = driver.strength is not None and driver.chance < MATTERS
        wide = BAR * (driver.strength or 0.0)
        paper.box(self.bar, top + 1, BAR, 8.0, edge=RULE, line=0.6)
        if wide:
            fill = GAUGE if shown else "white"
            paper.box(self.bar, top + 1, wide, 8.0, fill=fill, edge=GAUGE, line=0.6, name=f"bar-{number}")
        paper.text(self.bar, top + 11, strength_words(driver), SMALL, name=f"strength-{number}")
        for place, value in enumerate(self._shades(source)):
            x = self.left + place * self.cell
            paper.box(x, top, self.cell + 0.05, DEEP, fill=shade(value), name=f"draw-{number}-{place}")
        paper.box(self.left, top, STRIP, DEEP, edge=RULE, line=0.6, order=1.2)
        said = parameter_said(source)
        paper.text(self.left, top + DEEP + 1.5, said, SMALL, name=f"parameter-{number}", ink=QUIET)
        return top + max(ROW, len(lines) * LINE * SIZE + 4, DEEP + LINE * SMALL + 6)

    def _shades(self, source: SourceStrip) -> Floats:
        """Return how dark each cell of a strip is: u from -1 to 1, or its size from 0 to 1, as 0 to 1."""
        means = np.array([float(np.mean(source.u[group])) for group in self.groups])
        return means if source.by_score.by_size else (means + 1.0) / 2.0

    def _legend(self, top: float, width: float) -> float:
        name = score_words(self.strip.score)[0]
        said = [f"From left to right: the draws by rising {name}."]
        if len(self.groups) < len(self.strip.draws):
            said[0] = (
                f"{said[0][:-1]}; each column is {math.ceil(len(self.strip.draws) / len(self.groups))} draws "
                "or one fewer, their median above and their mean below."
            )
        if self.results.tolerance:
            said.append(
                "Dark columns fail the tolerance, pale ones keep it; hollow ones did not finish or settle."
            )
        if limits_of(self.results, self.strip.score):
            said.append("Dashed line: the tolerance's limit.")
        said.append(
            "Bars: how strongly a source goes with the score, 0 to 1 (multiple correlation of ranks); hollow "
            "where that is not shown."
        )
        said.append(
            "Strips: the value u of the named parameter, pale at -1 and dark at 1, or where its size goes "
            "with the score pale at 0 and dark at 1; behind its name Spearman's rank correlation."
        )
        for sentence in said:
            top = self.paper.lines(MARGIN, top, self.paper.wrap(sentence, width, 8.0), 8.0) + 3
        return top

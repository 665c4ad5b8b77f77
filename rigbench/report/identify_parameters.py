"""The base parameters of an identification's page: a row each, by what they do to torques."""

from __future__ import annotations

import math

import numpy as np

from rigbench.report.identify_joints import DECLARED, IDENTIFIED
from rigbench.report.identify_numbers import Shown
from rigbench.report.paper import INK, LINE, QUIET, Paper
from rigbench.report.shortening import fitted

__all__ = ["draw_parameters"]

SIZE, SMALL, HEAD = 8.0, 7.0, 9.5
ROW, APART = 11.0, 24.0
ONE_COLUMN = 12
"""So many parameters at most stand in one column."""
BAR, NOISE, RAIL = "#7ba7d4", "#e9edf2", "#cdd5de"
MOST_JOINT, GAP = 56.0, 8.0
DECADES = 9.0  # of the axis at most
KINDS = ("declared", "identified", "true")


def draw_parameters(paper: Paper, left: float, top: float, width: float, shown: Shown) -> float:
    """Draw heading, key and rows on the paper, from the least well known on; return where they end."""
    said = "How well each base parameter is known: distances from its estimate, by what they do to torque"
    top = paper.lines(left, top, paper.wrap(said, width, HEAD, bold=True), HEAD, bold=True, name="title") + 3
    top = _draw_key(paper, left, top, shown) + 6
    order = shown.departures.order
    columns = 1 if len(order) <= ONE_COLUMN else 2
    wide, each = (width - (columns - 1) * APART) / columns, math.ceil(len(order) / columns)
    for k in range(columns):
        _Column(paper, left + k * (wide + APART), wide, shown).draw(top, order[k * each : (k + 1) * each])
    top += each * ROW + LINE * SMALL + 6
    said = (
        "rms of the torque along the shown motion, in % of how much it varies, at the joint for which that "
        "is most (named beside the parameter); what is nearer than "
        "the axis shows stands at its left end. A mark beyond its bar is outside of the interval."
    )
    return paper.lines(left, top, paper.wrap(said, width, SMALL), SMALL, name="axis", ink=QUIET)


class _Column:
    """A column of rows: name, joint, and the distances on an axis of logarithms."""

    def __init__(self, paper: Paper, left: float, wide: float, shown: Shown) -> None:
        self.paper, self.shown, self.left = paper, shown, left
        self.joints = [fitted(name, MOST_JOINT, self._measure) for name in shown.joints]
        self.name = 0.45 * wide
        self.joint = left + self.name + GAP
        self.start = self.joint + paper.widest(self.joints, SMALL) + GAP
        self.width = left + wide - self.start
        self.low, self.high = _ends(shown)

    def draw(self, top: float, which: list[int]) -> None:
        """Draw these parameters, and the axis beneath them."""
        end = top + len(which) * ROW
        self._draw_axis(top, end)
        for number, k in enumerate(which):
            self._draw_row(top + number * ROW, k)

    def x(self, value: float) -> float:
        """Return where a value lies; what is off the axis stands at its end."""
        share = math.log(max(value, self.low) / self.low) / math.log(self.high / self.low)
        return self.start + self.width * min(share, 1.0)

    def _measure(self, line: str) -> float:
        return self.paper.width(line, SMALL)

    def _draw_row(self, top: float, k: int) -> None:
        paper, departures = self.paper, self.shown.departures
        joint, middle, text = int(departures.joint[k]), top + ROW / 2, top + (ROW - LINE * SMALL) / 2
        name = fitted(self.shown.done.found.base.names[k], self.name, self._measure)
        paper.text(self.left, text, name, SMALL, name=f"parameter-{k}")
        paper.text(self.joint, text, self.joints[joint], SMALL, name=f"at-{k}", ink=QUIET)
        noise = float(np.nan_to_num(self.shown.shares["noise"][joint]))
        paper.box(self.start, top, self.x(noise) - self.start, ROW, fill=NOISE, name=f"noise-{k}", order=0.3)
        wide = self.x(float(departures.half[k])) - self.start
        paper.box(self.start, middle - 2.2, wide, 4.4, fill=BAR, name=f"interval-{k}", order=1.0)
        for kind in KINDS:
            values = getattr(departures, kind)
            if values is not None:
                _mark(paper, self.x(float(values[k])), middle, kind, f"{kind}-{k}")

    def _draw_axis(self, top: float, end: float) -> None:
        first, last = math.ceil(math.log10(self.low)), math.floor(math.log10(self.high))
        said = {decade: f"{10.0**decade:g} %" for decade in range(first, last + 1)}
        apart = self.x(10.0**first * 10) - self.x(10.0**first)
        step = math.ceil((self.paper.widest(list(said.values()), SMALL) + 6) / apart)
        for decade in range(first, last + 1):
            x = self.x(10.0**decade)
            self.paper.stroke((x, top), (x, end), color=RAIL, line=0.6, order=0.6)
            if (decade - first) % step == 0:
                self.paper.text(x, end + 2, said[decade], SMALL, at="center", name="axis")
        self.paper.stroke((self.start, top), (self.start, end), color=QUIET, line=0.6, order=1.4)


def _ends(shown: Shown) -> tuple[float, float]:
    """Return the ends of the axis [%]: below the shortest interval and above the farthest mark."""
    departures = shown.departures
    marks = [departures.declared, departures.identified, departures.half, shown.shares["noise"]]
    marks += [] if departures.true is None else [departures.true]
    every = np.concatenate(marks)
    every = every[np.isfinite(every)]
    high = max(1.25 * float(every.max(initial=0.0)), 1e-9)
    halves = departures.half[departures.half > 0]
    low = min(float(halves.min(initial=math.inf)), high / 10) / 1.6
    low = max(low, high / 10**DECADES)
    return low, high


def _mark(paper: Paper, x: float, y: float, kind: str, name: str) -> None:
    if kind == "declared":
        paper.marker(x, y, 4.6, "o", fill="white", edge=DECLARED, name=name)
    elif kind == "identified":
        paper.marker(x, y, 2.6, "D", fill=IDENTIFIED, edge=IDENTIFIED, name=name)
    else:
        paper.marker(x, y, 4.4, "x", fill=INK, edge=INK, name=name)


def _draw_key(paper: Paper, left: float, top: float, shown: Shown) -> float:
    """Draw a sample of each mark with its meaning; return where they end."""
    x, middle = left, top + LINE * SIZE / 2
    for said, fill, high in (("95 % interval", BAR, 4.4), ("noise of one sample", NOISE, ROW - 2)):
        paper.box(x, middle - high / 2, 22, high, fill=fill)
        paper.text(x + 26, top, said, SIZE, name="key")
        x += 26 + paper.width(said, SIZE) + 14
    words = {
        "declared": "declared value",
        "identified": "identified arm, whose bodies can exist",
        "true": "true value",
    }
    for kind in KINDS:
        if kind != "true" or shown.departures.true is not None:
            _mark(paper, x + 4, middle, kind, "")
            paper.text(x + 11, top, words[kind], SIZE, name="key")
            x += 11 + paper.width(words[kind], SIZE) + 14
    return top + LINE * SIZE

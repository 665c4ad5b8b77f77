"""The joints of an identification's page: numbers, torque, its error, and what is left by speed."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from numpy import bool_
from numpy.typing import NDArray

from rigbench.arm.arm import Floats
from rigbench.report.identify_numbers import Shown
from rigbench.report.paper import INK, LINE, QUIET, Paper
from rigbench.report.shortening import fitted
from rigbench.report.time_axes import NUMBERS, REST, Panel, plain_axes, zero_line
from rigbench.report.words import figure

__all__ = ["BAND", "DECLARED", "IDENTIFIED", "MEASURED", "JointRows"]

MEASURED, DECLARED, IDENTIFIED, BAND = "#b4bec8", "#c8761a", "#1d4a75", "#d5e3f2"
DASHES = (3.0, 1.2)
SIZE, SMALL = 8.0, 7.0
WORDS, SHARE, SIDE = 136.0, 46.0, 36.0  # widths: of the numbers, of their last column, beside an axis
WIDTHS = (186.0, 200.0, 102.0)  # of a joint's panels
ALL_ROWS, LEAST_ROW, MOST_ROW, BELOW = 400.0, 60.0, 120.0, 10.0  # heights
TITLE, FEET = 13.0, 26.0
NOISE_BAND = 2.0  # times the noise
OUTLYING = 3.0
"""An axis ends before values beyond so many times the 99th percentile: one of them would flatten the rest."""
MOST_DOTS = 2000
BINS, LEAST_IN_BIN = 10, 8


class JointRows:
    """Words are written on the paper first, the panels drawn on the page afterwards."""

    def __init__(self, paper: Paper, left: float, top: float, shown: Shown) -> None:
        self.paper, self.shown = paper, shown
        n = shown.arm.n
        self.height = min(max(ALL_ROWS / n, LEAST_ROW), MOST_ROW)
        self.columns = [left + WORDS + sum(WIDTHS[:k]) + (k + 1) * SIDE for k in range(len(WIDTHS))]
        top = self._key(left, top) + 8
        titles = ("Torque", "Measured less predicted", "What is left")
        for x, title in zip(self.columns, titles, strict=True):
            paper.text(x - SIDE + 8, top, f"{title} [{shown.unit}]", SIZE, bold=True, name="title")
        self.tops = [top + TITLE + i * (self.height + BELOW) for i in range(n)]
        for i, at in enumerate(self.tops):
            self._numbers(left, at, i)
        self.end = self.tops[-1] + self.height + FEET
        """Where they end, from the upper edge of the page."""

    def draw(self, page: Figure) -> None:
        """Draw the panels of every joint."""
        for i, top in enumerate(self.tops):
            torque, error, left = (
                plain_axes(page, Panel(x, top, width, self.height))
                for x, width in zip(self.columns, WIDTHS, strict=True)
            )
            self._draw_torque(torque, i)
            self._draw_error(error, i)
            self._draw_left(left, i)
            for axes, said in ((torque, "t [s]"), (error, "t [s]"), (left, "speed over its greatest")):
                axes.locator_params(axis="y", nbins=4)
                if i < len(self.tops) - 1:
                    axes.tick_params(labelbottom=False)
                else:
                    axes.set_xlabel(said, size=NUMBERS, labelpad=1.5, color=INK)

    # --- words

    def _numbers(self, left: float, top: float, i: int) -> None:
        """Write a joint's name and its numbers, in its unit and in percent of how much the torque varies."""
        paper, shown = self.paper, self.shown
        name = fitted(shown.joints[i], WORDS, lambda line: paper.width(line, SIZE, bold=True))
        paper.text(left, top, name, SIZE, bold=True, name=f"joint-{i}")
        lines: list[tuple[str, float, float | None]] = [
            ("varies by", float(shown.varied[i]), None),
            *(
                (f"{whose} off", float(error.rms_nm[i]), float(shown.shares[whose][i]))
                for whose, error in shown.errors.items()
            ),
            ("noise", float(shown.done.found.noise[i]), float(shown.shares["noise"][i])),
        ]
        for number, (said, value, share) in enumerate(lines):
            y = top + LINE * SIZE + 1 + number * LINE * SMALL
            paper.text(left, y, said, SMALL, name=f"said-{i}", ink=QUIET)
            bold = said.startswith("identified")
            at = left + WORDS - SHARE
            paper.text(at, y, figure(value), SMALL, at="right", bold=bold, name=f"number-{i}")
            words = shown.units[i] if share is None else f"{figure(share)} %" if np.isfinite(share) else "-"
            right = left + WORDS if share is not None else at + 3 + paper.width(words, SMALL)
            paper.text(right, y, words, SMALL, at="right", bold=bold, name=f"share-{i}")

    def _key(self, left: float, top: float) -> float:
        """Draw a sample of each mark with its meaning; return where they end."""
        paper, x, middle = self.paper, left, top + LINE * SIZE / 2
        for said, color, line, dashes in (
            ("measured", MEASURED, 2.6, ()),
            ("declared", DECLARED, 1.1, DASHES),
            ("identified", IDENTIFIED, 1.1, ()),
        ):
            paper.stroke((x, middle), (x + 22, middle), color=color, line=line, dashes=dashes)
            x = self._said(x + 26, top, said)
        if self.shown.left_out:
            paper.box(x, middle - 4, 22, 8, fill=REST)
            x = self._said(x + 26, top, "left out, for the joint stands or turns back")
        paper.box(x, middle - 4, 22, 8, fill=BAND)
        x = self._said(x + 26, top, f"\u00b1 {NOISE_BAND:g} times the noise")
        paper.stroke((x + 6, middle - 5), (x + 6, middle + 5), color=INK, line=0.9)
        paper.marker(x + 6, middle, 3.0, "o", fill=INK, edge=INK)
        self._said(x + 16, top, "mean, 95 %")
        return top + LINE * SIZE

    def _said(self, x: float, top: float, said: str) -> float:
        self.paper.text(x, top, said, SIZE, name="key")
        return x + self.paper.width(said, SIZE) + 14

    # --- panels

    def _draw_torque(self, axes: Axes, i: int) -> None:
        t, measured = self.shown.rows.t, self.shown.rows.torque[:, i]
        predicted = {whose: values[:, i] for whose, values in self.shown.predicted.items()}
        axes.plot(t, measured, color=MEASURED, linewidth=2.6, gid="measured", zorder=2)
        self._draw_both(axes, predicted)
        self._over_time(axes, i)
        ends = np.concatenate([*predicted.values(), np.quantile(measured, [0.01, 0.99])])
        low, high = float(ends.min()), float(ends.max())
        room = 0.5 * (high - low) or 1.0
        near = measured[(measured > low - room) & (measured < high + room)]
        low, high = float(near.min(initial=low)), float(near.max(initial=high))
        axes.set_ylim(low - 0.1 * room, high + 0.1 * room)
        _draw_beyond(axes, t, measured, MEASURED)

    def _draw_error(self, axes: Axes, i: int) -> None:
        rests = {whose: self.shown.residual(whose, i) for whose in self.shown.predicted}
        zero_line(axes)
        self._draw_both(axes, rests)
        self._over_time(axes, i)
        _scale(axes, np.concatenate(list(rests.values())))
        for whose, color in (("declared", DECLARED), ("identified", IDENTIFIED)):
            _draw_beyond(axes, self.shown.rows.t, rests[whose], color)

    def _draw_both(self, axes: Axes, curves: dict[str, Floats]) -> None:
        t = self.shown.rows.t
        axes.plot(
            t, curves["declared"], color=DECLARED, linewidth=1.0, dashes=DASHES, gid="declared", zorder=2.4
        )
        axes.plot(t, curves["identified"], color=IDENTIFIED, linewidth=0.8, gid="identified", zorder=2.6)

    def _over_time(self, axes: Axes, i: int) -> None:
        """Shade what is left out, and let the axis go from the first to the last sample."""
        t = self.shown.rows.t
        for begin, end in _stretches(t, ~self.shown.rows.usable[:, i]):
            axes.axvspan(begin, end, color=REST, linewidth=0, zorder=0, gid="left-out")
        axes.set_xlim(t[0], t[-1])
        axes.locator_params(axis="x", nbins=5)

    def _draw_left(self, axes: Axes, i: int) -> None:
        """Draw what the identified arm leaves, against speed, within the noise and with its mean."""
        usable, noise = self.shown.rows.usable[:, i], float(self.shown.done.found.noise[i])
        rest, v = self.shown.residual("identified", i)[usable], self.shown.rows.v[usable, i]
        speed = v / max(float(np.abs(v).max(initial=0.0)), 1e-12)
        axes.axhspan(-NOISE_BAND * noise, NOISE_BAND * noise, color=BAND, linewidth=0, zorder=0, gid="band")
        zero_line(axes)
        some = slice(None, None, -(-len(rest) // MOST_DOTS) or 1)
        axes.plot(
            speed[some], rest[some], "o", color=IDENTIFIED, markersize=1.5, markeredgewidth=0, gid="left"
        )
        low, high = _scale(axes, rest, 1.6 * NOISE_BAND * noise)
        inside = (rest >= low) & (rest <= high)
        _draw_means(axes, speed[inside], rest[inside])
        _draw_beyond(axes, speed, rest, IDENTIFIED)
        axes.set_xlim(-1.05, 1.05)
        axes.set_xticks([-1, 0, 1])


def _scale(axes: Axes, values: Floats, least: float = 0.0) -> tuple[float, float]:
    """Scale an axis to 0, +-least and values, some nan, but for those that lie far out; return its ends."""
    there = values[np.isfinite(values)]
    common = float(np.quantile(np.abs(there), 0.99)) if there.size else 0.0
    if common > 0:
        there = there[np.abs(there) <= OUTLYING * common]
    low, high = float(there.min(initial=-least)), float(there.max(initial=least))
    room = 0.1 * (high - low) or 1.0
    axes.set_ylim(low - room, high + room)
    return low - room, high + room


def _draw_beyond(axes: Axes, x: Floats, values: Floats, color: str) -> None:
    """Draw values beyond the axis as arrowheads at its ends."""
    low, high = axes.get_ylim()
    for beyond, end, shape in ((values > high, high, "^"), (values < low, low, "v")):
        at = np.full(int(beyond.sum()), 0.97 * end + 0.03 * (low + high) / 2)
        axes.plot(x[beyond], at, shape, color=color, markersize=3.5, markeredgewidth=0, gid="beyond")


def _draw_means(axes: Axes, speed: Floats, rest: Floats) -> None:
    """Draw the mean over each of equal parts of the speed, with its 95 % interval, where samples are many."""
    part = np.clip(((speed + 1) / 2 * BINS).astype(int), 0, BINS - 1)
    for k in range(BINS):
        here = rest[part == k]
        if len(here) >= LEAST_IN_BIN:
            half = 1.96 * float(here.std(ddof=1)) / len(here) ** 0.5
            axes.errorbar(
                float(speed[part == k].mean()), float(here.mean()), yerr=half, fmt="o", color=INK,
                markersize=2.6, elinewidth=0.9, markeredgewidth=0, zorder=3, gid="mean",
            )  # fmt: skip


def _stretches(t: Floats, flags: NDArray[bool_]) -> Iterator[tuple[float, float]]:
    """Yield begin and end [s] of the stretches of set flags, out to half-way to the next sample."""
    half = float(t[1] - t[0]) / 2 if len(t) > 1 else 0.0
    edges = np.flatnonzero(np.diff(np.concatenate([[False], flags, [False]]).astype(np.int8)))
    for first, last in edges.reshape(-1, 2).tolist():
        yield float(t[first]) - half, float(t[last - 1]) + half

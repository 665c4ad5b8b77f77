"""Axes on a page of plots: time across, its marks, and curves that are no finer than can be seen."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import FuncFormatter
from numpy.typing import NDArray

from rigbench.arm.arm import Floats
from rigbench.report.paper import INK

__all__ = [
    "FAR",
    "LIMITED",
    "REST",
    "STROKES",
    "Panel",
    "Stage",
    "draw_curve",
    "draw_limits",
    "draw_stretches",
    "plain_axes",
    "scale_about_zero",
    "zero_line",
]

NUMBERS = 7.0  # size of type beside the axes
REFERENCE, ACTUAL, LIMIT, FRAME = "#8b98a5", "#1d4a75", "#6a7681", "#aab3bc"
LIMITED, REST = "#c98a2b", "#eef1f5"
STROKES: Mapping[str, tuple[str, float, tuple[float, ...]]] = {
    "reference": (REFERENCE, 1.1, (3.0, 1.6)),
    "actual": (ACTUAL, 1.0, ()),
    "limit": (LIMIT, 0.8, (6.0, 2.0, 1.2, 2.0)),
    "ended": (INK, 1.1, (1.2, 1.2)),
}
"""Colour, width and dashes of each kind of line: the dashes alone tell them apart in grey print."""

MOST_POINTS = 3000  # of a curve; more can't be told apart on the page
FAR = 1.8
"""A limit farther than this many times the largest value is not drawn: it would flatten the curve."""


@dataclass(frozen=True)
class Panel:
    """Where axes stand [pt], from the upper left corner of the page."""

    x: float
    top: float
    width: float
    height: float


@dataclass(frozen=True, eq=False)
class Stage:
    """What all panels of a run have in common: its length, its rests (R, 2), and where it ended early [s]."""

    span: float
    rests: Floats
    ended: float | None

    def axes(self, page: Figure, panel: Panel, numbered: bool) -> Axes:
        """Return axes over time with rests shaded and the early end marked."""
        axes = plain_axes(page, panel)
        axes.set_xlim(0, self.span)
        axes.locator_params(axis="y", nbins=5)
        axes.locator_params(axis="x", nbins=round(panel.width / 36))
        if numbered:
            axes.set_xlabel("t [s]", size=NUMBERS, labelpad=1.5, color=INK)
        else:
            axes.tick_params(labelbottom=False)
        for begin, end in self.rests:
            axes.axvspan(begin, min(end, self.span), color=REST, linewidth=0, zorder=0)
        if self.ended is not None:
            color, line, dashes = STROKES["ended"]
            axes.axvline(self.ended, color=color, linewidth=line, dashes=dashes, zorder=4, gid="ended")
        return axes


def plain_axes(page: Figure, panel: Panel) -> Axes:
    """Return axes with two quiet sides and small numbers."""
    width, height = page.get_size_inches() * 72
    bottom = height - panel.top - panel.height
    axes = page.add_axes((panel.x / width, bottom / height, panel.width / width, panel.height / height))
    for side in ("top", "right"):
        axes.spines[side].set_visible(False)
    for side in ("left", "bottom"):
        axes.spines[side].set(color=FRAME, linewidth=0.6)
    axes.tick_params(labelsize=NUMBERS, length=2, width=0.5, pad=1.5, color=FRAME, labelcolor=INK)
    for axis in (axes.xaxis, axes.yaxis):
        axis.set_major_formatter(FuncFormatter(lambda value, _: _tick_words(value)))
    return axes


def _tick_words(value: float) -> str:
    """Write the number at a tick whole: a common power of ten above the axis would run into the title."""
    if value == 0 or 1e-3 <= abs(value) < 1e5:
        return f"{value:g}"
    mantissa, _, exponent = f"{value:.2e}".partition("e")
    return f"{float(mantissa):g}e{int(exponent)}"


def draw_curve(axes: Axes, t: Floats, values: Floats, what: str) -> None:
    """Draw values (N,) over times (N,); ``what`` is one of STROKES."""
    color, line, dashes = STROKES[what]
    (drawn,) = axes.plot(*_thinned(t, values), color=color, linewidth=line, gid=what, zorder=2.5)
    if len(t) == 1:
        drawn.set(marker="o", markersize=2.5)
    if dashes:
        drawn.set_dashes(dashes)


def draw_limits(axes: Axes, limits: Sequence[float]) -> None:
    """Draw lines across at these values."""
    color, line, dashes = STROKES["limit"]
    for limit in limits:
        axes.axhline(limit, color=color, linewidth=line, dashes=dashes, zorder=2, gid="limit")


def zero_line(axes: Axes) -> None:
    """Draw a thin line at zero."""
    axes.axhline(0, color=REFERENCE, linewidth=0.6, zorder=2)


def scale_about_zero(axes: Axes, values: Floats, limit: float | None) -> None:
    """Scale an axis to values and zero, and to both limits, drawn, if they are not far beyond the values."""
    low, high = (float(values.min()), float(values.max())) if values.size else (0.0, 0.0)
    if limit is not None and limit <= FAR * max(abs(low), abs(high)):
        draw_limits(axes, [-limit, limit])
        low, high = min(low, -limit), max(high, limit)
    low, high = min(low, 0.0), max(high, 0.0)
    room = 0.08 * (high - low) or 1.0
    axes.set_ylim(low - 1.5 * room, high + room)


def draw_stretches(axes: Axes, flags: NDArray[np.bool_], tick_s: float, span: float) -> None:
    """Draw a bar at the foot of the axes wherever the flags (N,) of the ticks are set."""
    spans = list(_spans(flags, tick_s, span / 1000))
    if spans:
        low, high = axes.get_ylim()
        bar: Any = axes.broken_barh(
            spans, (low, 0.05 * (high - low)), facecolor=LIMITED, linewidth=0, zorder=3
        )
        bar.set_gid("limited")


def _thinned(t: Floats, values: Floats) -> tuple[Floats, Floats]:
    """Return the curve with no more points than can be told apart, its extremes among them."""
    share = math.ceil(len(t) / (MOST_POINTS / 2))
    if share <= 2:
        return t, values
    whole = len(t) // share * share
    blocks = values[:whole].reshape(-1, share)
    ends = np.stack([blocks.argmin(axis=1), blocks.argmax(axis=1)], axis=1)
    kept = (ends + share * np.arange(len(blocks))[:, None]).ravel()
    kept = np.unique(np.concatenate([[0], kept, np.arange(whole, len(t))]))
    return t[kept], values[kept]


def _spans(flags: NDArray[np.bool_], tick_s: float, least: float) -> Iterator[tuple[float, float]]:
    """Yield (start, length) [s] of the stretches of set flags; gaps shorter than ``least`` are closed."""
    edges = np.flatnonzero(np.diff(np.concatenate([[False], flags, [False]]).astype(np.int8)))
    begin: float | None = None
    end = 0.0
    for first, last in (edges.reshape(-1, 2) * tick_s).tolist():
        if begin is not None and first - end > least:
            yield begin, max(end - begin, least)
            begin = None
        begin, end = first if begin is None else begin, last
    if begin is not None:
        yield begin, max(end - begin, least)

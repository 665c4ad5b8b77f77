"""What gear ratios do to an arm, as one page of curves against the ratio, a curve a joint."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from pathlib import Path
from typing import Any

from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.lines import Line2D

from rigbench.campaign.gears.result import Geared, Gears
from rigbench.report.gears_words import how_words, notes, reserve
from rigbench.report.marks import mark_of
from rigbench.report.paper import INK, LINE, QUIET, Paper, steady_settings
from rigbench.report.picture import save_picture

__all__ = ["gears_figure", "gears_picture"]

WIDE, PANEL_HIGH = 792.0, 168.0  # pt: a landscape page's width
MARGIN = 30.0
SIZE, HEAD, TITLE = 8.0, 9.5, 14.0
GRID = "#e3e9f0"
BESIDE, ABOVE, BELOW, BETWEEN = 32.0, 26.0, 26.0, 14.0
LEAST_RESERVE = -100.0
KEYS_ACROSS = 8
MOST_TICKS = 8
HIGHEST = 0.97  # of the axis: a number above would touch the panel's title

Values = Callable[[Geared], float | None]


def gears_picture(gears: Gears, path: Path) -> None:
    """Draw the gears into a file whose suffix says the format, as :func:`save_picture` does."""
    save_picture(path, f"Gear ratios of {gears.name}", lambda: gears_figure(gears))


def gears_figure(gears: Gears) -> Figure:
    """Return the page: what a ratio does above, what it leaves and costs beneath."""
    with steady_settings():
        paper, width = Paper(), WIDE - 2 * MARGIN
        top = paper.lines(
            MARGIN,
            MARGIN - 8,
            paper.wrap(f"Gear ratios of {gears.name}", width, TITLE, bold=True),
            TITLE,
            bold=True,
        )
        rows = math.ceil(len(gears.joints) / KEYS_ACROSS)
        key, top = top + 4, top + 8 + rows * 14.0
        said = paper.wrap(
            " ".join([how_words(gears), *(f"Note: {note}." for note in notes(gears))]), width, SIZE
        )
        high = top + 2 * (ABOVE + PANEL_HIGH + BELOW) + 14 + len(said) * LINE * SIZE + MARGIN / 2
        paper.lines(MARGIN, top + 2 * (ABOVE + PANEL_HIGH + BELOW) + 14, said, SIZE, ink=QUIET)
        figure = paper.figure(WIDE, high)
        FigureCanvasAgg(figure)
        _draw_key(figure, gears, key, high)
        panel = (width - 2 * BETWEEN) / 3 - BESIDE
        for number, draw in enumerate((_inertia, _disturbance, _damping, _error, _speed, _torque)):
            row, column = divmod(number, 3)
            left = MARGIN + column * (panel + BESIDE + BETWEEN) + BESIDE
            bottom = high - top - (row + 1) * (ABOVE + PANEL_HIGH) - row * BELOW
            axes = figure.add_axes((left / WIDE, bottom / high, panel / WIDE, PANEL_HIGH / high))
            _dress(axes, gears)
            draw(axes, gears)
        return figure


def _draw_key(figure: Figure, gears: Gears, top: float, high: float) -> None:
    handles = [Line2D([], [], label=joint.joint[:24], **_look(at)) for at, joint in enumerate(gears.joints)]
    corner = (MARGIN - 6) / WIDE, 1 - top / high
    figure.legend(
        handles=handles,
        loc="upper left",
        bbox_to_anchor=corner,
        ncol=KEYS_ACROSS,
        frameon=False,
        fontsize=SIZE,
        labelcolor=INK,
        handlelength=2.6,
        columnspacing=1.6,
        borderaxespad=0.0,
    )


def _look(number: int) -> dict[str, Any]:
    mark = mark_of(number)
    return {
        "color": mark.tone, "marker": mark.shape, "markersize": 4.2, "linewidth": 1.2,
        "linestyle": (0, mark.dashes) if mark.dashes else "-", "markeredgecolor": mark.tone,
    }  # fmt: skip


def _dress(axes: Axes, gears: Gears) -> None:
    for side in ("top", "right"):
        axes.spines[side].set_visible(False)
    for side in ("left", "bottom"):
        axes.spines[side].set_color(QUIET)
    axes.tick_params(labelsize=SIZE, colors=INK, which="both")
    axes.grid(True, color=GRID, linewidth=0.7)
    axes.set_axisbelow(True)
    axes.set_xscale("log")
    low, high = gears.ratios[0], gears.ratios[-1]
    axes.set_xlim(low / 1.25, high * 1.25)
    shown = _apart(gears.ratios)
    axes.set_xticks(shown, [f"{ratio:g}" for ratio in shown])
    axes.set_xticks([], minor=True)
    axes.set_xlabel("gear ratio", fontsize=SIZE, color=INK, labelpad=1)


def _apart(ratios: Sequence[float]) -> list[float]:
    """Return the ratios that can be written beneath the axis without touching, the first among them."""
    span = math.log(ratios[-1] * 1.25**2 / ratios[0])
    shown: list[float] = []
    for ratio in ratios:
        if not shown or math.log(ratio / shown[-1]) > 0.095 * span:
            shown.append(ratio)
    return shown


def _head(axes: Axes, title: str) -> None:
    axes.annotate(
        title, (0, 1), (-26, 8), xycoords="axes fraction", textcoords="offset points", fontsize=HEAD,
        fontweight="bold", color=INK, annotation_clip=False,
    )  # fmt: skip


def _curves(axes: Axes, gears: Gears, *values: Values) -> list[float]:
    """Draw a joint's values as a curve each, with gaps where there are none; return all that is drawn."""
    drawn = []
    for number, joint in enumerate(gears.joints):
        for of in values:
            points = [(row.ratio, of(row)) for row in joint.ratios]
            heights = [math.nan if y is None or not math.isfinite(y) else y for _, y in points]
            axes.plot([x for x, _ in points], heights, **_look(number))
            drawn += [y for y in heights if not math.isnan(y)]
    if not drawn:
        axes.text(0.5, 0.5, "not known", transform=axes.transAxes, ha="center", fontsize=SIZE, color=QUIET)
        axes.set_yticks([])
    return drawn


def _logarithmic(axes: Axes, drawn: Sequence[float]) -> None:
    """Let the axis of values be logarithmic, with numbers beside it also where it has less than a decade."""
    positive = [value for value in drawn if value > 0]
    if not positive:
        return
    low, high = min(positive) / 1.3, max(*positive, 1.5 * min(positive)) * 1.3
    parts = (1, 1.5, 2, 3, 5, 7) if high / low < 8 else (1, 2, 5) if high / low < 300 else (1,)
    decades = range(math.floor(math.log10(low)), math.ceil(math.log10(high)) + 1)
    ticks = [part * 10.0**decade for decade in decades for part in parts]
    span = math.log(high / low)
    shown = [tick for tick in ticks if 0.0 <= math.log(tick / low) / span <= HIGHEST]
    axes.set_yscale("log")
    axes.set_ylim(low, high)
    _ticks(axes, shown[:: math.ceil(len(shown) / MOST_TICKS)])


def _linear(axes: Axes, drawn: Sequence[float]) -> None:
    """Let the axis of values begin at 0, with room above the largest."""
    high = 1.1 * max(drawn)
    step = next(
        part * 10.0**decade
        for decade in range(-12, 13)
        for part in (1, 2, 5)
        if high / (part * 10.0**decade) <= MOST_TICKS
    )
    axes.set_ylim(0.0, high)
    _ticks(axes, [k * step for k in range(MOST_TICKS + 1) if k * step <= HIGHEST * high])


def _ticks(axes: Axes, values: Sequence[float]) -> None:
    axes.set_yticks(values, [f"{value:g}" for value in values])
    axes.set_yticks([], minor=True)


def _inertia(axes: Axes, gears: Gears) -> None:
    _logarithmic(axes, _curves(axes, gears, lambda row: row.variation))
    _head(axes, "Inertia at the motor, largest over least")


def _disturbance(axes: Axes, gears: Gears) -> None:
    if all(row.disturbance_share is None for joint in gears.joints for row in joint.ratios):
        _logarithmic(axes, _curves(axes, gears, lambda row: row.disturbance))
        _head(axes, "Disturbance at the motor [N m]")
        return
    shares = _curves(
        axes, gears, lambda row: None if row.disturbance_share is None else 100 * row.disturbance_share
    )
    _logarithmic(axes, shares)
    axes.axhline(100.0, color=INK, linewidth=1.0, linestyle=(0, (6, 2)))
    _head(axes, "Disturbance over motor's limit [%]")


def _damping(axes: Axes, gears: Gears) -> None:
    _linear(axes, _curves(axes, gears, lambda row: row.damping_least, lambda row: row.damping_largest))
    axes.axhline(gears.damping, color=INK, linewidth=1.0, linestyle=(0, (6, 2)))
    _head(axes, "Damping ratio, least and largest")


def _error(axes: Axes, gears: Gears) -> None:
    slides = {joint.prismatic for joint in gears.joints}
    unit = "deg" if slides == {False} else "mm" if slides == {True} else "deg or mm"
    scales = {
        row: 1e3 if joint.prismatic else math.degrees(1.0) for joint in gears.joints for row in joint.ratios
    }
    _logarithmic(
        axes,
        _curves(axes, gears, lambda row: None if row.error_peak is None else scales[row] * row.error_peak),
    )
    _head(axes, f"Tracking error in the engine [{unit}]")


def _speed(axes: Axes, gears: Gears) -> None:
    _reserve(axes, gears, lambda row: row.speed_used)
    _head(axes, "Reserve of speed [%]")


def _torque(axes: Axes, gears: Gears) -> None:
    _reserve(axes, gears, lambda row: row.torque_used)
    _head(axes, "Reserve of torque [%]")


def _reserve(axes: Axes, gears: Gears, used: Values) -> None:
    """Draw what is left of a limit; below -100 % it is all the same how far."""

    def left(row: Geared) -> float | None:
        share = reserve(used(row))
        return None if share is None else max(100.0 * share, LEAST_RESERVE)

    drawn = _curves(axes, gears, left)
    if not drawn:
        return
    least = min(drawn)
    axes.set_ylim(-8.0 if least >= 0 else max(1.15 * least, 1.08 * LEAST_RESERVE), 108.0)
    axes.axhline(0.0, color=INK, linewidth=1.0, linestyle=(0, (6, 2)))
    low = axes.get_ylim()[0]
    ticks = [tick for tick in (-100, -75, -50, -25, 0, 25, 50, 75, 100) if tick >= low]
    axes.set_yticks(ticks, ["≤ -100" if tick == LEAST_RESERVE else str(tick) for tick in ticks])

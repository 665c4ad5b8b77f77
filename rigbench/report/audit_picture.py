"""An audit as one page of pictures."""

from __future__ import annotations

import math
from collections.abc import Sequence
from pathlib import Path
from typing import Any

from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.ticker import MaxNLocator

from rigbench.campaign.audit.result import Audit, Convergence
from rigbench.report.audit_text import number, rest_words
from rigbench.report.paper import INK, LINE, Paper, steady_settings
from rigbench.report.picture import save_picture
from rigbench.rig.log import RESIDUAL_LIMIT

__all__ = ["audit_figure", "audit_picture"]

WIDE, HIGH = 792.0, 612.0  # pt: a landscape page
MARGIN = 36.0
SIZE, HEAD, TITLE = 8.0, 9.5, 14.0
QUIET = "#5b6873"
DARK, MIDDLE, LIGHT = "#1d4a75", "#4f86bd", "#9bbfe2"
GRID = "#e3e9f0"
ABOVE, BELOW, BESIDE = 44.0, 34.0, 36.0  # room of a panel's head, of its lower axis and of its left one
BETWEEN, LOWEST = 24.0, 16.0  # between the panels; from the page's edge to its last line
KEY: dict[str, Any] = {
    "frameon": False, "fontsize": 7.5, "borderaxespad": 0.2, "handlelength": 2.2, "columnspacing": 1.4,
    "labelcolor": INK,
}  # fmt: skip
LEAST = 1e-16
"""What is 0 stands here on axes of logarithms."""


def audit_picture(audit: Audit, path: Path) -> None:
    """Draw the audit into a file whose suffix says the format: .png, .svg or .pdf; missing folders are made.

    The same audit gives the same bytes. Raises InputFaults for another suffix and StoreError if the file
    can't be written.
    """
    save_picture(path, audit.name, lambda: audit_figure(audit))


def audit_figure(audit: Audit) -> Figure:
    """Return the page: verdict, errors and scores by step, energy over time, and what each joint shows."""
    with steady_settings():
        paper = Paper()
        key, foot = _draw_head(paper, audit) + 6, _draw_foot(paper, audit) + BELOW + 10
        figure = paper.figure(WIDE, HIGH)
        FigureCanvasAgg(figure)
        top = key + ABOVE
        wide = (WIDE - 2 * MARGIN - BETWEEN - 2 * BESIDE) / 2
        high = (HIGH - foot - top - ABOVE - BELOW) / 2
        left, right = MARGIN + BESIDE, WIDE - MARGIN - wide
        upper, lower = HIGH - top - high, foot
        errors = _axes(figure, (left, upper, wide, high))
        _draw_errors(errors, audit)
        if errors.get_legend_handles_labels()[0]:
            corner = (MARGIN - 6) / WIDE, 1 - key / HIGH
            figure.legend(
                *errors.get_legend_handles_labels(), loc="upper left", bbox_to_anchor=corner, ncol=5, **KEY
            )
        _draw_scores(_axes(figure, (right, upper, wide, high)), audit)
        _draw_energy(_axes(figure, (left, lower, wide, high)), audit)
        _draw_joints(_axes(figure, (right, lower, wide, high)), audit, wide)
        return figure


def _draw_head(paper: Paper, audit: Audit) -> float:
    """Write title and verdict; return where they end, from the upper edge."""
    width = WIDE - 2 * MARGIN
    title = paper.wrap(f"Audit of {audit.name}", width, TITLE, bold=True)
    top = paper.lines(MARGIN, MARGIN - 8, title, TITLE, bold=True)
    said = f"{audit.verdict[0].upper()}{audit.verdict[1:]}."
    return paper.lines(MARGIN, top + 2, paper.wrap(said, width, 10.5), 10.5)


def _draw_foot(paper: Paper, audit: Audit) -> float:
    """Write what is not drawn; return where it begins, from the lower edge."""
    momentum = audit.momentum
    drift = f"; its momentum drifts by {number(max(momentum.drifts))}" if momentum.applies else ""
    said = (
        "Allowed is 1 % of a score, or 0.001 mm or 0.0001 deg where that is more. As declared: with dry "
        "friction and limits, against the engine at finer steps; else without, against "
        f"{_targets(audit)}. {rest_words(audit)} Momentum: {momentum.why}{drift}. Residual, engine against "
        f"drive: {number(audit.residual)} rad/s (runs are marked above {number(RESIDUAL_LIMIT)})."
    )
    lines = paper.wrap(said, WIDE - 2 * MARGIN, SIZE)
    begins = LOWEST + len(lines) * LINE * SIZE
    paper.lines(MARGIN, HIGH - begins, lines, SIZE, ink=QUIET)
    return begins


def _axes(figure: Figure, box: tuple[float, float, float, float]) -> Axes:
    """Return axes in a box (left, bottom, width, height) [pt]."""
    left, bottom, width, height = box
    axes = figure.add_axes((left / WIDE, bottom / HIGH, width / WIDE, height / HIGH))
    for side in ("top", "right"):
        axes.spines[side].set_visible(False)
    for side in ("left", "bottom"):
        axes.spines[side].set_color(QUIET)
    axes.tick_params(labelsize=SIZE, colors=INK, which="both")
    axes.grid(True, color=GRID, linewidth=0.7)
    axes.set_axisbelow(True)
    return axes


def _head(axes: Axes, title: str, keyed: bool = False) -> None:
    """Write the panel's title and the key of its lines beneath it, above the axes."""
    axes.annotate(
        title, (0, 1), (-30, 24 if keyed else 10), xycoords="axes fraction", textcoords="offset points",
        fontsize=HEAD, fontweight="bold", color=INK, annotation_clip=False,
    )  # fmt: skip
    if keyed:
        axes.legend(loc="lower left", bbox_to_anchor=(-0.08, 1.0), ncol=3, **KEY)


def _targets(audit: Audit) -> str:
    """Say what the runs without dry friction are measured against."""
    if any(convergence.against == "ode" for convergence in audit.convergences):
        return "an ODE solution of the same sampled loop"
    return "the engine too, for the arm is too stiff for an ODE solver"


def _rate_axis(axes: Axes, rates: Sequence[float]) -> None:
    axes.set_xscale("log")
    axes.set_yscale("log")
    axes.set_xticks(rates, [f"{hz:g}" for hz in rates], minor=False)
    axes.set_xticks([], minor=True)
    axes.set_xlabel("physics_hz", fontsize=SIZE, color=INK, labelpad=2)


def _look(convergence: Convergence) -> dict[str, Any]:
    first = convergence.law == "computed-torque"
    colour = DARK if first else MIDDLE
    return {
        "color": colour, "linewidth": 1.4, "marker": "o" if first else "s", "markersize": 4.5,
        "linestyle": (0, (3, 2)) if convergence.dry else "-",
        "markerfacecolor": "white" if convergence.dry else colour,
        "label": f"{convergence.law.replace('-', ' ')}{', as declared' if convergence.dry else ''}",
    }  # fmt: skip


def _judged(audit: Audit) -> list[Convergence]:
    return [convergence for convergence in audit.convergences if not convergence.note]


def _shown(values: Sequence[float]) -> list[float]:
    return [max(value, LEAST) if math.isfinite(value) else math.nan for value in values]


def _draw_errors(axes: Axes, audit: Audit) -> None:
    for convergence in _judged(audit):
        axes.plot(convergence.physics_hz, _shown(convergence.errors), **_look(convergence))
    exact = [convergence for convergence in _judged(audit) if convergence.against == "ode"]
    if exact:
        rates, errors = exact[0].physics_hz, exact[0].errors
        slope = [2.0 * errors[-1] * (rates[-1] / hz) ** 2 for hz in rates]
        axes.plot(rates, slope, color=LIGHT, linewidth=1.0, linestyle=":", label="square of the step")
    _finish(axes, audit, f"Largest joint error [{audit.unit}]")


def _draw_scores(axes: Axes, audit: Audit) -> None:
    for convergence in _judged(audit):
        axes.plot(convergence.physics_hz, _shown(convergence.used), **_look(convergence))
    axes.axhline(1.0, color=INK, linewidth=1.0, linestyle=(0, (6, 2)))
    axes.annotate(
        "allowed", (1, 1.0), (0, 3), xycoords=axes.get_yaxis_transform(), textcoords="offset points",
        ha="right", fontsize=7.5, color=INK,
    )  # fmt: skip
    _finish(axes, audit, "Worst score's error over what is allowed")


def _finish(axes: Axes, audit: Audit, title: str) -> None:
    judged = _judged(audit)
    if not judged:
        axes.clear()
        axes.set_axis_off()
        axes.text(0, 0.9, "No run could be judged.", transform=axes.transAxes, fontsize=SIZE, color=INK)
    else:
        _rate_axis(axes, judged[0].physics_hz)
    _head(axes, title)


def _draw_energy(axes: Axes, audit: Audit) -> None:
    swing = audit.swing
    for hz, trace, colour in zip(swing.physics_hz, swing.traces, (LIGHT, MIDDLE, DARK), strict=True):
        axes.plot(swing.times, trace, color=colour, linewidth=1.4, label=f"at {hz:g} Hz")
    axes.yaxis.set_major_formatter(lambda value, _: "0" if value == 0 else f"{value:.1e}")
    axes.yaxis.set_major_locator(MaxNLocator(5))
    axes.set_xlabel("time [s]", fontsize=SIZE, color=INK, labelpad=2)
    axes.set_xlim(swing.times[0], swing.times[-1])
    _head(axes, f"Free swing: energy's drift over its kinetic peak, {swing.peak_kinetic_j:.3g} J", keyed=True)


def _draw_joints(axes: Axes, audit: Audit, wide: float) -> None:
    """Draw by joint, on one axis of shares, what the engine's acceleration and the slides are off by."""
    places = list(range(len(audit.joints)))
    slides = {slide.joint: slide for slide in audit.slides}
    met = [place for place in places if audit.joints[place] in slides]
    differences = _shown(audit.accelerations.differences)
    stops = _shown([slides[audit.joints[place]].stop_off for place in met])
    ways = _shown([slides[audit.joints[place]].travel_off for place in met])
    axes.plot(places, differences, "o", color=DARK, markersize=5, label="acceleration")
    if met:
        axes.plot(met, stops, "s", color=MIDDLE, markersize=5, label="time of a sliding stop")
        axes.plot(met, ways, "^", color=LIGHT, markersize=5, label="way of a sliding stop")
    _whole_decades(axes, [*differences, *stops, *ways])
    axes.set_xlim(-0.6, len(places) - 0.4)
    paper, names = Paper(), list(audit.joints)
    if paper.widest(names, SIZE) + 6 > wide / len(places):
        names = [str(place + 1) for place in places]
        axes.set_xlabel("joint, from the base on", fontsize=SIZE, color=INK, labelpad=2)
    axes.set_xticks(places, names)
    axes.xaxis.grid(False)
    _head(axes, "By joint: off by so much of its size", keyed=True)


def _whole_decades(axes: Axes, values: Sequence[float]) -> None:
    """Let the axis of shares be one of logarithms that ends on decades, of which it shows three or more."""
    shown = [value for value in values if not math.isnan(value)] or [1.0]
    low, high = math.floor(math.log10(min(shown)) - 0.1), math.ceil(math.log10(max(shown)) + 0.1)
    axes.set_yscale("log")
    axes.set_ylim(10.0**low, 10.0 ** max(high, low + 3))
    axes.minorticks_off()

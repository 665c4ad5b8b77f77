"""Curves against the level: every law's points, bands, limits and break-even levels in their places."""

from __future__ import annotations

import datetime
import math
from collections.abc import Callable
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from matplotlib.figure import Figure
from matplotlib.patches import Polygon

from rigbench.report.level_curves import level_curves_figure
from rigbench.report.level_plot import Point, Scale
from rigbench.report.marks import band_opacity
from rigbench.report.view import SHOWS, View
from rigbench.scores.results import Results

DATE = datetime.date(2026, 12, 1)
LONG = "a law whose name_has_no_end_and_hardly_a_blank_in_it_whatever_one_does number"
SHAPES = {
    "one cell": {"laws": 1, "columns": 1},
    "two by two": {"laws": 2, "columns": 2},
    "twelve by twenty": {"laws": 12, "columns": 20, "incomplete": 12, "unstable": True},
    "all failed": {"laws": 1, "columns": 5, "unstable": True},
    "one draw": {"laws": 4, "columns": 8, "draws": 1},
    "no finished run": {"laws": 4, "columns": 8, "draws": 0},
    "no tolerance": {"laws": 4, "columns": 8, "tolerance": False},
    "long names": {"laws": [f"{LONG} {number}" for number in range(12)], "columns": 6},
    "twelve sheets": {
        "laws": 4,
        "columns": 6,
        "sheets": [f"control_hz {hz}" for hz in range(100, 1300, 100)],
    },
}


def crossing(results: Results, value: float, low: float, high: float) -> Results:
    one, other = results.laws[:2]
    level = {"value": value, "low": low, "high": high}
    found = {"sheet": "", "laws": [one, other], "score": "tool_peak_mm", "level": level, "better_below": one}
    return replace(results, break_even=(found,))


@pytest.mark.parametrize("show", SHOWS)
@pytest.mark.parametrize("shape", SHAPES)
def test_nothing_overlaps(look: Any, make_results: Callable[..., Results], shape: str, show: str) -> None:
    """At every extent and in every strait no two texts meet, none is small, none is off the paper."""
    figure = level_curves_figure(make_results(**SHAPES[shape]), DATE, View(show))
    look.clear(figure)
    width = figure.get_size_inches()[0] * 72
    assert width <= 1191  # that of a lying A3 sheet


def heights(look: Any, figure: Figure, prefix: str) -> dict[str, list[tuple[float, float]]]:
    return {
        name: [(float(line.get_xdata()[0]), float(line.get_ydata()[0])) for line in lines]
        for name, lines in look.lines(figure, prefix).items()
    }


def axis(look: Any, figure: Figure, value: Callable[[float], float] = float) -> np.poly1d:
    """Heights in points from the top by value, as the ticks' figures tell."""
    boxes = [(t, b) for t, b in look.clear(figure) if str(t.get_gid()).startswith("tick-")]
    high = figure.get_size_inches()[1] * 72
    places = [(value(float(t.get_text())), high - (b.y0 + b.y1) / 2) for t, b in boxes]
    fit = np.polyfit(*zip(*places, strict=True), 1)
    assert np.polyval(fit, [v for v, _ in places]) == pytest.approx([y for _, y in places], abs=1.0)
    return np.poly1d(fit)


def test_points_stand_at_their_values(look: Any, make_results: Callable[..., Results]) -> None:
    """On a linear axis from 0: each marker where its median is, one a level, and the limit at 3 mm."""
    results = make_results(2, 4)
    figure = level_curves_figure(results, DATE, View("median"))
    place, points = axis(look, figure), heights(look, figure, "point-")
    for law, name in enumerate(results.laws):
        medians = [results.cell("", name, c.name).measures["tool_peak_mm"].median for c in results.columns]
        found = sorted(points[f"point-0-{law}"])
        assert [y for _, y in found] == pytest.approx(place(medians), abs=1.0)
        assert np.diff([x for x, _ in found]) == pytest.approx(np.diff([x for x, _ in found])[0])
    assert heights(look, figure, "limit-")["limit-0"][0][1] == pytest.approx(place(3.0), abs=1.0)


def test_values_of_several_decades_stand_on_a_logarithmic_axis(
    look: Any, make_results: Callable[..., Results]
) -> None:
    """Markers are where the logarithms of the ticks' figures say, and the legend says so."""
    results = make_results(4, 8)
    figure = level_curves_figure(results, DATE, View("median"))
    place = axis(look, figure, math.log)
    medians = [
        results.cell("", results.laws[1], c.name).measures["tool_peak_mm"].median for c in results.columns
    ]
    found = [y for _, y in sorted(heights(look, figure, "point-")["point-0-1"])]
    assert found == pytest.approx(place(np.log(medians)), abs=1.0)
    assert "logarithmic" in look.said(figure)


def test_shares_stand_from_0_to_100_with_the_required_one(
    look: Any, make_results: Callable[..., Results]
) -> None:
    """The dashed line is at 95 %; bands are the Wilson intervals."""
    results = make_results(1, 4)
    figure = level_curves_figure(results, DATE)
    place = axis(look, figure)
    assert heights(look, figure, "limit-")["limit-0"][0][1] == pytest.approx(place(95.0), abs=1.0)
    band = next(p for p in figure.findobj(Polygon) if p.get_gid() == "band-0")
    corners = band.get_xy()[:, 1]
    cells = [results.cell("", results.laws[0], column.name) for column in results.columns]
    ends = [place(100 * (cell.pass_high or 0)) for cell in cells]
    ends += [place(100 * (cell.pass_low or 0)) for cell in reversed(cells)]
    assert corners[: len(ends)] == pytest.approx(ends, abs=1.0)


def test_what_is_infinite_stands_hollow_on_the_upper_edge(
    look: Any, make_results: Callable[..., Results]
) -> None:
    """A law that does not finish has hollow markers on the frame, and the legend says what they are."""
    figure = level_curves_figure(make_results(2, 4, unstable=True), DATE, View("median"))
    frame = look.rectangles(figure, "plot-0")["plot-0"]
    lines = look.lines(figure, "point-0-1")["point-0-1"]
    assert lines
    for line in lines:
        assert line.get_ydata()[0] == pytest.approx(frame.get_y())
        assert line.get_markerfacecolor() == "white"
    assert "A hollow mark on the upper edge" in look.said(figure)
    assert "hollow" not in look.said(level_curves_figure(make_results(2, 4), DATE, View("median")))


def test_break_even_levels_are_ringed_on_the_curve(look: Any, make_results: Callable[..., Results]) -> None:
    """The ring is at its level on the curve of the law that is better below, the bar spans its interval."""
    results = crossing(make_results(2, 4), 0.75, 0.5, 1.0)
    figure = level_curves_figure(results, DATE, View("median"))
    ((x, y),) = heights(look, figure, "ring-0-0")["ring-0-0"]
    points = sorted(heights(look, figure, "point-0-0")["point-0-0"])
    (before, y0), (after, y1) = points[2], points[3]
    assert (x, y) == pytest.approx(((before + after) / 2, (y0 + y1) / 2))
    (bar,) = look.lines(figure, "ring-0-0-bar")["ring-0-0-bar"]
    assert bar.get_xdata() == pytest.approx([before, after])
    assert "Ring: break-even level" in look.said(figure)
    for view in (View("share"), View("p95"), View("median", "settle_ms")):
        assert not look.lines(level_curves_figure(results, DATE, view), "ring-")


def test_an_open_break_even_level_ends_in_an_arrow(look: Any, make_results: Callable[..., Results]) -> None:
    """The bar then reaches the frame; a level below all that was run begins at the first."""
    figure = level_curves_figure(
        crossing(make_results(2, 4), 0.75, -math.inf, math.inf), DATE, View("median")
    )
    (bar,) = look.lines(figure, "ring-0-0-bar")["ring-0-0-bar"]
    frame = look.rectangles(figure, "plot-0")["plot-0"]
    first = min(x for x, _ in heights(look, figure, "point-0-0")["point-0-0"])
    assert bar.get_xdata() == pytest.approx([first, frame.get_x() + frame.get_width() - 2])


def test_a_law_without_a_result_is_named(look: Any, make_results: Callable[..., Results]) -> None:
    """It has no curve, and the legend tells; a sheet in which none has any says 'no result'."""
    figure = level_curves_figure(make_results(2, 4, draws=0, incomplete=1), DATE, View("median"))
    said = look.said(figure)
    assert "Without a result" not in said or "no result" in said
    empty = make_results(
        2, 4, sheets=("a", "b"), impossible=[("b", "computed torque"), ("b", "feedforward (model_hz 100)")]
    )
    assert look.texts(level_curves_figure(empty, DATE), "nothing-1")
    alone = make_results(2, 4, impossible=[("", "computed torque")])
    assert "Without a result, or not possible: computed torque." in look.said(
        level_curves_figure(alone, DATE)
    )


@pytest.mark.parametrize(
    ("values", "logarithmic", "ticks"),
    [
        ([0.0, 4.0], False, ["0", "1", "2", "3", "4"]),
        ([], False, ["0", "0.2", "0.4", "0.6", "0.8", "1"]),
        ([0.9, 1.1, 7.0], False, ["0", "2", "4", "6", "8"]),
        ([0.1, 10.0], True, ["0.1", "0.2", "0.5", "1", "2", "5", "10"]),
        ([0.0, 0.0], False, ["0", "0.2", "0.4", "0.6", "0.8", "1"]),
        ([math.inf, math.inf], False, ["0", "0.2", "0.4", "0.6", "0.8", "1"]),
    ],
)
def test_scales_by_hand(values: list[float], logarithmic: bool, ticks: list[str]) -> None:
    """Round steps from 0, or 1, 2, 5 in each decade; every value lies between the ends."""
    scale = Scale.of([Point(0.0, value, value, value) for value in values], (), False)
    assert scale.logarithmic == logarithmic
    assert [said for _, said in scale.ticks] == ticks
    parts = [scale.part(value) for value in values if math.isfinite(value)]
    assert all(0.0 <= part <= 1.0 for part in parts)
    assert parts == sorted(parts)


def test_bands_on_top_of_each_other_hide_no_curve() -> None:
    """However many laws there are, all bands together cover half; a few are as pale as one alone."""
    for laws in (1, 4, 12, 40):
        each = band_opacity(laws)
        assert 0.0 < each <= 0.13
        assert 1.0 - (1.0 - each) ** laws <= 0.5 + 1e-9
    assert band_opacity(4) == band_opacity(1) == 0.13

"""The picture of a sweep: sheets side by side, in one order, with the laws' levels as curves beneath."""

from __future__ import annotations

import datetime
import itertools
import math
import re
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from matplotlib.colors import to_hex, to_rgb
from matplotlib.figure import Figure
from matplotlib.image import imread
from matplotlib.lines import Line2D
from matplotlib.patches import Polygon

from rigbench.report import picture
from rigbench.report.marks import TONES, mark_of
from rigbench.report.matrix import matrix_figure, matrix_picture, text_boxes
from rigbench.report.paper import QUIET
from rigbench.report.plot import neighbours
from rigbench.report.shades import ABSENT
from rigbench.scores.results import Column, LawStanding, Results, Tolerated

DATE = datetime.date(2026, 12, 1)
RATIOS = tuple(f"gear_ratio {ratio}" for ratio in (50, 80, 101, 160))
RATES = tuple(f"control_hz {hz}, {ratio}" for hz, ratio in itertools.product((250, 500, 1000), RATIOS))
LONG = "a sheet whose name_has_no_end_and_hardly_a_blank_in_it_whatever_one_does number"
A2 = 594 / 25.4 * 72
"""Width of a lying A2 sheet [pt]."""


def assert_plots_are_clear(look: Any, figure: Figure) -> None:
    """Beside a plot of curves there is its axis to the left and the laws' names to the right, and no text in it.

    Every other sheet of a plot has a stripe of the plot's height, the first has one.
    """
    stripes = [look.extent(figure, stripe) for stripe in look.rectangles(figure, "slot-").values()]
    markers = [
        (float(line.get_xdata()[0]), figure.get_size_inches()[1] * 72 - float(line.get_ydata()[0]))
        for lines in look.lines(figure, "point-").values()
        for line in lines
    ]
    assert markers
    left, right = min(stripe.x0 for stripe in stripes), max(x for x, _ in markers)
    for low, high in {(stripe.y0, stripe.y1) for stripe in stripes}:
        for text, box in text_boxes(figure):
            if box.y1 > low and box.y0 < high:
                assert box.x1 < left or box.x0 > right, text.get_text()
    for x, y in markers:
        assert x > left
        assert any(stripe.y0 < y < stripe.y1 for stripe in stripes)


@pytest.mark.parametrize(("laws", "columns"), [(1, 1), (1, 2), (4, 11), (12, 20)])
def test_nothing_overlaps_with_four_sheets(
    look: Any, make_results: Callable[..., Results], laws: int, columns: int
) -> None:
    """From 1 x 1 to 12 x 20 cells a sheet; incomplete, unfinished, best and impossible ones among them."""
    impossible = [(RATIOS[1], "feedforward (model_hz 100)"), (RATIOS[3], "pd + gravity")]
    results = make_results(
        laws, columns, sheets=RATIOS, incomplete=12, unstable=laws > 1, impossible=impossible
    )
    figure = matrix_figure(results, DATE)
    look.tidy(figure)
    if columns > 1:
        assert_plots_are_clear(look, figure)


@pytest.mark.parametrize("long", [False, True])
@pytest.mark.parametrize("tolerance", [True, False])
def test_nothing_overlaps_with_twelve_sheets_of_one_cell(
    look: Any, make_results: Callable[..., Results], tolerance: bool, long: bool
) -> None:
    """Whether the one column is exact or random, and however long the sheets' names are."""
    sheets = [f"{LONG}, second {number}" for number in range(12)] if long else RATES
    for column in (Column("nominal", 0.0, random=False, ladder=True), Column("all at 1", 1.0, True, True)):
        results = make_results(["mine"], [column], sheets=sheets, tolerance=tolerance)
        figure = matrix_figure(results, DATE)
        look.tidy(figure)
        assert len(look.rectangles(figure, "cell-")) == 12
        letters = re.sub(r"\s", "", look.said(figure))
        assert all(re.sub(r"\s", "", sheet) in letters for sheet in sheets)


def test_long_names_of_everything_are_broken_and_not_cut(
    look: Any, make_results: Callable[..., Results]
) -> None:
    """Each sheet's name stands twice, over its matrix and under its curves, and each law's beside both."""
    laws = [f"{LONG} {number}" for number in range(3)]
    sheets = [f"{LONG}, second {number}" for number in range(7)]
    figure = matrix_figure(make_results(laws, 4, sheets=sheets), DATE)
    look.tidy(figure)
    assert_plots_are_clear(look, figure)
    letters = re.sub(r"\s", "", look.said(figure))
    for sheet in sheets:
        assert letters.count(re.sub(r"\s", "", sheet)) == 2
    for law in laws:
        assert letters.count(re.sub(r"\s", "", law)) >= len(sheets) + 1


@pytest.mark.parametrize(
    ("laws", "columns", "abreast"), [(1, 1, 4), (1, 2, 2), (2, 4, 2), (4, 6, 2), (4, 11, 2)]
)
def test_sheets_stand_side_by_side_as_far_as_the_paper_goes(
    look: Any, make_results: Callable[..., Results], laws: int, columns: int, abreast: int
) -> None:
    """No wider than about A2 lying, in full rows, from left to right and then downwards."""
    figure = matrix_figure(make_results(laws, columns, sheets=RATIOS, best=False), DATE)
    assert figure.get_size_inches()[0] * 72 < 1.07 * A2
    corners = [look.texts(figure, f"name-{number}-0")[f"name-{number}-0"][1] for number in range(4)]
    for number, corner in enumerate(corners):
        row, place = divmod(number, abreast)
        assert corner.y0 == pytest.approx(corners[row * abreast].y0)
        assert corner.x0 == pytest.approx(corners[place].x0, abs=1)
    assert all(corners[k].x0 < corners[k + 1].x0 for k in range(abreast - 1))
    assert all(corners[k].y0 > corners[k + abreast].y0 for k in range(4 - abreast))


def test_rows_and_columns_are_where_they_are_in_every_sheet(
    look: Any, make_results: Callable[..., Results]
) -> None:
    """The same law on the same line, the same cells at the same distance from the sheet's name."""
    results = make_results(4, 5, sheets=RATIOS, incomplete=3, impossible=[(RATIOS[2], "joint pd")])
    figure = matrix_figure(results, DATE)
    cells = look.rectangles(figure, "cell-")
    names = look.texts(figure, "name-")
    height = figure.get_size_inches()[1] * 72
    for row, column in itertools.product(range(4), range(5)):
        places = set()
        for sheet in range(4):
            cell, (_, name) = cells[f"cell-{sheet}-{row}-{column}"], names[f"name-{sheet}-0"]
            places.add((round(cell.get_x() - name.x0), round(cell.get_y() - (height - name.y1))))
        assert len(places) == 1
    orders = {
        tuple(look.texts(figure, f"law-{sheet}-{row}-")[f"law-{sheet}-{row}-0"][0] for row in range(4))
        for sheet in range(4)
    }
    assert len(orders) == 1


def test_head_and_legend_are_there_once(look: Any, make_results: Callable[..., Results]) -> None:
    """However many sheets there are."""
    results = make_results(3, 4, sheets=RATES)
    said = look.said(matrix_figure(results, DATE))
    for part in (results.title, "128 draws", "not a safety case", "share of the draws", "curves: ", "Wilson"):
        assert said.count(part) == 1


def test_what_is_not_possible_is_said_in_a_pale_cell(look: Any, make_results: Callable[..., Results]) -> None:
    """No gauge, no figure; the strip says it too, and the legend why; where all is possible nobody reads of it."""
    results = make_results(["a", "b"], 4, sheets=RATIOS[:2], impossible=[(RATIOS[1], "b")])
    figure = matrix_figure(results, DATE)
    row = next(r for r in (0, 1) if look.texts(figure, f"law-1-{r}-0")[f"law-1-{r}-0"][0] == "b")
    for column in range(4):
        name = f"1-{row}-{column}"
        cell = look.rectangles(figure, f"cell-{name}")[f"cell-{name}"]
        assert to_hex(cell.get_facecolor()) == ABSENT
        assert cell.get_hatch() is None
        assert [said for said, _ in look.texts(figure, f"text-{name}-").values()] == ["not possible"]
        assert not look.rectangles(figure, f"gauge-{name}")
    assert look.texts(figure, f"level-1-{row}")[f"level-1-{row}"][0] == "not possible"
    assert not look.rectangles(figure, f"bar-1-{row}")
    assert "not possible: the experiment" in look.said(figure)
    assert "not possible" not in look.said(matrix_figure(make_results(2, 4, sheets=RATIOS[:2]), DATE))


def test_quiet_type_and_curves_can_be_seen() -> None:
    """WCAG 2.1: contrast of type at least 4.5 (success criterion 1.4.3), of graphics 3 (1.4.11)."""

    def luminance(colour: str) -> float:
        rgb = np.array(to_rgb(colour))
        linear = np.where(rgb <= 0.04045, rgb / 12.92, ((rgb + 0.055) / 1.055) ** 2.4)
        return float(linear @ (0.2126, 0.7152, 0.0722))

    assert (luminance(ABSENT) + 0.05) / (luminance(QUIET) + 0.05) >= 4.5
    assert (1.05) / (luminance(QUIET) + 0.05) >= 4.5
    for tone in TONES:
        assert 1.05 / (luminance(tone) + 0.05) >= 3


def test_marks_differ_without_any_colour() -> None:
    """Twelve laws by shape alone, 84 by shape and dashes."""
    assert len({mark_of(number).shape for number in range(12)}) == 12
    assert len({(mark_of(number).shape, mark_of(number).dashes) for number in range(84)}) == 84


LEVELS = {
    ("one", "a"): Tolerated(0.25, 0.0, 0.5),
    ("two", "a"): Tolerated(0.75, 0.5, 1.0),
    ("three", "a"): Tolerated(None, 0.5, math.inf),
    ("one", "b"): Tolerated(0.25, 0.0, 0.5),
    ("three", "b"): Tolerated(0.0, 0.0, 0.0),
}


@pytest.fixture
def curves(make_results: Callable[..., Results]) -> Figure:
    """Laws a and b over three sheets at levels 0, 0.25, 0.5 and 1; b is not possible in the second."""
    results = make_results(["a", "b"], 4, sheets=("one", "two", "three"), impossible=[("two", "b")])
    standings = tuple(
        LawStanding(sheet, law, LEVELS.get((sheet, law))) for sheet in results.sheets for law in "ab"
    )
    return matrix_figure(replace(results, standings=standings), DATE)


def places(look: Any, figure: Figure, prefix: str) -> dict[str, tuple[float, float]]:
    """Where the markers are, x to the right and y upwards [pt], the key's left out."""
    top = figure.get_size_inches()[1] * 72
    return {
        name: (float(lines[0].get_xdata()[0]), top - float(lines[0].get_ydata()[0]))
        for name, lines in look.lines(figure, prefix).items()
    }


def test_curves_stand_at_their_levels(look: Any, curves: Figure) -> None:
    """On the axis of the strips, equal steps from level to level; what crosses nowhere stands beyond them."""
    axis = {t.get_text(): (b.y0 + b.y1) / 2 for t, b in text_boxes(curves) if t.get_gid() == "axis"}
    assert list(axis) == ["0", "0.25", "0.5", "1", "beyond"]
    steps = np.diff(list(axis.values()))
    assert steps[:3] == pytest.approx(steps[0], abs=1)
    assert 0 < steps[3] < steps[0]
    found = {name: y for name, (_, y) in places(look, curves, "point-").items()}
    between = (axis["0.5"] + axis["1"]) / 2
    expected = {
        "point-0-0": axis["0.25"], "point-0-1": axis["0.25"], "point-1-0": between,
        "point-2-0": axis["beyond"], "point-2-1": axis["0"],
    }  # fmt: skip
    assert found == pytest.approx(expected, abs=1.5)  # text is centred to a pixel or two of 0.5 pt


def test_hollow_is_what_crosses_at_no_level(look: Any, curves: Figure) -> None:
    """A filled marker is an estimate within the levels run."""
    fills = {name: to_hex(lines[0].get_color()) for name, lines in look.lines(curves, "point-").items()}
    assert [name for name, fill in fills.items() if fill == "#ffffff"] == ["point-2-0"]


def test_laws_of_one_sheet_stand_beside_each_other_under_their_sheet(look: Any, curves: Figure) -> None:
    """Sheets from left to right, each law always at the same place in them, and none on another's marker."""
    x = {name: at for name, (at, _) in places(look, curves, "point-").items()}
    centres = [
        (box.x0 + box.x1) / 2
        for _, box in (look.texts(curves, f"sheet-{n}-0")[f"sheet-{n}-0"] for n in range(3))
    ]
    assert centres == sorted(centres)
    offsets = [x[f"point-{sheet}-0"] - centres[sheet] for sheet in range(3)]
    assert offsets == pytest.approx([offsets[0]] * 3, abs=1)
    assert x["point-0-1"] - x["point-0-0"] > 8


def test_a_curve_is_broken_where_its_law_is_not_possible(look: Any, curves: Figure) -> None:
    """Law a goes through all three sheets, law b through none next to another."""
    assert len(look.lines(curves, "curve-0")["curve-0"]) == 2
    assert not look.lines(curves, "curve-1")
    assert "A curve is broken" in look.said(curves)


def test_no_curve_goes_where_two_settings_change(look: Any, make_results: Callable[..., Results]) -> None:
    """From gear ratio 101 at 500 Hz to 50 at 1000 Hz is not a step along anything."""
    sheets = [f"control_hz {hz}, gear_ratio {ratio}" for hz in (500, 1000) for ratio in (50, 80, 101)]
    figure = matrix_figure(make_results(1, 4, sheets=sheets), DATE)
    x = [place[0] for place in places(look, figure, "point-").values()]
    joined = {tuple(line.get_xdata()) for line in look.lines(figure, "curve-0")["curve-0"]}
    assert joined == {(x[0], x[1]), (x[1], x[2]), (x[3], x[4]), (x[4], x[5])}
    assert "more than one setting" in look.said(figure)
    assert neighbours("gravity [0, 0, 1]", "gravity [0, 1, 2]")


def test_bars_reach_from_shown_to_keep_to_shown_to_miss(look: Any, curves: Figure) -> None:
    """And end in an arrow where no level was shown to miss, one of curve, one of strip, one of the legend."""
    x, top = places(look, curves, "point-1-0")["point-1-0"][0], curves.get_size_inches()[1] * 72
    axis = {t.get_text(): (b.y0 + b.y1) / 2 for t, b in text_boxes(curves) if t.get_gid() == "axis"}
    uprights = [
        line for line in curves.findobj(Line2D)
        if len(line.get_xdata()) == 2 and line.get_xdata()[0] == line.get_xdata()[1] == x
    ]  # fmt: skip
    ends = sorted(top - float(y) for y in uprights[0].get_ydata())
    assert ends == pytest.approx([axis["0.5"], axis["1"]], abs=1.5)
    assert len([patch for patch in curves.findobj(Polygon) if type(patch) is Polygon]) == 3


def test_names_stand_where_the_curves_end(look: Any, curves: Figure) -> None:
    """At the height of the last marker, to the right of everything."""
    marks = places(look, curves, "point-2-")
    for law, (said, box) in enumerate(
        look.texts(curves, f"curve-name-{n}-0")[f"curve-name-{n}-0"] for n in (0, 1)
    ):
        x, y = marks[f"point-2-{law}"]
        assert said == "ab"[law]
        assert (box.y0 + box.y1) / 2 == pytest.approx(y, abs=6)
        assert box.x0 > x


def test_curves_that_coincide_run_beside_each_other(look: Any, make_results: Callable[..., Results]) -> None:
    """Two laws with the same levels: no point of one line lies on the other."""
    results = make_results(["a", "b"], 4, sheets=("one", "two"))
    standings = tuple(
        LawStanding(sheet, law, Tolerated(0.4, 0.25, 0.5)) for sheet in results.sheets for law in "ab"
    )
    figure = matrix_figure(replace(results, standings=standings), DATE)
    heights = [look.lines(figure, f"curve-{law}")[f"curve-{law}"][0].get_ydata() for law in (0, 1)]
    assert heights[0][0] == heights[0][1]
    assert abs(heights[0][0] - heights[1][0]) > 1


def test_many_laws_and_sheets_take_several_plots(look: Any, make_results: Callable[..., Results]) -> None:
    """Rather than grow beyond the paper; each has the laws' names, and every sheet is in one of them."""
    figure = matrix_figure(make_results(12, 2, sheets=RATES), DATE)
    assert figure.get_size_inches()[0] * 72 < 1.07 * A2
    named = [text for text, _ in text_boxes(figure) if text.get_gid() == "curve-name-0-0"]
    assert len(named) == 2
    assert len({name.split("-")[1] for name in look.texts(figure, "sheet-")}) == 12
    assert_plots_are_clear(look, figure)


def test_without_levels_there_are_no_curves(look: Any, make_results: Callable[..., Results]) -> None:
    """No tolerance, or nominal alone: no tolerated level, so nothing to draw."""
    for results in (
        make_results(2, 4, sheets=RATIOS, tolerance=False), make_results(2, 1, sheets=RATIOS),
        make_results(2, 4),
    ):  # fmt: skip
        assert "across the sheets" not in look.said(matrix_figure(results, DATE))


def test_nothing_run_yet_can_be_drawn(look: Any, make_results: Callable[..., Results]) -> None:
    """A campaign's first moments, and a sweep in which a whole sheet is impossible."""
    results = make_results(2, 4, sheets=RATIOS[:2], impossible=[(RATIOS[1], law) for law in ("a", "b")])
    none = replace(
        results,
        cells=tuple(replace(c, draws=0, pass_share=None, measures={}, best=False) for c in results.cells),
        standings=tuple(replace(s, tolerated=Tolerated(None, 0.0, math.inf)) for s in results.standings),
    )
    figure = matrix_figure(none, DATE)
    look.tidy(figure)
    assert not look.lines(figure, "point-")


def test_the_margin_of_a_sweep_stays_white(make_results: Callable[..., Results], tmp_path: Path) -> None:
    """Nothing but white within 20 pt of the edges of the PNG: curves, arrows and their names end on it too."""
    path = tmp_path / "matrix.png"
    matrix_picture(make_results(3, 4, sheets=RATIOS), path, DATE)
    pixels = imread(path)[:, :, :3]
    rim = int(20 * picture.DPI / 72)
    for edge in (pixels[:rim], pixels[-rim:], pixels[:, :rim], pixels[:, -rim:]):
        assert edge.min() == 1.0
    one = path.read_bytes()
    matrix_picture(make_results(3, 4, sheets=RATIOS), path, DATE)
    assert path.read_bytes() == one

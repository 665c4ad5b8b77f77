"""The picture of the matrix: what can be read on it, in colour and in grey print, at every extent."""

from __future__ import annotations

import datetime
import re
import subprocess
import sys
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import matplotlib
import numpy as np
import pytest
from matplotlib.colors import to_rgb
from matplotlib.image import imread
from matplotlib.patches import Polygon

from rigbench.errors import InputFaults, StoreError
from rigbench.report import picture
from rigbench.report.cells import Grid
from rigbench.report.matrix import matrix_figure, matrix_picture, text_boxes
from rigbench.report.paper import INK, Paper
from rigbench.report.shades import shade
from rigbench.report.strip import LevelStrip
from rigbench.scores.results import Cell, Column, LawStanding, Results, Tolerated

DATE = datetime.date(2026, 12, 1)
LONG = "a law whose name_has_no_end_and_hardly_a_blank_in_it_whatever_one_does number"
LONG_COLUMN = "a condition_of_a_name_without_an_end_that_nobody_should_have_given number"
SIZES = [(1, 1), (1, 2), (2, 2), (4, 9), (12, 20)]


@pytest.mark.parametrize("tolerance", [True, False])
@pytest.mark.parametrize(("laws", "columns"), SIZES)
def test_nothing_overlaps_at_any_extent(
    look: Any, make_results: Callable[..., Results], laws: int, columns: int, tolerance: bool
) -> None:
    """From 1 x 1 to 12 x 20, with incomplete, unfinished and best cells among them."""
    results = make_results(laws, columns, tolerance=tolerance, incomplete=12, unstable=True)
    look.tidy(matrix_figure(results, DATE))


@pytest.mark.parametrize("shape", [(1, 1), (3, 6), (12, 20)])
def test_long_names_are_broken_and_not_cut(
    look: Any, make_results: Callable[..., Results], shape: tuple[int, int]
) -> None:
    """Every character of a long name stands on the sheet, and still nothing overlaps."""
    laws = [f"{LONG} {number}" for number in range(shape[0])]
    columns = [
        Column(
            "nominal" if number == 0 else f"{LONG_COLUMN} {number}", number / 3, number > 0, number % 3 == 0
        )
        for number in range(shape[1])
    ]
    results = replace(
        make_results(laws, columns, title=f"{LONG} " * 5, sheets=(f"{LONG} sheet",)),
        arm=f"arms/{LONG}.yaml",
        motions=tuple(f"{LONG} {number}" for number in range(4)),
        advice=f"{LONG} is better. " * 8,
    )
    figure = matrix_figure(results, DATE)
    look.tidy(figure)
    letters = re.sub(r"\s", "", look.said(figure))
    for name in (*laws, *(column.name for column in columns), results.title, results.arm, *results.motions):
        assert re.sub(r"\s", "", name) in letters


@pytest.mark.parametrize(
    "name", ["$x^2$", "$\\frac{$", "a\nb\tc\x1b[0m", "計算トルク", "\\alpha & 50 %", "🙂", "ÀÉÎ gjpqy"]
)
def test_any_name_can_be_drawn(look: Any, make_results: Callable[..., Results], name: str) -> None:
    """Formula signs are text, control characters blanks, and signs without a glyph no reason to fail."""
    results = make_results([name, "b"], 3, title=name, sheets=(name, "other"))
    figure = matrix_figure(results, DATE)
    look.tidy(figure)
    if name.isprintable():
        assert look.said(figure).count(name) >= 4


def test_what_was_run_is_on_the_sheet(look: Any, make_results: Callable[..., Results]) -> None:
    """Title, arm, motions, draws, tolerance with units, required share, counts, date and advice."""
    results = make_results(4, 9, incomplete=3)
    text = look.said(matrix_figure(results, DATE))
    for part in (
        results.title, "Arm: tray6", "Motions: load tray, rim", "128 draws", "tool peak at most 3 mm",
        "95 % of the draws must keep it", f"{results.planned} runs planned", f"{results.done} done", "2 failed",
        "2026-12-01", results.advice, "3 incomplete", "not a safety case", "Wilson",
    ):  # fmt: skip
        assert part in text


def test_the_legend_explains_what_occurs_and_no_more(look: Any, make_results: Callable[..., Results]) -> None:
    """An exact result speaks of no interval; without best or incomplete cells nobody reads of them."""
    exact = look.said(matrix_figure(make_results(2, 1, best=False), DATE))
    assert not re.search("interval|draws|best|incomplete|tolerated level", exact)
    assert "open" not in exact
    assert "open: no result" in look.said(matrix_figure(make_results(3, 1, incomplete=1), DATE))
    full = look.said(matrix_figure(make_results(4, 9, incomplete=3), DATE))
    assert all(
        word in full for word in ("interval", "best: better", "incomplete: draws", "tolerated level: ")
    )


@pytest.mark.parametrize("grey", [False, True])
def test_type_can_be_read_on_every_shade(grey: bool) -> None:
    """Contrast of at least 4.5 (WCAG 2.1, success criterion 1.4.3) with every shade, in colour and in grey."""

    def luminance(colour: str) -> float:
        rgb = np.array(to_rgb(colour))
        if grey:
            rgb = np.full(3, rgb @ (0.299, 0.587, 0.114))  # luma, ITU-R BT.601
        linear = np.where(rgb <= 0.04045, rgb / 12.92, ((rgb + 0.055) / 1.055) ** 2.4)
        return float(linear @ (0.2126, 0.7152, 0.0722))

    for ink in (None, *np.linspace(0, 1, 101)):
        light, dark = luminance(shade(ink)), luminance(INK)
        assert (light + 0.05) / (dark + 0.05) >= 4.5


def test_grey_print_keeps_the_scale() -> None:
    """Luma falls all along the scale, from end to end by at least a fifth of the way from white to black."""
    luma = np.array([to_rgb(shade(ink)) for ink in np.linspace(0, 1, 21)]) @ (0.299, 0.587, 0.114)
    assert np.all(np.diff(luma) < 0)
    assert luma[0] - luma[-1] > 0.2
    assert shade(-1) == shade(0)
    assert shade(2) == shade(1)


def test_the_scale_has_one_hue() -> None:
    """All shades lie on one line of hue, a blue: colour-blind readers lose nothing."""
    hues = matplotlib.colors.rgb_to_hsv([to_rgb(shade(ink)) for ink in np.linspace(0.2, 1, 9)])[:, 0]
    assert np.ptp(hues) < 0.03
    assert 0.5 < hues.mean() < 0.7


def test_verdicts_differ_by_word_and_by_shape(
    look: Any, make_results: Callable[..., Results], make_cell: Callable[..., Cell]
) -> None:
    """Without any colour: the word, and a gauge that is full, half full or empty."""
    column = Column("together 1", 1.0, random=True, ladder=True)
    results = make_results(["a", "b", "c"], [column])
    cells = tuple(
        make_cell("", law, column, passed=passed, draws=128)
        for law, passed in (("a", 128), ("b", 122), ("c", 9))
    )
    levels = tuple(LawStanding("", law, None) for law in "abc")
    figure = matrix_figure(replace(results, cells=cells, standings=levels), DATE)
    gauges = look.rectangles(figure, "gauge-")
    filled = []
    for row in range(3):
        gauge, full = gauges[f"gauge-0-{row}-0"], gauges.get(f"gauge-0-{row}-0-full")
        filled.append(full.get_height() / gauge.get_height() if full else 0.0)
    assert filled == pytest.approx([1.0, 0.5, 0.0])
    heads = [text.get_text() for text, _ in text_boxes(figure) if str(text.get_gid()).endswith("-head")]
    assert heads == ["keeps", "open", "misses"]


def test_the_best_law_is_marked_only_where_it_is_best(make_results: Callable[..., Results]) -> None:
    """As many marks as best cells."""
    results = make_results(4, 9)
    heads = [t.get_text() for t, _ in text_boxes(matrix_figure(results, DATE)) if "-head" in str(t.get_gid())]
    assert sum("best" in head for head in heads) == sum(cell.best for cell in results.cells) > 0


def test_rows_stand_by_tolerated_level(make_results: Callable[..., Results]) -> None:
    """The best law is drawn on top, wherever it was declared."""
    results = make_results(["a", "b", "c"], 4)
    levels = (Tolerated(0.2, 0.0, 0.25), Tolerated(None, 0.5, float("inf")), Tolerated(0.4, 0.25, 0.5))
    standings = tuple(LawStanding("", law, level) for law, level in zip("abc", levels, strict=True))
    boxes = text_boxes(matrix_figure(replace(results, standings=standings), DATE))
    height = {t.get_text(): b.y0 for t, b in boxes if str(t.get_gid()).startswith("law-")}
    assert sorted(height, key=lambda law: -height[law]) == ["b", "c", "a"]


def test_the_axis_of_levels_rises_through_the_levels_that_were_run(
    make_results: Callable[..., Results],
) -> None:
    """The levels stand at equal distances, others between them in proportion, the last short of the arrow."""
    strip = LevelStrip(Paper(), Grid(make_results(1, 5)), 8)
    assert strip.axis.levels == [0, 0.25, 0.5, 1, 1.5]
    places = [strip.place(100, at) for at in strip.axis.levels]
    assert np.diff(places) == pytest.approx(np.diff(places)[0])
    assert strip.place(100, 0.75) == pytest.approx((places[2] + places[3]) / 2)
    assert places[0] > 100
    assert places[-1] < 100 + strip.width - 10


def test_bars_show_the_interval_and_arrows_an_open_end(
    look: Any, make_results: Callable[..., Results]
) -> None:
    """A bar goes from shown to keep to shown to miss; where nothing was shown to miss it is an arrow."""
    results = make_results(["a", "b"], 5)
    levels = (Tolerated(None, 0.5, float("inf")), Tolerated(0.4, 0.25, 1.0))
    standings = tuple(LawStanding("", law, level) for law, level in zip("ab", levels, strict=True))
    figure = matrix_figure(replace(results, standings=standings), DATE)
    ticks = {t.get_text(): b.x0 / 2 + b.x1 / 2 for t, b in text_boxes(figure) if t.get_ha() == "center"}
    bars = look.rectangles(figure, "bar-")
    closed, arrow = bars["bar-0-1"], bars["bar-0-0"]
    ends = [closed.get_x(), closed.get_x() + closed.get_width(), arrow.get_x()]
    assert ends == pytest.approx([ticks["0.25"], ticks["1"], ticks["0.5"]], abs=0.5)  # a pixel is 0.5 pt
    heads = [patch for patch in figure.findobj(Polygon) if type(patch) is Polygon]
    assert len(heads) == 2  # the other is the legend's
    tip = min(
        float(head.get_xy()[:, 0].max()) - ticks["1.5"] for head in heads if head.get_xy()[0, 0] > ends[2]
    )
    assert tip > 0


@pytest.mark.parametrize("suffix", [".png", ".svg", ".pdf", ".PNG"])
def test_the_same_results_give_the_same_bytes(
    make_results: Callable[..., Results], tmp_path: Path, suffix: str
) -> None:
    """In each format, also under a matplotlibrc that changes everything; and the settings are left alone."""
    results = make_results(3, 5, incomplete=2)
    matrix_picture(results, tmp_path / f"one{suffix}", DATE)
    odd = {"font.size": 30.0, "lines.linewidth": 9.0, "text.parse_math": False, "savefig.dpi": 30}
    odd |= {"savefig.bbox": "tight", "svg.hashsalt": "other", "font.family": ["serif"]}
    with matplotlib.rc_context(odd):
        before = dict(matplotlib.rcParams)
        matrix_picture(results, tmp_path / f"two{suffix}", DATE)
        assert dict(matplotlib.rcParams) == before
    one, two = ((tmp_path / f"{name}{suffix}").read_bytes() for name in ("one", "two"))
    assert one == two
    assert one[:4] in {b"\x89PNG", b"<?xm", b"%PDF"}
    matrix_picture(results, tmp_path / f"three{suffix}", datetime.date(2026, 12, 2))
    assert (tmp_path / f"three{suffix}").read_bytes() != one


def test_the_margin_stays_white(make_results: Callable[..., Results], tmp_path: Path) -> None:
    """Nothing but white within 20 pt of the edges of the PNG: strips, arrows and cells end on the sheet too."""
    path = tmp_path / "new folder" / "matrix.png"
    matrix_picture(make_results(4, 9), path, DATE)
    pixels = imread(path)[:, :, :3]
    rim = int(20 * picture.DPI / 72)
    for edge in (pixels[:rim], pixels[-rim:], pixels[:, :rim], pixels[:, -rim:]):
        assert edge.min() == 1.0
    assert pixels.min() < 0.5


def test_a_huge_picture_gets_fewer_pixels(
    make_results: Callable[..., Results], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Rather than fail in the rasteriser, which takes less than 2^16 pixels a side, the resolution falls."""
    results = make_results(2, 2, sheets=tuple(f"gear_ratio {ratio}" for ratio in range(6)))
    for limit, value, attained in (("MOST_SIDE", 800, max), ("MOST_PIXELS", 5e5, np.prod)):
        monkeypatch.setattr(picture, limit, value)
        matrix_picture(results, tmp_path / "matrix.png", DATE)
        assert 0.9 * value <= attained(imread(tmp_path / "matrix.png").shape[:2]) <= value + 2
        monkeypatch.undo()


def test_another_format_is_refused(make_results: Callable[..., Results], tmp_path: Path) -> None:
    """The fault names the file and the formats there are; nothing is drawn."""
    for name in ("matrix.jpg", "matrix"):
        with pytest.raises(InputFaults, match=r"matrix.*expected \.png, \.svg or \.pdf"):
            matrix_picture(make_results(1, 1), tmp_path / name, DATE)
    assert not list(tmp_path.iterdir())


def test_a_disk_that_refuses_is_named(make_results: Callable[..., Results], tmp_path: Path) -> None:
    """A path that can't be written is a StoreError with the path, not the system's traceback."""
    (tmp_path / "file").write_text("")
    for path in (tmp_path / "file" / "matrix.png", tmp_path / "folder.png"):
        (tmp_path / "folder.png").mkdir(exist_ok=True)
        with pytest.raises(StoreError, match=re.escape(str(path))):
            matrix_picture(make_results(1, 1), path, DATE)


def test_drawing_leaves_no_global_figure() -> None:
    """The text form loads no matplotlib, and the picture no pyplot."""
    code = (
        "import sys, rigbench.report.text, rigbench.report.json_form; assert 'matplotlib' not in sys.modules; "
        "import rigbench.report.matrix; assert 'matplotlib.pyplot' not in sys.modules"
    )
    subprocess.run([sys.executable, "-c", code], check=True, timeout=120)

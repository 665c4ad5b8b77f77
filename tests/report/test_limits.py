"""The picture of the draws' own limits, and the words about them."""

from __future__ import annotations

import datetime
import math
from collections.abc import Callable, Sequence
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from matplotlib.lines import Line2D

from rigbench.report.limits import limits_figure, limits_picture
from rigbench.report.limits_words import limits_words
from rigbench.report.matrix import matrix_figure
from rigbench.report.text import matrix_text
from rigbench.scores.own_limits import OwnLimits, tolerated_of_limits
from rigbench.scores.results import LevelSearch, Results

DATE = datetime.date(2026, 7, 30)
Make = Callable[..., Results]


def limits_of(law: int, draws: int, most: float) -> OwnLimits:
    """Brackets of 1/16 about limits that get lower law by law; what lies beyond ``most`` is open."""
    own = np.random.default_rng(law).exponential(2.5 / (1 + law), size=draws)
    low = np.floor(own * 16) / 16
    high = low + 1 / 16
    beyond = high > most
    return OwnLimits(np.where(beyond, most, low), np.where(beyond, math.inf, high), np.arange(draws) == 3)


def searched(results: Results, draws: int = 90, most: float = 6.0) -> Results:
    """The same results, with a search."""
    standings = []
    for number, standing in enumerate(results.standings):
        limits = limits_of(number, draws, most)
        found = tolerated_of_limits(limits, 0.95)
        standings.append(replace(standing, tolerated=found.tolerated, found=found, limits=limits))
    return replace(results, standings=tuple(standings), level_search=LevelSearch(draws, most, 1 / 16))


@pytest.mark.parametrize(
    ("laws", "sheets"), [(1, [""]), (4, [""]), (12, ["rates 500", "rates 1000", "rates 2000"])]
)
def test_nothing_overlaps(look: Any, make_results: Make, laws: int, sheets: Sequence[str]) -> None:
    """From one law to twelve in several sheets; every law and sheet is named."""
    results = searched(make_results(laws, 4, sheets=sheets))
    figure = limits_figure(results, DATE)
    look.clear(figure)
    for name in (*results.laws, *sheets):
        assert name in look.said(figure)


def test_a_stair_is_the_share_of_draws_that_keep_up_to_a_level(make_results: Make) -> None:
    """Against a count at levels between the middles of brackets."""
    results = searched(make_results(2, 4))
    limits = results.standings[0].limits
    assert limits is not None
    figure = limits_figure(results, DATE)
    row = "0-0" if results.standings[0].tolerated.value >= results.standings[1].tolerated.value else "0-1"
    [stair] = [line for line in figure.findobj(Line2D) if line.get_gid() == f"stair-{row}"]
    xs, ys = np.array(stair.get_xdata()), np.array(stair.get_ydata())
    bottom, top = ys.min(), ys.min()
    for at in (0.5, 1.01, 3.33, 5.9):
        x = xs[0] + (xs[-1] - xs[0]) * at / 6.0
        here = ys[np.searchsorted(xs, x) - 1]
        kept = np.sum(np.where(np.isfinite(limits.high), (limits.low + limits.high) / 2, math.inf) > at)
        assert (here - ys[0]) / 190.0 == pytest.approx(1.0 - kept / 90, abs=1e-9)
    assert bottom == top


def test_files_are_written_and_the_same_each_time(tmp_path: Path, make_results: Make) -> None:
    results = searched(make_results(2, 4))
    for suffix in ("png", "svg", "pdf"):
        once, again = tmp_path / f"a.{suffix}", tmp_path / f"b.{suffix}"
        limits_picture(results, once, DATE)
        limits_picture(results, again, DATE)
        assert once.read_bytes() == again.read_bytes()


def test_without_a_search_there_is_no_picture(make_results: Make) -> None:
    with pytest.raises(ValueError, match="no search"):
        limits_figure(make_results(2, 4), DATE)
    assert limits_words(make_results(2, 4)) == ""


def test_what_is_odd_is_counted_in_words(make_results: Make) -> None:
    """Draws that keep again, and those that were left open, law by law."""
    results = searched(make_results(2, 4))
    found = results.standings[1].found
    assert found is not None
    odd = replace(results.standings[1], found=replace(found, left_open=2))
    results = replace(results, standings=(results.standings[0], odd))
    assert limits_words(results) == (
        "Own limits: of 90 draws of each law, up to level 6, to within 0.0625; a limit is the first miss, above "
        "which some keep again (1 of computed torque, 1 of feedforward (model_hz 100)); runs that came to nothing "
        "left some less exact (2 of feedforward (model_hz 100))."
    )
    text = matrix_text(results, 200)
    assert "by each draw's own limit" in text
    assert " ".join(text.split()).endswith(limits_words(results))


@pytest.mark.parametrize("columns", [1, 4])
def test_the_matrix_takes_levels_beyond_its_own_columns(look: Any, make_results: Make, columns: int) -> None:
    """The strip's axis goes up to the highest level that was tried, also where nominal is the only column."""
    results = searched(make_results(3, columns), most=16.0)
    figure = matrix_figure(results, DATE)
    look.tidy(figure)
    assert "Own limits: of 90 draws" in look.said(figure)
    assert "tolerated level" in matrix_text(results, 120)


def test_a_settled_column_says_so(look: Any, make_results: Make) -> None:
    """In its cells, in the line of counts and in the legend; the interval is not called Wilson's."""
    results = make_results(2, 3)
    cells = tuple(
        replace(cell, settled=True, planned=cell.draws) if cell.condition == "together 0.25" else cell
        for cell in results.cells
    )
    results = replace(results, cells=cells, stop_early=True)
    text = matrix_text(results, 120)
    assert text.count("settled, 128 draws") == 2
    assert "At most 128 draws (columns settled before that: 1)." in text
    assert "at any number of draws" in text
    figure = matrix_figure(results, DATE)
    look.tidy(figure)
    assert "Wilson" not in look.said(figure)
    assert "settled: after so many draws" in look.said(figure)

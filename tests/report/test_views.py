"""The matrix with other numbers in its cells: medians, percentiles, ratios, and what changed."""

from __future__ import annotations

import datetime
import itertools
from collections.abc import Callable
from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from rigbench.errors import InputFaults
from rigbench.report.cells import Grid
from rigbench.report.changes_words import changes_json, changes_words
from rigbench.report.json_form import plain_values
from rigbench.report.matrix import matrix_figure
from rigbench.report.text import matrix_text
from rigbench.report.view import SHOWS, View, check_score
from rigbench.scores.changes import Changes, changes_since
from rigbench.scores.comparison import Comparison
from rigbench.scores.results import Column, LawComparison, Measure, Results

DATE = datetime.date(2026, 12, 1)
LONG = "a law whose name_has_no_end_and_hardly_a_blank_in_it_whatever_one_does number"
SHAPES = {
    "one cell": {"laws": 1, "columns": 1},
    "two by two": {"laws": 2, "columns": 2},
    "twelve by twenty": {"laws": 12, "columns": 20, "incomplete": 12, "unstable": True},
    "all failed": {"laws": 1, "columns": 5, "unstable": True},
    "one draw": {"laws": 4, "columns": 8, "draws": 1},
    "no finished run": {"laws": 4, "columns": 8, "draws": 0},
    "no tolerance": {"laws": 4, "columns": 9, "tolerance": False},
    "long names": {"laws": [f"{LONG} {number}" for number in range(3)], "columns": 6},
    "sheets": {
        "laws": 3,
        "columns": 4,
        "sheets": ("gear_ratio 50", "gear_ratio 100"),
        "impossible": [("gear_ratio 50", "pd + gravity")],
    },
}


def earlier(results: Results) -> Results:
    """The same campaign as it was: all scores a tenth larger, every other cell with fewer passes."""
    counted = {
        key: replace(here, worst=1.1 * here.worst, passed=here.passed & (here.draws < 60 + 60 * (number % 2)))
        for number, (key, here) in enumerate(results.counted.items())
    }
    return replace(results, counted=counted)


def without_last_column(results: Results) -> Results:
    columns = results.columns[:-1] or results.columns
    names = {column.name for column in columns}
    return replace(
        results,
        columns=columns,
        cells=tuple(c for c in results.cells if c.condition in names),
        laws=results.laws,
    )


@pytest.mark.parametrize("show", SHOWS)
@pytest.mark.parametrize("shape", SHAPES)
def test_nothing_overlaps_in_any_view(
    look: Any, make_results: Callable[..., Results], shape: str, show: str
) -> None:
    """At every extent and in every strait, as a picture and as text of any width."""
    results = make_results(**SHAPES[shape])
    look.tidy(matrix_figure(results, DATE, View(show)))
    for width in (40, 100):
        assert max(map(len, matrix_text(results, width, View(show), more=True).splitlines())) <= width


@pytest.mark.parametrize("shape", SHAPES)
def test_nothing_overlaps_where_changes_are_shown(
    look: Any, make_results: Callable[..., Results], shape: str
) -> None:
    """Frames stand around the cells that got better or worse, and around no other."""
    results = make_results(**SHAPES[shape])
    changes = changes_since(without_last_column(earlier(results)), results)
    figure = matrix_figure(results, DATE, View(), changes, "old.sqlite")
    look.tidy(figure)
    framed = [change for change in changes.cells.values() if change.kind in {"better", "worse"}]
    assert len(look.rectangles(figure, "frame-")) == len(framed)
    text = matrix_text(results, 100, View(), changes)
    assert text.count("better") >= changes.count("better")


def test_each_view_shows_its_number(make_results: Callable[..., Results]) -> None:
    """Figure, unit and interval of one cell, read by hand from its measures."""
    results = make_results(1, 2)
    column = results.columns[1]
    peak = Measure(1.8, 1.62, 2.2, 3.6, 2.9, np.inf)
    cell = replace(
        results.cells[1],
        measures={"tool_peak_mm": peak, "settle_ms": Measure(120.0, 110.0, 130.0, 200.0, 180.0, 240.0)},
        ratios={"tool_peak_mm": Comparison(7.5, 6.0, 9.0, 128, False)},
    )
    results = replace(results, cells=(results.cells[0], cell))
    expected = {
        ("median", ""): ("1.8", "mm", "1.6 to 2.2"),
        ("p95", ""): ("3.6", "mm", "2.9 to no end"),
        ("ratio", ""): ("7.5", "times", "6.0 to 9.0"),
        ("p95", "settle_ms"): ("200", "ms", "180 to 240"),
    }
    for (show, score), said in expected.items():
        words = Grid(results, View(show, score)).words("", results.laws[0], column)
        assert (words.figure, words.unit, words.interval) == said
    share = Grid(results, View("share", "settle_ms")).words("", results.laws[0], column)
    assert (share.unit, share.lines[0]) == ("%", "settling time 120 ms")


def test_what_has_no_number_says_why(make_results: Callable[..., Results]) -> None:
    """A score that runs don't have, nominal's zero, a percentile that is infinite, a row that failed."""
    results = make_results(2, 2, unstable=True)
    column = results.columns[1]
    good, bad = results.laws
    assert Grid(results, View("median", "energy_j")).words("", good, column).lines[0] == "no energy"
    zero = replace(results.cells[1], ratios={"tool_peak_mm": Comparison(np.inf, 3.0, np.inf, 128, False)})
    over = replace(results, cells=(results.cells[0], zero, *results.cells[2:]))
    assert "nominal's tool peak is 0" in Grid(over, View("ratio")).words("", good, column).lines
    assert Grid(results, View("median")).words("", bad, column).lines == ("96 did not finish",)


def test_the_best_is_marked_only_where_its_own_number_stands(make_results: Callable[..., Results]) -> None:
    """Beside a ratio or another score the mark would say something that nobody has shown."""
    results = make_results(2, 4)
    for show, score, marked in itertools.product(SHOWS, ("", "settle_ms"), (True,)):
        heads = [
            Grid(results, View(show, score)).words("", law, column).head
            for law in results.laws
            for column in results.columns
        ]
        assert any("best" in head for head in heads) == (marked and show in {"share", "median"} and not score)


def test_a_change_tells_old_and_new(make_results: Callable[..., Results]) -> None:
    """The cell says what the other store showed and by how much the score changed, draw by draw."""
    results = make_results(1, 2)
    changes = changes_since(earlier(results), results)
    cell = results.cells[1]
    words = Grid(results, View(), changes).words("", results.laws[0], results.columns[1])
    assert words.change == "better"
    assert f"was {cell.passed / 128:.0%}".replace("%", " %") in words.lines
    by = changes.cells[cell.key].difference
    assert by is not None
    assert words.lines[-1] == f"tool peak by {by.value:.2g} mm"
    assert words.head.endswith("better")
    median = Grid(results, View("median"), changes).words("", results.laws[0], results.columns[1])
    assert any(line.startswith("was ") and line.endswith(" mm") for line in median.lines)


def test_the_sentence_counts_and_names() -> None:
    """Kinds with their numbers, and what only one of the stores has; names beyond three are counted."""
    names = tuple("abcde")
    only = changes_words(Changes("tool_peak_mm", {}, {"law": ("pd",)}, {"condition": names}), "old.sqlite")
    assert only == (
        "Against old.sqlite, on the same draws: of 0 cells; only in old.sqlite: conditions 'a', 'b', 'c' "
        "and 2 more; not in old.sqlite: law 'pd'."
    )


def test_changes_are_strict_json(make_results: Callable[..., Results]) -> None:
    """Every cell with its kind and both numbers; what is infinite is None."""
    results = make_results(2, 3, unstable=True)
    document = plain_values(changes_json(changes_since(without_last_column(earlier(results)), results)))
    kinds = [cell["change"] for cell in document["cells"]]
    assert kinds.count("new") == 2
    first = document["cells"][0]
    assert (first["before"]["draws"], first["after"]["draws"]) == (1, 1)
    assert first["before"]["tool_peak_mm"]["median"] > 0
    assert document["only_after"] == {"condition": [results.columns[-1].name]}


def test_laws_are_compared_draw_by_draw_beneath(make_results: Callable[..., Results]) -> None:
    """Against the law in the first row, whichever way round the pair is stored; ties are said to be ties."""
    results = make_results(["b", "a"], 2, best=False)
    column = results.columns[1]
    gaps = {False: Comparison(0.5, 0.4, 0.7, 128, False), True: Comparison(0.1, -0.2, 0.3, 128, True)}
    for laws, tie in itertools.product((("a", "b"), ("b", "a")), (False, True)):
        pair = LawComparison("", column.name, column.level or 0.0, laws, "tool_peak_mm", gaps[tie])
        text = matrix_text(replace(results, comparisons=(pair,)), 120, more=True)
        sign = "+" if laws[0] == "a" else "-"
        assert "Draw by draw against 'b': the tool peak less its own [mm]" in text
        assert f"{sign}{'0.10' if tie else '0.50'} (" in text
        assert ("tie\n" in f"{text}\n") == tie
    assert "Draw by draw" not in matrix_text(results, 120, more=True)


def test_an_unknown_score_is_named_with_the_nearest(make_results: Callable[..., Results]) -> None:
    """Any stored one will do, of a joint too; without a run any that rigbench knows."""
    results = make_results(1, 2)
    check_score("s", "joint_peak_deg.j1", ["joint_peak_deg.j1"], results)
    check_score("s", "tool_peak_mm", [], results)
    check_score("s", "energy_j", [], results)
    with pytest.raises(InputFaults, match=r"'setle_ms' \(did you mean 'settle_ms'\?\)"):
        check_score("s", "setle_ms", ["settle_ms"], results)
    for stored in (["settle_ms"], []):
        with pytest.raises(InputFaults, match=r"'qqq'; expected one of .*tool_peak_mm"):
            check_score("s", "qqq", stored, results)


def test_a_legend_explains_the_view(look: Any, make_results: Callable[..., Results]) -> None:
    """What is large, on which scale, and how verdicts read when no share is shown."""
    results = make_results(3, 5)
    ratio = look.said(matrix_figure(results, DATE, View("ratio")))
    for part in ("times nominal", "median of these ratios", "keeps: the share's interval's low end"):
        assert part in ratio
    assert "95th percentile over the draws" in look.said(matrix_figure(results, DATE, View("p95")))
    assert "share of the draws" not in ratio.replace("share of the draws must", "")
    column = Column("all at 1", 1.0, random=True, ladder=True)
    assert "Wilson" in look.said(matrix_figure(make_results(2, [column]), DATE))

"""What the cells say, and the order of the rows."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace

import pytest

from rigbench.report.cells import Grid
from rigbench.scores.results import Cell, Column, LawStanding, Results, Tolerance, Tolerated

NOMINAL = Column("nominal", 0.0, random=False, ladder=True)
TOGETHER = Column("together 1", 1.0, random=True, ladder=True)


@pytest.fixture
def say(make_results: Callable[..., Results], make_cell: Callable[..., Cell]) -> Callable[..., Grid]:
    """A grid of one cell, made of what the test says."""

    def grid(column: Column, **cell: object) -> Grid:
        with_tolerance = bool(cell.get("tolerance", True))
        results = make_results(["mine"], [column], tolerance=with_tolerance)
        return Grid(replace(results, cells=(make_cell("", "mine", column, **cell),)))

    return grid


def test_a_random_cell_says_share_interval_and_main_score(say: Callable[..., Grid]) -> None:
    """124 of 128 is 97 %, its Wilson interval (Wilson 1927, by hand) 92.2 to 98.8 %."""
    words = say(TOGETHER, passed=124, draws=128, median=1.84).words("", "mine", TOGETHER)
    assert (words.head, words.figure, words.unit, words.interval) == ("open", "97", "%", "92 to 99")
    assert words.lines == ("tool peak 1.8 mm",)
    assert words.ink == 124 / 128
    assert say(TOGETHER, passed=511, draws=512).words("", "mine", TOGETHER).figure == "99.8"


def test_an_exact_cell_says_its_score_and_no_share(say: Callable[..., Grid]) -> None:
    """Where nothing is random there is a verdict and a value, on its own side of the limit of 3 mm."""
    words = say(NOMINAL, passed=0, draws=1, median=3.004).words("", "mine", NOMINAL)
    assert (words.head, words.figure, words.unit, words.interval) == ("misses", "3.004", "mm", "")
    assert words.lines == ("tool peak", "one exact run")
    assert words.ink == 0


def test_incomplete_and_unfinished_draws_are_counted(say: Callable[..., Grid]) -> None:
    """A cell says how many draws it lacks, and on how many the machine did not finish."""
    words = say(TOGETHER, passed=0, draws=125, incomplete=3, unfinished=90, median=math.inf).words(
        "", "mine", TOGETHER
    )
    assert words.lines == ("90 did not finish", "3 incomplete")


@pytest.mark.parametrize("column", [NOMINAL, TOGETHER])
@pytest.mark.parametrize("tolerance", [True, False])
def test_a_cell_without_draws_claims_nothing(
    say: Callable[..., Grid], column: Column, tolerance: bool
) -> None:
    """No share, no shade: only that there is no result and how many draws lack."""
    words = say(column, passed=0, draws=0, incomplete=5, tolerance=tolerance).words("", "mine", column)
    assert (words.figure, words.unit, words.interval, words.ink) == ("-", "", "", None)
    assert words.lines == ("no result", "5 incomplete")


def test_a_run_that_did_not_finish_has_no_number(say: Callable[..., Grid]) -> None:
    """An infinite score is said in words."""
    words = say(NOMINAL, passed=0, draws=1, median=math.inf).words("", "mine", NOMINAL)
    assert (words.head, words.figure) == ("misses", "-")
    assert words.lines == ("did not finish", "one exact run")


def test_the_best_law_is_marked_in_words(say: Callable[..., Grid]) -> None:
    """Where the cell is the best of its column, and only there."""
    assert say(TOGETHER, passed=128, draws=128, best=True).words("", "mine", TOGETHER).head == "keeps, best"
    assert say(TOGETHER, passed=128, draws=128).words("", "mine", TOGETHER).head == "keeps"


def test_without_a_tolerance_the_score_is_large(make_results: Callable[..., Results]) -> None:
    """The main score with its interval; the least has no ink, the largest and the infinite all of it."""
    results = make_results(3, 6, tolerance=False, unstable=True)
    grid = Grid(results)
    first = grid.words("", "computed torque", results.columns[1])
    assert (first.verdict, first.unit, first.interval) == ("", "mm", "0.75 to 1.0")
    inks = {
        results.cell("", law, column.name).measures["tool_peak_mm"].median: grid.words("", law, column).ink
        for law in results.laws
        for column in results.columns
    }
    shades = [inks[median] for median in sorted(inks)]
    assert shades == sorted(shades)
    assert (shades[0], inks[grid.most], inks[math.inf]) == (0, pytest.approx(1), 1)


@pytest.mark.parametrize("median", [0.0, 1.8, math.inf])
def test_one_value_alone_makes_a_scale(say: Callable[..., Grid], median: float) -> None:
    """A scale from a value to itself, or from 0, divides by nothing."""
    words = say(TOGETHER, passed=0, draws=9, median=median, tolerance=False).words("", "mine", TOGETHER)
    assert words.ink == (1.0 if math.isinf(median) else 0.0)


def test_the_limit_of_another_score_is_not_the_main_one(say: Callable[..., Grid]) -> None:
    """With a limit on the angle, the cells show the angle, or say that there is none."""
    results = replace(
        say(TOGETHER, passed=9, draws=9).results, tolerance=Tolerance({"tool_angle_peak_deg": 0.5})
    )
    assert Grid(results).words("", "mine", TOGETHER).lines == ()
    exact = say(NOMINAL, passed=1, draws=1).results
    exact = replace(exact, tolerance=Tolerance({"tool_angle_peak_deg": 0.5}))
    assert Grid(exact).words("", "mine", NOMINAL).lines == ("no tool angle peak", "one exact run")


@pytest.mark.parametrize("tolerance", [True, False])
def test_a_law_that_is_not_possible_says_so_and_nothing_else(
    make_results: Callable[..., Results], tolerance: bool
) -> None:
    """No figure, no verdict, no shade, no count of what lacks, and no tolerated level."""
    results = make_results(["mine", "b"], 3, tolerance=tolerance, impossible=[("", "mine")])
    results = replace(results, cells=tuple(replace(c, incomplete=4) for c in results.cells))
    grid = Grid(results)
    for column in results.columns:
        words = grid.words("", "mine", column)
        assert (words.head, words.figure, words.unit, words.interval) == ("", "", "", "")
        assert (words.lines, words.ink, words.possible) == (("not possible",), None, False)
    assert grid.level("", "mine") == "not possible"
    assert not grid.possible("", "mine")
    assert grid.possible("", "b")


@pytest.mark.parametrize(
    ("level", "crossing"),
    [
        (Tolerated(0.3, 0.25, 0.5), 0.3),
        (Tolerated(None, 0.5, math.inf), math.inf),
        (Tolerated(None, 0.0, math.inf), math.inf),
        (Tolerated(None, 0.0, 0.5), 0.0),
        (Tolerated(0.0, 0.0, 0.0), 0.0),
        (None, None),
    ],
)
def test_where_the_share_crosses(
    make_results: Callable[..., Results], level: Tolerated | None, crossing: float | None
) -> None:
    """At the point estimate; beyond all levels where the share starts above the required one and stays."""
    results = make_results(["mine"], 4)
    results = replace(results, standings=(LawStanding("", "mine", level),))
    assert Grid(results).crossing("", "mine") == crossing


def test_nothing_run_crosses_nowhere(make_results: Callable[..., Results]) -> None:
    """An estimate takes a result."""
    assert Grid(make_results(["mine"], 4, draws=0)).crossing("", "mine") is not None  # nominal has one
    results = make_results(["mine"], 4, draws=1, incomplete=1)
    none = replace(
        results, cells=tuple(replace(c, draws=0, pass_share=None, verdict="open") for c in results.cells)
    )
    assert Grid(none).crossing("", "mine") is None

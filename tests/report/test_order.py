"""The order of the rows."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace

import pytest

from rigbench.report.cells import Grid
from rigbench.report.order import laws_in_order
from rigbench.scores.results import Cell, Column, LawStanding, Results, Tolerated

NOMINAL = Column("nominal", 0.0, random=False, ladder=True)
TOGETHER = Column("together 1", 1.0, random=True, ladder=True)


def standing(law: str, value: float | None, low: float, high: float, sheet: str = "") -> LawStanding:
    return LawStanding(sheet, law, Tolerated(value, low, high))


def ordered(results: Results) -> str:
    return "".join(laws_in_order(Grid(results)))


def test_rows_stand_by_tolerated_level(make_results: Callable[..., Results]) -> None:
    """Best first: never missed, then by level; what misses at level 0 comes last; ties as declared."""
    results = make_results(["a", "b", "c", "d", "e", "f"], 4)
    results = replace(
        results,
        standings=(
            standing("a", 0.0, 0.0, 0.0),
            standing("b", 0.7, 0.5, 1.0),
            standing("c", None, 0.5, math.inf),
            standing("d", 0.7, 0.5, 1.0),
            standing("e", None, 1.0, math.inf),
            standing("f", 0.9, 0.5, math.inf),
        ),
    )
    assert ordered(results) == "ecfbda"


def test_an_undecided_law_is_placed_by_its_shares(
    make_results: Callable[..., Results], make_cell: Callable[..., Cell]
) -> None:
    """With too few draws to show anything, a law that always passed stands above one that fell short."""
    results = make_results(["b", "g"], [TOGETHER])
    cells = [make_cell("", law, TOGETHER, passed=passed, draws=8) for law, passed in (("b", 7), ("g", 8))]
    undecided = (standing("b", None, 0.0, math.inf), standing("g", None, 0.0, math.inf))
    results = replace(results, cells=tuple(cells), standings=undecided)
    assert ordered(results) == "gb"
    assert [Grid(results).crossing("", law) for law in "bg"] == [0.0, math.inf]


def test_without_a_tolerance_rows_stand_as_declared(make_results: Callable[..., Results]) -> None:
    """There is nothing to sort by."""
    results = make_results(5, 3, tolerance=False)
    assert laws_in_order(Grid(results)) == results.laws


@pytest.mark.parametrize("impossible", [(), (("two", "b"),)])
def test_all_sheets_together_set_one_order(
    make_results: Callable[..., Results], impossible: tuple[tuple[str, str], ...]
) -> None:
    """By the mean on the axis as drawn, over the sheets in which a law is possible.

    On the levels 0, 0.25, 0.5, 1 law a stands at 3 and 0 steps, b at 2 in both: b is ahead, by 2 to 1.5.
    Without its second sheet b has 1.9, a still 1.5.
    """
    first = 0.5 if not impossible else 0.475
    levels = {("one", "a"): 1.0, ("two", "a"): 0.0, ("one", "b"): first, ("two", "b"): 0.5}
    results = make_results(["a", "b"], 4, sheets=("one", "two"), impossible=impossible)
    standings = tuple(standing(law, at, 0.0, 1.0, sheet) for (sheet, law), at in levels.items())
    assert ordered(replace(results, standings=standings)) == "ba"


def test_a_law_that_is_possible_nowhere_comes_last(make_results: Callable[..., Results]) -> None:
    """Even behind one that misses at level 0."""
    results = make_results(["a", "b"], 4, impossible=[("", "a")])
    results = replace(results, standings=(LawStanding("", "a", None), standing("b", 0.0, 0.0, 0.0)))
    assert ordered(results) == "ba"

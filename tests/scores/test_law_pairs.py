"""All pairs of laws at once are what one pair is by itself."""

from __future__ import annotations

from itertools import combinations

import numpy as np
import pytest

from rigbench.scores.cell import CountedDraws
from rigbench.scores.comparison import compare_by_difference
from rigbench.scores.gather import Frame
from rigbench.scores.law_pairs import compare_laws
from rigbench.scores.results import Column

COLUMNS = (
    Column("nominal", None, random=False, ladder=True),
    Column("mass alone", 1.0, random=True, ladder=False),
    Column("all at 1", 1.0, random=True, ladder=True),
)
LAWS = ("a", "b", "c", "d", "e")


def draws_of(numbers: np.ndarray, worst: np.ndarray) -> CountedDraws:
    passed = worst < 1.0
    return CountedDraws(numbers, np.isfinite(worst), passed, np.stack([np.zeros(len(worst)), worst], axis=1))


def test_pairs_equal_the_comparison_of_two() -> None:
    """Laws with draws of their own, infinite scores and equal ones; 'e' has none at all."""
    rng = np.random.default_rng(4)
    count = {}
    for law in LAWS[:4]:
        numbers = np.sort(rng.permutation(40)[:30])
        worst = np.round(rng.lognormal(size=30), 1)
        worst[rng.random(30) < 0.1] = np.inf
        count["", law, "all at 1"] = draws_of(numbers, worst)
        count["", law, "nominal"] = draws_of(np.array([0]), rng.lognormal(size=1))
    count["", "e", "all at 1"] = draws_of(np.empty(0, int), np.empty(0))
    found = list(compare_laws(Frame(("",), LAWS, COLUMNS, ("m",)), count, "tool_peak_mm", 1))
    pairs = list(combinations(LAWS[:4], 2))
    assert [(one.condition, one.laws) for one in found] == [
        (name, pair) for name in ("nominal", "all at 1") for pair in pairs
    ]
    for one in found:
        mine, theirs = (count["", law, one.condition] for law in one.laws)
        _, i, j = np.intersect1d(mine.draws, theirs.draws, return_indices=True)
        expected = compare_by_difference(mine.worst[i, 1], theirs.worst[j, 1], one.condition != "nominal")
        assert one.difference == expected
        assert one.score == "tool_peak_mm"


def test_a_tie_is_a_tie() -> None:
    """The same scores differ by 0; a constant 0.1 on 40 draws is shown."""
    numbers, worst = np.arange(40), np.linspace(1.0, 2.0, 40)
    count = {
        ("", law, "all at 1"): draws_of(numbers, worst + shift)
        for law, shift in (("a", 0), ("b", 0), ("c", 0.1))
    }
    found = {
        one.laws: one.difference for one in compare_laws(Frame(("",), LAWS, COLUMNS, ("m",)), count, "s", 1)
    }
    assert found["a", "b"].tie
    assert not found["a", "c"].tie
    assert found["a", "c"].value == pytest.approx(-0.1)

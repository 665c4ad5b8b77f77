"""The tolerated level."""

from __future__ import annotations

from dataclasses import replace
from math import inf

import numpy as np
import pytest

from rigbench.scores.cell import verdict_of
from rigbench.scores.intervals import wilson
from rigbench.scores.levels import ladder, tolerated_level
from rigbench.scores.results import Cell, Column, Tolerated


def cell(level: float | None, passed: int, draws: int = 128) -> Cell:
    """A cell at a level; None is nominal, one exact run."""
    exact = level is None
    share = passed / draws if draws else None
    low, high = (share, share) if exact else wilson(passed, draws)
    verdict = "open" if share is None or low is None or high is None else verdict_of(low, high, 0.95)
    if share is None:
        low = high = None
    return Cell("", "pd", "c", level, draws, 0, passed, share, low, high, verdict, {}, {})


def level_of(*cells: Cell) -> Tolerated:
    return tolerated_level(cells, 0.95)


NOMINAL = cell(None, 1, 1)


def test_the_level_crosses_linearly_between_the_shares() -> None:
    """From 1 at 0.5 to 0.5 at 1 the share falls through 0.95 after a tenth of the way."""
    found = level_of(NOMINAL, cell(0.5, 128), cell(1.0, 64))
    assert found.value == pytest.approx(0.55, rel=1e-12)
    assert (found.low, found.high) == (0.5, 1.0)


def test_between_keeping_and_missing_all_is_open() -> None:
    """The largest level that keeps, the smallest that misses, whatever lies between."""
    found = level_of(NOMINAL, cell(0.25, 128), cell(0.5, 124), cell(1.0, 122), cell(2.0, 60))
    assert (found.low, found.high) == (0.25, 2.0)


def test_levels_all_kept_have_no_upper_end() -> None:
    """Nor a crossing."""
    assert level_of(NOMINAL, cell(1.0, 128), cell(2.0, 127)) == Tolerated(None, 2.0, inf)


def test_a_law_that_misses_at_level_0_tolerates_nothing() -> None:
    """0, whatever it does at other levels."""
    assert level_of(cell(None, 0, 1), cell(1.0, 128)) == Tolerated(0.0, 0.0, 0.0)


def test_a_level_kept_above_a_miss_proves_nothing() -> None:
    """Low stays below high, and the value between the two."""
    found = level_of(NOMINAL, cell(0.25, 128), cell(0.5, 100), cell(1.0, 128))
    assert (found.low, found.high) == (0.25, 0.5)
    assert found.value is not None
    assert 0.25 <= found.value <= 0.5


def test_shares_that_rise_are_pooled_before_they_cross() -> None:
    """By hand: 90 and 100 of 100 pool to 0.95, which is not below it; then 0 at level 3 crosses at once."""
    assert (
        level_of(NOMINAL, cell(1.0, 90, 100), cell(2.0, 100, 100), cell(3.0, 0, 100)).value == 1.0
    )  # its high
    pooled = level_of(NOMINAL, cell(1.0, 91, 100), cell(2.0, 99, 100), cell(3.0, 0, 100))
    assert pooled.high == 3.0
    assert pooled.value == pytest.approx(2.0, rel=1e-12)


def test_a_pooled_share_may_miss_the_required_one_by_a_rounding_error() -> None:
    """223 of 280 and 33 of 40 pool to 0.8 less 1e-16: still kept at level 2, where it begins to fall."""
    cells = [NOMINAL, cell(1.0, 223, 280), cell(2.0, 33, 40), cell(3.0, 0, 100)]
    cells = [replace(c, verdict="open") if c.level in {1.0, 2.0} else c for c in cells]
    assert tolerated_level(cells, 0.8).value == pytest.approx(2.0, rel=1e-12)


def test_draws_are_the_weights() -> None:
    """By hand: 47 of 50 and 198 of 200 pool to 245 / 250 = 0.98; linear from there to 0 at level 3."""
    found = level_of(NOMINAL, cell(1.0, 47, 50), cell(2.0, 198, 200), cell(3.0, 0, 200))
    assert found.value == pytest.approx(2.0 + (0.98 - 0.95) / 0.98, rel=1e-12)


def test_nothing_run_says_nothing() -> None:
    """0 to inf; and so does a ladder whose lowest level is open with a share below the required one."""
    assert level_of() == Tolerated(None, 0.0, inf)
    assert level_of(cell(None, 0, 0), cell(1.0, 0, 0)) == Tolerated(None, 0.0, inf)
    assert level_of(cell(None, 0, 0), cell(1.0, 120, 128)).value is None


def test_the_order_of_the_cells_does_not_matter() -> None:
    """Levels are sorted."""
    cells = [NOMINAL, cell(0.5, 128), cell(1.0, 110), cell(2.0, 3)]
    random = np.random.default_rng(0)
    for _ in range(5):
        assert level_of(*(cells[i] for i in random.permutation(4))) == level_of(*cells)


def test_the_ladder_is_nominal_and_the_levels_of_all_sources() -> None:
    """Sorted by level; sources alone and cases are not steps of it."""
    columns = [
        Column("level 2", 2.0, True, True),
        Column("mass alone", 1.0, True, False),
        Column("level 1", 1.0, True, True),
        Column("nominal", None, False, True),
    ]
    assert [column.name for column in ladder(columns)] == ["nominal", "level 1", "level 2"]


@pytest.mark.evidence
def test_the_interval_covers_the_level_at_which_the_true_share_crosses() -> None:
    """2000 campaigns of 128 draws on a known, falling share: low to high holds the truth in 95 % at least.

    Each end errs only if a cell whose true share is on the other side of 0.95 gets the wrong verdict,
    which its Wilson interval allows in about 2.5 % per cell near the crossing.
    """
    random = np.random.default_rng(3)
    levels = np.array([0.25, 0.5, 1.0, 1.5, 2.0, 3.0])

    def share(level: np.ndarray) -> np.ndarray:
        return 1 / (1 + np.exp(4 * (level - 1.8)))

    truth = 1.8 - np.log(19) / 4
    hits = 0
    for _ in range(2000):
        passed = random.binomial(128, share(levels))
        found = level_of(NOMINAL, *(cell(a, int(k)) for a, k in zip(levels, passed, strict=True)))
        hits += found.low <= truth <= found.high
    assert hits / 2000 >= 0.95

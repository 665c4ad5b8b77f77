"""Each cell's ratio to nominal, its degradation: draw by draw, or over one exact run."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy import stats

from rigbench.scores.cell import CountedDraws
from rigbench.scores.intervals import quantiles
from rigbench.scores.ratios import ratios_to_nominal
from rigbench.scores.results import Cell, Measure

NAMES = ("tool_peak_mm", "settle_ms", "law_us")


def counted(draws: np.ndarray, worst: np.ndarray) -> CountedDraws:
    return CountedDraws(draws, np.isfinite(worst[:, 0]), np.isfinite(worst[:, 0]), worst)


def cell_of(here: CountedDraws, random: bool = True) -> Cell:
    table = quantiles(here.worst) if random else np.repeat(here.worst[:1].T, 6, axis=1)
    measures = {n: Measure(*row) for n, row in zip(NAMES, table.tolist(), strict=True) if row[0] == row[0]}
    empty = Cell("", "pd", "c", 1.0, len(here.draws), 0, 0, None, None, None, "", measures, {})
    return replace(empty, draws=len(here.draws))


@pytest.mark.parametrize("nominal_random", [False, True])
def test_the_numbers_are_those_of_the_ratios(nominal_random: bool) -> None:
    """numpy's median and scipy's interval of all ratios: over one exact run, and over draws that only partly

    meet. Infinite scores are among them, and one that is absent.
    """
    rng = np.random.default_rng(1)
    worst = rng.lognormal(size=(60, 3))
    worst[rng.random((60, 3)) < 0.1] = np.inf
    worst[:, 2] = np.nan
    here = counted(np.arange(60), worst)
    size = 50 if nominal_random else 1
    foot = counted(np.arange(size) + (5 if nominal_random else 0), rng.lognormal(size=(size, 3)))
    found = ratios_to_nominal(
        NAMES, (cell_of(here), here, True), (cell_of(foot, nominal_random), foot, nominal_random)
    )
    assert set(found) == {"tool_peak_mm", "settle_ms"}
    rows = slice(5, 55) if nominal_random else slice(None)
    for place, name in enumerate(NAMES[:2]):
        ratios = worst[rows, place] / foot.worst[:, place]
        ends = stats.quantile_test(ratios, p=0.5).confidence_interval(0.95)
        middle = np.quantile(ratios, 0.5, method="inverted_cdf")
        one = found[name]
        assert (one.value, one.low, one.high) == pytest.approx((middle, ends.low, ends.high))
        assert (one.draws, one.tie) == (len(ratios), ends.low <= 1.0 <= ends.high)


def test_the_ratio_is_by_draw() -> None:
    """Each draw is twice its own nominal, however far the draws lie apart; nominal over itself is a tie."""
    foot = counted(np.arange(30), np.exp(np.random.default_rng(6).normal(size=(30, 3))))
    twice = counted(foot.draws, 2.0 * foot.worst)
    found = ratios_to_nominal(NAMES, (cell_of(twice), twice, True), (cell_of(foot), foot, True))
    assert all((one.value, one.low, one.high, one.tie) == (2.0, 2.0, 2.0, False) for one in found.values())
    found = ratios_to_nominal(NAMES, (cell_of(foot), foot, True), (cell_of(foot), foot, True))
    assert [one.tie for one in found.values()] == [True] * 3


def test_of_an_infinite_error_there_is_no_multiple() -> None:
    """A nominal run that did not finish leaves no ratio; nominal's 0 an infinite one, or 1 of 0."""
    here = counted(np.arange(8), np.full((8, 3), [2.0, 0.0, 1.0]))
    foot = counted(np.array([0]), np.array([[np.inf, 0.0, 0.0]]))
    found = ratios_to_nominal(NAMES, (cell_of(here), here, True), (cell_of(foot, False), foot, False))
    assert "tool_peak_mm" not in found
    assert found["settle_ms"].value == 1.0
    assert found["law_us"].value == np.inf


def test_an_exact_run_has_one_ratio() -> None:
    """A case against nominal: a tie within 1 %; over a nominal with draws there is none to divide by."""
    foot = counted(np.array([0]), np.array([[1.0, 1.0, 1.0]]))
    case = counted(np.array([0]), np.array([[2.0, 1.005, 0.995]]))
    found = ratios_to_nominal(NAMES, (cell_of(case, False), case, False), (cell_of(foot, False), foot, False))
    assert [found[name].tie for name in NAMES] == [False, True, True]
    assert found["tool_peak_mm"].value == found["tool_peak_mm"].high == 2.0
    noisy = counted(np.arange(9), np.ones((9, 3)))
    assert not ratios_to_nominal(NAMES, (cell_of(case, False), case, False), (cell_of(noisy), noisy, True))


def test_a_score_that_some_runs_lack_counts_where_both_have_it() -> None:
    """Draws without it in the cell or in a random nominal are left out, not taken for ties."""
    here = counted(np.arange(40), np.full((40, 3), 3.0))
    foot = counted(np.arange(40), np.full((40, 3), 2.0))
    here.worst[:12, 1] = np.nan
    foot.worst[30:, 1] = np.nan
    found = ratios_to_nominal(NAMES, (cell_of(here), here, True), (cell_of(foot), foot, True))
    assert found["settle_ms"].draws == 18
    assert (found["settle_ms"].value, found["settle_ms"].low) == (1.5, 1.5)
    assert found["tool_peak_mm"].draws == 40

"""From rows to cells."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from typing import Any

import pytest
from scipy.stats import binomtest

from rigbench.scores.cell import build_cell, verdict_of
from rigbench.scores.gather import Frame, gather
from rigbench.scores.results import Cell, Column, Tolerance
from rigbench.scores.row import HOST_OUTCOMES, Row
from rigbench.scores.run_table import table_of

NOMINAL = Column("nominal", None, random=False, ladder=True)
LEVEL = Column("level 1", 1.0, random=True, ladder=True)
TOLERANCE = Tolerance({"tool_peak_mm": 3.0, "settle_ms": 250.0})
INF = float("inf")


def row(draw: int | None, peak: float | None, motion: str = "load", **given: Any) -> Row:
    """A run that finished with that peak, or ended otherwise."""
    scores = {} if peak is None else {"tool_peak_mm": peak, "law_us": 20.0} | given.pop("more", {})
    values = {"outcome": "finished" if peak is not None else "diverged", "condition": "level 1"} | given
    return Row("", "pd", motion, level=None, draw=draw, scores=scores, **values)


def cell_of(
    rows: Iterable[Row],
    column: Column = LEVEL,
    tolerance: Tolerance | None = TOLERANCE,
    draws: int = 4,
    motions: tuple[str, ...] = ("load",),
) -> Cell:
    """The cell of the one law, as the summary builds it."""
    frame = Frame(("",), ("pd",), (NOMINAL, LEVEL), motions)
    gathered = gather(table_of(rows), frame, expected=("tool_peak_mm",))
    key = ("", "pd", column.name)
    return build_cell(key, column, gathered, motions=motions, tolerance=tolerance, draws=draws)[0]


def medians(cell: Cell) -> Mapping[str, float]:
    """Each measure's median."""
    return {name: measure.median for name, measure in cell.measures.items()}


def test_a_draw_passes_when_every_motion_keeps_every_limit() -> None:
    """At the limit is within it; one motion out of it fails the draw, though the other motion passes."""
    peaks = {0: (1.0, 2.0), 1: (1.0, 3.5), 2: (3.0, 3.0), 3: (4.0, 5.0)}
    rows = [row(d, p, m) for d, pair in peaks.items() for m, p in zip(("load", "rim"), pair, strict=True)]
    cell = cell_of(rows, motions=("load", "rim"))
    assert (cell.draws, cell.passed, cell.pass_share, cell.incomplete) == (4, 2, 0.5, 0)
    assert (cell.motions["load"].passed, cell.motions["rim"].passed) == (3, 2)


def test_the_measure_of_a_draw_is_its_worst_motion() -> None:
    """The medians of 2, 4 and 6 (cell), 1, 4 and 5 (load), 2, 3 and 6 (rim)."""
    peaks = {0: (1.0, 2.0), 1: (4.0, 3.0), 2: (5.0, 6.0)}
    rows = [row(d, p, m) for d, pair in peaks.items() for m, p in zip(("load", "rim"), pair, strict=True)]
    cell = cell_of(rows, motions=("load", "rim"))
    assert medians(cell)["tool_peak_mm"] == 4.0
    assert cell.motions["load"].measures["tool_peak_mm"].median == 4.0
    assert cell.motions["rim"].measures["tool_peak_mm"].median == 3.0


def test_a_limit_applies_to_the_motions_that_have_the_score() -> None:
    """Settling is limited; the motion without rests can't fail it, the one with rests can."""
    slow = {"more": {"settle_ms": 300.0}}
    quick = {"more": {"settle_ms": 100.0}}
    cell = cell_of([row(0, 1.0), row(0, 1.0, "rim", **quick)], motions=("load", "rim"))
    assert cell.passed == 1
    cell = cell_of([row(0, 1.0), row(0, 1.0, "rim", **slow)], motions=("load", "rim"))
    assert cell.passed == 0
    assert "settle_ms" not in cell.motions["load"].measures
    assert medians(cell)["settle_ms"] == 300.0


def test_a_tool_that_never_settles_fails_its_limit() -> None:
    """An infinite score is beyond any limit, and counts in the quantiles."""
    rows = [row(d, 1.0, more={"settle_ms": INF if d else 100.0}) for d in range(3)]
    cell = cell_of(rows)
    assert cell.passed == 1
    assert medians(cell)["settle_ms"] == INF


def test_an_unfinished_run_fails_with_infinite_error() -> None:
    """It counts against the law, in the share and in every quantile; but says nothing of the law's time."""
    cell = cell_of([row(0, 1.0), row(1, None), row(2, None, outcome="hit-stop")])
    assert (cell.draws, cell.passed, cell.unfinished, cell.incomplete) == (3, 1, 2, 1)
    assert medians(cell)["tool_peak_mm"] == INF
    assert medians(cell)["law_us"] == 20.0


def test_an_unfinished_motion_spoils_the_draw_but_not_the_other_motion() -> None:
    """The cell's worst is infinite, the other motion's own part is not."""
    rows = [
        row(0, 1.0),
        row(0, None, "rim"),
        row(1, 1.0),
        row(1, 2.0, "rim"),
        row(2, None),
        row(2, 2.0, "rim"),
    ]
    cell = cell_of(rows, motions=("load", "rim"))
    assert (cell.passed, cell.unfinished) == (1, 2)
    assert medians(cell)["tool_peak_mm"] == INF
    assert cell.motions["load"].measures["tool_peak_mm"].median == 1.0


@pytest.mark.parametrize("outcome", HOST_OUTCOMES)
def test_the_host_s_trouble_leaves_a_draw_incomplete(outcome: str) -> None:
    """It counts neither for nor against; the other motion's part still has its run."""
    rows = [row(0, 1.0), row(0, 1.0, "rim"), row(1, 1.0), row(1, None, "rim", outcome=outcome)]
    cell = cell_of(rows, motions=("load", "rim"), draws=2)
    assert (cell.draws, cell.passed, cell.incomplete, cell.unfinished) == (1, 1, 1, 0)
    assert (cell.motions["load"].draws, cell.motions["rim"].draws) == (2, 1)


def test_a_draw_waits_for_all_its_motions() -> None:
    """A run that is not yet done leaves its draw incomplete, even where another motion has failed it."""
    cell = cell_of([row(0, 9.0)], motions=("load", "rim"), draws=5)
    assert (cell.draws, cell.incomplete, cell.pass_share, cell.verdict) == (0, 5, None, "open")
    assert cell.measures == {}


def test_a_cell_in_which_nothing_is_random_is_exact() -> None:
    """One run, no interval, kept or missed; all six figures of a measure are the one value."""
    for peak, verdict, share in ((2.0, "keeps", 1.0), (4.0, "misses", 0.0)):
        cell = cell_of([row(None, peak, condition="nominal")], NOMINAL, draws=128)
        assert (cell.draws, cell.incomplete, cell.verdict) == (1, 0, verdict)
        assert cell.pass_share == cell.pass_low == cell.pass_high == share
        measure = cell.measures["tool_peak_mm"]
        assert {getattr(measure, name) for name in measure.__dataclass_fields__} == {peak}


def test_draw_numbers_have_no_meaning_where_nothing_is_random() -> None:
    """Two rows of an exact cell are one run, stored twice."""
    rows = [row(None, 9.0, condition="nominal"), row(7, 1.0, condition="nominal")]
    cell = cell_of(rows, NOMINAL)
    assert (cell.draws, cell.passed, cell.incomplete) == (1, 1, 0)


def test_a_motion_has_the_scores_that_it_defines_also_when_it_fails() -> None:
    """A motion without rests does not settle late because it once diverged."""
    rows = [row(0, 1.0), row(1, None), row(2, None)]
    rows += [row(d, 1.0, "rim", more={"settle_ms": 100.0}) for d in range(3)]
    cell = cell_of(rows, motions=("load", "rim"))
    assert set(cell.motions["load"].measures) == {"tool_peak_mm", "law_us"}
    assert cell.motions["rim"].measures["settle_ms"].median == 100.0
    assert medians(cell)["settle_ms"] == INF


def test_an_exact_run_that_is_missing_is_one_incomplete_draw() -> None:
    """However many draws the random cells have."""
    cell = cell_of([], NOMINAL, draws=128)
    assert (cell.draws, cell.incomplete, cell.verdict, cell.measures) == (0, 1, "open", {})


@pytest.mark.parametrize(
    ("passed", "draws", "verdict"),
    [(73, 73, "keeps"), (72, 72, "open"), (127, 128, "keeps"), (126, 128, "open"), (0, 5, "misses")],
)
def test_the_verdict_is_what_the_interval_shows(passed: int, draws: int, verdict: str) -> None:
    """Keeps from 0.95 on, misses below it, else open; the interval is scipy's Wilson."""
    cell = cell_of([row(d, 1.0 if d < passed else 9.0) for d in range(draws)], draws=draws)
    theirs = binomtest(passed, draws).proportion_ci(0.95, method="wilson")
    assert (cell.pass_low, cell.pass_high) == pytest.approx((theirs.low, theirs.high), abs=1e-14)
    assert cell.verdict == verdict


def test_an_interval_that_touches_the_required_share_keeps_it() -> None:
    """'Reaches' at its low end; at its high end it is still open."""
    assert verdict_of(0.95, 1.0, 0.95) == "keeps"
    assert verdict_of(0.9, 0.95, 0.95) == "open"


def test_without_a_tolerance_there_is_no_verdict() -> None:
    """Only measures, and how many draws finished."""
    cell = cell_of([row(0, 1.0), row(1, None)], tolerance=None)
    assert (cell.verdict, cell.pass_share, cell.pass_low, cell.pass_high) == ("", None, None, None)
    assert (cell.passed, cell.unfinished) == (1, 1)


def test_where_nothing_finished_the_expected_scores_are_infinite() -> None:
    """No row tells a score's name then; the cell still says that the error has no bound."""
    assert medians(cell_of([row(0, None)])) == {"tool_peak_mm": INF}


def test_a_score_that_is_no_number_is_beyond_every_limit() -> None:
    """It must not pass for absent."""
    cell = cell_of([row(0, float("nan"))])
    assert (cell.passed, medians(cell)["tool_peak_mm"]) == (0, INF)


def test_later_rows_replace_earlier_ones_and_strangers_are_passed_over() -> None:
    """One row a run; a law, motion or condition that isn't in the frame belongs to no cell."""
    strangers = [Row("", "other", "load", "level 1", 1.0, 1, "finished", {"tool_peak_mm": 1.0})]
    strangers += [row(2, 1.0, "elsewhere"), row(3, 1.0, condition="gone")]
    cell = cell_of([row(0, 9.0), row(0, 1.0), *strangers])
    assert (cell.draws, cell.passed) == (1, 1)


def test_more_draws_than_declared_all_count() -> None:
    """A store that holds more than the file now asks for has nothing incomplete."""
    cell = cell_of([row(d, 1.0) for d in range(6)], draws=4)
    assert (cell.draws, cell.incomplete) == (6, 0)

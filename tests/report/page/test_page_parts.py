"""What the page is made of: bins, the worst and the median run, traces of replays."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from rigbench.campaign.find import worst_run
from rigbench.campaign.plan import Entry
from rigbench.campaign.reading import Reader
from rigbench.report.cells import Grid
from rigbench.report.page.bins import BINS, Bins, binned
from rigbench.report.page.curve import LINE, charts
from rigbench.report.page.runs import CellRuns, NamedRun, read_runs
from rigbench.report.page.sections import DECIDING, SHEETS, evidence
from rigbench.report.page.traces import POINTS, chosen, peaks, traced

values = st.lists(st.floats(0.0, 1e6) | st.just(math.inf), min_size=1, max_size=60)


def edges(bins: Bins) -> list[float]:
    inner = [bins.limit * k / bins.below for k in range(bins.below)]
    return [*inner, *(bins.limit + bins.width * k for k in range(len(bins.counts) - bins.below + 1))]


@given(values, st.floats(1e-3, 1e3))
def test_no_draw_is_on_the_wrong_side_of_the_limit(found: list[float], limit: float) -> None:
    """Every value is counted once, those at most the limit below it, and the bins are some forty."""
    bins = binned(np.array(found), limit)
    assert bins is not None
    assert sum(bins.counts) + bins.endless == len(found)
    assert sum(bins.counts[: bins.below]) == sum(value <= limit for value in found)
    assert len(bins.counts) <= 1.5 * BINS + 1


@given(st.lists(st.floats(0.0, 100.0), min_size=1, max_size=60), st.none() | st.floats(0.5, 200.0))
def test_counts_are_those_of_the_edges(found: list[float], limit: float | None) -> None:
    """As numpy's histogram of the negated values, whose bins hold their lower edge as ours hold the upper.

    Values within rounding of an edge other than the limit are left out: they may count on either side.
    """
    bins = binned(np.array(found), limit)
    assert bins is not None
    at = np.array(edges(bins))
    inner = np.array([v for v in found if np.min(np.abs(at - v)) > 1e-9 * at[-1] or v == limit])
    left_out = len(found) - len(inner)
    expected = np.histogram(-inner, bins=-at[::-1])[0][::-1]
    assert np.sum(np.abs(expected - np.array(bins.counts))) <= left_out


def test_a_limit_far_below_everything_keeps_a_bin() -> None:
    """Where all draws are hundreds of limits away there is one bin below it, and it is empty."""
    bins = binned(np.array([300.0, 500.0]), 1.0)
    assert bins is not None
    assert (bins.below, bins.counts[0], sum(bins.counts)) == (1, 0, 2)
    assert binned(np.empty(0), 1.0) is None


def ends_badly(entry: Entry) -> str:
    """Law 1 runs away in every third draw; law 2's code fails in draw 4 of one motion."""
    if entry.law == "law 1" and entry.draw is not None and entry.draw % 3 == 0:
        return "diverged"
    if entry.law == "law 2" and entry.draw in (None, 4) and entry.motion == "rim":
        return "law-error"
    return "finished"


@pytest.fixture
def swept(make_store: Callable[..., Path]) -> Path:
    """Three laws, four conditions, two motions and two sheets, with runs that ended badly."""
    return make_store(3, 4, 8, sheets=("one", "two"), motions=("load tray", "rim"), ends=ends_badly, done=0.9)


def of_cells(store: Reader) -> dict[tuple[str, str, str], CellRuns]:
    return read_runs(store, store.results())


def test_the_worst_run_is_the_one_that_trace_finds(swept: Path) -> None:
    """In every cell, though this reads the store once and `trace --worst` one law and condition of it."""
    with Reader.open_for_reading(swept) as store:
        found = 0
        for (sheet, law, condition), runs in of_cells(store).items():
            for run in runs.named:
                if run.kind != "median":
                    assert run.key == worst_run(store, law, condition, sheet=sheet).key
                    found += 1
        assert found >= 20


def test_the_median_run_has_half_of_the_draws_on_either_side(swept: Path) -> None:
    """Of the draws that count, each by its worst motion, as many are below as above, or one more above."""
    with Reader.open_for_reading(swept) as store:
        results = store.results()
        medians = 0
        for key, runs in read_runs(store, results).items():
            cell = results.cell(*key)
            rows = [record.row for record in store.records_of(key[1], key[2]) if record.row.sheet == key[0]]
            own = {}
            for row in rows:
                score = row.scores.get("tool_peak_mm", math.inf) if row.outcome != "law-error" else None
                own.setdefault(row.draw, []).append(score)
            draws = [max(s) for s in own.values() if len(s) == 2 and None not in s]
            assert len(draws) == cell.draws
            for run in runs.named:
                if run.kind == "median":
                    below = sum(value < run.score for value in draws)
                    above = sum(value > run.score for value in draws)
                    assert below <= len(draws) / 2
                    assert above <= len(draws) / 2
                    medians += 1
        assert medians >= 15


def test_spreads_and_troubles_are_those_of_the_rows(swept: Path) -> None:
    """Values of the runs with a verdict, endless where not finished; the others counted with their reason."""
    with Reader.open_for_reading(swept) as store:
        for (sheet, law, condition), runs in of_cells(store).items():
            rows = [r.row for r in store.records_of(law, condition) if r.row.sheet == sheet]
            for motion in ("load tray", "rim"):
                own = [row for row in rows if row.motion == motion and row.outcome != "law-error"]
                expected = sorted(row.scores.get("tool_peak_mm", math.inf) for row in own)
                assert sorted(runs.values[motion, "tool_peak_mm"].tolist()) == expected
            bad = sorted(row.outcome for row in rows if row.outcome != "finished")
            assert sorted(t.outcome for t in runs.troubles for _ in range(t.count)) == bad
            assert all(trouble.reason == "the tray <b>fell</b>" for trouble in runs.troubles)


def test_a_trace_keeps_every_peak() -> None:
    """Two hundred points at most, each the largest of its stretch, found here one by one."""
    rng = np.random.default_rng(3)
    for n in (1, POINTS, POINTS + 1, 2601):
        course = rng.random(n)
        found = peaks(course)
        bounds = [k * n // len(found) for k in range(len(found) + 1)]
        assert len(found) == min(n, POINTS)
        assert found.tolist() == [course[a:b].max() for a, b in pairwise(bounds)]


def test_a_replayed_trace_peaks_at_the_stored_score(run_store: Path) -> None:
    """To its three digits: the tool's peak error is what the run was scored with."""
    with Reader.open_for_reading(run_store) as store:
        runs = [run for cell in of_cells(store).values() for run in cell.named]
        assert {run.kind for run in runs} == {"only", "worst", "median"}
        for run in runs:
            trace = traced(store, run)
            assert trace.note == ""
            assert max(trace.error_mm) == pytest.approx(run.score, rel=0.006)
            assert trace.seconds == pytest.approx(trace.whole_s, abs=0.01)
            assert trace.rests == ((0.4, pytest.approx(0.6)),)


def test_what_can_not_be_replayed_says_so(make_store: Callable[..., Path]) -> None:
    """Invented scores are told from the replay's; a run that is gone has no points."""
    with Reader.open_for_reading(make_store(1, 2, 3)) as store:
        run = next(run for cell in of_cells(store).values() for run in cell.named)
        assert "Not the stored run to the last bit" in traced(store, run).note
        gone = traced(store, NamedRun("only", "0" * 40, None, "load tray", "finished", 1.0, 0.1))
        assert (gone.error_mm, gone.note) == ((), "It is not stored any more.")


def test_replays_are_bounded_by_number_or_by_time() -> None:
    """--traces takes the first so many; without it runs that took 20 s altogether, 80 of a quarter."""
    runs = [NamedRun("worst", str(k), k, "load tray", "finished", 1.0, 0.25) for k in range(100)]
    assert chosen(runs, 7) == runs[:7]
    assert chosen(runs, 0) == []
    assert chosen(runs, None) == runs[:80]


def test_the_evidence_is_of_what_the_advice_names(make_store: Callable[..., Path]) -> None:
    """However far down the matrix a law or a sheet stands; the others follow in the order given."""
    sheets = tuple(f"sheet {k}" for k in range(SHEETS + 2))
    with Reader.open_for_reading(make_store(DECIDING + 3, 3, 3, sheets=sheets)) as store:
        results = store.results()
    last, laws = results.laws[-1], results.laws
    results = replace(results, advice=f"In '{sheets[-1]}': take '{last}'.")
    found = evidence(Grid(results), laws, levels=True)
    assert [(one.sheet, one.law) for one in found] == [
        (sheet, law) for sheet in (sheets[-1], sheets[0]) for law in (last, *laws[: DECIDING - 1])
    ]


def test_names_beside_the_curves_are_whole_and_apart(make_store: Callable[..., Path]) -> None:
    """A long name takes several lines, none of which lies on another's; all are within the picture."""
    laws = [f"law {k} " + "of many words " * (k % 4) for k in range(12)]
    with Reader.open_for_reading(make_store(laws, 4, 6)) as store:
        results = store.results()
    chart = next(charts(Grid(results), "", results.laws, ["tool_peak_mm"]))
    assert [" ".join(curve.names) for curve in chart.curves] == [law.strip() for law in results.laws]
    places = sorted(y for curve in chart.curves for y, _ in curve.labels)
    assert len(places) > len(laws)
    assert min(b - a for a, b in pairwise(places)) >= LINE - 1e-6
    assert 0.0 < places[0] < places[-1] < chart.bottom + LINE

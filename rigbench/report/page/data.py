"""What the panel of each cell shows, as the JSON that the page carries."""

from __future__ import annotations

import json
import math
import shlex
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import asdict
from typing import Any

from rigbench.arm.arm import Floats
from rigbench.campaign.reading import Reader
from rigbench.errors import RigbenchError, counted
from rigbench.report.cells import Grid
from rigbench.report.drawn import case_words, drawn_of
from rigbench.report.page.bins import binned
from rigbench.report.page.runs import CellRuns, NamedRun, Trouble, shown_scores
from rigbench.report.page.traces import Trace
from rigbench.report.words import figure, interval, percent, quantity
from rigbench.scores.names import SCORES, score_words
from rigbench.scores.results import Cell, Measure, MotionCell

__all__ = ["NAMED", "TRACE_LENGTH", "cell_data", "embedded", "run_data"]

NAMED = 2000
"""The draws of so many runs at most are put into words: each takes some 2 ms."""

DEPARTURES = 6
"""So many of a run's drawn parameters are shown, those that depart most."""

TRACE_LENGTH = 3000
"""Characters of a traceback, from its end."""

ENDS = {
    "diverged": "diverged",
    "hit-stop": "ran into a joint's stop",
    "law-error": "ended by an error of the law's code",
    "timed-out": "took too long and were ended",
    "crashed": "crashed their process",
    "disagrees": "left out, since engine and drive disagree about the machine",
    "no-plant": "could not be, since the draw makes no possible machine",
}


def embedded(document: Any) -> str:
    """Return a document as JSON that can stand in an HTML script element: nothing in it ends that element."""
    text = json.dumps(document, allow_nan=False, separators=(",", ":"))
    return text.replace("<", "\\u003c").replace(">", "\\u003e").replace("&", "\\u0026")


def cell_data(
    grid: Grid,
    cell: Cell,
    runs: CellRuns,
    shown: Sequence[Mapping[str, Any]],
    tracebacks: Mapping[tuple[str, str, str], int],
) -> dict[str, Any]:
    """Return what the panel of one cell shows; ``shown`` are its named runs as :func:`run_data` has them,
    ``tracebacks`` the numbers of tracebacks by law, outcome and reason.
    """
    tolerance, column = (
        grid.results.tolerance,
        next(column for column in grid.results.columns if column.name == cell.condition),
    )
    motions = grid.results.motions
    return {
        "sheet": cell.sheet,
        "law": cell.law,
        "condition": cell.condition,
        "verdict": cell.verdict,
        "exact": not column.random,
        "said": list(_counts(cell, column.random, tolerance.required_share if tolerance else None)),
        "spreads": list(_spreads(grid, cell, runs)) if cell.draws else [],
        "scores": [
            {"motion": motion, "rows": list(_rows(grid, motion, cell.motions[motion], column.random))}
            for motion in motions
            if motion in cell.motions and cell.motions[motion].measures
        ],
        "runs": list(shown),
        "troubles": [
            _trouble(one, tracebacks.get((cell.law, one.outcome, one.reason))) for one in runs.troubles
        ],
    }


def _counts(cell: Cell, random: bool, required: float | None) -> Iterator[str]:
    """Yield in sentences how many draws keep the tolerance, and how many say nothing."""
    if cell.draws == 0:
        yield "No draw has a result yet." if random else "The one run has no result yet."
    elif not random:
        yield "Nothing is random here: one exact run, without an interval."
        if required is not None:
            yield f"It {'keeps' if cell.passed else 'misses'} the tolerance."
    elif required is None or cell.pass_low is None or cell.pass_high is None:
        yield f"{counted(cell.draws, 'draw')}. No tolerance is declared, so none keeps or misses it."
    else:
        share = percent(cell.passed / cell.draws, required, exact=True)
        low, high = (percent(end, required) for end in (cell.pass_low, cell.pass_high))
        yield (
            f"{cell.passed} of {counted(cell.draws, 'draw')} keep the tolerance: {share} % "
            f"(95 % interval {low} to {high} %; {percent(required)} % are required)."
        )
    if random and cell.unfinished:
        yield f"In {counted(cell.unfinished, 'draw')} the arm did not finish; that counts as a miss."
    if cell.incomplete:
        yield f"{counted(cell.incomplete, 'draw')} of {cell.planned} incomplete: for or against no law."


def _spreads(grid: Grid, cell: Cell, runs: CellRuns) -> Iterator[dict[str, Any]]:
    """Yield how the draws spread over each limited score, motion by motion, those with a limit first."""
    tolerance, several = grid.results.tolerance, len(grid.results.motions) > 1
    for score in shown_scores(grid.results):
        for motion in grid.results.motions:
            limit = tolerance.limits_for(motion).get(score) if tolerance else None
            if limit is None and score != grid.score:
                continue
            values: Floats = runs.values[motion, score]
            bins, measure = binned(values, limit), cell.motions[motion].measures.get(score)
            if bins is None or measure is None:
                continue
            words, unit = score_words(score)
            yield {
                "title": f"{words}, {motion}" if several else words,
                "unit": unit,
                "limit": limit,
                "bins": asdict(bins) | {"width": _number(bins.width)},
                "median": [_number(one) for one in (measure.median, measure.median_low, measure.median_high)],
                "p95": _number(measure.p95),
            }


def _rows(grid: Grid, motion: str, part: MotionCell, random: bool) -> Iterator[list[str]]:
    """Yield score, median and 95th percentile with their intervals, and limit, in words; joints left out."""
    limits = grid.results.tolerance.limits_for(motion) if grid.results.tolerance else {}
    for name, measure in part.measures.items():
        if name not in SCORES and name not in limits:
            continue
        words, unit = score_words(name)
        limit = f"{limits[name]:g}" if name in limits else ""
        yield [words, unit, *_measured(measure, name, random), limit]


def _measured(measure: Measure, name: str, random: bool) -> tuple[str, str]:
    if not random:
        return _plain(measure.median, name), ""
    ends = (measure.median_low, measure.median_high), (measure.p95_low, measure.p95_high)
    middle, high = (
        _plain(value, name) + (f" ({interval(*pair)})" if math.isfinite(value) else "")
        for value, pair in zip((measure.median, measure.p95), ends, strict=True)
    )
    return middle, high


def _plain(value: float, name: str) -> str:
    return figure(value) if math.isfinite(value) else quantity(value, name)


def _trouble(one: Trouble, traceback: int | None) -> dict[str, Any]:
    runs = counted(one.count, "run")
    return {
        "said": f"{runs} {ENDS.get(one.outcome, one.outcome)} ({one.outcome})",
        "reason": one.reason,
        "traceback": traceback,
    }


def run_data(
    store: Reader, path: str, run: NamedRun, score: str, trace: Trace | None, draws: bool
) -> dict[str, Any]:
    """Return what the page shows of one run; ``draws``: with the parameters that were drawn for it."""
    finished = run.outcome == "finished"
    departures, case, note = _departures(store, run) if draws else ((), "", "")
    return {
        "kind": run.kind,
        "key": run.key,
        "draw": run.draw,
        "motion": run.motion,
        "ended": f"{score_words(score)[0]} {quantity(run.score, score)}" if finished else run.outcome,
        "departures": list(departures),
        "case": case,
        "note": note,
        "command": f"rigbench trace {shlex.quote(path)} {run.key[:12]}",
        "trace": None if trace is None else asdict(trace),
    }


def _departures(store: Reader, run: NamedRun) -> tuple[Sequence[tuple[str, float, str]], str, str]:
    """Return the drawn parameters that depart most, what the case states, and why there are none."""
    try:
        kept = store.kept(run.key).run
        drawn = drawn_of(kept)[:DEPARTURES]
    except RigbenchError as error:
        return (), "", f"What was drawn can't be told: {error}"
    return [(one.words, round(one.u, 3), one.amount) for one in drawn], case_words(kept), ""


def _number(value: float) -> float | None:
    """Return a number as JSON has it, to six digits; None for what is infinite."""
    return float(f"{value:.6g}") if math.isfinite(value) else None

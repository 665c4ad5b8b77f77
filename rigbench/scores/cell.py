"""A cell: what the draws of one law under one condition show."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rigbench.arm.arm import Floats
from rigbench.scores.anytime import anytime_interval, settled
from rigbench.scores.gather import FINISHED, CellKey, CellRuns, Gathered
from rigbench.scores.intervals import quantiles, wilson
from rigbench.scores.names import score_info
from rigbench.scores.results import Cell, Column, Measure, MotionCell, Tolerance

__all__ = ["CountedDraws", "build_cell", "counted", "verdict_of"]

Interval = Callable[[int, int], tuple[float, float]]


@dataclass(frozen=True, eq=False)
class CountedDraws:
    """The draws of a cell that count: those on which the machine gave its verdict in every motion."""

    draws: NDArray[np.int64]  # (D,) draw numbers, ascending
    finished: NDArray[np.bool_]  # (D,), every motion finished
    passed: NDArray[np.bool_]  # (D,), every motion finished and kept its limits
    worst: Floats  # (D, S), each score in its worst motion; inf if a motion did not finish


def counted(
    runs: CellRuns, names: Sequence[str], motions: Sequence[str], tolerance: Tolerance | None
) -> CountedDraws:
    """Return the draws that count, of runs of the M ``motions``.

    A draw passes when in every motion the run finished and each of the motion's limits holds ('at most')
    on the scores that the motion defines; without a tolerance, when every run finished. A score is that
    of the draw's worst motion, and infinite if any of its runs did not finish, except for scores about
    the host, of which such a run says nothing.
    """
    complete = runs.complete
    finished = np.all(runs.state[complete] == FINISHED, axis=1)
    scores = runs.scores[complete]
    worst = np.fmax.reduce(scores, axis=1, initial=np.nan)
    unfinished = np.ix_(~finished, ~_of_host(names))
    worst[unfinished] = np.inf
    passed = finished & np.all(_keeps_limits(scores, names, motions, tolerance), axis=1)
    return CountedDraws(runs.draws[complete], finished, passed, worst)


def _of_host(names: Sequence[str]) -> NDArray[np.bool_]:
    """Return which scores are about the host, (S,)."""
    infos = [score_info(name) for name in names]
    return np.array([info is not None and info.host for info in infos], dtype=bool)


def _keeps_limits(
    scores: Floats, names: Sequence[str], motions: Sequence[str], tolerance: Tolerance | None
) -> NDArray[np.bool_]:
    """Return whether each run keeps every limit of its motion on the scores it has: (D, M, S) to (D, M)."""
    limits = [{} if tolerance is None else tolerance.limits_for(motion) for motion in motions]
    ceiling = np.array([[own.get(name, np.inf) for name in names] for own in limits])
    kept: NDArray[np.bool_] = np.all(np.isnan(scores) | (scores <= ceiling), axis=2)
    return kept


def verdict_of(low: float, high: float, required_share: float) -> str:
    """Return 'keeps' if the interval reaches the required share, 'misses' if it lies below, else 'open'."""
    if low >= required_share:
        return "keeps"
    return "misses" if high < required_share else "open"


def build_cell(
    key: CellKey,
    column: Column,
    gathered: Gathered,
    *,
    motions: Sequence[str],
    tolerance: Tolerance | None,
    draws: int,
    possible: bool = True,
    anytime: bool = False,
    settled_after: int | None = None,
) -> tuple[Cell, CountedDraws]:
    """Return the cell of one law under one condition, and its draws that count.

    It is of ``draws`` draws if anything in it is random, or of the first ``settled_after`` where its column
    was settled after these. Unless it is ``possible``: then it plans none, and has no verdict. ``anytime``:
    its share's interval is to hold at any number of draws.

    Draws that lack a verdict of the machine, for now or for good, are ``incomplete`` and count neither
    for nor against the law. Where nothing is random the one run is exact: its share is 1 or 0 and its
    interval that point. A motion's own part counts the draws on which that motion has its verdict.
    """
    runs, names = gathered.cells[key], gathered.names
    if settled_after is not None:
        runs, draws = runs.first(settled_after), settled_after
    here = counted(runs, names, motions, tolerance)
    total, passed = len(here.draws), int(here.passed.sum())
    interval = (anytime_interval if anytime else wilson) if column.random else None
    share, low, high, verdict = _shares(passed, total, interval, tolerance if possible else None)
    planned = max(draws if possible else 0, len(runs.draws)) if column.random else int(possible)
    measures = _measures(here.worst, names, np.any(gathered.defined, axis=0), column.random)
    if len(motions) == 1:
        parts = {motions[0]: MotionCell(passed, total, measures)}
    else:
        parts = {
            motion: _motion_cell(index, motion, column, gathered, runs, tolerance)
            for index, motion in enumerate(motions)
        }
    cell = Cell(
        sheet=key[0],
        law=key[1],
        condition=key[2],
        level=column.level,
        draws=total,
        incomplete=planned - total,
        passed=passed,
        pass_share=share,
        pass_low=low,
        pass_high=high,
        verdict=verdict,
        measures=measures,
        motions=parts,
        unfinished=int(np.sum(~here.finished)),
        planned=planned,
        settled=settled_after is not None,
    )
    return cell, here


def _shares(
    passed: int, draws: int, interval: Interval | None, tolerance: Tolerance | None
) -> tuple[float | None, float | None, float | None, str]:
    """Return the pass share, its interval and the verdict; without an ``interval`` the one run is exact."""
    if tolerance is None:
        return None, None, None, ""
    if draws == 0:
        return None, None, None, "open"
    share = passed / draws
    low, high = interval(passed, draws) if interval else (share, share)
    if interval is anytime_interval:  # the very rule by which columns stop: no rounding error in between
        return share, low, high, settled(passed, draws, tolerance.required_share)
    return share, low, high, verdict_of(low, high, tolerance.required_share)


def _motion_cell(
    index: int, motion: str, column: Column, gathered: Gathered, runs: CellRuns, tolerance: Tolerance | None
) -> MotionCell:
    """Return the part of ``motion``, number ``index``, as if the cell had no other motion."""
    alone = CellRuns(runs.draws, runs.state[:, index : index + 1], runs.scores[:, index : index + 1])
    here = counted(alone, gathered.names, (motion,), tolerance)
    measures = _measures(here.worst, gathered.names, gathered.defined[index], column.random)
    return MotionCell(int(here.passed.sum()), len(here.draws), measures)


def _measures(
    worst: Floats, names: Sequence[str], defined: NDArray[np.bool_], random: bool
) -> Mapping[str, Measure]:
    """Return the measure of each score that is defined and of which the draws have a value."""
    if random:
        table = quantiles(worst)
    else:
        exact = worst[0] if len(worst) else np.full(len(names), np.nan)
        table = np.repeat(exact[:, None], 6, axis=1)
    return {
        name: Measure(*row)
        for name, row, exists in zip(names, table.tolist(), defined.tolist(), strict=True)
        if exists and row[0] == row[0]
    }

"""The runs of a campaign as columns: what a million rows are summed up from without an object for each."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rigbench.arm.arm import Floats
from rigbench.scores.row import HOST_OUTCOMES, MACHINE_OUTCOMES, Row

__all__ = ["FINISHED", "MISSING", "NO_DRAW", "STATES", "UNFINISHED", "RunTable", "table_of"]

MISSING, UNFINISHED, FINISHED = 0, 1, 2
"""State of a run: no verdict of the machine (yet), diverged or at a stop, finished."""

STATES = {
    **dict.fromkeys(HOST_OUTCOMES, MISSING),
    **dict.fromkeys(MACHINE_OUTCOMES, UNFINISHED),
    "finished": FINISHED,
}
"""The state of a run by its outcome."""

NO_DRAW = -1
"""Stands for the draw where nothing is random."""


@dataclass(frozen=True, eq=False)
class RunTable:
    """R runs with S scores, in any order; of two rows of the same run the later one counts.

    ``places`` holds each (sheet, law, motion, condition) that any run has, ``place`` the index of each run's.
    """

    names: tuple[str, ...]  # of the scores
    places: tuple[tuple[str, str, str, str], ...]
    place: NDArray[np.int64]  # (R,)
    draw: NDArray[np.int64]  # (R,), NO_DRAW where nothing is random
    state: NDArray[np.int8]  # (R,)
    scores: Floats  # (R, S); NaN where absent, and in runs that did not finish


def table_of(rows: Iterable[Row]) -> RunTable:
    """Return rows as a table. A score that is not a number counts as inf."""
    places: dict[tuple[str, str, str, str], int] = {}
    layouts: dict[tuple[str, ...], tuple[list[int], list[list[float]]]] = {}
    index: list[tuple[int, int, int]] = []
    for number, row in enumerate(rows):
        place = places.setdefault((row.sheet, row.law, row.motion, row.condition), len(places))
        index.append((place, NO_DRAW if row.draw is None else row.draw, STATES[row.outcome]))
        if row.outcome == "finished" and row.scores:
            numbers, values = layouts.setdefault(tuple(row.scores), ([], []))
            numbers.append(number)
            values.append(list(row.scores.values()))
    names = tuple(dict.fromkeys(name for layout in layouts for name in layout))
    column = {name: k for k, name in enumerate(names)}
    scores = np.full((len(index), len(names)), np.nan)
    for layout, (numbers, values) in layouts.items():
        block = np.array(values, dtype=float)
        block[np.isnan(block)] = np.inf
        scores[np.ix_(numbers, [column[name] for name in layout])] = block
    columns = np.array(index, dtype=np.int64).reshape(-1, 3).T
    return RunTable(names, tuple(places), columns[0], columns[1], columns[2].astype(np.int8), scores)

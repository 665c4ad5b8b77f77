"""Rows sorted into cells, as arrays."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from itertools import product

import numpy as np
from numpy.typing import NDArray

from rigbench.arm.arm import Floats
from rigbench.scores.names import in_display_order
from rigbench.scores.results import Column
from rigbench.scores.row import HOST_OUTCOMES, MACHINE_OUTCOMES, Row

__all__ = ["FINISHED", "MISSING", "UNFINISHED", "CellKey", "CellRuns", "Frame", "Gathered", "gather"]

CellKey = tuple[str, str, str]
"""Sheet, law, condition."""

MISSING, UNFINISHED, FINISHED = 0, 1, 2
"""State of a run: no verdict of the machine (yet), diverged or at a stop, finished."""

STATES = {
    **dict.fromkeys(HOST_OUTCOMES, MISSING),
    **dict.fromkeys(MACHINE_OUTCOMES, UNFINISHED),
    "finished": FINISHED,
}


@dataclass(frozen=True)
class Frame:
    """What spans the cells of a campaign, and the motions that every cell has."""

    sheets: tuple[str, ...]
    laws: tuple[str, ...]
    columns: tuple[Column, ...]
    motions: tuple[str, ...]

    def places(self) -> Iterator[tuple[str, str, Column]]:
        """Yield every sheet x law x column, in that order."""
        return product(self.sheets, self.laws, self.columns)


@dataclass(frozen=True, eq=False)
class CellRuns:
    """The runs of one cell: D draws of which there is any row, M motions, S scores."""

    draws: NDArray[np.int64]  # (D,) draw numbers, ascending; 0 where nothing is random
    state: NDArray[np.int8]  # (D, M)
    scores: Floats  # (D, M, S); NaN where absent

    @property
    def complete(self) -> NDArray[np.bool_]:
        """Which draws have the machine's verdict on every motion, (D,)."""
        complete: NDArray[np.bool_] = np.all(self.state != MISSING, axis=1)
        return complete


@dataclass(frozen=True, eq=False)
class Gathered:
    """All rows: the scores' names in display order, which motion defines which, and the cells."""

    names: tuple[str, ...]
    defined: NDArray[np.bool_]  # (M, S), whether the motion's runs have the score when they finish
    cells: Mapping[CellKey, CellRuns]  # every sheet x law x column


def gather(rows: Iterable[Row], frame: Frame, expected: Iterable[str] = ()) -> Gathered:
    """Sort rows into the cells of every sheet x law x column.

    Rows of other names are passed over; of two rows of the same run the later one counts. In a column
    where nothing is random the draw number has no meaning. A score that is not a number counts as inf.
    A motion defines the scores that any of its runs has; while none has finished, nothing tells which,
    and it is taken to define all: those met elsewhere and the ``expected`` ones.
    """
    random = [column.random for column in frame.columns]
    axes = (frame.sheets, frame.laws, tuple(column.name for column in frame.columns), frame.motions)
    sheet, law, column, motion = ({name: i for i, name in enumerate(axis)} for axis in axes)
    kept: list[Row] = []
    where: list[tuple[int, int, int, int, int, int]] = []
    for row in rows:
        try:
            place = sheet[row.sheet], law[row.law], column[row.condition], motion[row.motion]
        except KeyError:
            continue
        draw = row.draw if random[place[2]] and row.draw is not None else 0
        kept.append(row)
        where.append((*place, draw, STATES[row.outcome]))
    names, scores = _score_table(kept, expected)
    index = np.array(where, dtype=np.int64).reshape(-1, 6)
    number = (index[:, 0] * len(law) + index[:, 1]) * len(column) + index[:, 2]
    order = np.argsort(number, kind="stable")
    bounds = np.searchsorted(number[order], np.arange(len(sheet) * len(law) * len(column) + 1))
    cells = {
        (place[0], place[1], place[2].name): _cell(order[start:end], index, scores, len(motion))
        for place, start, end in zip(frame.places(), bounds[:-1], bounds[1:], strict=True)
    }
    defined = np.zeros((len(motion), len(names)), dtype=bool)
    for k in range(len(motion)):
        seen = np.any(~np.isnan(scores[index[:, 3] == k]), axis=0)
        defined[k] = seen | ~np.any(seen)
    return Gathered(names, defined, cells)


def _score_table(rows: Sequence[Row], expected: Iterable[str]) -> tuple[tuple[str, ...], Floats]:
    """Return all scores' names, also of those expected, and the rows' values (rows, S), NaN where absent."""
    layouts: dict[tuple[str, ...], tuple[list[int], list[list[float]]]] = {}
    for number, row in enumerate(rows):
        if row.outcome == "finished" and row.scores:
            numbers, values = layouts.setdefault(tuple(row.scores), ([], []))
            numbers.append(number)
            values.append(list(row.scores.values()))
    names = in_display_order([*(name for layout in layouts for name in layout), *expected])
    place = {name: column for column, name in enumerate(names)}
    table = np.full((len(rows), len(names)), np.nan)
    for layout, (numbers, values) in layouts.items():
        block = np.array(values, dtype=float)
        block[np.isnan(block)] = np.inf
        table[np.ix_(numbers, [place[name] for name in layout])] = block
    return names, table


def _cell(rows: NDArray[np.int64], index: NDArray[np.int64], scores: Floats, motions: int) -> CellRuns:
    """Lay the rows of one cell out by draw and motion."""
    draws, place = np.unique(index[rows, 4], return_inverse=True)
    state = np.full((len(draws), motions), MISSING, dtype=np.int8)
    cube = np.full((len(draws), motions, scores.shape[1]), np.nan)
    state[place, index[rows, 3]] = index[rows, 5]
    cube[place, index[rows, 3]] = scores[rows]
    return CellRuns(draws, state, cube)

"""The runs of every cell, in one reading of the store: the worst one, the median one, and what went wrong."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rigbench.arm.arm import Floats
from rigbench.campaign.reading import Reader
from rigbench.report.words import main_score
from rigbench.scores.gather import CellKey
from rigbench.scores.results import Results
from rigbench.scores.run_table import FINISHED, MISSING, NO_DRAW, STATES

__all__ = ["CellRuns", "NamedRun", "Trouble", "read_runs", "shown_scores"]

OUTCOMES = tuple(STATES)
KEY = np.dtype("S40")


@dataclass(frozen=True)
class NamedRun:
    """A run worth a look: ``kind`` is 'worst', 'median', or 'only' where nothing is random."""

    kind: str
    key: str
    draw: int | None
    motion: str
    outcome: str
    score: float  # the main score; inf if it did not finish
    wall_s: float  # how long it took on its host


@dataclass(frozen=True)
class Trouble:
    """An outcome other than 'finished', how often it came, and the first one's reason and key."""

    outcome: str
    count: int
    reason: str
    key: str


@dataclass(frozen=True, eq=False)
class CellRuns:
    """One cell's runs. ``values`` (n,) by motion and score are those of the runs with the machine's verdict,
    inf for one that did not finish."""

    named: tuple[NamedRun, ...]
    troubles: tuple[Trouble, ...]
    values: Mapping[tuple[str, str], Floats]


def shown_scores(results: Results) -> tuple[str, ...]:
    """Return the scores whose spread is shown: the main one and those with a limit."""
    limited = results.tolerance.limited if results.tolerance else ()
    return tuple(dict.fromkeys([main_score(results), *limited]))


def read_runs(store: Reader, results: Results) -> dict[CellKey, CellRuns]:
    """Return the runs of each cell of the results. Read within the same moment of the store as they were."""
    table = _Table(store, results)
    return {key: table.cell(key, rows) for key, rows in table.cells()}


class _Table:
    """All stored runs as columns, in the order of the plan."""

    def __init__(self, store: Reader, results: Results) -> None:
        self.names, self.motions = shown_scores(results), results.motions
        self._random = {column.name: column.random for column in results.columns}
        code = {outcome: number for number, outcome in enumerate(OUTCOMES)}
        parts: list[tuple[NDArray[Any], ...]] = []
        self._first: dict[tuple[int, int], str] = {}  # reason of the first run of a place and outcome
        for block in store.blocks(self.names, ("key", "reason", "wall_s")):
            outcome = np.array([code[one] for one in block.outcome], dtype=np.int8)
            for row in np.flatnonzero(outcome != code["finished"]).tolist():
                at = int(block.place[row]), int(outcome[row])
                self._first.setdefault(at, str(block.more["reason"][row]))
            wall = np.array([one or 0.0 for one in block.more["wall_s"]])
            keys = np.array(block.more["key"], dtype=KEY)
            parts.append((block.place, block.draw, outcome, keys, wall, block.scores))
        self.place, self.draw, self.outcome, self.key, self.wall, self.scores = _joined(
            parts, len(self.names)
        )
        self.state = np.array([STATES[outcome] for outcome in OUTCOMES])[self.outcome]
        self._places = store.places()
        self._cells = {(cell.sheet, cell.law, cell.condition): n for n, cell in enumerate(results.cells)}
        self._settled = {cell.key: cell.planned for cell in results.cells if cell.settled}

    def cells(self) -> Iterator[tuple[CellKey, NDArray[np.int64]]]:
        """Yield each cell with the numbers of its rows."""
        number = np.full(max(self._places, default=0) + 1, len(self._cells))
        self.motion = np.full(len(number), -1)
        for place, where in self._places.items():
            number[place] = self._cells.get((where.sheet, where.law, where.condition), len(self._cells))
            if where.motion in self.motions:
                self.motion[place] = self.motions.index(where.motion)
        cell = number[self.place]
        order = np.argsort(cell, kind="stable")
        bounds = np.searchsorted(cell[order], np.arange(len(self._cells) + 1))
        for key, n in self._cells.items():
            yield key, order[bounds[n] : bounds[n + 1]]

    def cell(self, key: CellKey, rows: NDArray[np.int64]) -> CellRuns:
        """Return what one cell's rows show; of a settled column's the draws after which it was settled."""
        if key in self._settled:
            rows = rows[self.draw[rows] < self._settled[key]]
        motion = self.motion[self.place[rows]]
        values = {}
        for m, motion_name in enumerate(self.motions):
            own = rows[(motion == m) & (self.state[rows] != MISSING)]
            for s, score in enumerate(self.names):
                found = np.where(self.state[own] == FINISHED, self.scores[own, s], np.inf)
                values[motion_name, score] = found[~np.isnan(found)]
        return CellRuns(tuple(self._named(key[2], rows)), tuple(self._troubles(rows)), values)

    def _named(self, condition: str, rows: NDArray[np.int64]) -> Iterator[NamedRun]:
        """Yield the worst run, as 'rigbench trace --worst' finds it, and that of the median draw."""
        draws, index = np.unique(self.draw[rows], return_inverse=True)
        verdicts = np.bincount(index, weights=self.state[rows] != MISSING, minlength=len(draws))
        counts = verdicts[index] == len(self.motions)
        rows, index = rows[counts], index[counts]
        if not len(rows):
            return
        main = np.nan_to_num(self.scores[rows, 0], nan=-np.inf, posinf=np.inf)
        badness = np.where(self.state[rows] == FINISHED, main, np.inf)
        random = self._random[condition]
        worst = int(np.argmax(badness))
        yield self._run("worst" if random else "only", rows[worst], badness[worst])
        of_draw = np.full(len(draws), -np.inf)
        np.maximum.at(of_draw, index, badness)
        present = np.unique(index)
        ordered = present[np.argsort(of_draw[present], kind="stable")]
        middle = ordered[(len(ordered) - 1) // 2]
        median = int(np.argmax(np.where(index == middle, badness, -np.inf)))
        if random and index[median] == middle and median != worst:
            yield self._run("median", rows[median], badness[median])

    def _run(self, kind: str, row: int, score: float) -> NamedRun:
        where = self._places[int(self.place[row])]
        draw = int(self.draw[row])
        return NamedRun(
            kind,
            self.key[row].decode(),
            None if draw == NO_DRAW else draw,
            where.motion,
            OUTCOMES[int(self.outcome[row])],
            float(score),
            float(self.wall[row]),
        )

    def _troubles(self, rows: NDArray[np.int64]) -> Iterator[Trouble]:
        for number, outcome in enumerate(OUTCOMES):
            own = rows[self.outcome[rows] == number]
            if outcome != "finished" and len(own):
                first = own[0]
                reason = self._first[int(self.place[first]), number]
                yield Trouble(outcome, len(own), reason, self.key[first].decode())


def _joined(parts: Sequence[tuple[NDArray[Any], ...]], scores: int) -> tuple[NDArray[Any], ...]:
    """Return the columns of all blocks, each in one piece."""
    whole, number = np.empty(0, np.int64), np.empty(0)
    nothing = (whole, whole, np.empty(0, np.int8), np.empty(0, KEY), number, np.empty((0, scores)))
    return tuple(np.concatenate(column) for column in zip(nothing, *parts, strict=True))

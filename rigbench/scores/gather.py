"""Runs sorted into cells, as arrays."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass
from itertools import product

import numpy as np
from numpy.typing import NDArray

from rigbench.arm.arm import Floats
from rigbench.scores.names import in_display_order
from rigbench.scores.results import CellKey, Column
from rigbench.scores.run_table import FINISHED, MISSING, UNFINISHED, RunTable

__all__ = ["FINISHED", "MISSING", "UNFINISHED", "CellKey", "CellRuns", "Frame", "Gathered", "gather"]


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

    def first(self, draws: int) -> CellRuns:
        """Return the runs of the first so many draws."""
        own = self.draws < draws
        return CellRuns(self.draws[own], self.state[own], self.scores[own])


class _Cells(Mapping[CellKey, CellRuns]):
    """The cells of a table, each of which is laid out when it is asked for: the scores stand there once."""

    def __init__(self, table: RunTable, frame: Frame, names: Iterable[str]) -> None:
        axes = (frame.sheets, frame.laws, frame.motions, tuple(column.name for column in frame.columns))
        keys = [(sheet, law, column.name) for sheet, law, column in frame.places()]
        self._cell = {key: number for number, key in enumerate(keys)}
        self._names, self._motions, self._scores = tuple(names), len(frame.motions), table.scores
        self._column = [self._names.index(name) for name in table.names]
        at = _indices(table.places, axes)  # (P, 4)
        cell = (at[:, 0] * len(axes[1]) + at[:, 1]) * len(axes[3]) + at[:, 3]
        cell[np.any(at < 0, axis=1)] = len(keys)
        number, self._motion = cell[table.place], at[table.place, 2]
        random = np.array([name in {c.name for c in frame.columns if c.random} for *_, name in table.places])
        self._draw = np.where(random[table.place], np.maximum(table.draw, 0), 0)
        self._state = table.state
        self._order = np.argsort(number, kind="stable")
        self._bounds = np.searchsorted(number[self._order], np.arange(len(keys) + 1))

    def __getitem__(self, key: CellKey) -> CellRuns:
        """Lay the runs of one cell out by draw and motion."""
        cell = self._cell[key]
        rows = self._order[self._bounds[cell] : self._bounds[cell + 1]]
        draws, place = np.unique(self._draw[rows], return_inverse=True)
        motion = self._motion[rows]
        state = np.full((len(draws), self._motions), MISSING, dtype=np.int8)
        cube = np.full((len(draws), self._motions, len(self._names)), np.nan)
        state[place, motion] = self._state[rows]
        cube[place[:, None], motion[:, None], self._column] = self._scores[rows]
        return CellRuns(draws, state, cube)

    def __iter__(self) -> Iterator[CellKey]:
        return iter(self._cell)

    def __len__(self) -> int:
        return len(self._cell)

    def defined(self) -> NDArray[np.bool_]:
        """Return which scores each motion's runs have, (M, S)."""
        defined = np.zeros((self._motions, len(self._names)), dtype=bool)
        kept = np.zeros(len(self._order), dtype=bool)
        kept[self._order[: self._bounds[-1]]] = True
        present = ~np.isnan(self._scores)
        for k in range(self._motions):
            seen = np.any(present[kept & (self._motion == k)], axis=0)
            defined[k, self._column] = seen
            defined[k] |= ~np.any(seen)
        return defined


@dataclass(frozen=True, eq=False)
class Gathered:
    """All runs: the scores' names in display order, which motion defines which, and the cells."""

    names: tuple[str, ...]
    defined: NDArray[np.bool_]  # (M, S), whether the motion's runs have the score when they finish
    cells: Mapping[CellKey, CellRuns]  # every sheet x law x column


def gather(table: RunTable, frame: Frame, expected: Iterable[str] = ()) -> Gathered:
    """Sort runs into the cells of every sheet x law x column.

    Runs of other names are passed over; of two rows of the same run the later one counts. In a column
    where nothing is random the draw number has no meaning.
    A motion defines the scores that any of its runs has; while none has finished, nothing tells which,
    and it is taken to define all: those met elsewhere and the ``expected`` ones.
    """
    names = in_display_order([*table.names, *expected])
    cells = _Cells(table, frame, names)
    return Gathered(names, cells.defined(), cells)


def _indices(
    places: Iterable[tuple[str, str, str, str]], axes: tuple[tuple[str, ...], ...]
) -> NDArray[np.int64]:
    """Return the index of each name of each place on its axis, (P, 4); -1 for what is not on it."""
    index = [{name: i for i, name in enumerate(axis)} for axis in axes]
    found = [[known.get(name, -1) for known, name in zip(index, place, strict=True)] for place in places]
    return np.array(found, dtype=np.int64).reshape(-1, len(axes))

"""A store opened for reading from Python."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import fields
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from rigbench.campaign.closable import Closable
from rigbench.campaign.columns import NUMBER, WHOLE, Columns, TableColumn
from rigbench.campaign.reading import Reader
from rigbench.errors import Fault, InputFaults, nearest
from rigbench.scores.results import Measure, Results
from rigbench.scores.run_table import NO_DRAW

if TYPE_CHECKING:
    import pandas

__all__ = ["OpenedStore", "open_store"]

CELL_TEXT = ("sheet", "law", "condition", "verdict")
CELL_COUNTS = ("draws", "incomplete", "unfinished", "planned", "passed")
CELL_NUMBERS = ("level", "pass_share", "pass_low", "pass_high")

EMPTY = {NUMBER: np.dtype(float), WHOLE: np.dtype(np.int64)}


def open_store(path: str | Path) -> OpenedStore:
    """Open a store that 'rigbench run' filled, for reading alone; StoreError if there is none at ``path``.

    A campaign may go on meanwhile: each call shows the store as it is at that moment.
    """
    return OpenedStore(Reader.open_for_reading(path))


class OpenedStore(Closable):
    """What is stored of a campaign. Use it in a ``with``, or close it. Nothing is written to the file."""

    def __init__(self, reader: Reader) -> None:
        self._reader = reader

    def columns(self, studies: bool = False) -> tuple[TableColumn, ...]:
        """Return the columns of :meth:`runs`, each with its name, kind, unit and meaning."""
        with self._reader.one_moment():
            return Columns(self._reader, studies).all

    def runs(self, *names: str, studies: bool = False) -> Mapping[str, NDArray[Any]]:
        """Return the stored runs as columns by name, (R,) each, in the order of the plan.

        All columns, or those of ``names`` alone. With ``studies`` their runs follow those of the matrix, and
        the column study says which is which: they were chosen by how others came out, so no share or median
        of theirs is that of a cell. Text is an array of str objects; numbers are float64, NaN
        where there is none, inf where it is infinite; ``draw`` is int64, -1 where nothing is random.
        InputFaults, all at once, if there are no columns of these names.
        """
        with self._reader.one_moment():
            columns = Columns(self._reader, studies)
            kinds = {column.name: column.kind for column in columns.all}
            self._check(names, list(kinds))
            wanted = tuple(dict.fromkeys(names)) or tuple(kinds)
            found: dict[str, list[NDArray[Any]]] = {name: [] for name in wanted}
            for block in columns.blocks(wanted):
                for name, values in block.items():
                    found[name].append(values)
        return {
            # One column after the other, so that no more than one is there twice.
            name: np.concatenate(found.pop(name) or [np.empty(0, EMPTY.get(kinds[name], np.dtype(object)))])
            for name in wanted
        }

    def frame(self, *names: str, studies: bool = False) -> pandas.DataFrame:
        """Return what :meth:`runs` does as a pandas DataFrame; ``draw`` is missing where nothing is random.

        InputFaults if pandas is not installed.
        """
        frame = self._framed("frame()", "runs()", lambda: self.runs(*names, studies=studies))
        if "draw" in frame:
            frame["draw"] = frame["draw"].astype("Int64").mask(frame["draw"] == NO_DRAW)
        return frame

    def results(self) -> Results:
        """Return the cells and standings: all that the results matrix and its JSON show."""
        return self._reader.results()

    def cells(self) -> Mapping[str, NDArray[Any]]:
        """Return the cells of the results matrix as columns by name, (C,) each, in the matrix's order.

        What a cell is: sheet, law, condition, level, and its counts, shares and verdict as the matrix has
        them; then each score's median and 95th percentile with their intervals (``tool_peak_mm.median``,
        ``.median_low``, ``.median_high``, ``.p95`` ...). NaN where there is none, inf where it is infinite.
        """
        cells = self.results().cells
        scores = dict.fromkeys(name for cell in cells for name in cell.measures)
        columns: dict[str, NDArray[Any]] = {}
        for name in CELL_TEXT:
            columns[name] = np.array([getattr(cell, name) for cell in cells], dtype=object)
        for name in CELL_COUNTS:
            columns[name] = np.array([getattr(cell, name) for cell in cells], dtype=np.int64)
        for name in CELL_NUMBERS:
            columns[name] = np.array([_number(getattr(cell, name)) for cell in cells], dtype=float)
        for score in scores:
            for part in (field.name for field in fields(Measure)):
                found = [getattr(cell.measures.get(score), part, None) for cell in cells]
                columns[f"{score}.{part}"] = np.array([_number(value) for value in found], dtype=float)
        return columns

    def cells_frame(self) -> pandas.DataFrame:
        """Return what :meth:`cells` does as a pandas DataFrame; InputFaults if pandas is not installed."""
        return self._framed("cells_frame()", "cells()", self.cells)

    def _framed(
        self, asked: str, instead: str, columns: Callable[[], Mapping[str, NDArray[Any]]]
    ) -> pandas.DataFrame:
        try:
            import pandas
        except ImportError:
            problem = "needs the package pandas, which is not installed"
            expected = f"pip install pandas, or {instead}"
            raise InputFaults.one(self._reader.path, asked, problem, expected) from None
        return pandas.DataFrame(dict(columns()))

    def close(self) -> None:
        """Close the file."""
        self._reader.close()

    def _check(self, names: tuple[str, ...], known: list[str]) -> None:
        faults = [
            Fault(str(self._reader.path), None, "", f"there is no column '{name}'", near=nearest(name, known))
            for name in dict.fromkeys(names)
            if name not in known
        ]
        if faults:
            raise InputFaults(faults)


def _number(value: float | None) -> float:
    return np.nan if value is None else float(value)

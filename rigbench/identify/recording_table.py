"""Tables of recordings as they stand in CSV and Parquet files, and the faults of their cells."""

from __future__ import annotations

import csv
import io
import math
from collections.abc import Set
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.errors import Fault, InputFaults, counted
from rigbench.yamlfile import read_text

__all__ = ["ENOUGH", "Table", "read_table", "told"]

MOST_FAULTS = 20
"""Faults of cells and times are told up to this number, and the rest are counted."""

ENOUGH = 10_000
"""No more faults of cells are looked for beyond this number."""

NUMBER = "a finite number"


@dataclass(frozen=True, eq=False)
class Table:
    """A recording as it stands in its file, in the file's own units."""

    file: str
    names: tuple[str, ...]
    numbers: Floats  # (N, columns), nan where a cell holds no number, or was not asked for
    lines: Floats | None  # (N,) line of each row; None in a file without lines
    header: int = 1  # line of the names

    def column(self, name: str) -> Floats:
        """Return the column of this name, (N,)."""
        return self.numbers[:, self.names.index(name)]

    def fault(self, row: int, name: str, problem: str, expected: str) -> Fault:
        """Return a fault of a column at a row."""
        if self.lines is None:
            return Fault(self.file, None, f"row {row + 1}, {name}", problem, expected)
        return Fault(self.file, int(self.lines[row]), name, problem, expected)

    def column_fault(self, name: str, problem: str, expected: str, near: str | None = None) -> Fault:
        """Return a fault of a whole column, addressed to the header."""
        return Fault(self.file, None if self.lines is None else self.header, name, problem, expected, near)


def read_table(file: str, known: Set[str]) -> tuple[Table, list[Fault]]:
    """Return the table of a file, and the faults of the cells in its ``known`` columns.

    A name that ends in .parquet is read by pyarrow, anything else as CSV. Raises InputFaults where there is
    no table.
    """
    table, faults = (_parquet if file.lower().endswith(".parquet") else _csv)(file, known)
    return table, told(file, faults)


def told(file: str, faults: list[Fault]) -> list[Fault]:
    """Return the first faults, and one that counts the rest."""
    if len(faults) <= MOST_FAULTS:
        return faults
    more = f"{len(faults) - MOST_FAULTS} more" if len(faults) < ENOUGH else "many more"
    rest = f"and {more} faults of this kind"
    return [*faults[:MOST_FAULTS], Fault(file, None, "", rest)]


def _csv(file: str, known: Set[str]) -> tuple[Table, list[Fault]]:
    text = read_text(Path(file), file, "the recording").removeprefix("\ufeff")
    lines = csv.reader(io.StringIO(text, newline=None), skipinitialspace=True)
    try:
        rows = [(lines.line_num, cells) for cells in lines if any(map(str.strip, cells))]
    except csv.Error as error:
        raise InputFaults.one(file, "", f"no table: {error}", "CSV", lines.line_num) from None
    if not rows:
        raise InputFaults.one(file, "", "no table in it", "a header and rows of numbers")
    names = tuple(cell.strip() for cell in rows[0][1])
    numbers = np.full((len(rows) - 1, len(names)), np.nan)
    faults: list[Fault] = []
    for row, (line, cells) in enumerate(rows[1:]):
        if len(cells) == len(names):
            numbers[row] = [_number(cell) for cell in cells]
        if len(faults) < ENOUGH and not np.isfinite(numbers[row]).all():
            faults += _row_faults(file, line, names, cells, numbers[row], known)
    return Table(file, names, numbers, np.array([k for k, _ in rows[1:]], float), rows[0][0]), faults


def _row_faults(
    file: str, line: int, names: tuple[str, ...], cells: list[str], numbers: Floats, known: Set[str]
) -> list[Fault]:
    """Return what is wrong with a row of CSV: one fault for all of it, or one for each cell."""
    if len(cells) != len(names):
        return [Fault(file, line, "", counted(len(cells), "cell"), f"{len(names)}, as in the header")]
    if np.isnan(numbers).all():
        return [Fault(file, line, "", f"no row of numbers: '{','.join(cells)[:60]}'", "one header alone")]
    faults = []
    for name, cell, number in zip(names, cells, numbers, strict=True):
        if name in known and not math.isfinite(number):
            problem = f"'{cell.strip()[:40]}' is no number" if cell.strip() else "empty"
            faults.append(Fault(file, line, name, problem, NUMBER))
    return faults


def _number(cell: str) -> float:
    """Return the number of a cell, nan where it is none; Python's own 1_000 is none."""
    try:
        return math.nan if "_" in cell else float(cell)
    except ValueError:
        return math.nan


def _parquet(file: str, known: Set[str]) -> tuple[Table, list[Fault]]:
    try:
        from pyarrow import ArrowException
        from pyarrow.parquet import read_table
    except ImportError:
        problem = "Parquet needs the package pyarrow, which is not installed"
        raise InputFaults.one(file, "", problem, "pip install 'rigbench[parquet]', or a .csv file") from None
    try:
        read = read_table(file)
    except (OSError, ArrowException) as error:
        problem = f"can't be read as a table: {str(error).splitlines()[0]}"
        raise InputFaults.one(file, "", problem, "a Parquet file") from None
    names = tuple(read.column_names)
    numbers, faults = np.full((read.num_rows, len(names)), np.nan), []
    table = Table(file, names, numbers, None)
    for at, (name, column) in enumerate(zip(names, read.columns, strict=True)):
        if name not in known:
            continue
        if not _numeric(column.type):
            faults.append(table.column_fault(name, f"a column of {column.type}", "a column of numbers"))
            continue
        numbers[:, at] = np.asarray(column.to_numpy(), float)
        missing = np.flatnonzero(~np.isfinite(numbers[:, at]))[:ENOUGH]
        faults += [table.fault(int(row), name, "no number", NUMBER) for row in missing]
    return table, faults


def _numeric(kind: Any) -> bool:
    """Tell whether a column of this Arrow type holds numbers: neither text, nor times, nor yes and no."""
    from pyarrow import types

    return bool(types.is_integer(kind) or types.is_floating(kind) or types.is_decimal(kind))

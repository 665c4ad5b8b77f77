"""The stored runs as a table for other programs, one row a run: as CSV, or as Parquet."""

from __future__ import annotations

import csv
from collections.abc import Sequence
from typing import TYPE_CHECKING, Any, BinaryIO, TextIO

import numpy as np

from rigbench.campaign.blocks import SIZE
from rigbench.campaign.columns import NUMBER, WHOLE, Columns, TableColumn, Values
from rigbench.campaign.reading import Reader
from rigbench.errors import InputFaults
from rigbench.scores.run_table import NO_DRAW

if TYPE_CHECKING:
    from types import ModuleType

__all__ = ["check_parquet", "export_columns", "export_csv", "export_parquet"]

GROUP = 2**15
"""Rows of a row group of Parquet: what is in memory at once."""


def export_csv(store: Reader, stream: TextIO, studies: bool = False) -> int:
    """Write the stored runs as CSV in the order of the plan, and return how many there are.

    With ``studies`` their runs follow. The columns are those of :class:`Columns`. Infinite is 'inf', what
    there is not is empty, and numbers read back as exactly what they were.
    """
    out = csv.writer(stream, lineterminator="\n")
    written = 0
    with store.one_moment():
        columns = Columns(store, studies)
        out.writerow([column.name for column in columns.all])
        for block in columns.blocks(size=SIZE):
            lists = [_plain(column, block[column.name]) for column in columns.all]
            out.writerows(zip(*lists, strict=True))
            written += len(lists[0])
    return written


def export_columns(store: Reader, stream: TextIO, studies: bool = False) -> None:
    """Write the name, unit and meaning of each column of the table as CSV."""
    out = csv.writer(stream, lineterminator="\n")
    out.writerow(["name", "unit", "meaning"])
    with store.one_moment():
        out.writerows([column.name, column.unit, column.meaning] for column in Columns(store, studies).all)


def check_parquet(file: str) -> None:
    """Raise InputFaults if the package that writes Parquet is not installed."""
    try:
        import pyarrow.parquet  # noqa: F401
    except ImportError:
        problem = "Parquet needs the package pyarrow, which is not installed"
        raise InputFaults.one(
            file, "-o", problem, "pip install 'rigbench[parquet]', or a .csv file"
        ) from None


def export_parquet(store: Reader, stream: BinaryIO, studies: bool = False) -> int:
    """Write the stored runs as Parquet in the order of the plan, and return how many there are.

    As :func:`export_csv`, but what there is not is null. The metadata of a field have its unit and meaning.
    There are never more rows in memory than a row group has.
    """
    import pyarrow
    from pyarrow.parquet import ParquetWriter

    written = 0
    with store.one_moment():
        columns = Columns(store, studies)
        schema = pyarrow.schema([_field(pyarrow, column) for column in columns.all])
        with ParquetWriter(stream, schema) as out:
            for block in columns.blocks(size=GROUP):
                arrays = [_array(pyarrow, column, block[column.name]) for column in columns.all]
                out.write_batch(pyarrow.record_batch(arrays, schema=schema))
                written += len(arrays[0])
    return written


def _plain(column: TableColumn, values: Values) -> Sequence[object]:
    """Return a column as a list, None where there is nothing."""
    plain: list[object] = values.tolist()
    if column.kind == NUMBER:
        return [
            None if absent else value for value, absent in zip(plain, np.isnan(values).tolist(), strict=True)
        ]
    return [None if value == NO_DRAW else value for value in plain] if column.kind == WHOLE else plain


def _field(pyarrow: ModuleType, column: TableColumn) -> Any:
    kind = {NUMBER: pyarrow.float64(), WHOLE: pyarrow.int64()}.get(column.kind, pyarrow.string())
    return pyarrow.field(column.name, kind, metadata={"unit": column.unit, "meaning": column.meaning})


def _array(pyarrow: ModuleType, column: TableColumn, values: Values) -> Any:
    if column.kind == NUMBER:
        return pyarrow.array(values, mask=np.isnan(values))
    if column.kind == WHOLE:
        return pyarrow.array(values, mask=values == NO_DRAW)
    return pyarrow.array(values, type=pyarrow.string())

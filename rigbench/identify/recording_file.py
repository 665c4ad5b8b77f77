"""Recordings as files: CSV or Parquet with one documented header.

``t_s`` [s], then for each joint of the arm, in any order: ``q_deg.<joint>`` [deg], ``tau_nm.<joint>`` [N m,
of the motor, at the joint] and, if velocities were measured, ``v_deg_s.<joint>`` [deg/s]. For a prismatic
joint: ``q_mm.``, ``tau_n.``, ``v_mm_s.``. Rows are at equal steps of time; a torque is that of the
row's instant.
"""

from __future__ import annotations

import csv
import io
import math
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from rigbench.arm.arm import PRISMATIC, Arm, Floats
from rigbench.errors import Fault, InputFaults, counted, nearest
from rigbench.identify.recording import Recording
from rigbench.motion.limits import to_si
from rigbench.yamlfile import read_text

__all__ = ["Table", "column_names", "read_recording", "write_recording"]

TIME = "t_s"
MOST_FAULTS = 20
"""Faults of cells and times are told up to this number, and the rest are counted."""

GAP, CLOSE = 1.5, 0.5
"""A step of time beyond so many median ones is a gap; one below this share comes too soon."""

LEAST_ROWS = 50
"""Fewer rows are no motion."""


@dataclass(frozen=True, eq=False)
class Table:
    """A recording as it stands in its file: the arm's columns, in the file's own units."""

    file: str
    names: tuple[str, ...]
    numbers: Floats  # (N, columns), nan where a cell holds no number
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


def column_names(arm: Arm) -> dict[str, tuple[str, ...]]:
    """Return the columns of positions ('q'), velocities ('v') and torques ('tau'), in the arm's order."""
    slides = arm.kinds == PRISMATIC
    units = {"q": ("q_deg", "q_mm"), "v": ("v_deg_s", "v_mm_s"), "tau": ("tau_nm", "tau_n")}
    return {
        what: tuple(f"{pair[int(s)]}.{joint}" for joint, s in zip(arm.joints, slides, strict=True))
        for what, pair in units.items()
    }


def read_recording(path: Path | str, arm: Arm) -> tuple[Recording, Table]:
    """Read a recording of an arm, .parquet by pyarrow and anything else as CSV.

    Raises InputFaults, addressed by line (by row in Parquet) and column, for all of these at once: columns
    that are missing, twice there or unknown, velocities of some joints alone; cells without a finite number;
    times that do not rise, a gap, a step too short; fewer than 50 rows.
    """
    file = str(path)
    table, faults = _read_parquet(file) if file.endswith(".parquet") else _read_csv(file)
    names = column_names(arm)
    faults = _header_faults(table, names) + faults
    if TIME in table.names:
        faults += _time_faults(table)
    if len(table.numbers) < LEAST_ROWS:
        faults.append(
            Fault(file, None, "", f"too short: {counted(len(table.numbers), 'row')}", f"{LEAST_ROWS} or more")
        )
    if faults:
        raise InputFaults(faults)
    si = to_si(arm)

    def columns(what: str) -> Floats:
        return np.column_stack([table.column(name) for name in names[what]])

    v = columns("v") * si if names["v"][0] in table.names else None
    return Recording(file, table.column(TIME), columns("q") * si, v, columns("tau")), table


def write_recording(path: Path | str, arm: Arm, recording: Recording) -> None:
    """Write a recording as CSV, in numbers that read back as what they were (positions: to rounding)."""
    names, si = column_names(arm), to_si(arm)
    parts = {"q": recording.q / si, "tau": recording.torque}
    if recording.v is not None:
        parts["v"] = recording.v / si
    with Path(path).open("w", newline="", encoding="utf-8") as stream:
        out = csv.writer(stream, lineterminator="\n")
        out.writerow([TIME, *(name for what in parts for name in names[what])])
        out.writerows(np.column_stack([recording.t, *parts.values()]).tolist())


def _read_csv(file: str) -> tuple[Table, list[Fault]]:
    """Return the table of a CSV file and the faults of its cells."""
    text = read_text(Path(file), file, "the recording").removeprefix("\ufeff")
    lines = [(k, line) for k, line in enumerate(io.StringIO(text, newline=None), 1) if line.strip()]
    if not lines:
        raise InputFaults.one(file, "", "no table in it", "a header and rows of numbers")
    names = tuple(cell.strip() for cell in lines[0][1].split(","))
    numbers, faults = np.full((len(lines) - 1, len(names)), np.nan), []
    for row, (line, cells) in enumerate((k, text.split(",")) for k, text in lines[1:]):
        if len(cells) != len(names):
            problem, expected = counted(len(cells), "cell"), f"{len(names)}, as in the header"
            faults.append(Fault(file, line, "", problem, expected))
            continue
        for at, cell in enumerate(cells):
            numbers[row, at] = _number(cell)
            if not math.isfinite(numbers[row, at]):
                problem = f"'{cell.strip()[:40]}' is no number" if cell.strip() else "empty"
                faults.append(Fault(file, line, names[at], problem, "a finite number"))
    return Table(file, names, numbers, np.array([k for k, _ in lines[1:]], float), lines[0][0]), _told(
        file, faults
    )


def _number(cell: str) -> float:
    try:
        return float(cell)
    except ValueError:
        return math.nan


def _told(file: str, faults: list[Fault]) -> list[Fault]:
    """Return the first faults, and one that counts the rest."""
    if len(faults) <= MOST_FAULTS:
        return faults
    return [
        *faults[:MOST_FAULTS],
        Fault(file, None, "", f"and {len(faults) - MOST_FAULTS} more faults of this kind"),
    ]


def _read_parquet(file: str) -> tuple[Table, list[Fault]]:
    """Return the table of a Parquet file and the faults of its cells."""
    try:
        from pyarrow import ArrowException
        from pyarrow.parquet import read_table
    except ImportError:
        problem = "Parquet needs the package pyarrow, which is not installed"
        raise InputFaults.one(file, "", problem, "pip install 'rigbench[parquet]', or a .csv file") from None
    try:
        read = read_table(file)
        columns = [np.asarray(column.to_numpy(), float) for column in read.columns]
    except (OSError, ArrowException, ValueError, TypeError) as error:
        problem = f"can't be read as a table of numbers: {str(error).splitlines()[0]}"
        raise InputFaults.one(file, "", problem, "a Parquet file whose columns are numbers") from None
    table = Table(file, tuple(read.column_names), np.column_stack(columns), None)
    rows, places = np.nonzero(~np.isfinite(table.numbers))
    faults = [
        table.fault(int(row), table.names[at], "no number", "a finite number")
        for row, at in zip(rows[: MOST_FAULTS + 1], places[: MOST_FAULTS + 1], strict=True)
    ]
    return table, _told(file, faults)


def _header_faults(table: Table, names: dict[str, tuple[str, ...]]) -> list[Fault]:
    """Return what is wrong with the names of the columns."""
    known = [TIME, *(name for part in names.values() for name in part)]
    some = any(name in table.names for name in names["v"])
    needed = [TIME, *names["q"], *names["tau"], *(names["v"] if some else ())]
    faults = []
    for name in dict.fromkeys(table.names):
        if name not in known:
            near = nearest(name, [other for other in known if other not in table.names])
            faults.append(table.column_fault(name, "no such column", "columns of the arm's joints", near))
        elif table.names.count(name) > 1:
            faults.append(table.column_fault(name, "two columns of this name", "one"))
    missing = [name for name in needed if name not in table.names]
    return faults + [table.column_fault(name, "missing", "a column for every joint") for name in missing]


def _time_faults(table: Table) -> list[Fault]:
    """Return where times do not go on in equal steps."""
    t = table.column(TIME)
    step = np.diff(t)
    if not np.isfinite(t).all() or not step.size:
        return []
    usual = float(np.median(step))
    checks: list[tuple[NDArray[np.bool_], Callable[[int], str]]] = [
        (step <= 0, lambda k: f"{t[k + 1]:.6g} s after {t[k]:.6g} s"),
        (step > GAP * usual, lambda k: f"a gap of {step[k]:.4g} s after {t[k]:.6g} s"),
        ((step > 0) & (step < CLOSE * usual), lambda k: f"a step of {step[k]:.4g} s only"),
    ]
    faults = []
    for wrong, said in checks:
        rows = np.flatnonzero(wrong)
        expected = f"equal steps, as most are: {usual:.4g} s"
        faults += [table.fault(int(k) + 1, TIME, said(int(k)), expected) for k in rows[: MOST_FAULTS + 1]]
    return _told(table.file, sorted(faults, key=lambda fault: fault.line or 0))

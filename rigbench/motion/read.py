"""Reading a motion's table from CSV text."""

from __future__ import annotations

import csv
import io
import math
import re
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rigbench.arm.arm import Arm, Floats
from rigbench.errors import Fault, InputFaults, counted, nearest
from rigbench.motion.limits import SLACK, beyond, passings, shown, to_si, unit_of
from rigbench.motion.table import LEAST_STEP_S, TableMotion

__all__ = ["read_table"]

Line = tuple[int, list[str]]

TIME = "t_s"
NUMBER = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)(e[+-]?\d+)?", re.ASCII | re.IGNORECASE)
MOST_NUMBER = 1e12
"""Largest time, angle or length that makes sense to anyone; beyond it differences lose their digits."""

MOST_FAULTS = 20
"""Faults of a table's cells and times are told up to this number, and the rest are counted."""

MOST_SPEED = {"deg": math.degrees(10), "mm": 2000.0}
"""Speed [deg/s or mm/s] that makes a step a jump where the joint has no speed limit: 10 rad/s, 2 m/s."""

PARTS = 10
"""Parts into which each step between rows is cut to see whether the spline keeps the limits."""


@dataclass(frozen=True)
class _Sheet:
    """What the checks of a table's rows have in common."""

    file: str
    arm: Arm
    lines: NDArray[np.int64]  # line of each row

    def fault(self, row: int | np.intp, key: str, problem: str, expected: str) -> Fault:
        return Fault(self.file, int(self.lines[row]), key, problem, expected)


def read_table(file: str, text: str, arm: Arm, pace: float = 1.0) -> TableMotion:
    """Read a motion for an arm from CSV text.

    The header is ``t_s`` [s] and then the arm's joints by name, in any order, and each row holds as
    many numbers: degrees, or mm for a prismatic joint. The first time may be any; empty lines are
    skipped. ``pace`` as in :class:`rigbench.motion.table.TableMotion`; speeds are judged at it.

    Raises InputFaults, addressed by ``file`` and line, for all of these at once: a header that names
    other columns; a row with more or fewer cells, with what is no finite number, or at a time that
    does not rise; a position beyond the joint's limits; a jump, which is a step that needs more than
    the joint's speed limit, or than 10 rad/s or 2 m/s if it has none. Where none of these is left: a
    spline that passes a limit of position or speed between the rows.
    """
    lines = list(_lines(text))
    if not lines:
        raise InputFaults.one(file, "", "no table in it", _header(arm))
    column, faults = _columns(file, lines[0], arm)
    sheet = _Sheet(file, arm, np.array([line for line, _ in lines[1:]], np.int64))
    table, bad = _numbers(file, lines[1:], lines[0][1])
    bad += _check_times(sheet, table[:, 0])
    if len(bad) > MOST_FAULTS:
        rest = len(bad) - MOST_FAULTS
        bad = [*bad[:MOST_FAULTS], Fault(file, None, "", f"and {rest} more faults of cells and times")]
    faults += bad
    if len(lines) < 3:
        faults.append(Fault(file, lines[-1][0], "", counted(len(lines) - 1, "row"), "2 or more"))
    for joint, at in column.items():
        i = arm.joints.index(joint)
        faults += _check_positions(sheet, table[:, at], i)
        faults += _check_steps(sheet, table[:, 0] / pace, table[:, at], i)
    if faults:
        raise InputFaults(sorted(faults, key=lambda fault: (fault.line is None, fault.line)))
    rows = table[:, [column[joint] for joint in arm.joints]] * to_si(arm)
    motion = TableMotion(tuple(table[:, 0].tolist()), tuple(map(tuple, rows.tolist())), pace)
    if between := _check_between(sheet, motion):
        raise InputFaults(between)
    return motion


def _lines(text: str) -> Iterator[Line]:
    """Yield number and cells of every line that is not empty."""
    for number, line in enumerate(io.StringIO(text.removeprefix("\ufeff"), newline=None), 1):
        if line.strip():
            try:
                yield number, [cell.strip() for cell in next(csv.reader([line]))]
            except csv.Error:  # a cell beyond the reader's size: no number is that long
                yield number, [line.strip()]


def _header(arm: Arm) -> str:
    return f"a header '{TIME},{','.join(arm.joints)}' (joints in any order), then rows of numbers"


def _columns(file: str, header: Line, arm: Arm) -> tuple[dict[str, int], list[Fault]]:
    """Return the column of each joint that the header names, and the header's faults."""
    line, cells = header
    if len(cells) == 1 and len(re.split("[;\t]", cells[0])) > 1:
        raise InputFaults.one(file, "", "no commas in the header", "cells separated by commas", line)
    if cells[0] != TIME:
        raise InputFaults.one(file, "", f"the header starts with '{_short(cells[0])}'", _header(arm), line)
    column: dict[str, int] = {}
    faults = []
    for at, name in enumerate(cells[1:], 1):
        if name not in arm.joints:
            near = nearest(name, arm.joints)
            faults.append(Fault(file, line, "", f"no joint '{_short(name)}'", "joints of the arm", near))
        elif name in column:
            faults.append(Fault(file, line, name, "two columns of this name", "one"))
        column[name] = at
    for joint in arm.joints:
        if joint not in column:
            faults.append(Fault(file, line, joint, "missing", "a column for every joint of the arm"))
    return {joint: at for joint, at in column.items() if joint in arm.joints}, faults


def _numbers(file: str, lines: list[Line], header: list[str]) -> tuple[Floats, list[Fault]]:
    """Return the rows as numbers, nan where a cell is at fault, and the faults."""
    table = np.full((len(lines), len(header)), np.nan)
    faults = []
    for row, (line, cells) in enumerate(lines):
        if len(cells) != len(header):
            faults.append(
                Fault(file, line, "", counted(len(cells), "cell"), f"{len(header)}, as in the header")
            )
            continue
        for at, cell in enumerate(cells):
            value = float(cell) if NUMBER.fullmatch(cell) else math.nan
            if abs(value) <= MOST_NUMBER:
                table[row, at] = value
            else:
                problem = (
                    f"'{_short(cell)}' is not a number"
                    if math.isnan(value)
                    else f"{_short(cell)} is too large"
                )
                faults.append(Fault(file, line, header[at], problem if cell else "empty", "a finite number"))
    return table, faults


def _short(text: str) -> str:
    return text if len(text) <= 40 else text[:37] + "..."


def _check_times(sheet: _Sheet, times: Floats) -> list[Fault]:
    """Find the rows that don't come after the row before them (of those that have a time)."""
    at = np.flatnonzero(np.isfinite(times))
    shifted = times[at] - times[at[:1]]
    faults = []
    for k in np.flatnonzero(np.diff(shifted) < LEAST_STEP_S) + 1:
        problem = f"{float(times[at[k]])} s after {float(times[at[k - 1]])} s"
        faults.append(sheet.fault(at[k], TIME, problem, "times that rise by 1e-6 s or more"))
    return faults


def _more(count: int) -> str:
    return "" if count == 0 else f" (and in {count} more {'row' if count == 1 else 'rows'})"


def _check_positions(sheet: _Sheet, column: Floats, i: int) -> list[Fault]:
    """Find the first row beyond the joint's lower limit and the first beyond its upper one."""
    unit, scale = unit_of(sheet.arm, i)
    faults = []
    for side, sign, bound in (("least", -1, sheet.arm.lower[i]), ("most", 1, sheet.arm.upper[i])):
        rows = beyond(sign * (column / scale - bound), bound)
        if rows.size:
            value, limit = shown(column[rows[0]], bound * scale)
            problem = f"{value} {unit} is beyond the joint's limit{_more(rows.size - 1)}"
            faults.append(sheet.fault(rows[0], sheet.arm.joints[i], problem, f"at {side} {limit} {unit}"))
    return faults


def _check_steps(sheet: _Sheet, times: Floats, column: Floats, i: int) -> list[Fault]:
    """Find the first step between neighbouring rows that is a jump."""
    unit, scale = unit_of(sheet.arm, i)
    limited = np.isfinite(sheet.arm.drives.speed_limit[i])
    bound = sheet.arm.drives.speed_limit[i] * scale if limited else MOST_SPEED[unit]
    with np.errstate(over="ignore", invalid="ignore"):
        step, time = np.diff(column), np.diff(times)
        jumps = np.flatnonzero((time > 0) & (np.abs(step) > bound * time * (1 + SLACK))) + 1
    if not jumps.size:
        return []
    value, limit = shown(abs(step[jumps[0] - 1]) / time[jumps[0] - 1], bound)
    problem = f"jumps by {step[jumps[0] - 1]:.4g} {unit}, at {value} {unit}/s{_more(jumps.size - 1)}"
    why = "the joint's speed limit" if limited else "for a joint without a speed limit"
    return [sheet.fault(jumps[0], sheet.arm.joints[i], problem, f"at most {limit} {unit}/s, {why}")]


def _check_between(sheet: _Sheet, motion: TableMotion) -> list[Fault]:
    """Find where the spline passes limits that the rows keep."""
    knots = motion.row_times
    parts = knots[:-1, None] + np.diff(knots)[:, None] * np.arange(PARTS) / PARTS
    faults = []
    for passing in passings(motion, sheet.arm, np.append(parts.ravel(), knots[-1])):
        row = int(np.searchsorted(knots, passing.time_s, side="right")) - 1
        value, bound = shown(passing.value, passing.bound)
        problem = (
            f"the spline passes the {passing.limit} at {passing.time_s:.3f} s, after this row, and reaches "
            f"{value} {passing.unit}"
        )
        faults.append(sheet.fault(row, passing.joint, problem, f"within {bound} {passing.unit}"))
    return sorted(faults, key=lambda fault: fault.line or 0)

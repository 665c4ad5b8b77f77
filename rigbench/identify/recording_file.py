"""Recordings as files: CSV or Parquet with one documented header.

``t_s`` [s], then for each joint of the arm, in any order: ``q_deg.<joint>`` [deg], ``tau_nm.<joint>`` [N m,
of the motor, at the joint] and, if velocities were measured, ``v_deg_s.<joint>`` [deg/s]. For a prismatic
joint: ``q_mm.``, ``tau_n.``, ``v_mm_s.``. Rows are at equal steps of time; a torque is that of the
row's instant.
"""

from __future__ import annotations

import csv
from collections.abc import Callable
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from rigbench.arm.arm import PRISMATIC, Arm, Floats
from rigbench.errors import Fault, InputFaults, counted, nearest
from rigbench.identify.recording import Recording
from rigbench.identify.recording_table import ENOUGH, Table, read_table, told
from rigbench.motion.limits import to_si

__all__ = ["TIME", "column_names", "read_recording", "write_recording"]

TIME = "t_s"

GAP, CLOSE = 1.5, 0.5
"""A step of time beyond so many median ones is a gap; one below this share comes too soon."""

BLOCK, EVEN = 100, 0.02
"""Steps over which the rate may differ by this share at most from what it mostly is: speeds would be off by
as much. Jitter of the single step averages out."""

LEAST_ROWS = 50
"""Fewer rows are no motion."""


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
    that are missing, twice there, unknown or not of numbers, velocities of some joints alone; cells without a
    finite number; times that do not rise, a gap, a step too short, a rate that changes; fewer than 50 rows.
    A first line that names no column of the arm is told alone.
    """
    file, names = str(path), column_names(arm)
    known = [TIME, *(name for part in names.values() for name in part)]
    table, cells = read_table(file, set(known))
    if set(known).isdisjoint(table.names):
        raise InputFaults([_no_header(table, [TIME, *names["q"], *names["tau"]])])
    faults = _header_faults(table, names, known) + cells
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


def _no_header(table: Table, needed: list[str]) -> Fault:
    """Return the fault of a first line that names no column of the arm."""
    said = ",".join(table.names)
    problem = f"the header names no column of the arm: '{said[:60]}'"
    if other := next((sign for sign in (";", "\t") if sign in said), None):
        problem += "; its cells are parted by " + {";": "semicolons", "\t": "tabs"}[other]
    text = "" if table.lines is None else ", parted by commas, with decimal points"
    return table.column_fault("", problem, f"columns {','.join(needed)}{text}")


def _header_faults(table: Table, names: dict[str, tuple[str, ...]], known: list[str]) -> list[Fault]:
    """Return what is wrong with the names of the columns."""
    some = any(name in table.names for name in names["v"])
    needed = [TIME, *names["q"], *names["tau"], *(names["v"] if some else ())]
    faults = []
    for name in dict.fromkeys(table.names):
        if not name:
            place = table.names.index(name) + 1
            faults.append(table.column_fault("", f"column {place} has no name", "a name for every column"))
        elif name not in known:
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
        (step <= 0, lambda k: f"{t[k + 1]:.13g} s after {t[k]:.13g} s"),
        (step > GAP * usual, lambda k: f"a gap of {step[k]:.4g} s after {t[k]:.13g} s"),
        ((step > 0) & (step < CLOSE * usual), lambda k: f"a step of {step[k]:.4g} s only"),
    ]
    faults = []
    for wrong, said in checks:
        rows = np.flatnonzero(wrong)[:ENOUGH]
        expected = f"equal steps, as most are: {usual:.4g} s"
        faults += [table.fault(int(k) + 1, TIME, said(int(k)), expected) for k in rows]
    if not faults:
        return _rate_faults(table, t)
    return told(table.file, sorted(faults, key=lambda fault: fault.line or 0))


def _rate_faults(table: Table, t: Floats) -> list[Fault]:
    """Return where first the rate is not what it mostly is."""
    block = min(BLOCK, len(t) - 1)
    rate = block / (t[block:] - t[:-block])
    usual = float(np.median(rate))
    other = np.flatnonzero(np.abs(rate / usual - 1) > EVEN)
    if not other.size:
        return []
    problem = f"{rate[other[0]]:.4g} samples a second over the next {block}, elsewhere {usual:.4g}"
    return [table.fault(int(other[0]), TIME, problem, "equal steps all along")]

"""Recordings as files: what is good comes back, what is bad is named with its place."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from rigbench.errors import InputFaults
from rigbench.identify.plausible import implausible
from rigbench.identify.recording_file import column_names, read_recording, write_recording

ROOT = Path(__file__).resolve().parents[2]
GRAVITY = (0.0, 0.0, -9.81)


def lines_of(path):
    return path.read_text().splitlines()


def faults_of(path, arm):
    with pytest.raises(InputFaults) as caught:
        read_recording(path, arm)
    return [str(fault) for fault in caught.value.faults]


@pytest.mark.parametrize("v", [True, False])
def test_what_is_written_comes_back(tmp_path, rubbing, v, recorded):
    """Times, positions, velocities, torques: torques and times to the bit, angles to rounding."""
    given = recorded(rubbing, v=v)
    write_recording(tmp_path / "a.csv", rubbing, given)
    read, table = read_recording(tmp_path / "a.csv", rubbing)
    assert np.array_equal(read.t, given.t)
    assert np.array_equal(read.torque, given.torque)
    assert np.allclose(read.q, given.q, rtol=1e-15)
    assert (read.v is None) == (not v)
    assert implausible(rubbing, GRAVITY, read, table) == []
    assert table.names[:2] == ("t_s", "q_deg.shoulder")


def test_prismatic_joints_have_their_own_units(chain):
    """mm, mm/s and N in place of deg, deg/s and N m."""
    names = column_names(chain([[0, 0, 1], [1, 0, 0]], np.zeros((2, 3)), [0, 1]))
    assert names == {
        "q": ("q_deg.j1", "q_mm.j2"),
        "v": ("v_deg_s.j1", "v_mm_s.j2"),
        "tau": ("tau_nm.j1", "tau_n.j2"),
    }


def test_parquet_holds_the_same(tmp_path, rubbing, recorded):
    """The same columns from a Parquet file, in any order."""
    pyarrow = pytest.importorskip("pyarrow")
    from pyarrow.parquet import write_table

    given = recorded(rubbing)
    write_recording(tmp_path / "a.csv", rubbing, given)
    names, *rows = (line.split(",") for line in lines_of(tmp_path / "a.csv"))
    columns = dict(zip(names, np.array(rows, float).T, strict=True))
    write_table(pyarrow.table(dict(reversed(columns.items()))), tmp_path / "a.parquet")
    assert np.array_equal(read_recording(tmp_path / "a.parquet", rubbing)[0].torque, given.torque)
    columns["tau_nm.elbow"][7] = np.nan
    write_table(pyarrow.table(columns), tmp_path / "bad.parquet")
    assert "row 8, tau_nm.elbow" in faults_of(tmp_path / "bad.parquet", rubbing)[0]
    (tmp_path / "no.parquet").write_text("no table")
    assert "can't be read" in faults_of(tmp_path / "no.parquet", rubbing)[0]


@pytest.fixture
def spoiled(tmp_path, recorded):
    """A good file with its lines changed by ``change(lines)``: spoiled(arm, change)."""

    def build(arm, change):
        path = tmp_path / "bad.csv"
        write_recording(path, arm, recorded(arm))
        path.write_text("\n".join(change(lines_of(path))) + "\n")
        return path

    return build


def test_a_gap_is_named(rubbing, spoiled):
    """100 rows lost after line 501: the line after the gap, where it begins and how long it is."""
    (fault,) = faults_of(spoiled(rubbing, lambda lines: lines[:501] + lines[601:]), rubbing)
    assert "bad.csv:502: t_s: a gap of 0.202 s after 0.998 s" in fault


def test_cells_without_numbers_are_named(rubbing, spoiled):
    """NaN, text, an empty cell and a short row, all at once, each with line and column."""

    def change(lines):
        for line, cell, text in ((10, 1, "nan"), (20, 3, "off"), (30, 4, "")):
            cells = lines[line - 1].split(",")
            cells[cell] = text
            lines[line - 1] = ",".join(cells)
        lines[39] = "1,2"
        return lines

    said = "\n".join(faults_of(spoiled(rubbing, change), rubbing))
    for expected in (
        "bad.csv:10: q_deg.shoulder: 'nan' is no number",
        "bad.csv:20: tau_nm.shoulder: 'off' is no number",
        "bad.csv:30: tau_nm.elbow: empty",
        "bad.csv:40: 2 cells; expected 5, as in the header",
    ):
        assert expected in said


HEADERS = {
    "semicolons": (lambda text: text.replace(",", ";"), "its cells are parted by semicolons"),
    "tabs": (lambda text: text.replace(",", "\t"), "its cells are parted by tabs"),
    "decimal commas": (
        lambda text: text.replace(",", ";").replace("0.", "0,"),
        "its cells are parted by semicolons",
    ),
    "none": (lambda text: text.split("\n", 1)[1], "the header names no column of the arm: '0.0,"),
    "a remark": (
        lambda text: "# a logger's\n" + text,
        "the header names no column of the arm: '# a logger's'",
    ),
}


@pytest.mark.parametrize("header", HEADERS)
def test_a_header_of_something_else_is_one_fault(tmp_path, rubbing, header, recorded):
    """Other separators, none at all, a remark before it: one fault at its line that says what is expected."""
    change, said = HEADERS[header]
    write_recording(tmp_path / "a.csv", rubbing, recorded(rubbing))
    (tmp_path / "bad.csv").write_text(change((tmp_path / "a.csv").read_text()))
    (fault,) = faults_of(tmp_path / "bad.csv", rubbing)
    assert "bad.csv:1: " in fault
    assert said in fault
    assert "expected columns t_s,q_deg.shoulder,q_deg.elbow,tau_nm.shoulder,tau_nm.elbow, parted by" in fault


READABLE = {
    "a byte order mark": lambda text: "\ufeff" + text,
    "lines as on Windows": lambda text: text.replace("\n", "\r\n"),
    "quotes": lambda text: '"' + text.split("\n", 1)[0].replace(",", '","') + '"\n' + text.split("\n", 1)[1],
    "spaces": lambda text: text.replace(",", " , "),
    "empty lines": lambda text: "\n" + text.replace("\n", "\n\n", 20),
}


@pytest.mark.parametrize("how", READABLE)
def test_the_same_table_in_other_dress(tmp_path, rubbing, how, recorded):
    """What CSV allows changes nothing."""
    given = recorded(rubbing)
    write_recording(tmp_path / "a.csv", rubbing, given)
    (tmp_path / "b.csv").write_bytes(READABLE[how]((tmp_path / "a.csv").read_text()).encode())
    read, table = read_recording(tmp_path / "b.csv", rubbing)
    assert np.array_equal(read.torque, given.torque)
    assert implausible(rubbing, GRAVITY, read, table) == []


def test_lines_that_are_no_rows_are_one_fault_each(rubbing, spoiled):
    """A line of units, the header once more, Python's 1_0 for a number; a comma at the header's end."""

    def change(lines):
        cells = lines[29].split(",")
        lines[29] = ",".join([cells[0], "1_0", *cells[2:]])
        return [
            lines[0] + ",",
            "s,deg,deg,Nm,Nm,",
            *(line + "," for line in lines[1:20]),
            *lines[:1],
            *lines[20:],
        ]

    faults = faults_of(spoiled(rubbing, change), rubbing)
    assert "bad.csv:1: column 6 has no name" in faults[0]
    assert "bad.csv:2: no row of numbers: 's,deg,deg,Nm,Nm,'" in faults[1]
    assert "bad.csv:22: 5 cells" in faults[2]
    assert len(faults) == 4 + 18  # and short rows, told up to 20


def test_an_underscore_is_no_part_of_a_number(rubbing, spoiled):
    """1_0 is ten to Python, and a slip in a table."""

    def change(lines):
        cells = lines[29].split(",")
        return [*lines[:29], ",".join([cells[0], "1_0", *cells[2:]]), *lines[30:]]

    (fault,) = faults_of(spoiled(rubbing, change), rubbing)
    assert "bad.csv:30: q_deg.shoulder: '1_0' is no number" in fault


def test_times_that_begin_anywhere(tmp_path, rubbing, recorded):
    """Seconds since 1970 are as good as those from 0, and a gap in them is told with all of its digits."""
    given = recorded(rubbing)
    later = replace(given, t=given.t + 1.7e9)
    write_recording(tmp_path / "a.csv", rubbing, later)
    read, table = read_recording(tmp_path / "a.csv", rubbing)
    assert read.rate_hz == pytest.approx(500, rel=1e-6)
    assert implausible(rubbing, GRAVITY, read, table) == []
    lines = lines_of(tmp_path / "a.csv")
    (tmp_path / "bad.csv").write_text("\n".join(lines[:501] + lines[601:]))
    (fault,) = faults_of(tmp_path / "bad.csv", rubbing)
    assert "a gap of 0.202 s after 1700000000.998 s" in fault


def test_jitter_is_no_fault_and_another_rate_is(tmp_path, rubbing, recorded):
    """Steps that vary by 2 percent, each on its own or adding up, are taken; from 500 to 450 Hz later on is told
    within the 100 rows before it."""
    given, rng = recorded(rubbing), np.random.default_rng(0)
    step = 0.002 * (1 + 0.02 * rng.uniform(-1, 1, len(given.t)))
    for t in (given.t + step - 0.002, np.cumsum(step)):
        write_recording(tmp_path / "a.csv", rubbing, replace(given, t=t))
        read_recording(tmp_path / "a.csv", rubbing)
    turn = 3 * len(given.t) // 4
    slower = np.where(
        np.arange(len(given.t)) < turn, given.t, given.t[turn] + (given.t - given.t[turn]) / 0.9
    )
    write_recording(tmp_path / "bad.csv", rubbing, replace(given, t=slower))
    (fault,) = faults_of(tmp_path / "bad.csv", rubbing)
    assert "samples a second over the next 100" in fault
    assert turn - 100 < int(fault.split("bad.csv:")[1].split(":")[0]) <= turn + 2


RATES = {20: 20.0, 40: 40.0, 20_000: 20_000.0}


@pytest.mark.parametrize("rate", RATES)
def test_slow_and_fast_recordings_are_no_slips(tmp_path, rubbing, rate, recorded, planar2_motion):
    """20 Hz to 20 kHz, 16 s or 1 s of it: what is good is not faulted."""
    slow, fast = replace(planar2_motion, periods=4), replace(planar2_motion, period_s=2.0, periods=1)
    motion = slow if rate < 1000 else fast
    write_recording(tmp_path / "a.csv", rubbing, recorded(rubbing, motion, rate=rate))
    read, table = read_recording(tmp_path / "a.csv", rubbing)
    assert read.rate_hz == pytest.approx(rate)
    assert implausible(rubbing, GRAVITY, read, table) == []


def test_columns_of_parquet_that_are_no_numbers(tmp_path, rubbing, recorded):
    """Text, yes and no, times of day: each column with its type; integers and single precision are numbers."""
    pyarrow = pytest.importorskip("pyarrow")
    from pyarrow.parquet import write_table

    given = recorded(rubbing)
    write_recording(tmp_path / "a.csv", rubbing, given)
    names, *rows = (line.split(",") for line in lines_of(tmp_path / "a.csv"))
    good = dict(zip(names, np.array(rows, float).T, strict=True))
    whole = good | {"tau_nm.elbow": np.round(good["tau_nm.elbow"]).astype(int)}
    write_table(pyarrow.table(whole), tmp_path / "whole.PARQUET")
    assert np.array_equal(
        read_recording(tmp_path / "whole.PARQUET", rubbing)[0].torque[:, 1], whole["tau_nm.elbow"]
    )
    bad = good | {
        "q_deg.elbow": [str(x) for x in good["q_deg.elbow"]],
        "tau_nm.elbow": good["tau_nm.elbow"] > 0,
        "t_s": (good["t_s"] * 1e9).astype("datetime64[ns]"),
    }
    write_table(pyarrow.table(bad), tmp_path / "bad.parquet")
    said = "\n".join(faults_of(tmp_path / "bad.parquet", rubbing))
    for expected in (
        "q_deg.elbow: a column of string",
        "tau_nm.elbow: a column of bool",
        "t_s: a column of timestamp",
    ):
        assert expected in said
    write_table(pyarrow.table({}), tmp_path / "none.parquet")
    assert "names no column of the arm" in faults_of(tmp_path / "none.parquet", rubbing)[0]


def test_a_broken_header_is_named(rubbing, spoiled):
    """A misspelt column with the nearest name, one missing, one twice, velocities of one joint alone."""

    def change(lines):
        return ["t_s,q_deg.sholder,q_deg.elbow,q_deg.elbow,v_deg_s.elbow", *lines[1:]]

    said = "\n".join(faults_of(spoiled(rubbing, change), rubbing))
    assert "bad.csv:1: q_deg.sholder: no such column" in said
    assert "did you mean 'q_deg.shoulder'" in said
    assert "q_deg.elbow: two columns of this name" in said
    assert "tau_nm.elbow: missing" in said
    assert "v_deg_s.shoulder: missing" in said


def test_too_short_and_empty_files(tmp_path, rubbing, spoiled):
    """30 rows are no motion; an empty file is no table; a file that is not there is told."""
    assert "too short: 30 rows" in faults_of(spoiled(rubbing, lambda lines: lines[:31]), rubbing)[0]
    (tmp_path / "empty.csv").write_text("\n\n")
    assert "no table in it" in faults_of(tmp_path / "empty.csv", rubbing)[0]
    assert "does not exist" in faults_of(tmp_path / "none.csv", rubbing)[0]


def test_times_that_turn_back(rubbing, spoiled):
    """Two lines exchanged: a step back, and what it makes of its neighbours."""

    def change(lines):
        lines[99], lines[100] = lines[100], lines[99]
        return lines

    assert any(
        "bad.csv:101: t_s: 0.196 s after 0.198 s" in fault
        for fault in faults_of(spoiled(rubbing, change), rubbing)
    )

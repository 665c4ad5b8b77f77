"""Recordings as files: what is good comes back, what is bad is named with its place."""

from __future__ import annotations

import re
import shutil
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from rigbench.arm.dynamics import inverse_dynamics
from rigbench.arm.files import load_arm
from rigbench.arm.physical import add_point_mass
from rigbench.errors import InputFaults
from rigbench.identify.fourier import FourierMotion
from rigbench.identify.plausible import implausible
from rigbench.identify.recording import Recording
from rigbench.identify.recording_file import column_names, read_recording, write_recording

ROOT = Path(__file__).resolve().parents[2]
GRAVITY = (0.0, 0.0, -9.81)
TRAY6_MOTION = FourierMotion(
    centre=(0.0, -0.9, 1.0, 0.1, 0.5, -0.2),
    sine=((0.9, -0.45), (0.5, -0.25), (0.6, -0.3), (0.5, -0.25), (-0.7, 0.35), (0.9, -0.45)),
    cosine=((0.4, -0.1), (-0.4, 0.1), (0.5, -0.125), (-0.8, 0.2), (0.4, -0.1), (0.8, -0.2)),
    period_s=4.0,
    periods=2,
)
MOTION = FourierMotion((0.2, -0.3), ((0.9, -0.45), (-0.7, 0.35)), ((0.4, -0.1), (0.8, -0.2)), 4.0, 2)


def recorded(arm, motion=MOTION, v=False, rate=500):
    """Formulas' torques with a little noise."""
    t = np.arange(0, motion.duration_s, 1 / rate)
    q, speed, a = motion.reference(t)
    links = np.array(
        [inverse_dynamics(arm.chain(GRAVITY), *state) for state in zip(q, speed, a, strict=True)]
    )
    torque = (
        links + arm.drives.reflected * a + arm.drives.viscous * speed + arm.drives.coulomb * np.sign(speed)
    )
    torque += 0.1 * np.random.default_rng(0).normal(size=torque.shape)
    return Recording("made", t, q, speed if v else None, torque)


def lines_of(path):
    return path.read_text().splitlines()


def faults_of(path, arm):
    with pytest.raises(InputFaults) as caught:
        read_recording(path, arm)
    return [str(fault) for fault in caught.value.faults]


@pytest.mark.parametrize("v", [True, False])
def test_what_is_written_comes_back(tmp_path, rubbing, v):
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


def test_parquet_holds_the_same(tmp_path, rubbing):
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


def spoiled(tmp_path, arm, change, **given):
    """A good file with its lines changed by ``change(lines)``."""
    path = tmp_path / "bad.csv"
    write_recording(path, arm, recorded(arm, **given))
    path.write_text("\n".join(change(lines_of(path))) + "\n")
    return path


def test_a_gap_is_named(tmp_path, rubbing):
    """100 rows lost after line 501: the line after the gap, where it begins and how long it is."""
    (fault,) = faults_of(spoiled(tmp_path, rubbing, lambda lines: lines[:501] + lines[601:]), rubbing)
    assert "bad.csv:502: t_s: a gap of 0.202 s after 0.998 s" in fault


def test_cells_without_numbers_are_named(tmp_path, rubbing):
    """NaN, text, an empty cell and a short row, all at once, each with line and column."""

    def change(lines):
        for line, cell, text in ((10, 1, "nan"), (20, 3, "off"), (30, 4, "")):
            cells = lines[line - 1].split(",")
            cells[cell] = text
            lines[line - 1] = ",".join(cells)
        lines[39] = "1,2"
        return lines

    said = "\n".join(faults_of(spoiled(tmp_path, rubbing, change), rubbing))
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
def test_a_header_of_something_else_is_one_fault(tmp_path, rubbing, header):
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
def test_the_same_table_in_other_dress(tmp_path, rubbing, how):
    """What CSV allows changes nothing."""
    given = recorded(rubbing)
    write_recording(tmp_path / "a.csv", rubbing, given)
    (tmp_path / "b.csv").write_bytes(READABLE[how]((tmp_path / "a.csv").read_text()).encode())
    read, table = read_recording(tmp_path / "b.csv", rubbing)
    assert np.array_equal(read.torque, given.torque)
    assert implausible(rubbing, GRAVITY, read, table) == []


def test_lines_that_are_no_rows_are_one_fault_each(tmp_path, rubbing):
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

    faults = faults_of(spoiled(tmp_path, rubbing, change), rubbing)
    assert "bad.csv:1: column 6 has no name" in faults[0]
    assert "bad.csv:2: no row of numbers: 's,deg,deg,Nm,Nm,'" in faults[1]
    assert "bad.csv:22: 5 cells" in faults[2]
    assert len(faults) == 4 + 18  # and short rows, told up to 20


def test_an_underscore_is_no_part_of_a_number(tmp_path, rubbing):
    """1_0 is ten to Python, and a slip in a table."""

    def change(lines):
        cells = lines[29].split(",")
        return [*lines[:29], ",".join([cells[0], "1_0", *cells[2:]]), *lines[30:]]

    (fault,) = faults_of(spoiled(tmp_path, rubbing, change), rubbing)
    assert "bad.csv:30: q_deg.shoulder: '1_0' is no number" in fault


def test_times_that_begin_anywhere(tmp_path, rubbing):
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


def test_jitter_is_no_fault_and_another_rate_is(tmp_path, rubbing):
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
def test_slow_and_fast_recordings_are_no_slips(tmp_path, rubbing, rate):
    """20 Hz to 20 kHz, 16 s or 1 s of it: what is good is not faulted."""
    motion = replace(MOTION, periods=4) if rate < 1000 else replace(MOTION, period_s=2.0, periods=1)
    write_recording(tmp_path / "a.csv", rubbing, recorded(rubbing, motion, rate=rate))
    read, table = read_recording(tmp_path / "a.csv", rubbing)
    assert read.rate_hz == pytest.approx(rate)
    assert implausible(rubbing, GRAVITY, read, table) == []


def test_columns_of_parquet_that_are_no_numbers(tmp_path, rubbing):
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


def test_a_broken_header_is_named(tmp_path, rubbing):
    """A misspelt column with the nearest name, one missing, one twice, velocities of one joint alone."""

    def change(lines):
        return ["t_s,q_deg.sholder,q_deg.elbow,q_deg.elbow,v_deg_s.elbow", *lines[1:]]

    said = "\n".join(faults_of(spoiled(tmp_path, rubbing, change), rubbing))
    assert "bad.csv:1: q_deg.sholder: no such column" in said
    assert "did you mean 'q_deg.shoulder'" in said
    assert "q_deg.elbow: two columns of this name" in said
    assert "tau_nm.elbow: missing" in said
    assert "v_deg_s.shoulder: missing" in said


def test_too_short_and_empty_files(tmp_path, rubbing):
    """30 rows are no motion; an empty file is no table; a file that is not there is told."""
    assert "too short: 30 rows" in faults_of(spoiled(tmp_path, rubbing, lambda lines: lines[:31]), rubbing)[0]
    (tmp_path / "empty.csv").write_text("\n\n")
    assert "no table in it" in faults_of(tmp_path / "empty.csv", rubbing)[0]
    assert "does not exist" in faults_of(tmp_path / "none.csv", rubbing)[0]


def test_times_that_turn_back(tmp_path, rubbing):
    """Two lines exchanged: a step back, and what it makes of its neighbours."""

    def change(lines):
        lines[99], lines[100] = lines[100], lines[99]
        return lines

    assert any(
        "bad.csv:101: t_s: 0.196 s after 0.198 s" in fault
        for fault in faults_of(spoiled(tmp_path, rubbing, change), rubbing)
    )


def said_of(tmp_path, true, believed, change, v=False, motion=MOTION):
    """What is said of a recording of ``true`` when ``change(recording)`` came into its file."""
    path = tmp_path / "bad.csv"
    write_recording(path, true, change(recorded(true, motion, v=v)))
    recording, table = read_recording(path, believed)
    return [str(fault) for fault in implausible(believed, GRAVITY, recording, table)]


def test_single_spikes_of_position_are_no_fault(tmp_path, planar2):
    """Within the joint's limits or far beyond, they are left out later; a joint that only spikes stands still."""

    def spiked(factor):
        def change(recording):
            q = recording.q * np.array([factor, 1.0])
            q[[200, 450, 700], 0] += np.radians([40.0, -40.0, 400.0])
            return replace(recording, q=q)

        return change

    assert said_of(tmp_path, planar2, planar2, spiked(1.0)) == []
    (said,) = said_of(tmp_path, planar2, planar2, spiked(0.0))
    assert "joint shoulder moves by 0 deg" in said


@pytest.mark.parametrize("what", ["q", "torque"])
def test_both_columns_are_named_where_either_may_be_of_the_wrong_sign(tmp_path, what):
    """The mirror image of an arm with a plane of symmetry about a vertical axis turns the other way, no more."""
    folder = ROOT / "robots_demo" / "planar2"
    text = (folder / "planar2.urdf").read_text().replace('<axis xyz="0 -1 0"/>', '<axis xyz="0 0 1"/>', 1)
    (tmp_path / "planar2.urdf").write_text(text)
    shutil.copy(folder / "arm.yaml", tmp_path)
    arm = load_arm(tmp_path / "arm.yaml")
    (said,) = said_of(tmp_path, arm, arm, lambda r: replace(r, **{what: column(getattr(r, what), 0, -1)}))
    assert "looks of the wrong sign, or else " in said
    assert "q_deg.shoulder" in said
    assert "tau_nm.shoulder" in said


def column(array, i, factor):
    changed = array.copy()
    changed[:, i] *= factor
    return changed


def wrapped(q, i):
    """A joint about half a turn, read as -180 to 180 degrees."""
    changed = q.copy()
    changed[:, i] = (changed[:, i] + 2.5 + np.pi) % (2 * np.pi) - np.pi
    return changed


GEARS = load_arm(ROOT / "robots_demo" / "tray6" / "arm.yaml").drives.gear_ratio
SLIPS = {
    "q in rad": (lambda r: replace(r, q=r.q / 57.29578), ["q_deg.j1: looks 57.3 times too small", "q_deg.j6"]),
    "q of one joint in rad": (lambda r: replace(r, q=column(r.q, 1, 1 / 57.29578)), ["q_deg.j2: looks 57.3 times too small"]),
    "q of one joint turned twice": (lambda r: replace(r, q=column(r.q, 1, 57.29578)), ["q_deg.j2", "it looks 57.3 times too large"]),
    "torques in N mm": (lambda r: replace(r, torque=r.torque * 1e3), ["tau_nm.j1: looks 1000 times too large", "tau_nm.j6"]),
    "one torque in kN m": (lambda r: replace(r, torque=column(r.torque, 2, 1e-3)), ["tau_nm.j3: looks 1000 times too small"]),
    "one torque in N mm": (lambda r: replace(r, torque=column(r.torque, 5, 1e3)), ["tau_nm.j6: looks 1000 times too large"]),
    "times in ms": (lambda r: replace(r, t=r.t * 1e3), ["bad.csv:1: t_s: 0.5 samples a second, so times may be in ms"]),
    "torques swapped": (lambda r: replace(r, torque=r.torque[:, [0, 2, 1, 3, 4, 5]]), ["tau_nm.j2 and tau_nm.j3 look swapped"]),
    "positions swapped": (lambda r: replace(r, q=r.q[:, [0, 1, 2, 4, 3, 5]]), ["q_deg.j4 and q_deg.j5 look swapped"]),
    "times a tenth": (lambda r: replace(r, t=r.t / 10), ["q_deg.j1: moves at", "beyond the drive's speed limit; or times in t_s are too short"]),
    "torques of the wrong sign": (lambda r: replace(r, torque=-r.torque), ["tau_nm.j1: looks of the wrong sign", "tau_nm.j6"]),
    "one torque of the wrong sign": (lambda r: replace(r, torque=column(r.torque, 2, -1)), ["tau_nm.j3: looks of the wrong sign"]),
    "torques of the motors": (lambda r: replace(r, torque=r.torque / GEARS), ["tau_nm.j1: looks like the motor's own, before its gear", "tau_nm.j6"]),
    "one torque of the motor": (lambda r: replace(r, torque=column(r.torque, 1, 1 / GEARS[1])), ["tau_nm.j2: looks like the motor's own, before its gear"]),
    "q of two joints in rad": (lambda r: replace(r, q=column(column(r.q, 1, 1 / 57.29578), 4, 1 / 57.29578)), ["q_deg.j2: looks 57.3 times too small", "q_deg.j5: looks 57.3 times too small"]),
    "q in rad and torques in N mm": (lambda r: replace(r, q=r.q / 57.29578, torque=r.torque * 1e3), ["q_deg.j1: looks 57.3 times too small", "tau_nm.j1: looks 1000 times too large"]),
    "q of the wrong sign": (lambda r: replace(r, q=column(r.q, 4, -1)), ["q_deg.j5: looks of the wrong sign"]),
    "q of the wrong sign beyond its range": (lambda r: replace(r, q=column(r.q, 2, -1)), ["q_deg.j3", " deg at ", "more rows); it looks of the wrong sign"]),
    "a joint wrapped": (lambda r: replace(r, q=wrapped(r.q, 0)), ["q_deg.j1: jumps by 359.9 deg from the row before", "it looks wrapped at half a turn"]),
    "a torque that never changes": (lambda r: replace(r, torque=column(r.torque, 2, 0.0)), ["tau_nm.j3: the same all along: 0"]),
    "a torque of 1e300": (lambda r: replace(r, torque=column(r.torque, 2, 1e300)), ["tau_nm.j3: is of", "which no drive gives"]),
    "a torque of 1e-300": (lambda r: replace(r, torque=column(r.torque, 2, 1e-300)), ["tau_nm.j3: is of", "which no drive gives"]),
    "torques of another arm": (lambda r: replace(r, torque=np.cumsum(np.random.default_rng(0).normal(size=r.torque.shape), axis=0)), ["tau_nm.j1: no masses, inertias and friction explain this torque"]),
    "a joint within 0.1 deg": (lambda r: replace(r, q=column(r.q, 3, np.radians(0.1) / np.ptp(r.q[:, 3]))), ["q_deg.j4: no excitation: joint j4 moves by 0.1 deg in all, unless these are in rad; expected 1 deg"]),
    "a joint at rest": (lambda r: replace(r, q=column(r.q, 3, 0.0)), ["q_deg.j4: no excitation: joint j4 moves by 0 deg in all; expected 1 deg"]),
}  # fmt: skip


@pytest.mark.parametrize("slip", SLIPS)
def test_a_slip_is_named(tmp_path, tray6, slip):
    """Each wrong unit and each swap, on a machine whose masses and friction are 15 % off the model's."""
    drives = replace(tray6.drives, viscous=1.15 * tray6.drives.viscous, coulomb=0.85 * tray6.drives.coulomb)
    change, expected = SLIPS[slip]
    said = "\n".join(
        said_of(tmp_path, tray6.replaced(1.15 * tray6.parameters, drives), tray6, change, motion=TRAY6_MOTION)
    )
    for part in expected:
        assert part in said
    named = {line.split(": ")[1] for line in said.splitlines()}
    if "j6" not in said and "no masses" not in said:  # where all columns are wrong, some stand for them
        assert named == set(re.findall(r"\b(?:t_s|(?:q_deg|tau_nm)\.j\d)\b", " ".join(expected)))


VELOCITIES = {
    "constant": (lambda v: 0 * v, "v_deg_s.elbow: the same all along: 0"),
    "of the wrong sign": (lambda v: -v, "v_deg_s.elbow: does not go with the change"),
    "in rad/s": (lambda v: v / 57.29578, "v_deg_s.elbow: 57.3 times too small"),
    "swapped": (lambda v: v[:, ::-1], "v_deg_s.elbow: looks like the velocity of joint shoulder"),
    "of something else": (
        lambda v: np.random.default_rng(1).normal(size=v.shape),
        "does not go with the change",
    ),
}


@pytest.mark.parametrize("slip", VELOCITIES)
def test_a_velocity_that_is_none_is_named(tmp_path, rubbing, slip):
    """Velocities are held against the change of their own positions."""
    change, expected = VELOCITIES[slip]
    assert expected in "\n".join(
        said_of(tmp_path, rubbing, rubbing, lambda r: replace(r, v=change(r.v)), v=True)
    )


def test_a_wrong_model_is_no_fault(tmp_path, tray6):
    """Masses 40 % up, no friction in the model: what identification is for, not the recording's fault."""
    believed = tray6.replaced(
        drives=replace(tray6.drives, viscous=np.zeros(6), coulomb=np.zeros(6), static=np.zeros(6))
    )
    assert (
        said_of(tmp_path, tray6.replaced(1.4 * tray6.parameters), believed, lambda r: r, motion=TRAY6_MOTION)
        == []
    )


@pytest.mark.parametrize("seed", range(6))
def test_a_badly_known_arm_is_no_fault(tmp_path, tray6, seed):
    """CAD that is off by 30 %, a load of 3 kg that it does not know, friction half or twice, or not in it."""
    rng = np.random.default_rng(seed)
    parameters = tray6.parameters * rng.uniform(0.7, 1.3, (6, 1))
    parameters[-1] = add_point_mass(parameters[-1], 3.0, np.array([0.1, 0.0, 0.02]))
    friction = {name: getattr(tray6.drives, name) * rng.uniform(0.5, 2, 6) for name in ("viscous", "coulomb")}
    drives = replace(tray6.drives, **friction, static=friction["coulomb"])
    bare = replace(tray6.drives, viscous=np.zeros(6), coulomb=np.zeros(6), static=np.zeros(6))
    for believed in (tray6, tray6.replaced(drives=bare)):
        true = tray6.replaced(parameters, drives)
        assert said_of(tmp_path, true, believed, lambda r: r, motion=TRAY6_MOTION) == []


def test_friction_does_not_explain_any_scale(tmp_path, tray6):
    """A wrist that its model makes four times too heavy: a thousand times the torque would be friction to the last
    percent, which is no slip."""
    parameters = tray6.parameters.copy()
    parameters[-1] *= 4.0
    rotors = tray6.drives.rotor_inertia * np.array([1, 1, 1, 1, 1, 4.0])
    bare = replace(
        tray6.drives, rotor_inertia=rotors, viscous=np.zeros(6), coulomb=np.zeros(6), static=np.zeros(6)
    )
    believed = tray6.replaced(parameters, bare)
    assert said_of(tmp_path, tray6, believed, lambda r: r, motion=TRAY6_MOTION) == []


def test_both_columns_of_two_joints_swapped(tmp_path, rubbing):
    """Positions and torques of one joint under the other's name, and both of a joint that turns the other way."""
    cases = {
        "swapped": lambda r: replace(r, q=r.q[:, ::-1], torque=r.torque[:, ::-1]),
        "turns the other way": lambda r: replace(r, q=column(r.q, 1, -1), torque=column(r.torque, 1, -1)),
    }
    for expected, change in cases.items():
        said = said_of(tmp_path, rubbing, rubbing, change)
        assert all(expected in line for line in said)
        assert {"q_deg.elbow", "tau_nm.elbow"} <= {line.split(": ")[1] for line in said}


def test_a_slip_stands_out_from_friction_that_the_model_lacks(tmp_path, tray6):
    """Nearly all of joint 6's torque is friction, of which the model knows nothing; which never drives, so a
    wrong sign is named."""
    rough = replace(tray6.drives, viscous=5 * tray6.drives.viscous, coulomb=5 * tray6.drives.coulomb)
    bare = replace(tray6.drives, viscous=np.zeros(6), coulomb=np.zeros(6), static=np.zeros(6))
    (said,) = said_of(
        tmp_path,
        tray6.replaced(drives=rough),
        tray6.replaced(drives=bare),
        lambda r: replace(r, torque=column(r.torque, 5, -1)),
        motion=TRAY6_MOTION,
    )
    assert "tau_nm.j6: looks of the wrong sign" in said


@pytest.mark.parametrize("rows", [50, 100, 200, 400])
def test_a_short_recording_is_no_slip(tmp_path, tray6, rows):
    """Filters that are longer than what they filter say nothing of units: what is too short is told as that later."""
    for start in (300, 900):
        part = slice(start, start + rows)
        said = said_of(
            tmp_path,
            tray6,
            tray6,
            lambda r, part=part: replace(r, t=r.t[part], q=r.q[part], torque=r.torque[part]),
            motion=TRAY6_MOTION,
        )
        assert [line for line in said if "no excitation" not in line] == []

"""Recordings as files: what is good comes back, what is bad is named with its place."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from rigbench.arm.dynamics import inverse_dynamics
from rigbench.errors import InputFaults
from rigbench.identify.fourier import FourierMotion
from rigbench.identify.plausible import implausible
from rigbench.identify.recording import Recording
from rigbench.identify.recording_file import column_names, read_recording, write_recording

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


def column(array, i, factor):
    changed = array.copy()
    changed[:, i] *= factor
    return changed


SLIPS = {
    "q in rad": (lambda r: replace(r, q=r.q / 57.29578), ["q_deg.j1: looks 57.3 times too small", "q_deg.j6"]),
    "q of one joint in rad": (lambda r: replace(r, q=column(r.q, 1, 1 / 57.29578)), ["q_deg.j2: looks 57.3 times too small"]),
    "q of one joint turned twice": (lambda r: replace(r, q=column(r.q, 1, 57.29578)), ["q_deg.j2", "it looks 57.3 times too large"]),
    "torques in N mm": (lambda r: replace(r, torque=r.torque * 1e3), ["tau_nm.j1: looks 1000 times too large", "tau_nm.j6"]),
    "one torque in kN m": (lambda r: replace(r, torque=column(r.torque, 2, 1e-3)), ["tau_nm.j3: looks 1000 times too small"]),
    "times in ms": (lambda r: replace(r, t=r.t * 1e3), ["bad.csv:1: t_s: 0.5 samples a second, so times may be in ms"]),
    "torques swapped": (lambda r: replace(r, torque=r.torque[:, [0, 2, 1, 3, 4, 5]]), ["tau_nm.j2 and tau_nm.j3 look swapped"]),
    "positions swapped": (lambda r: replace(r, q=r.q[:, [0, 1, 2, 4, 3, 5]]), ["q_deg.j4 and q_deg.j5 look swapped"]),
    "a joint at rest": (lambda r: replace(r, q=column(r.q, 3, 0.0)), ["q_deg.j4: no excitation: joint j4 moves by 0 deg"]),
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


VELOCITIES = {
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

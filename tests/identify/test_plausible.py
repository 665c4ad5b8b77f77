"""Recordings held against their arm: what is no recording of it is named with its place, and nothing else."""

from __future__ import annotations

import re
import shutil
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from rigbench.arm.files import load_arm
from rigbench.arm.physical import add_point_mass
from rigbench.identify.plausible import implausible
from rigbench.identify.recording_file import read_recording, write_recording

ROOT = Path(__file__).resolve().parents[2]
GRAVITY = (0.0, 0.0, -9.81)


@pytest.fixture
def said_of(tmp_path, recorded):
    """What is said of a recording of ``true`` when ``change(recording)`` came into its file."""

    def said(true, believed, change, v=False):
        path = tmp_path / "bad.csv"
        write_recording(path, true, change(recorded(true, v=v)))
        recording, table = read_recording(path, believed)
        return [str(fault) for fault in implausible(believed, GRAVITY, recording, table)]

    return said


def test_single_spikes_of_position_are_no_fault(said_of, planar2):
    """Within the joint's limits or far beyond, they are left out later; a joint that only spikes stands still."""

    def spiked(factor):
        def change(recording):
            q = recording.q * np.array([factor, 1.0])
            q[[200, 450, 700], 0] += np.radians([40.0, -40.0, 400.0])
            return replace(recording, q=q)

        return change

    assert said_of(planar2, planar2, spiked(1.0)) == []
    (said,) = said_of(planar2, planar2, spiked(0.0))
    assert "joint shoulder moves by 0 deg" in said


@pytest.mark.parametrize("what", ["q", "torque"])
def test_both_columns_are_named_where_either_may_be_of_the_wrong_sign(said_of, tmp_path, what):
    """The mirror image of an arm with a plane of symmetry about a vertical axis turns the other way, no more."""
    folder = ROOT / "robots_demo" / "planar2"
    text = (folder / "planar2.urdf").read_text().replace('<axis xyz="0 -1 0"/>', '<axis xyz="0 0 1"/>', 1)
    (tmp_path / "planar2.urdf").write_text(text)
    shutil.copy(folder / "arm.yaml", tmp_path)
    arm = load_arm(tmp_path / "arm.yaml")
    (said,) = said_of(arm, arm, lambda r: replace(r, **{what: column(getattr(r, what), 0, -1)}))
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
def test_a_slip_is_named(said_of, tray6, slip):
    """Each wrong unit and each swap, on a machine whose masses and friction are 15 % off the model's."""
    drives = replace(tray6.drives, viscous=1.15 * tray6.drives.viscous, coulomb=0.85 * tray6.drives.coulomb)
    change, expected = SLIPS[slip]
    said = "\n".join(said_of(tray6.replaced(1.15 * tray6.parameters, drives), tray6, change))
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
def test_a_velocity_that_is_none_is_named(said_of, rubbing, slip):
    """Velocities are held against the change of their own positions."""
    change, expected = VELOCITIES[slip]
    assert expected in "\n".join(said_of(rubbing, rubbing, lambda r: replace(r, v=change(r.v)), v=True))


def test_a_wrong_model_is_no_fault(said_of, tray6):
    """Masses 40 % up, no friction in the model: what identification is for, not the recording's fault."""
    believed = tray6.replaced(
        drives=replace(tray6.drives, viscous=np.zeros(6), coulomb=np.zeros(6), static=np.zeros(6))
    )
    assert said_of(tray6.replaced(1.4 * tray6.parameters), believed, lambda r: r) == []


@pytest.mark.parametrize("seed", range(6))
def test_a_badly_known_arm_is_no_fault(said_of, tray6, seed):
    """CAD that is off by 30 %, a load of 3 kg that it does not know, friction half or twice, or not in it."""
    rng = np.random.default_rng(seed)
    parameters = tray6.parameters * rng.uniform(0.7, 1.3, (6, 1))
    parameters[-1] = add_point_mass(parameters[-1], 3.0, np.array([0.1, 0.0, 0.02]))
    friction = {name: getattr(tray6.drives, name) * rng.uniform(0.5, 2, 6) for name in ("viscous", "coulomb")}
    drives = replace(tray6.drives, **friction, static=friction["coulomb"])
    bare = replace(tray6.drives, viscous=np.zeros(6), coulomb=np.zeros(6), static=np.zeros(6))
    for believed in (tray6, tray6.replaced(drives=bare)):
        true = tray6.replaced(parameters, drives)
        assert said_of(true, believed, lambda r: r) == []


def test_friction_does_not_explain_any_scale(said_of, tray6):
    """A wrist that its model makes four times too heavy: a thousand times the torque would be friction to the last
    percent, which is no slip."""
    parameters = tray6.parameters.copy()
    parameters[-1] *= 4.0
    rotors = tray6.drives.rotor_inertia * np.array([1, 1, 1, 1, 1, 4.0])
    bare = replace(
        tray6.drives, rotor_inertia=rotors, viscous=np.zeros(6), coulomb=np.zeros(6), static=np.zeros(6)
    )
    believed = tray6.replaced(parameters, bare)
    assert said_of(tray6, believed, lambda r: r) == []


def test_both_columns_of_two_joints_swapped(said_of, rubbing):
    """Positions and torques of one joint under the other's name, and both of a joint that turns the other way."""
    cases = {
        "swapped": lambda r: replace(r, q=r.q[:, ::-1], torque=r.torque[:, ::-1]),
        "turns the other way": lambda r: replace(r, q=column(r.q, 1, -1), torque=column(r.torque, 1, -1)),
    }
    for expected, change in cases.items():
        said = said_of(rubbing, rubbing, change)
        assert all(expected in line for line in said)
        assert {"q_deg.elbow", "tau_nm.elbow"} <= {line.split(": ")[1] for line in said}


def test_a_slip_stands_out_from_friction_that_the_model_lacks(said_of, tray6):
    """Nearly all of joint 6's torque is friction, of which the model knows nothing; which never drives, so a
    wrong sign is named."""
    rough = replace(tray6.drives, viscous=5 * tray6.drives.viscous, coulomb=5 * tray6.drives.coulomb)
    bare = replace(tray6.drives, viscous=np.zeros(6), coulomb=np.zeros(6), static=np.zeros(6))
    (said,) = said_of(
        tray6.replaced(drives=rough),
        tray6.replaced(drives=bare),
        lambda r: replace(r, torque=column(r.torque, 5, -1)),
    )
    assert "tau_nm.j6: looks of the wrong sign" in said


@pytest.mark.parametrize("rows", [50, 100, 200, 400])
def test_a_short_recording_is_no_slip(said_of, tray6, rows):
    """Filters that are longer than what they filter say nothing of units: what is too short is told as that later."""
    for start in (300, 900):
        part = slice(start, start + rows)
        said = said_of(
            tray6, tray6, lambda r, part=part: replace(r, t=r.t[part], q=r.q[part], torque=r.torque[part])
        )
        assert [line for line in said if "no excitation" not in line] == []

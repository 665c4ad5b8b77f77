"""Identified arms as files: they read back as what was found, and pay on the rig."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from rigbench.arm.dynamics import tool_path
from rigbench.arm.files import ArmFiles
from rigbench.errors import StoreError
from rigbench.identify.base import base_of
from rigbench.identify.bounds import bounds_of
from rigbench.identify.consistent import Consistent, consistent
from rigbench.identify.estimate import Estimate, estimate
from rigbench.identify.excitation import Search
from rigbench.identify.filtering import rows_of
from rigbench.identify.identified import write_identified
from rigbench.identify.recording import of_run
from rigbench.identify.regressor import Terms, parameter_values
from rigbench.identify.series import SeriesSpace
from rigbench.laws.options import options_model
from rigbench.laws.registry import choose, registered
from rigbench.motion.via import ViaMotion
from rigbench.rig import Rates, Run, simulate

GRAVITY = (0.0, 0.0, -9.81)
ROOT = Path(__file__).resolve().parents[2]
FILES = ArmFiles.read(ROOT / "robots_demo" / "tray6" / "arm.yaml")


def off(arm, share, seed=0):
    """The arm with masses, rotors and friction off by up to ``share``, each by its own factor."""
    rng = np.random.default_rng(seed)

    def factor(*shape):
        return rng.uniform(1 - share, 1 + share, shape)

    drives = arm.drives
    dry = factor(arm.n)
    changed = {name: getattr(drives, name) * factor(arm.n) for name in ("rotor_inertia", "viscous")}
    drives = replace(drives, coulomb=drives.coulomb * dry, static=drives.static * dry, **changed)
    return arm.replaced(arm.parameters * factor(arm.n, 1), drives)


def known(arm, terms=None):
    """An estimate of an arm's own values, as if known to 1 %."""
    base = base_of(arm, GRAVITY, terms or Terms())
    values = base.combination @ parameter_values(arm, terms or Terms())
    return Estimate(
        base, values, np.diag((0.01 * values) ** 2), np.ones(arm.n), np.zeros(arm.n, int), 100, 10.0
    )


def written(folder, name, files, arm, terms=None):
    """The files of an arm that is taken as found."""
    count = len(parameter_values(arm, terms or Terms()))
    result = Consistent(arm, np.zeros(arm.n), 0.01 * np.eye(count), np.ones(count - 10 * arm.n))
    return write_identified(folder, name, files, terms or Terms(), known(arm, terms), result)


def test_an_arm_reads_back_as_what_was_found(tmp_path):
    """Every array of the arm comes back: geometry, limits, tool and names as declared, the rest as identified."""
    found = off(FILES.arm(), 0.2)
    back = ArmFiles.read(written(tmp_path, "tray6-identified", FILES, found)[0]).arm()
    assert (back.joints, back.links, back.name) == (found.joints, found.links, found.name)
    for name in ("rotation", "position", "axis", "tool_rotation", "tool_position", "lower", "upper"):
        assert np.array_equal(getattr(back, name), getattr(found, name)), name
    assert np.allclose(back.parameters, found.parameters, rtol=1e-12, atol=1e-14)
    for name, value in vars(found.drives).items():
        assert np.allclose(getattr(back.drives, name), value, rtol=1e-14, atol=0), name


def test_bodies_of_fixed_and_locked_links_are_not_counted_twice(tmp_path):
    """With the gripper's joint locked the body of five joints holds six links, and does so once."""
    text = FILES.text.replace("# lock: {finger_a: 0.02}", "lock: {j6: 0.3} #")
    text = text[: text.index("  j6:\n    gear_ratio")]
    files = replace(FILES, text=text)
    arm = files.arm()
    assert arm.n == 5
    back = ArmFiles.read(written(tmp_path, "five", files, arm)[0]).arm()
    assert np.allclose(back.parameters, arm.parameters, rtol=1e-12, atol=1e-14)


def test_what_was_not_identified_stays(tmp_path):
    """Without friction and rotors among the terms, the drives read back as declared, breakaway included."""
    text = FILES.text.replace("coulomb: 5.5 ", "static: 7.0\n    stribeck_speed: 0.05\n    coulomb: 5.5 ")
    files = replace(FILES, text=text)
    terms = Terms(rotor=False, viscous=False, coulomb=False)
    back = ArmFiles.read(written(tmp_path, "links", files, files.arm(), terms)[0]).arm()
    for name, value in vars(files.arm().drives).items():
        assert np.array_equal(getattr(back.drives, name), value), name
    whole = ArmFiles.read(written(tmp_path, "all", files, off(files.arm(), 0.2))[0]).arm()
    assert whole.drives.static[0] / whole.drives.coulomb[0] == pytest.approx(7.0 / 5.5)


def test_a_folder_that_is_a_file_is_a_fault(tmp_path):
    """No traceback where nothing can be written; drives changed elsewhere are refused."""
    (tmp_path / "file").write_text("")
    with pytest.raises(StoreError, match="can't be written"):
        written(tmp_path / "file", "a", FILES, FILES.arm())
    with pytest.raises(ValueError, match="no arm file"):
        written(tmp_path, "a", FILES.with_drives([("all", "viscous", 1.0)]), FILES.arm())


def tool_error(motion, model):
    """Largest distance of the tool from its reference [m], tray6 under computed torque with a model."""
    log = simulate(run_of(motion, model))
    assert log.outcome == "finished"
    chain = log.plant.chain(GRAVITY)
    tool, wanted = (tool_path(chain, np.ascontiguousarray(q))[0] for q in (log.q, log.q_ref))
    return float(np.linalg.norm(tool - wanted, axis=1).max())


def run_of(motion, model):
    law = choose("computed-torque", options_model(registered().laws["computed-torque"].cls)(natural_hz=5.0))
    pose = tuple(motion.reference(np.zeros(1))[0][0].tolist())
    return Run(FILES, law, motion, Rates(1000, 2000), pose, 0.5, model=model)


def test_identification_pays_on_the_rig(tmp_path):
    """tray6, CAD off by 10 %: one excitation under the CAD model, recorded with noise of 0.001 deg and
    0.5 N m, makes computed torque at least five times more accurate on another motion."""
    arm = FILES.arm()
    cad = ArmFiles.read(written(tmp_path, "cad", FILES, off(arm, 0.1))[0])
    bounds = bounds_of(arm, 0.8)  # off the limits, as the CAD model tracks badly
    search = Search(cad.arm(), GRAVITY, Terms(), bounds, SeriesSpace(bounds, 5, 6.0))
    motion = search.motion(search.random_point(np.random.default_rng(3)), periods=4)
    log = simulate(run_of(motion, cad))
    rng = np.random.default_rng(1)
    noise = np.radians(0.001) * rng.normal(size=log.q.shape), 0.5 * rng.normal(size=log.q.shape)
    recording = of_run(log, "excitation", *noise)
    rows = rows_of(cad.arm(), GRAVITY, Terms(), search.base, recording)
    found = estimate(search.base, [rows])
    result = consistent(cad.arm(), Terms(), found)
    identified = ArmFiles.read(write_identified(tmp_path, "identified", cad, Terms(), found, result)[0])
    load = np.radians([[0, -60, 90, 0, 60, 0], [70, -20, 60, 0, 50, 0], [0, -60, 90, 0, 60, 0]])
    test = ViaMotion(tuple(map(tuple, load.tolist())), leg_s=1.0, rest_s=0.3)
    before, after = tool_error(test, cad), tool_error(test, identified)
    print(f"tool error with CAD {before * 1e3:.2f} mm, identified {after * 1e3:.3f} mm")
    assert 5 * after < before

"""Arms that nobody here wrote: URDF files that the physics engine's package ships as data."""

from __future__ import annotations

import csv
import io
from pathlib import Path

import pybullet_data
import pytest
from typer.testing import CliRunner

from rigbench.arm.files import load_arm
from rigbench.cli import app
from rigbench.errors import InputFaults

DATA = Path(pybullet_data.getDataPath())
SEVEN = [f"lbr_iiwa_joint_{i}" for i in range(1, 8)]
OTHER_SEVEN = [f"panda_joint{i}" for i in range(1, 8)]

ARMS = {
    "seven axes": ("kuka_iiwa/model.urdf", "lbr_iiwa_link_7", SEVEN, ""),
    "seven axes, gripper locked": (
        "franka_panda/panda.urdf", "panda_grasptarget", OTHER_SEVEN,
        "lock: {panda_finger_joint1: 0.02, panda_finger_joint2: 0.02}",
    ),
    "a slide and a turn": ("cartpole.urdf", "pole", ["slider_to_cart", "cart_to_pole"], ""),
    "five parallel axes": ("pendulum5.urdf", "link4", [f"joint{i}" for i in range(5)], ""),
}  # fmt: skip
IMPOSSIBLE = ("xarm/xarm6_robot.urdf", "link6", [f"joint{i}" for i in range(1, 7)], "")

EXPERIMENT = """
rigbench: 1
arm: arm.yaml
rates: {{control_hz: 1000, physics_hz: 1000}}
motions: {{move: {{via_deg: [{start}, {end}], leg_s: 0.8, rest_s: 0.2}}}}
laws:
  pd: {{law: independent-joint, natural_hz: {natural_hz}}}
  computed torque: {{law: computed-torque, natural_hz: {natural_hz}}}
mismatch: {{link_mass_percent: 5, link_cog_mm: 5, rotor_inertia_percent: 15, coulomb_percent: 30}}
conditions: {{together: [1]}}
draws: 3
tolerance: {{tool_peak_mm: 5}}
"""


def write_arm(folder, shipped, lock=None):
    file, tool, joints, declared = shipped
    drive = "{gear_ratio: 100, rotor_inertia: 2.0e-5, coulomb: 2, viscous: 3}"
    drives = "".join(f"  {joint}: {drive}\n" for joint in joints)
    text = f"urdf: {DATA / file}\ntool: {tool}\n{declared if lock is None else lock}\ndrives:\n{drives}"
    (folder / "arm.yaml").write_text(text)
    return folder / "arm.yaml"


@pytest.mark.parametrize("name", ARMS)
def test_a_short_campaign_runs(tmp_path, monkeypatch, name):
    """Each arm is read, tracked by two laws and perturbed: no run fails, and the exact model all but
    cancels: computed torque at level 0 is at least twenty times closer than PD."""
    arm = load_arm(write_arm(tmp_path, ARMS[name]))
    start, end = [0, -20, 0, -60, 0, 60, 0][: arm.n], [30, 0, 20, -80, 20, 40, 20][: arm.n]
    # five parallel axes couple so strongly that joint-wise gains for 4 Hz are beyond what 1 kHz holds stable
    natural_hz = 1 if name == "five parallel axes" else 4
    (tmp_path / "job.yaml").write_text(EXPERIMENT.format(start=start, end=end, natural_hz=natural_hz))
    monkeypatch.chdir(tmp_path)
    done = CliRunner().invoke(app, ["run", "job.yaml", "--jobs", "0"])
    assert done.exit_code == 0, done.output
    text = CliRunner().invoke(app, ["export", "results/job.sqlite"]).stdout
    rows = list(csv.DictReader(io.StringIO(text)))
    assert len(rows) == 2 * (1 + 3)
    assert {row["outcome"] for row in rows} == {"finished"}
    assert max(float(row["residual_rad_s"]) for row in rows) < 1e-9
    peak = {row["law"]: float(row["tool_peak_mm"]) for row in rows if row["condition"] == "nominal"}
    assert peak["computed torque"] < peak["pd"] / 20


def test_an_impossible_inertia_is_refused_with_its_line(tmp_path):
    """One of those files has links that no body can have; reading it says which and where."""
    with pytest.raises(InputFaults, match=r"xarm6_robot\.urdf:109: link link2: its principal inertias"):
        load_arm(write_arm(tmp_path, IMPOSSIBLE))


def test_a_gripper_that_is_not_locked_is_a_fault_that_says_how(tmp_path):
    """The fault names the fingers, with their addresses, and prints a lock block to paste."""
    with pytest.raises(InputFaults) as caught:
        load_arm(write_arm(tmp_path, ARMS["seven axes, gripper locked"], lock=""))
    text = str(caught.value)
    assert "panda_finger_joint1" in text
    assert "panda_finger_joint2" in text
    assert "lock:" in text

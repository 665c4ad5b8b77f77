"""Tracking on the two-link arm of Kelly, Santibanez, Loria 2005, ch. 5, by the whole program.

Arm, reference and gains are the book's (as quoted in other works). The errors were derived apart from
this project, with a tight ODE solver, continuous control and an exact plant; sampled control comes
closer to them as its rate rises.
"""

from __future__ import annotations

import numpy as np
import pytest

from rigbench.campaign.work import do
from rigbench.experiment import load_experiment

# (plant, law): RMS of joint 1, of joint 2, peak of joint 1, of joint 2 [deg]
EXPECTED = {
    ("nominal", "pd"): (2.187550, 0.160062, 2.52060, 0.21831),
    ("nominal", "pd + gravity"): (0.398120, 0.033606, 0.63690, 0.08051),
    ("nominal", "pd + feedforward"): (0, 0, 0, 0),
    ("nominal", "computed torque"): (0, 0, 0, 0),
    ("heavy", "pd"): (2.605635, 0.192186, 3.00798, 0.26122),
    ("heavy", "pd + feedforward"): (0.434707, 0.032062, 0.50200, 0.04357),
    ("heavy", "computed torque"): (0.174667, 0.008966, 0.20386, 0.01730),
}

URDF = """<robot name="two links">
<link name="stand"/>
<joint name="shoulder" type="continuous"><parent link="stand"/><child link="upper"/><axis xyz="0 -1 0"/></joint>
<link name="upper"><inertial><origin xyz="0 0 -0.0983"/><mass value="{m1}"/>
 <inertia ixx="{i1}" ixy="0" ixz="0" iyy="{i1}" iyz="0" izz="{z1}"/></inertial></link>
<joint name="elbow" type="continuous"><parent link="upper"/><child link="lower"/><origin xyz="0 0 -0.26"/>
 <axis xyz="0 -1 0"/></joint>
<link name="lower"><inertial><origin xyz="0 0 -0.0229"/><mass value="{m2}"/>
 <inertia ixx="{i2}" ixy="0" ixz="0" iyy="{i2}" iyz="0" izz="{z2}"/></inertial></link>
<joint name="end" type="fixed"><parent link="lower"/><child link="tip"/><origin xyz="0 0 -0.26"/></joint>
<link name="tip"/>
</robot>
"""

EXPERIMENT = """
rigbench: 1
arm: {plant}.yaml
model: nominal.yaml
rates: {{control_hz: {hz}, physics_hz: {physics}}}
motions: {{published: {{file: reference.csv}}}}
laws:
  pd: {{law: independent-joint, kp: [200, 150], kd: [3, 3]}}
  pd + gravity: {{law: gravity-compensated, kp: [200, 150], kd: [3, 3]}}
  pd + feedforward: {{law: torque-feedforward, kp: [200, 150], kd: [3, 3]}}
  computed torque: {{law: computed-torque, kp: [1500, 14000], kd: [77.46, 236.64]}}
"""


def write_arms(folder):
    for name, scale in (("nominal", 1.0), ("heavy", 1.2)):
        values = {"m1": 6.5225, "m2": 2.0458, "i1": 0.1213, "i2": 0.0116, "z1": 0.01, "z2": 0.001}
        (folder / f"{name}.urdf").write_text(URDF.format(**{k: v * scale for k, v in values.items()}))
        text = f"urdf: {name}.urdf\ntool: tip\ndrives: {{shoulder: {{}}, elbow: {{}}}}\n"
        (folder / f"{name}.yaml").write_text(text)


def write_reference(folder):
    t = np.arange(0, 10.0005, 0.001)
    rise = 1 - np.exp(-2 * t**3)
    q1 = np.pi / 4 * rise + np.pi / 9 * rise * np.sin(4 * t)
    q2 = np.pi / 3 * rise + np.pi / 6 * rise * np.sin(3 * t)
    rows = [
        f"{a:.3f},{float(b)!r},{float(c)!r}"
        for a, b, c in zip(t, np.rad2deg(q1), np.rad2deg(q2), strict=True)
    ]
    (folder / "reference.csv").write_text("\n".join(["t_s,shoulder,elbow", *rows]) + "\n")


def track(folder, plant, hz):
    """Run the experiment from its YAML; return, per law, the four figures."""
    path = folder / f"{plant}-{hz}.yaml"
    path.write_text(EXPERIMENT.format(plant=plant, hz=hz, physics=max(hz, 2000)))
    found = {}
    for entry in load_experiment(path).plan().entries:
        outcome = do(entry.run)
        assert outcome.outcome == "finished", outcome.reason
        names = [f"joint_{kind}_deg.{joint}" for kind in ("rms", "peak") for joint in ("shoulder", "elbow")]
        found[entry.law] = np.array([outcome.scores[name] for name in names])
    return found


@pytest.mark.parametrize("plant", ["nominal", "heavy"])
def test_published_tracking_errors(tmp_path, plant):
    """Each figure lies within 2 % or 0.01 deg of the derived one at 1 kHz, and closer at 4 kHz.

    Where a figure is already within 0.0005 deg at 1 kHz it need only stay there: the derived figures
    carry five digits.
    """
    write_arms(tmp_path)
    write_reference(tmp_path)
    slow, fast = track(tmp_path, plant, 1000), track(tmp_path, plant, 4000)
    for (which, law), figures in EXPECTED.items():
        if which != plant:
            continue
        derived = np.array(figures)
        off_slow, off_fast = np.abs(slow[law] - derived), np.abs(fast[law] - derived)
        assert np.all(off_slow <= np.maximum(0.02 * derived, 0.01)), (law, slow[law], derived)
        assert np.all((off_fast < off_slow) | (off_fast <= 5e-4)), (law, slow[law], fast[law], derived)

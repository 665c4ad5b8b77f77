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
def test_published_tracking_errors(tmp_path, two_link_files, plant):
    """Each figure lies within 2 % or 0.01 deg of the derived one at 1 kHz, and closer at 4 kHz.

    Where a figure is already within 0.0005 deg at 1 kHz it need only stay there: the derived figures
    carry five digits.
    """
    two_link_files(tmp_path)
    slow, fast = track(tmp_path, plant, 1000), track(tmp_path, plant, 4000)
    for (which, law), figures in EXPECTED.items():
        if which != plant:
            continue
        derived = np.array(figures)
        off_slow, off_fast = np.abs(slow[law] - derived), np.abs(fast[law] - derived)
        assert np.all(off_slow <= np.maximum(0.02 * derived, 0.01)), (law, slow[law], derived)
        assert np.all((off_fast < off_slow) | (off_fast <= 5e-4)), (law, slow[law], fast[law], derived)

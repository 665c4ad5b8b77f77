"""Golden rows: a change of ours that alters what a run yields must raise ``NUMERICS``.

The stored rows of users are taken for new ones only while the number stays; so if this test fails on
purpose, raise ``rigbench.rig.run.NUMERICS`` and write the rows anew with

    python tests/rig/test_golden.py
"""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest

from rigbench.arm.files import ArmFiles
from rigbench.arm.mismatch import Mismatch, Payload
from rigbench.laws.options import options_model
from rigbench.laws.registry import choose, registered
from rigbench.motion.via import ViaMotion
from rigbench.rig import NUMERICS, Rates, Run, simulate
from rigbench.scores.of_run import score_run

ROOT = Path(__file__).resolve().parents[2]
GOLDEN = Path(__file__).with_suffix(".json")
LAWS = ("computed-torque", "gravity-compensated", "independent-joint", "torque-feedforward")
HOST = ("law_us", "law_share_percent")


def golden_run(law: str, level: float) -> Run:
    """A second on tray6 with everything that a run can have, in direction of draw 5."""
    poses = np.deg2rad([[0, -60, 90, 0, 60, 0], [30, -40, 75, 10, 55, -20]])
    mismatch = Mismatch(5, 5, 15, Payload(1.5, 0, 3, 30), 30, 30, 15)
    options = options_model(registered().laws[law].cls)()
    return Run(
        arm=ArmFiles.read(ROOT / "robots_demo" / "tray6" / "arm.yaml"),
        law=choose(law, options),
        motion=ViaMotion(points=tuple(map(tuple, poses.tolist())), leg_s=0.7, rest_s=0.2),
        rates=Rates(500, 1000),
        gain_pose=tuple(poses[0].tolist()),
        settle_band_mm=0.5,
        seed=9,
        mismatch=mismatch,
        level=level,
        sources=mismatch.sources if level else (),
        draw=5 if level else None,
    )


def measured() -> dict[str, dict[str, float]]:
    found = {}
    for law in LAWS:
        for level in (0.0, 1.0):
            run = golden_run(law, level)
            scores = score_run(simulate(run), run.motion, run.settle_band_mm)
            found[f"{law} at {level}"] = {
                name: value if np.isfinite(value) else None
                for name, value in scores.items()
                if name not in HOST
            }
    return found


def test_golden_rows_stand():
    """Scores equal the stored ones to 1e-9, or 1e-9 in the score's unit: other types of CPU round
    otherwise, a change of method shows far above."""
    golden = json.loads(GOLDEN.read_text())
    assert golden["numerics"] == NUMERICS, "rows were written under another number: write them anew"
    found = measured()
    assert found.keys() == golden["rows"].keys()
    for name, scores in golden["rows"].items():
        for score, value in scores.items():
            if value is None:
                assert found[name][score] is None, (name, score)
            else:
                assert found[name][score] == pytest.approx(value, rel=1e-9, abs=1e-9), (name, score)


if __name__ == "__main__":
    GOLDEN.write_text(json.dumps({"numerics": NUMERICS, "rows": measured()}, indent=1) + "\n")

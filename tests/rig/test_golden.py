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
from rigbench.arm.mismatch import Case, Mismatch, Payload
from rigbench.laws.options import options_model
from rigbench.laws.registry import choose, registered
from rigbench.motion.table import TableMotion
from rigbench.motion.via import ViaMotion
from rigbench.rig import NUMERICS, Rates, Run, simulate
from rigbench.rig.sampled import Sensing, Timing
from rigbench.scores.of_run import score_run

ROOT = Path(__file__).resolve().parents[2]
GOLDEN = Path(__file__).with_suffix(".json")
LAWS = ("computed-torque", "gravity-compensated", "independent-joint", "torque-feedforward")
HOST = ("law_us", "law_share_percent")
POSES = np.deg2rad([[0, -60, 90, 0, 60, 0], [30, -40, 75, 10, 55, -20]])
IMPERFECT = (
    ("all", "torque_lag_ms", 0.5), ("all", "encoder_counts", 65536), ("all", "gear_efficiency", 0.95),
    ("all", "motor_torque_step", 1e-4), ("j2", "stiffness", 4e4), ("j2", "spring_damping", 40.0),
    ("j3", "lugre_stiffness", 2e4), ("j3", "lugre_damping", 150.0), ("j1", "static", 6.5),
    ("j1", "stribeck_speed", 0.05), ("j4", "motor_ripple", 0.003), ("j5", "motor_stall_torque", 0.9),
    ("j5", "motor_no_load_speed", 600.0),
)  # fmt: skip


def plain_run(law: str, level: float) -> Run:
    """A second on tray6 with every source of the link model and friction, in the direction of draw 5."""
    mismatch = Mismatch(5, 5, 15, Payload(1.5, 0, 3, 30), 30, 30, 15)
    return Run(
        arm=ArmFiles.read(ROOT / "robots_demo" / "tray6" / "arm.yaml"),
        law=choose(law, options_model(registered().laws[law].cls)()),
        motion=ViaMotion(points=tuple(map(tuple, POSES.tolist())), leg_s=0.7, rest_s=0.2),
        rates=Rates(500, 1000),
        gain_pose=tuple(POSES[0].tolist()),
        settle_band_mm=0.5,
        seed=9,
        mismatch=mismatch,
        level=level,
        sources=mismatch.sources if level else (),
        draw=5 if level else None,
    )


def imperfect_run() -> Run:
    """The same second with everything else that a run can have."""
    arm = ArmFiles.read(ROOT / "robots_demo" / "tray6" / "arm.yaml")
    mismatch = Mismatch(
        link_mass_percent=5, payload=Payload(1.5, 0, 3, 30), torque_constant_percent=5, torque_bias_percent=1,
        encoder_offset_deg=0.05, stiffness_percent=20, delay_ms=0.3, base_tilt_deg=0.3,
    )  # fmt: skip
    via = ViaMotion(points=tuple(map(tuple, POSES.tolist())), leg_s=0.7, rest_s=0.2)
    times = np.linspace(0.0, 0.9, 10)
    return Run(
        arm=arm.with_drives(IMPERFECT),
        model=arm,
        law=choose("computed-torque", options_model(registered().laws["computed-torque"].cls)(model_hz=250)),
        motion=TableMotion(tuple(times.tolist()), tuple(map(tuple, via.reference(times)[0].tolist()))),
        rates=Rates(500, 2000),
        gain_pose=tuple(POSES[1].tolist()),
        settle_band_mm=0.5,
        seed=9,
        mismatch=mismatch,
        level=1.0,
        sources=mismatch.sources,
        draw=2,
        start_offset=(0.01, 0.0, -0.01, 0.0, 0.0, 0.02),
        gravity=(0.0, 0.1, -9.8),
        case=Case(payload_kg=2.0),
        sensing=Sensing(noise_deg=0.002, velocity_corner_hz=80.0),
        timing=Timing(delay_ms=0.7, jitter_percent=50, dropped_percent=2, model_late=True),
        base_tilt=(0.002, -0.001),
    )


def golden_runs() -> dict[str, Run]:
    plain = {f"{law} at {level}": plain_run(law, level) for law in LAWS for level in (0.0, 1.0)}
    return plain | {"imperfect": imperfect_run()}


def measured() -> dict[str, dict[str, float | None]]:
    found = {}
    for name, run in golden_runs().items():
        scores = score_run(simulate(run), run.motion, run.settle_band_mm)
        found[name] = {
            score: value if np.isfinite(value) else None
            for score, value in scores.items()
            if score not in HOST
        }
    return found


def test_golden_rows_stand():
    """Scores equal the stored ones to 1e-9 (1e-6 with all imperfections, whose rounded counts make small
    differences larger), relative or in the score's unit: other types of CPU round otherwise, a change of
    method shows far above."""
    golden = json.loads(GOLDEN.read_text())
    assert golden["numerics"] == NUMERICS, "rows were written under another number: write them anew"
    found = measured()
    assert found.keys() == golden["rows"].keys()
    for name, scores in golden["rows"].items():
        close = 1e-6 if name == "imperfect" else 1e-9
        assert found[name].keys() == scores.keys()
        for score, value in scores.items():
            if value is None:
                assert found[name][score] is None, (name, score)
            else:
                assert found[name][score] == pytest.approx(value, rel=close, abs=close), (name, score)


if __name__ == "__main__":
    GOLDEN.write_text(json.dumps({"numerics": NUMERICS, "rows": measured()}, indent=1) + "\n")

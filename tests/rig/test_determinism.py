"""A run is a function of its inputs, and a worker stays the size it is."""

from __future__ import annotations

import hashlib
import pickle
import subprocess
import sys
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from rigbench.arm.files import ArmFiles
from rigbench.arm.mismatch import Mismatch
from rigbench.laws.options import options_model
from rigbench.laws.registry import choose, registered
from rigbench.motion.via import ViaMotion
from rigbench.rig import Rates, Run, simulate
from rigbench.rig.sampled import Sensing, Timing

ROOT = Path(__file__).resolve().parents[2]
MISMATCH = Mismatch(link_mass_percent=5, coulomb_percent=30)

ELSEWHERE = """
import hashlib, pickle, sys
from rigbench.rig import simulate
log = simulate(pickle.loads(sys.stdin.buffer.read()))
print(hashlib.sha256(log.q.tobytes() + log.torque.tobytes()).hexdigest())
"""


def tray_run(law: str = "computed-torque", draw: int = 0, **given) -> Run:
    poses = np.deg2rad([[0, -60, 90, 0, 60, 0], [10, -55, 85, 0, 60, 10]])
    return Run(
        arm=ArmFiles.read(ROOT / "robots_demo" / "tray6" / "arm.yaml"),
        law=choose(law, options_model(registered().laws[law].cls)()),
        motion=ViaMotion(points=tuple(map(tuple, poses.tolist())), leg_s=0.15, rest_s=0.05),
        rates=Rates(500, 1000),
        gain_pose=tuple(poses[0].tolist()),
        settle_band_mm=0.5,
        seed=2,
        mismatch=MISMATCH,
        level=1.0,
        sources=MISMATCH.sources,
        draw=draw,
        **given,
    )


def bits(log) -> str:
    return hashlib.sha256(log.q.tobytes() + log.torque.tobytes()).hexdigest()


@pytest.mark.parametrize(
    "given",
    [
        {},
        {
            "sensing": Sensing(noise_deg=0.01),
            "timing": Timing(delay_ms=1.3, jitter_percent=50, dropped_percent=5, model_late=True),
        },
    ],
    ids=["ideal", "imperfect"],
)
def test_same_bits_alone_after_others_and_in_another_process(given):
    """Alone, after 100 other runs of every law, and in a fresh process: the same bits."""
    run = tray_run(**given)
    alone = bits(simulate(run))
    laws = sorted(registered().laws)
    for k in range(100):
        simulate(tray_run(laws[k % len(laws)], draw=k))
    assert bits(simulate(run)) == alone
    done = subprocess.run(
        [sys.executable, "-c", ELSEWHERE], input=pickle.dumps(run), capture_output=True, check=True
    )
    assert done.stdout.decode().strip() == alone
    assert bits(simulate(replace(run, draw=1))) != alone


def resident_mb() -> float:
    status = Path("/proc/self/status").read_text()
    return int(status.split("VmRSS:")[1].split()[0]) / 1024


@pytest.mark.evidence
def test_memory_of_a_worker_stays_flat_over_2000_runs():
    """Less than 10 MB more after 2,000 runs than after the first 200."""
    for k in range(200):
        simulate(tray_run(draw=k))
    before = resident_mb()
    for k in range(2000):
        simulate(tray_run(draw=k % 300))
    assert resident_mb() - before < 10

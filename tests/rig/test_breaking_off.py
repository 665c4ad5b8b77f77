"""Runs that end before their time."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest

from rigbench.arm.files import ArmFiles
from rigbench.laws.options import options_model
from rigbench.laws.registry import choose, load_file_law, registered
from rigbench.motion.via import ViaMotion
from rigbench.rig import Rates, Run, simulate
from rigbench.scores.of_run import score_run

ARM = Path(__file__).resolve().parents[2] / "robots_demo/planar2/arm.yaml"

PUSH = """
from rigbench.laws import Law


class Push(Law):
    def start(self, setup):
        pass

    def torque(self, t, q, v, ref, held):
        return {torque}
"""


def pushed(tmp_path, torque, arm=None):
    """A run of 1 s under a law in plain Python that commands so much."""
    (tmp_path / "push.py").write_text(PUSH.format(torque=torque))
    cls, files = load_file_law(tmp_path / "push.py", "Push")
    return run_of(choose("push.py:Push", options_model(cls)(), files), arm)


def run_of(law, arm=None):
    motion = ViaMotion(points=((0.0, 0.3), (0.4, -0.2)), leg_s=0.8, rest_s=0.2)
    return Run(arm or ArmFiles.read(ARM), law, motion, Rates(1000, 1000), (0.0, 0.3), 0.5)


def ends_early(run, outcome, words):
    """The run broke off so, says when and where in words, and no number of its log or scores is NaN."""
    log = simulate(run)
    assert log.outcome == outcome
    assert words in log.reason
    assert 0 < len(log.t) < 1001
    assert f"{log.t[-1] + 1e-3:.3f} s" in log.reason
    for array in (log.q, log.v, log.torque):
        assert np.isfinite(array).all()
    scores = score_run(log, run.motion, 0.5)
    assert not any(math.isnan(value) for value in scores.values())


def test_a_joint_that_meets_its_stop(tmp_path):
    """A constant push ends at the position limit, and the joint is named."""
    ends_early(pushed(tmp_path, "[80.0, 0.0]"), "hit-stop", "met its limit")


def test_a_joint_that_runs_away(tmp_path):
    """Drives without a torque limit to speak of pass ten times the speed limit within a step."""
    strong = ArmFiles.read(ARM).with_drives([("all", "torque_limit", 1e9)])
    ends_early(pushed(tmp_path, "[1e6, -1e6]", strong), "diverged", "ran away")


@pytest.mark.parametrize("name", sorted(registered().laws))
def test_gains_that_no_sampled_loop_bears(name):
    """Every built-in law, at a natural frequency ten times its own sampling rate, runs away."""
    cls = registered().laws[name].cls
    strong = ArmFiles.read(ARM).with_drives([("all", "torque_limit", 1e9)])
    ends_early(run_of(choose(name, options_model(cls)(natural_hz=10_000.0)), strong), "diverged", "ran away")

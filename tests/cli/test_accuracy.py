"""``rigbench matrix --accuracy``: ISO 9283 from replays of runs that differ by noise alone."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
from typer.testing import Result

from rigbench.arm.dynamics import tool_path
from rigbench.campaign.accuracy import _ends
from rigbench.experiment import load_experiment
from rigbench.motion.via import ViaMotion
from rigbench.rig import simulate

STORE = "results/trial.sqlite"
EDGE = "  edge: {line: {from_m: [0.5, 0, 0.1], to_m: [0.5, 0, 0.2], near_deg: [-20, 60]}, leg_s: 0.3, rest_s: 0.1}\n"


@pytest.fixture
def noisy(trial: Path, trial_text: str, run_here: Callable[..., Result]) -> Path:
    """A campaign whose sensors are noisy: a motion between poses, and one along a line."""
    text = trial_text.replace("laws:\n", f"{EDGE}laws:\n").replace("draws: 3", "draws: 4")
    trial.write_text(f"{text}sensing: {{noise_deg: 0.05}}\n", "utf-8")
    assert run_here(str(trial)).exit_code == 0
    return trial


def test_it_is_what_the_runs_themselves_say(noisy: Path, call: Callable[..., Result]) -> None:
    """AP and RP of the pose, and bounds of AT and RT, from the runs done anew and the standard's formulas."""
    done = call("matrix", STORE, "--accuracy", "computed torque", "--json")
    assert done.exit_code == 0, done.stderr
    told = json.loads(done.stdout)["accuracy"]["motions"]
    assert set(told) == {"swing", "edge"}
    assert told["swing"]["path"] is None
    for motion in told:
        entries = [
            entry
            for entry in load_experiment("trial.yaml").plan().entries
            if (entry.law, entry.motion, entry.condition) == ("computed torque", motion, "nominal")
        ]
        logs = [simulate(entry.run) for entry in entries]
        assert told[motion]["runs"] == len(logs) == 4
        assert told[motion]["not_as_stored"] == 0
        points = [
            1e3
            * np.array(
                [
                    tool_path(log.plant.chain(log.gravity), np.ascontiguousarray(q))[0]
                    for q in (log.q, log.q_ref)
                ]
            )
            for log in logs
        ]
        ends = np.array([pair[0, -1] for pair in points])
        middle = ends.mean(axis=0)
        spread = np.linalg.norm(ends - middle, axis=1)
        (pose,) = told[motion]["poses"]
        assert pose["ap_mm"] == pytest.approx(np.linalg.norm(middle - points[0][1, -1]))
        assert pose["rp_mm"] == pytest.approx(spread.mean() + 3 * spread.std(ddof=1))
    # On a path no run is farther off than at equal times; its end is among its points.
    miss = max(float(np.linalg.norm(pair[0] - pair[1], axis=1).max()) for pair in points)
    assert 0 < told["edge"]["path"]["at_mm"] <= miss
    assert told["edge"]["path"]["rt_mm"] > 0


def test_the_table_names_poses_and_paths(noisy: Path, call: Callable[..., Result]) -> None:
    """And says how many runs the standard would have; no picture is drawn."""
    done = call("matrix", STORE, "--accuracy", "joint pd")
    assert done.exit_code == 0, done.stderr
    for part in ("swing, pose 1", "edge, pose 1", "edge, path", "4 runs of one machine", "asks for 30 runs"):
        assert part in " ".join(done.stdout.split())
    assert "swing, path" not in done.stdout


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (["--condition", "all at 1"], "are different machines"),
        (["-o", "x.png"], "prints a table"),
        (["--curves"], "are views of their own"),
    ],
)
def test_what_is_no_repetition_is_refused(
    noisy: Path, call: Callable[..., Result], arguments: list[str], said: str
) -> None:
    """Machines that differ, and what can't go together."""
    done = call("matrix", STORE, "--accuracy", "joint pd", *arguments)
    assert done.exit_code == 2
    assert said in done.stderr


def test_exact_runs_are_no_repetition(
    trial: Path, run_here: Callable[..., Result], call: Callable[..., Result]
) -> None:
    """Without noise every run of one machine is the same."""
    assert run_here(str(trial)).exit_code == 0
    done = call("matrix", STORE, "--accuracy", "joint pd")
    assert done.exit_code == 2
    assert "an experiment with noise" in done.stderr


def test_poses_are_taken_at_the_last_tick_of_each_rest() -> None:
    """Rests from 0.3 to 0.4 and 0.7 to 0.8 s at 500 Hz end at ticks 200 and, the log's last, 399."""
    motion = ViaMotion(points=((0.0, 0.0), (0.2, 0.1), (0.0, 0.0)), leg_s=0.3, rest_s=0.1)
    assert list(_ends(motion, 500.0, 400)) == [200, 399]
    assert list(_ends(ViaMotion(points=((0.0,), (0.2,)), leg_s=0.3, rest_s=0.0), 500.0, 150)) == []

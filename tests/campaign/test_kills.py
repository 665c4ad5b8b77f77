"""SIGKILL at any moment: no row that was committed is lost, the store is sound, and the campaign goes on."""

from __future__ import annotations

import os
import random
import shutil
import signal
import subprocess
import sys
import threading
import time
from pathlib import Path

import pytest

from rigbench.campaign.store import Store
from rigbench.errors import StoreError
from rigbench.scores.names import SCORES

ROOT = Path(__file__).resolve().parents[2]

EXPERIMENT = f"""\
rigbench: 1
title: A trial
arm: {ROOT / "robots_demo" / "planar2" / "arm.yaml"}
rates: {{control_hz: 500, physics_hz: 500}}
motions:
  swing: {{via_deg: [[0, 0], [20, -15]], leg_s: 0.2, rest_s: 0.1}}
laws:
  joint pd: {{law: independent-joint, natural_hz: 3}}
  computed torque: {{law: computed-torque, natural_hz: 3}}
mismatch: {{link_mass_percent: 10}}
conditions: {{together: [1]}}
draws: 300
tolerance: {{tool_peak_mm: 15}}
"""
RUNS = 2 * 301

LOADED_ONCE = """
import os, sys
import rigbench.cli.run
from rigbench.cli import main
from rigbench.rig import warm_up

warm_up()
for line in sys.stdin:  # each is a command: done in a process forked from here, whose id is told
    child = os.fork()
    if child == 0:
        os.dup2(2, 1)
        sys.argv = ["rigbench", *line.split()]
        main()
    print(child, flush=True)
    print(os.waitpid(child, 0)[1], flush=True)
"""
"""The command without its second of imports, so that a kill soon after its start meets it at work."""


@pytest.fixture(scope="module")
def undisturbed(tmp_path_factory: pytest.TempPathFactory) -> dict[object, object]:
    """The rows of a campaign that nobody kills."""
    folder = tmp_path_factory.mktemp("undisturbed")
    (folder / "trial.yaml").write_text(EXPERIMENT)
    _run(folder)
    found = rows(folder)
    assert len(found) == RUNS
    return found


def test_twenty_kills_lose_nothing(tmp_path: Path, undisturbed: dict[object, object]) -> None:
    """One campaign, killed again and again: a moment after its start, or after its next row, by turns."""
    (tmp_path / "trial.yaml").write_text(EXPERIMENT)
    loaded = subprocess.Popen(
        [sys.executable, "-c", LOADED_ONCE],
        cwd=tmp_path,
        stdin=subprocess.PIPE,
        stdout=subprocess.PIPE,
        stderr=subprocess.DEVNULL,
        text=True,
        bufsize=1,
    )
    assert loaded.stdin is not None
    assert loaded.stdout is not None
    bound = threading.Timer(120, loaded.kill)
    bound.start()
    chance, before, grown = random.Random(20), {}, 0
    try:
        for turn in range(20):
            loaded.stdin.write("run trial.yaml --jobs 0\n")
            child = int(loaded.stdout.readline())
            while turn % 2 and len(rows(tmp_path)) == len(before):
                time.sleep(0.01)
            time.sleep(chance.uniform(0.0, 0.1))
            os.kill(child, signal.SIGKILL)
            status = int(loaded.stdout.readline())
            assert os.WIFSIGNALED(status), "it was done before it was killed: the campaign is too small"
            after = rows(tmp_path)
            assert before.items() <= after.items() <= undisturbed.items()
            before, grown = after, grown + (len(after) > len(before))
    finally:
        bound.cancel()
        loaded.kill()
        loaded.communicate()
    assert grown >= 10
    _run(tmp_path)
    assert rows(tmp_path) == undisturbed


@pytest.mark.evidence
def test_sixty_kills_of_the_command_lose_nothing(tmp_path: Path, undisturbed: dict[object, object]) -> None:
    """The command itself with its two workers, from its first moment to its last; begun anew when it is done."""
    (tmp_path / "trial.yaml").write_text(EXPERIMENT)
    chance, before, grown = random.Random(60), {}, 0
    for _ in range(60):
        command = subprocess.Popen(
            [sys.executable, "-m", "rigbench", "run", "trial.yaml", "--jobs", "2"],
            cwd=tmp_path,
            stdout=subprocess.DEVNULL,
            stderr=subprocess.DEVNULL,
        )
        time.sleep(chance.uniform(0.0, 4.0))
        command.kill()
        command.wait()
        after = rows(tmp_path)
        assert before.items() <= after.items() <= undisturbed.items()
        before, grown = after, grown + (len(after) > len(before))
        if len(after) == RUNS:
            shutil.rmtree(tmp_path / "results")
            before = {}
    assert grown > 10
    _run(tmp_path)
    assert rows(tmp_path) == undisturbed


def _run(folder: Path) -> None:
    command = [sys.executable, "-m", "rigbench", "run", "trial.yaml", "--jobs", "2"]
    done = subprocess.run(command, cwd=folder, capture_output=True, text=True, timeout=120, check=False)
    assert done.returncode == 0, done.stderr


def rows(folder: Path) -> dict[object, object]:
    """What is stored, by the runs' names, without what tells of the host; the store passes SQLite's checks.

    A store whose making was cut short holds nothing yet.
    """
    store = folder / "results" / "trial.sqlite"
    try:
        with Store.open_for_reading(store) as reader:
            records = list(reader.records())
            checks = [reader._connection.execute(f"PRAGMA {check}").fetchall() for check in CHECKS]
            assert checks == [[("ok",)], []]
    except StoreError as error:
        if "no such store" not in str(error) and "holds no campaign yet" not in str(error):
            raise
        return {}
    return {
        (r.row.law, r.row.condition, r.row.draw): (
            r.row.outcome,
            r.residual,
            tuple(sorted((n, v) for n, v in r.row.scores.items() if not SCORES[n.partition(".")[0]].host)),
        )
        for r in records
    }


CHECKS = ("integrity_check", "foreign_key_check")

"""The main job through the command line: the same rows whatever the way to them, and nothing done twice."""

from __future__ import annotations

import csv
import io
import json
import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[1]
HOST_COLUMNS = ("law_us", "law_share_percent", "wall_s")

EXPERIMENT = """
rigbench: 1
title: main job
arm: {root}/robots_demo/tray6/arm.yaml
seed: 3
rates: {{control_hz: 500, physics_hz: 1000}}
motions:
  short: {{via_deg: [[0, -60, 90, 0, 60, 0], [20, -50, 80, 0, 60, 0]], leg_s: 0.5, rest_s: 0.1}}
laws:
  pd: {{law: gravity-compensated}}
  computed torque: {{law: computed-torque}}
{more_laws}
mismatch:
  link_mass_percent: 5
  coulomb_percent: 30
{more_sources}
conditions: {{each_alone: 1.0, together: [1]}}
draws: {draws}
tolerance: {{tool_peak_mm: 3.0}}
"""


def rigbench(folder: Path, *arguments: str, check: int | None = 0) -> subprocess.CompletedProcess[str]:
    """Run the command as a user would, in ``folder``."""
    command = [sys.executable, "-m", "rigbench", *arguments]
    done = subprocess.run(command, cwd=folder, capture_output=True, text=True, timeout=300, check=False)
    assert check is None or done.returncode == check, done.stdout + done.stderr
    assert "Traceback" not in done.stderr
    return done


def write(folder: Path, draws: int = 4, more_laws: str = "", more_sources: str = "") -> None:
    text = EXPERIMENT.format(root=ROOT, draws=draws, more_laws=more_laws, more_sources=more_sources)
    (folder / "job.yaml").write_text(text)


def rows(folder: Path) -> dict[tuple[str, ...], dict[str, str]]:
    """The exported rows by name, without what depends on the host."""
    text = rigbench(folder, "export", "results/job.sqlite").stdout
    found = {}
    for row in csv.DictReader(io.StringIO(text)):
        for column in HOST_COLUMNS:
            assert row.pop(column) != "", column
        found[tuple(row[name] for name in ("law", "motion", "condition", "draw"))] = row
    return found


@pytest.fixture(scope="module")
def reference(tmp_path_factory):
    """Rows of an undisturbed run with one worker."""
    folder = tmp_path_factory.mktemp("reference")
    write(folder)
    rigbench(folder, "run", "job.yaml", "--jobs", "1")
    found = rows(folder)
    assert len(found) == 2 * (1 + 3 * 4)
    assert {row["outcome"] for row in found.values()} == {"finished"}
    assert len({row["tool_peak_mm"] for row in found.values()}) > 20
    return found


def test_two_workers_give_the_same_bits(tmp_path, reference):
    """Rows of a run with two workers equal those of one, to the last digit."""
    write(tmp_path)
    rigbench(tmp_path, "run", "job.yaml", "--jobs", "2")
    assert rows(tmp_path) == reference


def test_in_two_goes_with_more_draws_the_second_time(tmp_path, reference):
    """Two draws first and four then give the same rows, and the first two draws are not done again."""
    write(tmp_path, draws=2)
    first = json.loads(rigbench(tmp_path, "run", "job.yaml", "--jobs", "2", "--json").stdout)
    assert first["runs"]["done"] == 2 * (1 + 3 * 2)
    write(tmp_path, draws=4)
    again = rigbench(tmp_path, "run", "job.yaml", "--jobs", "1")
    assert f"{2 * 3 * 2} of {2 * (1 + 3 * 4)} runs to do" in again.stderr
    assert rows(tmp_path) == reference
    nothing = rigbench(tmp_path, "run", "job.yaml")
    assert "nothing to do" in nothing.stderr.lower() or "all 26 runs" in nothing.stderr.lower()


def test_a_law_or_a_source_more_recomputes_nothing(tmp_path, reference):
    """A law more: only its runs. A source more: its own column, and the one where all act together."""
    write(tmp_path)
    rigbench(tmp_path, "run", "job.yaml")
    write(tmp_path, more_laws="  feedforward: {law: torque-feedforward}")
    done = rigbench(tmp_path, "run", "job.yaml")
    assert "13 of 39 runs to do" in done.stderr
    write(tmp_path, more_laws="  feedforward: {law: torque-feedforward}", more_sources="  link_cog_mm: 5")
    done = rigbench(tmp_path, "run", "job.yaml")
    assert f"{3 * 2 * 4} of {3 * (1 + 4 * 4)} runs to do" in done.stderr
    found = rows(tmp_path)
    for name, row in reference.items():
        if not name[2].startswith("all"):
            assert all(found[name][column] == value for column, value in row.items()), name


def test_sigkill_half_way_loses_nothing(tmp_path, reference):
    """Killed without warning and started again, the campaign ends with the rows of an unbroken one."""
    write(tmp_path)
    command = [sys.executable, "-m", "rigbench", "run", "job.yaml", "--jobs", "1"]
    process = subprocess.Popen(
        command,
        cwd=tmp_path,
        stdout=subprocess.DEVNULL,
        stderr=subprocess.DEVNULL,
        env=os.environ | {"PYTHONUNBUFFERED": "1"},
    )
    store, deadline, done = tmp_path / "results" / "job.sqlite", time.monotonic() + 120, 0
    while done == 0 and time.monotonic() < deadline and process.poll() is None:
        time.sleep(0.05)
        if store.exists():
            status = rigbench(tmp_path, "status", "results/job.sqlite", "--json", check=None)
            if status.returncode == 0:
                done = json.loads(status.stdout)["runs"]["done"]
    process.send_signal(signal.SIGKILL)
    process.wait(timeout=30)
    assert done > 0
    rigbench(tmp_path, "run", "job.yaml", "--jobs", "2")
    assert rows(tmp_path) == reference


def test_json_has_the_documented_form(tmp_path, reference):
    """``run --json`` prints one document with the documented keys and nothing else on stdout."""
    write(tmp_path, draws=2)
    document = json.loads(rigbench(tmp_path, "run", "job.yaml", "--json").stdout)
    assert set(document) >= {"store", "runs", "cells", "laws", "break_even", "advice"}
    assert document["runs"] == {"planned": 14, "done": 14, "failed": 0}
    cell = document["cells"][0]
    assert set(cell) >= {
        "sheet", "law", "condition", "level", "draws", "incomplete", "pass_share", "pass_low", "pass_high", "verdict",
        "tool_peak_mm", "joint_rms_deg", "motions",
    }  # fmt: skip
    assert set(cell["tool_peak_mm"]) >= {"median", "p95"}
    assert set(document["laws"][0]["tolerated_level"]) == {"value", "low", "high"}

"""A small experiment, and ways to give the commands: in this process or in one of their own."""

from __future__ import annotations

import subprocess
import sys
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest
from typer.testing import CliRunner, Result

from rigbench.cli import app

ARM = Path(__file__).resolve().parents[2] / "robots_demo" / "planar2" / "arm.yaml"

TRIAL = f"""\
rigbench: 1
title: A trial
arm: {ARM}
rates: {{control_hz: 500, physics_hz: 500}}
motions:
  swing: {{via_deg: [[0, 0], [20, -15]], leg_s: 0.3, rest_s: 0.1}}
laws:
  joint pd: {{law: independent-joint, natural_hz: 3}}
  computed torque: {{law: computed-torque, natural_hz: 3}}
mismatch: {{link_mass_percent: 10}}
conditions: {{together: [1]}}
draws: 3
tolerance: {{tool_peak_mm: 15}}
"""


@pytest.fixture
def trial_text() -> str:
    """The text of the file trial.yaml."""
    return TRIAL


@pytest.fixture
def trial(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A small experiment in a folder of its own, which is the current one: 2 laws x (1 + 3 draws) = 8 runs."""
    monkeypatch.chdir(tmp_path)
    monkeypatch.setenv("COLUMNS", "100")
    path = Path("trial.yaml")
    path.write_text(TRIAL, encoding="utf-8")
    return path


@pytest.fixture
def call() -> Callable[..., Result]:
    """Give a command in this process."""

    def invoke(*arguments: str) -> Result:
        return CliRunner().invoke(app, list(arguments))

    return invoke


@pytest.fixture
def run_here(call: Callable[..., Result]) -> Callable[..., Result]:
    """Give the command `run` without worker processes."""

    def run(*arguments: str) -> Result:
        return call("run", *arguments, "--jobs", "0")

    return run


@pytest.fixture
def in_process_of_its_own() -> Callable[..., subprocess.CompletedProcess[str]]:
    """Give a command as a shell would."""

    def start(*arguments: str, **given: Any) -> subprocess.CompletedProcess[str]:
        command = [sys.executable, "-m", "rigbench", *arguments]
        return subprocess.run(command, capture_output=True, text=True, timeout=120, check=False, **given)

    return start

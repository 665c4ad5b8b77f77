"""A small experiment, and ways to give the commands: in this process or in one of their own."""

from __future__ import annotations

import contextlib
import fcntl
import os
import pty
import select
import struct
import subprocess
import sys
import termios
import time
from collections.abc import Callable, Iterator
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


class Terminal:
    """A command at a terminal of its own, 24 lines of 100 columns; ``said`` is all that came so far."""

    def __init__(self, *arguments: str) -> None:
        self._ours, theirs = pty.openpty()
        fcntl.ioctl(theirs, termios.TIOCSWINSZ, struct.pack("HHHH", 24, 100, 0, 0))
        environment = {name: value for name, value in os.environ.items() if name != "COLUMNS"}
        self.process = subprocess.Popen(
            [sys.executable, "-m", "rigbench", *arguments],
            stdin=theirs,
            stdout=theirs,
            stderr=theirs,
            start_new_session=True,
            env=environment | {"TERM": "xterm"},
        )
        os.close(theirs)
        self.said = ""

    def wait_for(self, words: str, within_s: float = 120) -> None:
        """Read until the words are there."""
        deadline = time.monotonic() + within_s
        while words not in self.said:
            assert self._read(deadline), f"{words!r} is not in {self.said}"

    def answer(self, text: str) -> None:
        """Type a line."""
        os.write(self._ours, f"{text}\n".encode())

    def end(self, within_s: float = 120) -> int:
        """Read to the end, and return the exit code."""
        deadline = time.monotonic() + within_s
        while self._read(deadline):
            pass
        return self.process.wait(timeout=within_s)

    def close(self) -> None:
        """End it, whatever it does."""
        self.process.kill()
        self.process.wait(timeout=60)
        os.close(self._ours)

    def _read(self, deadline: float) -> bool:
        ready, _, _ = select.select([self._ours], [], [], max(0.0, deadline - time.monotonic()))
        assert ready, f"nothing more came after {self.said}"
        try:
            part = os.read(self._ours, 65536)
        except OSError:  # Linux: the other end is closed
            return False
        self.said += part.decode("utf-8", "replace").replace("\r\n", "\n")
        return bool(part)


@pytest.fixture
def at_terminal() -> Iterator[Callable[..., Terminal]]:
    """Give a command at a terminal."""
    with contextlib.ExitStack() as undo:

        def start(*arguments: str) -> Terminal:
            terminal = Terminal(*arguments)
            undo.callback(terminal.close)
            return terminal

        yield start

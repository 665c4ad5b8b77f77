"""What goes to stdout and what to stderr: one JSON document, faults, and streams that take nothing."""

from __future__ import annotations

import json
import os
import shlex
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path

import pytest
from typer.testing import Result

Process = subprocess.CompletedProcess[str]

LOUD_LAW = """\
import os, sys
from rigbench.laws import Law

print("imported")
sys.__stdout__.write("imported\\n")
os.write(1, b"imported\\n")


class Loud(Law):
    def start(self, setup):
        print("started")
        os.system("echo started")

    def torque(self, t, q, v, ref, held):
        if t == 0:
            os.write(1, b"ticked\\n")
        return 0 * q
"""


def test_run_prints_one_json_document(run_here: Callable[..., Result], trial: Path) -> None:
    """run --json has the results alone on stdout; notes and progress are on stderr."""
    result = run_here("trial.yaml", "--json", "--store", "mine.sqlite")
    document = json.loads(result.stdout)
    assert document["store"] == "mine.sqlite"
    assert document["runs"] == {"planned": 8, "done": 8, "failed": 0}
    assert {(cell["law"], cell["condition"]) for cell in document["cells"]} == {
        (law, condition) for law in ("joint pd", "computed torque") for condition in ("nominal", "all at 1")
    }
    assert Path("mine-matrix.png").exists()
    assert not Path("results").exists()


def test_check_prints_one_json_document(call: Callable[..., Result], trial: Path) -> None:
    """check --json holds the plan, the estimate and the notes."""
    document = json.loads(call("check", "trial.yaml", "--json").stdout)
    assert document["runs"] == {"planned": 8, "stored": None, "not_wanted": 0}
    assert document["draws_needed"] == 73
    assert document["misses_allowed"] is None
    assert document["estimate"]["seconds"] > 0
    assert [note["key"] for note in document["notes"]] == ["draws"]
    assert not Path("results").exists()


@pytest.mark.parametrize(
    ("arguments", "file"),
    [
        (("check", "nope.yaml"), "nope.yaml"),
        (("run", "trial.yaml", "--store", "trial.yaml"), "trial.yaml"),
        (("laws", "computed_torque"), "rigbench laws"),
    ],
)
def test_faults_as_json(
    call: Callable[..., Result], trial: Path, arguments: tuple[str, ...], file: str
) -> None:
    """With --json whatever is wrong is one document on stdout too."""
    (fault,) = json.loads(call(*arguments, "--json").stdout)["faults"]
    assert Path(fault["file"]).name == file
    assert set(fault) == {"file", "line", "key", "problem", "expected", "near"}


@pytest.mark.parametrize("command", [("check",), ("run", "--jobs", "0")])
def test_what_a_law_prints_is_not_on_stdout(
    in_process_of_its_own: Callable[..., Process], trial_text: str, trial: Path, command: tuple[str, ...]
) -> None:
    """Whatever a law prints as it is imported or runs, in Python or below it, --json is one document."""
    Path("loud.py").write_text(LOUD_LAW, encoding="utf-8")
    text = trial_text.replace(
        "computed torque: {law: computed-torque, natural_hz: 3}", "loud: {law: 'loud.py:Loud'}"
    )
    trial.write_text(text, encoding="utf-8")
    done = in_process_of_its_own(command[0], "trial.yaml", "--json", *command[1:])
    assert done.returncode == 0, done.stderr
    assert json.loads(done.stdout)["runs"]["planned"] == 8
    assert done.stderr.count("imported\n") >= 3
    assert done.stderr.count("started\n") >= 2
    assert "ticked\n" in done.stderr


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("check",), "FILE"),
        (("check", "trial.yaml", "--jsn"), "--jsn"),
        (("chekc", "trial.yaml"), "chekc"),
        (("--bogus",), "--bogus"),
        (("run", "trial.yaml", "--jobs", "-1"), "--jobs"),
        (("export", "nope.sqlite"), "needs -o"),
    ],
)
def test_usage_errors_as_json(
    call: Callable[..., Result], trial: Path, arguments: tuple[str, ...], words: str
) -> None:
    """With --json among the arguments, what is wrong with them is one document too; the exit code is 2."""
    result = call(*arguments, "--json")
    assert result.exit_code == 2
    (fault,) = json.loads(result.stdout)["faults"]
    assert words in fault["problem"]
    assert words in result.stderr


@pytest.mark.skipif(not Path("/dev/full").exists(), reason="no /dev/full here")
@pytest.mark.parametrize(
    "arguments", ["laws", "laws --json", "status s.sqlite --json", "export s.sqlite", "--help", "--version"]
)
def test_a_full_disk_under_stdout(run_here: Callable[..., Result], trial: Path, arguments: str) -> None:
    """A result that can't be written ends with exit code 5 and one sentence."""
    run_here("trial.yaml", "--store", "s.sqlite")
    command = f"{shlex.quote(sys.executable)} -m rigbench {arguments} >/dev/full"
    done = subprocess.run(["sh", "-c", command], capture_output=True, text=True, timeout=60, check=False)
    assert done.returncode == 5
    assert done.stderr == "standard output: can't be written: No space left on device\n"


@pytest.mark.parametrize(
    ("arguments", "code"), [("laws", 5), ("check trial.yaml", 5), ("check --json", 2), ("--help", 0)]
)
def test_a_closed_stdout(trial: Path, arguments: str, code: int) -> None:
    """Where there is no stdout at all, a command with a result says so; nothing has a traceback."""
    command = f"{shlex.quote(sys.executable)} -m rigbench {arguments} >&-"
    done = subprocess.run(["sh", "-c", command], capture_output=True, text=True, timeout=60, check=False)
    assert done.returncode == code
    assert "Traceback" not in done.stderr
    assert ("standard output: is closed" in done.stderr) == (code == 5)


@pytest.mark.parametrize("closed", ["2>&-", "2>/dev/full", "<&- 2>&-"])
def test_a_stderr_that_takes_nothing(trial: Path, closed: str) -> None:
    """Notes and progress may get lost; the result is whole, and alone on stdout."""
    command = f"{shlex.quote(sys.executable)} -m rigbench run trial.yaml --jobs 0 --json {closed}"
    done = subprocess.run(["sh", "-c", command], capture_output=True, text=True, timeout=60, check=False)
    assert done.returncode == 0
    assert json.loads(done.stdout)["runs"]["done"] == 8


@pytest.mark.parametrize("arguments", [("laws", "--json"), ("--help",)])
def test_a_reader_that_stops_reading_is_no_error(arguments: tuple[str, ...]) -> None:
    """`rigbench ... | head` ends without a word on stderr."""
    command = [sys.executable, "-m", "rigbench", *arguments]
    writer = subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE)
    assert writer.stdout is not None
    assert writer.stderr is not None
    writer.stdout.close()
    said = writer.stderr.read().decode()
    writer.stderr.close()
    writer.wait(timeout=60)
    assert "Traceback" not in said
    assert "Broken" not in said


def test_output_that_the_terminal_can_not_show(
    in_process_of_its_own: Callable[..., Process], trial_text: str, trial: Path
) -> None:
    """On a terminal without the characters, they are replaced; nothing fails."""
    trial.write_text(trial_text.replace("A trial", "Größe µ"), encoding="utf-8")
    environment = os.environ | {"PYTHONIOENCODING": "ascii"}
    done = in_process_of_its_own("run", "trial.yaml", "--jobs", "0", env=environment)
    assert done.returncode == 0, done.stderr
    assert "Gr??e" in done.stdout

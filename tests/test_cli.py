"""The commands, as a user meets them: what they print where, what they write, and how they end."""

from __future__ import annotations

import contextlib
import csv
import io
import json
import os
import shlex
import shutil
import signal
import sqlite3
import subprocess
import sys
import time
from importlib import import_module
from pathlib import Path
from typing import Any

import pytest
from typer.main import get_command
from typer.testing import CliRunner, Result

from rigbench.cli import app

ARM = Path(__file__).resolve().parents[1] / "robots_demo" / "planar2" / "arm.yaml"

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

BAD_LAW = """\
from rigbench.laws import Law


class Bad(Law):
    def start(self, setup):
        pass

    def torque(self, t, q, v, ref, held):
        return no_such_name
"""

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

COMMANDS = tuple(get_command(app).list_commands(None))  # type: ignore[attr-defined]


@pytest.fixture
def trial(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A small experiment in a folder of its own, which is the current one: 2 laws x (1 + 3 draws) = 8 runs."""
    monkeypatch.chdir(tmp_path)
    monkeypatch.setenv("COLUMNS", "100")
    path = Path("trial.yaml")
    path.write_text(TRIAL, encoding="utf-8")
    return path


def call(*arguments: str) -> Result:
    return CliRunner().invoke(app, list(arguments))


def run_here(*arguments: str) -> Result:
    return call("run", *arguments, "--jobs", "0")


def in_process_of_its_own(*arguments: str, **given: Any) -> subprocess.CompletedProcess[str]:
    command = [sys.executable, "-m", "rigbench", *arguments]
    return subprocess.run(command, capture_output=True, text=True, timeout=120, check=False, **given)


def test_help_needs_no_heavy_import() -> None:
    """`rigbench --help` answers without loading numbers, engine, YAML, or pictures."""
    code = (
        "import sys, rigbench.cli; heavy = {'numpy', 'numba', 'pydantic', 'pybullet', 'yaml', 'matplotlib',"
        " 'scipy', 'rich'}; print(sorted(heavy & set(sys.modules)))"
    )
    done = subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, timeout=60, check=True
    )
    assert done.stdout == "[]\n"


@pytest.mark.parametrize("command", COMMANDS)
def test_every_command_has_help_with_an_example(command: str) -> None:
    """--help ends with one example that starts as a user would type it."""
    result = call(command, "--help")
    assert result.exit_code == 0
    assert f"Example: rigbench {command}" in " ".join(result.stdout.split())


def test_help_lists_the_commands_and_the_exit_codes() -> None:
    """The first page names every command and what the process's exit code says."""
    result = call("--help")
    assert result.exit_code == 0
    assert all(f"\n  {command} " in result.stdout for command in COMMANDS)
    assert "3 a campaign stopped" in " ".join(result.stdout.split())


def test_version() -> None:
    """--version prints name and version."""
    assert call("--version").stdout.startswith("rigbench 0.")


def test_a_campaign_from_check_to_export(trial: Path) -> None:
    """Check, run, run again, more draws, status, picture, table: each does what is missing and no more."""
    checked = call("check", "trial.yaml")
    assert checked.exit_code == 0
    assert "1 sheet x 2 laws x 1 motion x (1 exact + 1 random condition x 3 draws) = 8 runs" in checked.stdout
    assert "takes 73" in checked.stderr
    assert "an estimate" in checked.stdout

    first = run_here("trial.yaml")
    assert first.exit_code == 0
    assert "8 of 8 runs to do" in first.stderr
    assert "A trial" in first.stdout
    assert "all at 1" in first.stdout
    assert "not a safety case" in first.stderr
    store, picture = Path("results/trial.sqlite"), Path("results/trial-matrix.png")
    assert picture.read_bytes().startswith(b"\x89PNG")

    again = run_here("trial.yaml")
    assert again.exit_code == 0
    assert "nothing to run" in again.stderr
    assert again.stdout == first.stdout

    trial.write_text(TRIAL.replace("draws: 3", "draws: 5"), encoding="utf-8")
    assert "stored: 8 of them" in call("check", "trial.yaml").stdout
    more = run_here("trial.yaml")
    assert "4 of 12 runs to do" in more.stderr

    status = json.loads(call("status", str(store), "--json").stdout)
    assert status["runs"] == {"planned": 12, "done": 12, "failed": 0}
    assert call("status", str(store)).stdout == more.stdout.rstrip("\n") + "\n"

    drawn = call("matrix", str(store), "-o", "m.svg")
    assert drawn.exit_code == 0
    assert "<svg" in Path("m.svg").read_text("utf-8")

    table = call("export", str(store))
    rows = list(csv.DictReader(io.StringIO(table.stdout)))
    assert len(rows) == 12
    assert {row["outcome"] for row in rows} == {"finished"}
    written = call("export", str(store), "-o", "runs.csv", "--json")
    assert json.loads(written.stdout) == {"store": str(store), "file": "runs.csv", "rows": 12}
    assert Path("runs.csv").read_text("utf-8") == table.stdout
    assert not list(Path().glob("*.part"))


def test_run_prints_one_json_document(trial: Path) -> None:
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


def test_check_prints_one_json_document(trial: Path) -> None:
    """check --json holds the plan, the estimate and the notes."""
    document = json.loads(call("check", "trial.yaml", "--json").stdout)
    assert document["runs"] == {"planned": 8, "stored": None}
    assert document["draws_needed"] == 73
    assert document["misses_allowed"] is None
    assert document["estimate"]["seconds"] > 0
    assert [note["key"] for note in document["notes"]] == ["draws"]
    assert not Path("results").exists()


def test_a_run_in_worker_processes_gives_the_same(trial: Path) -> None:
    """One worker process or none: the same results, but for the host's own times."""
    here = json.loads(run_here("trial.yaml", "--json", "--store", "here.sqlite").stdout)
    done = in_process_of_its_own("run", "trial.yaml", "--json", "--store", "there.sqlite", "--jobs", "1")
    assert done.returncode == 0, done.stderr
    there = json.loads(done.stdout)
    for document in (here, there):
        del document["store"]
        for cell in document["cells"]:
            for measures in (cell, *cell["motions"].values()):
                del measures["law_us"], measures["law_share_percent"]
    assert here == there


def test_ctrl_c_ends_with_3_and_the_next_run_goes_on(trial: Path) -> None:
    """A campaign that is stopped keeps what is done, prints what that shows, and says how to go on."""
    trial.write_text(TRIAL.replace("draws: 3", "draws: 4000"), encoding="utf-8")
    command = [sys.executable, "-m", "rigbench", "run", "trial.yaml", "--jobs", "0"]
    campaign = subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)
    try:
        deadline = time.monotonic() + 60
        done = 0
        while done < 3 and time.monotonic() < deadline and campaign.poll() is None:
            time.sleep(0.2)
            status = call("status", "results/trial.sqlite", "--json")
            done = json.loads(status.stdout)["runs"]["done"] if status.exit_code == 0 else 0
        campaign.send_signal(signal.SIGINT)
        stdout, stderr = campaign.communicate(timeout=60)
    finally:
        campaign.kill()
    assert campaign.returncode == 3, stderr
    assert "'rigbench run trial.yaml' goes on from here" in stderr
    assert "Traceback" not in stderr
    assert "all at 1" in stdout
    assert "of 8002 runs are still to do." in " ".join(stdout.split())
    trial.write_text(TRIAL, encoding="utf-8")
    assert "nothing to run" in run_here("trial.yaml").stderr or done < 8


@pytest.mark.parametrize(
    ("arguments", "code", "words"),
    [
        (("check", "nope.yaml"), 2, "nope.yaml: the experiment file does not exist"),
        (("run", "nope.yaml"), 2, "nope.yaml: the experiment file does not exist"),
        (("run", "trial.yaml", "--store", "trial.yaml"), 5, "is not a store"),
        (("run", "trial.yaml", "--jobs", "-1"), 2, "--jobs"),
        (("status", "nope.sqlite"), 5, "no such store"),
        (("matrix", "nope.sqlite"), 5, "no such store"),
        (("matrix", "nope.sqlite", "-o", "nope.sqlite"), 2, "is the store itself"),
        (("export", "nope.sqlite"), 5, "no such store"),
        (("export", "nope.sqlite", "--json"), 2, "needs -o"),
        (("laws", "computed_torque"), 2, "did you mean 'computed-torque'?"),
        (("laws", "zzz"), 2, "one of computed-torque"),
        (("chekc", "trial.yaml"), 2, "chekc"),
        (("check",), 2, "FILE"),
        (("check", "trial.yaml", "--jsn"), 2, "--jsn"),
    ],
)
def test_exit_codes(trial: Path, arguments: tuple[str, ...], code: int, words: str) -> None:
    """2: the input is at fault; 5: the store or the disk. The reason is on stderr, and no traceback."""
    result = call(*arguments)
    assert result.exit_code == code
    assert words in result.stderr
    assert "Traceback" not in result.stderr
    if "--json" in arguments:
        (fault,) = json.loads(result.stdout)["faults"]
        assert words in fault["problem"]
    else:
        assert result.stdout == ""


@pytest.mark.parametrize(
    ("arguments", "file"),
    [
        (("check", "nope.yaml"), "nope.yaml"),
        (("run", "trial.yaml", "--store", "trial.yaml"), "trial.yaml"),
        (("laws", "computed_torque"), "rigbench laws"),
    ],
)
def test_faults_as_json(trial: Path, arguments: tuple[str, ...], file: str) -> None:
    """With --json whatever is wrong is one document on stdout too."""
    (fault,) = json.loads(call(*arguments, "--json").stdout)["faults"]
    assert Path(fault["file"]).name == file
    assert set(fault) == {"file", "line", "key", "problem", "expected", "near"}


def test_a_store_of_another_experiment_is_refused(trial: Path) -> None:
    """Another file of another title. Exit code 5, and the store is left as it was; check only notes it."""
    run_here("trial.yaml")
    before = Path("results/trial.sqlite").read_bytes()
    Path("other").mkdir()
    Path("other/trial.yaml").write_text(TRIAL.replace("A trial", "Another"), encoding="utf-8")
    result = run_here("other/trial.yaml")
    assert result.exit_code == 5
    assert "A trial" in result.stderr
    assert Path("results/trial.sqlite").read_bytes() == before
    checked = call("check", "other/trial.yaml")
    assert checked.exit_code == 0
    assert "belongs to the experiment 'A trial'" in checked.stderr


def test_a_title_can_be_mended_and_a_folder_moved(trial: Path) -> None:
    """Nothing is run anew; where the file is another one, that is said."""
    run_here("trial.yaml")
    trial.write_text(TRIAL.replace("A trial", "Another"), encoding="utf-8")
    mended = run_here("trial.yaml")
    assert mended.exit_code == 0
    assert "nothing to run" in mended.stderr
    assert "was filled from" not in mended.stderr
    assert "Another" in call("status", "results/trial.sqlite").stdout
    Path("moved").mkdir()
    trial.rename("moved/trial.yaml")
    moved = run_here("moved/trial.yaml")
    assert moved.exit_code == 0
    assert "nothing to run" in moved.stderr
    assert f"was filled from {trial.resolve()}" in moved.stderr


def test_status_says_where_hosts_differ(trial: Path) -> None:
    """In one sentence, as text and as JSON; on one host there is nothing to say."""
    run_here("trial.yaml")
    store = "results/trial.sqlite"
    assert json.loads(call("status", store, "--json").stdout)["notes"] == []
    with contextlib.closing(sqlite3.connect(store)) as connection, connection:
        cpu, versions = connection.execute("SELECT cpu, versions FROM hosts").fetchone()
        other = json.dumps(json.loads(versions) | {"numpy": "0.1"})
        connection.execute("INSERT INTO hosts (cpu, versions) VALUES ('Another CPU', ?)", (other,))
        connection.execute("UPDATE runs SET host = 2 WHERE rowid = 3")
    (note,) = json.loads(call("status", store, "--json").stdout)["notes"]
    assert f"different types of CPU ({cpu}, Another CPU) and versions of numpy (" in note
    assert ", 0.1), so last digits may differ." in note
    assert note in " ".join(call("status", store).stdout.split())


def test_a_file_that_can_not_be_written(trial: Path) -> None:
    """-o below what is no folder: exit code 5, and nothing is left behind."""
    run_here("trial.yaml")
    result = call("export", "results/trial.sqlite", "-o", "trial.yaml/runs.csv")
    assert result.exit_code == 5
    assert "trial.yaml/runs.csv: can't be written" in result.stderr
    assert not list(Path().rglob("*.part"))


def test_missing_folders_are_made(trial: Path) -> None:
    """-o into a folder that isn't there makes it, for a table as for a picture."""
    run_here("trial.yaml")
    assert call("export", "results/trial.sqlite", "-o", "one/two/runs.csv").exit_code == 0
    assert call("matrix", "results/trial.sqlite", "-o", "one/three/m.svg").exit_code == 0
    assert Path("one/two/runs.csv").exists()
    assert Path("one/three/m.svg").exists()


@pytest.mark.parametrize("command", [("check",), ("run", "--jobs", "0")])
def test_what_a_law_prints_is_not_on_stdout(trial: Path, command: tuple[str, ...]) -> None:
    """Whatever a law prints as it is imported or runs, in Python or below it, --json is one document."""
    Path("loud.py").write_text(LOUD_LAW, encoding="utf-8")
    text = TRIAL.replace(
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
def test_usage_errors_as_json(trial: Path, arguments: tuple[str, ...], words: str) -> None:
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
def test_a_full_disk_under_stdout(trial: Path, arguments: str) -> None:
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


def test_a_law_that_hangs_does_not_hang_check(trial: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Its run is given up after a limit of time, and noted at its line."""
    from rigbench.cli import estimate

    monkeypatch.setattr(estimate, "LIMIT_S", 2.0)
    Path("bad.py").write_text(BAD_LAW.replace("return no_such_name", "while True: pass"), encoding="utf-8")
    text = TRIAL.replace(
        "computed torque: {law: computed-torque, natural_hz: 3}", "stuck: {law: 'bad.py:Bad'}"
    )
    trial.write_text(text, encoding="utf-8")
    begin = time.monotonic()
    checked = call("check", "trial.yaml")
    assert time.monotonic() - begin < 60  # the workers have to start first
    assert checked.exit_code == 0
    assert (
        "trial.yaml:9: laws.stuck: does not finish motion swing even in nominal (timed-out)" in checked.stderr
    )
    assert "can't be told" in checked.stdout


def test_a_long_motion_does_not_make_check_long(trial: Path) -> None:
    """The estimate of 500 s of motion is measured on 3 s of it; it is that of the whole."""
    times = {}
    for leg_s in (5, 500):
        trial.write_text(TRIAL.replace("leg_s: 0.3", f"leg_s: {leg_s}"), encoding="utf-8")
        begin = time.monotonic()
        document = json.loads(call("check", "trial.yaml", "--json").stdout)
        times[leg_s] = document["estimate"]["seconds"]
        assert time.monotonic() - begin < 30  # eight runs of 500 s take minutes
    assert 20 < times[500] / times[5] < 500  # 100, but for the noise of the clock


def test_a_law_that_raises_shows_its_own_traceback(trial: Path) -> None:
    """check refuses it (2) at the law's line; run stores the other law's runs and shows the traceback once."""
    Path("bad.py").write_text(BAD_LAW, encoding="utf-8")
    text = TRIAL.replace(
        "computed torque: {law: computed-torque, natural_hz: 3}", "mine: {law: 'bad.py:Bad'}"
    )
    trial.write_text(text, encoding="utf-8")
    checked = call("check", "trial.yaml")
    assert checked.exit_code == 2
    assert "trial.yaml:9: laws.mine: raised NameError" in checked.stderr
    assert "return no_such_name" in checked.stderr
    ran = run_here("trial.yaml", "--json")
    assert ran.exit_code == 0
    assert json.loads(ran.stdout)["runs"] == {"planned": 8, "done": 4, "failed": 4}
    assert ran.stderr.count("return no_such_name") == 1
    assert "4 runs of 'mine' came to nothing (law-error)" in ran.stderr
    anew = "mine: 4 runs ended with its error: 'rigbench run trial.yaml --again mine' does them anew"
    assert anew in ran.stderr
    again = run_here("trial.yaml")
    assert "all 8 runs are stored" in again.stderr
    assert anew in again.stderr


def test_a_law_can_be_run_anew(trial: Path) -> None:
    """Its runs alone, with the same result; a name that isn't there is a fault with the nearest one."""
    first = run_here("trial.yaml")
    again = run_here("trial.yaml", "--again", "joint pd")
    assert again.exit_code == 0
    assert "4 of 8 runs to do" in again.stderr
    assert again.stdout == first.stdout
    both = run_here("trial.yaml", "--again", "joint pd", "--again", "computed torque")
    assert "8 of 8 runs to do" in both.stderr
    wrong = run_here("trial.yaml", "--again", "joint-pd", "--again", "computed torque")
    assert wrong.exit_code == 2
    assert "trial.yaml: --again: there is no law 'joint-pd'" in wrong.stderr
    assert "(did you mean 'joint pd'?)" in wrong.stderr


def test_entries_that_share_a_run_are_all_counted(trial: Path) -> None:
    """One source alone and all together are the same runs where one is declared: 14 planned, 14 to do."""
    trial.write_text(TRIAL.replace("together: [1]", "each_alone: 1, together: [1]"), encoding="utf-8")
    assert "14 of 14 runs to do" in run_here("trial.yaml").stderr
    assert "all 14 runs are stored" in run_here("trial.yaml").stderr


def test_a_law_that_does_not_finish_is_noted(trial: Path) -> None:
    """A law that pushes the arm onto a joint's limit: check says so and then gives no time."""
    Path("bad.py").write_text(BAD_LAW.replace("no_such_name", "0 * q + [90, 30]"), encoding="utf-8")
    text = TRIAL.replace(
        "computed torque: {law: computed-torque, natural_hz: 3}", "push: {law: 'bad.py:Bad'}"
    )
    trial.write_text(text.replace("leg_s: 0.3", "leg_s: 3"), encoding="utf-8")
    checked = call("check", "trial.yaml")
    assert checked.exit_code == 0
    noted = "note: trial.yaml:9: laws.push: does not finish motion swing even in nominal (hit-stop)"
    assert noted in checked.stderr
    assert "can't be told" in checked.stdout


def test_laws_lists_every_registered_law() -> None:
    """One line a law with its package; with a name its equation and its options with unit and default."""
    listed = call("laws")
    assert listed.exit_code == 0
    names = [line.split()[0] for line in listed.stdout.splitlines()]
    assert {"independent-joint", "gravity-compensated", "torque-feedforward", "computed-torque"} <= set(names)
    sheet = call("laws", "computed-torque").stdout
    assert "tau = (M(q) + Jr)" in sheet
    assert "natural_hz: number [Hz], default 5.0" in sheet
    assert "friction: none, viscous, full, default full" in sheet
    document = json.loads(call("laws", "--json").stdout)
    assert [law["name"] for law in document["laws"]] == names
    assert document["broken"] == []


def test_schema_prints_what_an_editor_reads() -> None:
    """The experiment file's schema, or the arm file's; anything else is a fault with the nearest name."""
    experiment = json.loads(call("schema").stdout)
    assert experiment == json.loads(call("schema", "experiment").stdout)
    assert {"vary", "laws", "tolerance"} <= set(experiment["properties"])
    assert "gear_ratio" in call("schema", "arm").stdout
    wrong = call("schema", "rm")
    assert wrong.exit_code == 2
    assert "did you mean 'arm'?" in wrong.stderr


def test_the_demo_can_be_copied_and_run(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Arms and experiments in a new folder, no pictures; what it says to do next works there."""
    monkeypatch.chdir(tmp_path)
    copied = call("demo", "my demo")
    assert copied.exit_code == 0
    files = {path.relative_to("my demo").as_posix() for path in Path("my demo").rglob("*") if path.is_file()}
    assert {
        "experiments/first-look.yaml",
        "robots_demo/tray6/arm.yaml",
        "robots_demo/tray6/tray6.urdf",
    } <= files
    assert not any(file.endswith(".png") for file in files)
    assert "cd 'my demo'\n  rigbench check experiments/first-look.yaml" in copied.stdout
    listed = json.loads(call("demo", "other", "--json").stdout)
    assert set(listed["files"]) == files
    monkeypatch.chdir(tmp_path / "my demo")
    assert call("check", "experiments/first-look.yaml").exit_code == 0


def test_the_demo_overwrites_nothing(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Every file in the way is named, and nothing is copied; a file in place of the folder is in the way too."""
    monkeypatch.chdir(tmp_path)
    mine = Path("here/robots_demo/tray6/arm.yaml")
    mine.parent.mkdir(parents=True)
    mine.write_text("mine", encoding="utf-8")
    refused = call("demo", "here", "--json")
    assert refused.exit_code == 2
    (fault,) = json.loads(refused.stdout)["faults"]
    assert (fault["file"], fault["problem"]) == (str(mine), "exists already")
    assert mine.read_text("utf-8") == "mine"
    assert [path.name for path in Path("here").rglob("*.yaml")] == ["arm.yaml"]
    Path("file").write_text("", encoding="utf-8")
    assert call("demo", "file").exit_code == 2


def test_a_demo_that_can_not_be_written(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """The disk's refusal is exit code 5, said plainly."""
    monkeypatch.chdir(tmp_path)

    def refuse(*_: object) -> None:
        raise OSError(28, "No space left on device", "there/arm.yaml")

    monkeypatch.setattr(shutil, "copyfile", refuse)
    refused = call("demo", "there")
    assert refused.exit_code == 5
    assert "there/arm.yaml: can't be written: No space left on device" in refused.stderr


def test_broken_plugins_are_listed_as_such(monkeypatch: pytest.MonkeyPatch) -> None:
    """A law that can't be loaded is named with its reason and stops no other."""
    laws = import_module("rigbench.cli.laws")
    from rigbench.laws.registry import Registry, registered

    registry = Registry(registered().laws, (("wobbly", "ImportError: no module named 'wobble'"),))
    monkeypatch.setattr(laws, "registered", lambda: registry)
    assert "wobbly is registered but can't be used: ImportError" in call("laws").stderr
    named = call("laws", "wobbly")
    assert named.exit_code == 2
    assert "no module named 'wobble'" in named.stderr
    assert json.loads(call("laws", "--json").stdout)["broken"][0]["name"] == "wobbly"


@pytest.mark.parametrize("as_json", [False, True])
def test_an_error_nobody_foresaw(monkeypatch: pytest.MonkeyPatch, as_json: bool) -> None:
    """Exit code 1, the traceback and a line that says whose fault it is; with --json one document too."""
    laws = import_module("rigbench.cli.laws")

    def fail() -> None:
        raise RuntimeError("the sky fell")

    monkeypatch.setattr(laws, "registered", fail)
    result = call("laws", *(["--json"] if as_json else []))
    assert result.exit_code == 1
    assert "Traceback" in result.stderr
    assert result.stderr.rstrip().endswith("a bug in rigbench: RuntimeError: the sky fell")
    if as_json:
        assert "the sky fell" in json.loads(result.stdout)["faults"][0]["problem"]


def test_ctrl_c_outside_a_campaign(monkeypatch: pytest.MonkeyPatch) -> None:
    """An interrupt anywhere else ends quietly with 3."""
    laws = import_module("rigbench.cli.laws")

    def interrupt() -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr(laws, "registered", interrupt)
    result = call("laws")
    assert result.exit_code == 3
    assert "Traceback" not in result.stderr


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


def test_output_that_the_terminal_can_not_show(trial: Path) -> None:
    """On a terminal without the characters, they are replaced; nothing fails."""
    trial.write_text(TRIAL.replace("A trial", "Größe µ"), encoding="utf-8")
    environment = os.environ | {"PYTHONIOENCODING": "ascii"}
    done = in_process_of_its_own("run", "trial.yaml", "--jobs", "0", env=environment)
    assert done.returncode == 0, done.stderr
    assert "Gr??e" in done.stdout

"""The commands, as a user meets them: what they do, what they write, and how they end."""

from __future__ import annotations

import contextlib
import csv
import io
import json
import signal
import sqlite3
import subprocess
import sys
import time
from collections.abc import Callable
from importlib import import_module
from pathlib import Path

import pytest
from typer.main import get_command
from typer.testing import Result

from rigbench.cli import app

Process = subprocess.CompletedProcess[str]

COMMANDS = tuple(get_command(app).list_commands(None))  # type: ignore[attr-defined]


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
def test_every_command_has_help_with_an_example(call: Callable[..., Result], command: str) -> None:
    """--help ends with one example that starts as a user would type it."""
    result = call(command, "--help")
    assert result.exit_code == 0
    assert f"Example: rigbench {command}" in " ".join(result.stdout.split())


def test_help_lists_the_commands_and_the_exit_codes(call: Callable[..., Result]) -> None:
    """The first page names every command and what the process's exit code says."""
    result = call("--help")
    assert result.exit_code == 0
    assert all(f"\n  {command} " in result.stdout for command in COMMANDS)
    assert "3 a campaign stopped" in " ".join(result.stdout.split())


def test_version(call: Callable[..., Result]) -> None:
    """--version prints name and version."""
    assert call("--version").stdout.startswith("rigbench 0.")


def test_a_campaign_from_check_to_export(
    call: Callable[..., Result], run_here: Callable[..., Result], trial_text: str, trial: Path
) -> None:
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

    trial.write_text(trial_text.replace("draws: 3", "draws: 5"), encoding="utf-8")
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
    told = {"store": str(store), "file": "runs.csv", "columns": "runs-columns.csv", "rows": 12}
    assert json.loads(written.stdout) == told
    assert Path("runs.csv").read_text("utf-8") == table.stdout
    columns = csv.DictReader(io.StringIO(Path("runs-columns.csv").read_text("utf-8")))
    assert [column["name"] for column in columns] == list(rows[0])
    assert call("export", str(store), "-o", "runs.parquet").exit_code == 0
    assert Path("runs.parquet").read_bytes().startswith(b"PAR1")
    assert not list(Path().glob("*.part"))


def test_a_run_in_worker_processes_gives_the_same(
    run_here: Callable[..., Result], in_process_of_its_own: Callable[..., Process], trial: Path
) -> None:
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


def test_ctrl_c_ends_with_3_and_the_next_run_goes_on(
    call: Callable[..., Result], run_here: Callable[..., Result], trial_text: str, trial: Path
) -> None:
    """A campaign that is stopped keeps what is done, prints what that shows, and says how to go on."""
    trial.write_text(trial_text.replace("draws: 3", "draws: 4000"), encoding="utf-8")
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
    trial.write_text(trial_text, encoding="utf-8")
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
def test_exit_codes(
    call: Callable[..., Result], trial: Path, arguments: tuple[str, ...], code: int, words: str
) -> None:
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


def test_a_store_of_another_experiment_is_refused(
    call: Callable[..., Result], run_here: Callable[..., Result], trial_text: str, trial: Path
) -> None:
    """Another file of another title. Exit code 5, and the store is left as it was; check only notes it."""
    run_here("trial.yaml")
    before = Path("results/trial.sqlite").read_bytes()
    Path("other").mkdir()
    Path("other/trial.yaml").write_text(trial_text.replace("A trial", "Another"), encoding="utf-8")
    result = run_here("other/trial.yaml")
    assert result.exit_code == 5
    assert "A trial" in result.stderr
    assert Path("results/trial.sqlite").read_bytes() == before
    checked = call("check", "other/trial.yaml")
    assert checked.exit_code == 0
    assert "belongs to the experiment 'A trial'" in checked.stderr


def test_a_title_can_be_mended_and_a_folder_moved(
    call: Callable[..., Result], run_here: Callable[..., Result], trial_text: str, trial: Path
) -> None:
    """Nothing is run anew; where the file is another one, that is said."""
    run_here("trial.yaml")
    trial.write_text(trial_text.replace("A trial", "Another"), encoding="utf-8")
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


def test_status_says_where_hosts_differ(
    call: Callable[..., Result], run_here: Callable[..., Result], trial: Path
) -> None:
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


def test_a_file_that_can_not_be_written(
    call: Callable[..., Result], run_here: Callable[..., Result], trial: Path
) -> None:
    """-o below what is no folder: exit code 5, and nothing is left behind."""
    run_here("trial.yaml")
    for file in ("trial.yaml/runs.csv", "trial.yaml/runs.parquet"):
        result = call("export", "results/trial.sqlite", "-o", file)
        assert result.exit_code == 5
        assert f"{file}: can't be written" in result.stderr
    assert not list(Path().rglob("*.part"))


def test_a_table_has_one_of_two_endings(call: Callable[..., Result], trial: Path) -> None:
    """A slip in the ending is told, and no CSV is written under the name of something else."""
    result = call("export", "results/trial.sqlite", "-o", "runs.parqet")
    assert result.exit_code == 2
    assert "runs.parqet: -o: '.parqet' is no ending of a table; expected .csv or .parquet" in result.stderr
    assert not list(Path().glob("runs*"))


def test_missing_folders_are_made(
    call: Callable[..., Result], run_here: Callable[..., Result], trial: Path
) -> None:
    """-o into a folder that isn't there makes it, for a table as for a picture."""
    run_here("trial.yaml")
    assert call("export", "results/trial.sqlite", "-o", "one/two/runs.csv").exit_code == 0
    assert call("matrix", "results/trial.sqlite", "-o", "one/three/m.svg").exit_code == 0
    assert Path("one/two/runs.csv").exists()
    assert Path("one/three/m.svg").exists()


def test_a_long_motion_does_not_make_check_long(
    call: Callable[..., Result], trial_text: str, trial: Path
) -> None:
    """The estimate of 500 s of motion is measured on 3 s of it; it is that of the whole."""
    times = {}
    for leg_s in (5, 500):
        trial.write_text(trial_text.replace("leg_s: 0.3", f"leg_s: {leg_s}"), encoding="utf-8")
        begin = time.monotonic()
        document = json.loads(call("check", "trial.yaml", "--json").stdout)
        times[leg_s] = document["estimate"]["seconds"]
        assert time.monotonic() - begin < 30  # eight runs of 500 s take minutes
    assert 20 < times[500] / times[5] < 500  # 100, but for the noise of the clock


def test_entries_that_share_a_run_are_all_counted(
    run_here: Callable[..., Result], trial_text: str, trial: Path
) -> None:
    """One source alone and all together are the same runs where one is declared: 14 planned, 14 to do."""
    trial.write_text(trial_text.replace("together: [1]", "each_alone: 1, together: [1]"), encoding="utf-8")
    assert "14 of 14 runs to do" in run_here("trial.yaml").stderr
    assert "all 14 runs are stored" in run_here("trial.yaml").stderr


@pytest.mark.parametrize("as_json", [False, True])
def test_an_error_nobody_foresaw(
    call: Callable[..., Result], monkeypatch: pytest.MonkeyPatch, as_json: bool
) -> None:
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


def test_ctrl_c_outside_a_campaign(call: Callable[..., Result], monkeypatch: pytest.MonkeyPatch) -> None:
    """An interrupt anywhere else ends quietly with 3."""
    laws = import_module("rigbench.cli.laws")

    def interrupt() -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr(laws, "registered", interrupt)
    result = call("laws")
    assert result.exit_code == 3
    assert "Traceback" not in result.stderr

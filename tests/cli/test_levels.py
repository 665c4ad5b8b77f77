"""find_level and stop_early by the commands, on a small real arm."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path

from typer.testing import Result

Call = Callable[..., Result]


def changed(trial: Path, *lines: str, **new: object) -> None:
    """Give keys of the trial other values, and add lines."""
    kept = [line for line in trial.read_text().splitlines() if line.split(":")[0] not in new]
    trial.write_text("\n".join([*kept, *(f"{key}: {value}" for key, value in new.items()), *lines]) + "\n")


def test_own_limits_from_file_to_matrix(trial: Path, call: Call, run_here: Call) -> None:
    """check foretells the runs; run finds the level; status, JSON and picture show it; nothing is done twice."""
    changed(trial, "find_level: {most: 4, steps: 3}", draws=6, tolerance="{tool_peak_mm: 4}")
    told = call("check", str(trial))
    assert told.exit_code == 0, told.output
    # 2 laws, 6 draws, level 4 and 3 halvings of 1 to 4, down to 4 / 2^3
    assert "find_level: at most 48 runs more" in told.output
    done = run_here(str(trial), "--json")
    assert done.exit_code == 0, done.output
    document = json.loads(done.stdout)
    assert document["runs"] == {"planned": 14, "done": 14, "failed": 0}
    laws = {law["law"]: law for law in document["laws"]}
    assert {law["found_by"] for law in laws.values()} == {"own_limits"}
    assert laws["computed torque"]["own_limits"]["draws"] == 6
    assert laws["computed torque"]["own_limits"]["finest"] == 0.5
    again = run_here(str(trial))
    assert "nothing to run" in again.stderr
    assert "by each draw's own limit" in again.stdout
    picture = call("matrix", "results/trial.sqlite", "--limits")
    assert picture.exit_code == 0, picture.output
    assert Path("results/trial-limits.png").read_bytes().startswith(b"\x89PNG")


def test_limits_that_nobody_looked_for(trial: Path, call: Call, run_here: Call) -> None:
    """It is the input's fault, in words."""
    run_here(str(trial))
    told = call("matrix", "results/trial.sqlite", "--limits", "-o", "limits.png")
    assert told.exit_code == 2
    assert "find_level in the experiment file" in told.stderr
    for other in (["--curves"], ["--text"], ["--show", "p95"]):
        assert call("matrix", "results/trial.sqlite", "--limits", *other).exit_code == 2
    assert not Path("limits.png").exists()


def test_columns_that_stop_early(trial: Path, call: Call, run_here: Call) -> None:
    """Nobody keeps 0.001 mm: two draws settle it. No command takes the others for missing."""
    changed(trial, "stop_early: true", draws=40, tolerance="{tool_peak_mm: 0.001}")
    told = call("check", str(trial))
    assert "takes 158 that all keep" in told.stdout
    assert "40 draws can't settle" in told.stderr
    done = run_here(str(trial), "--json")
    assert done.exit_code == 0, done.output
    document = json.loads(done.stdout)
    assert document["runs"] == {"planned": 6, "done": 6, "failed": 0}
    cell = next(cell for cell in document["cells"] if cell["condition"] == "all at 1")
    assert (cell["draws"], cell["incomplete"], cell["settled"], cell["verdict"]) == (2, 0, True, "misses")
    status = call("status", "results/trial.sqlite")
    assert "settled, 2 draws" in status.stdout
    assert "6 runs planned, all done" in " ".join(status.stdout.split())
    assert "still to do" not in status.stdout
    checked = json.loads(call("check", str(trial), "--json").stdout)
    assert checked["runs"] == {"planned": 82, "stored": 6, "not_wanted": 76}
    assert (checked["stop_early"], checked["draws_needed"]) == (True, 158)
    again = run_here(str(trial))
    assert "nothing to run" in again.stderr
    assert call("status", "results/trial.sqlite", "--watch").exit_code == 0

"""A part of a campaign, from the command line: by time, by draws, and how to go on."""

from __future__ import annotations

import json
import subprocess
import time
from collections.abc import Callable
from pathlib import Path

import pytest
from typer.testing import Result

Process = subprocess.CompletedProcess[str]


@pytest.mark.parametrize("more", [(), ("--until", "LATER", "--draws", "3999")])
def test_when_the_time_is_up(
    in_process_of_its_own: Callable[..., Process], trial_text: str, trial: Path, more: tuple[str, ...]
) -> None:
    """Exit code 3, cells that differ by one draw at most, and the command that goes on, without the time.

    Of --for and --until the earlier counts.
    """
    trial.write_text(trial_text.replace("draws: 3", "draws: 4000"), encoding="utf-8")
    later = time.strftime("%H:%M", time.localtime(time.time() + 7200))
    more = tuple(later if word == "LATER" else word for word in more)
    done = in_process_of_its_own("run", "trial.yaml", "--for", "2s", "--jobs", "2", "--json", *more)
    assert done.returncode == 3, done.stderr
    document = json.loads(done.stdout)
    draws = [cell["draws"] for cell in document["cells"] if cell["condition"] == "all at 1"]
    assert len(draws) == 2
    assert max(draws) - min(draws) <= 1
    assert document["runs"]["done"] < 8000
    resume = "rigbench run trial.yaml --draws 3999" if more else "rigbench run trial.yaml"
    assert "none begins when" in done.stderr
    assert f"stopped as its time is up, with {document['runs']['done']} of 8002 runs stored" in done.stderr
    assert f"'{resume}' goes on from here" in done.stderr
    assert "Traceback" not in done.stderr


def test_time_enough_is_no_stop(run_here: Callable[..., Result], trial: Path) -> None:
    """A campaign that is done before its time ends with 0."""
    result = run_here("trial.yaml", "--for", "1h")
    assert result.exit_code == 0
    assert "none begins when 60 min have passed" in result.stderr


def test_the_first_draws(run_here: Callable[..., Result], trial: Path) -> None:
    """Exit code 0, a sentence that says how to go on; then the rest, and no run twice."""
    first = run_here("trial.yaml", "--draws", "2", "--json")
    assert first.exit_code == 0
    assert "6 of 6 runs of the first 2 draws to do" in first.stderr
    assert "the first 2 of 3 draws are done, as asked; 'rigbench run trial.yaml' does the other 2 runs" in (
        first.stderr
    )
    document = json.loads(first.stdout)
    assert document["runs"] == {"planned": 8, "done": 6, "failed": 0}
    assert {cell["draws"] for cell in document["cells"] if cell["level"]} == {2}
    assert "all 4 runs of the first 1 draw are stored" in run_here("trial.yaml", "--draws", "1").stderr
    rest = run_here("trial.yaml", "--draws", "3")
    assert "2 of 8 runs of the first 3 draws to do" in rest.stderr
    assert "as asked" not in rest.stderr
    assert "nothing to run" in run_here("trial.yaml").stderr


def test_wishes_that_can_not_be_had(run_here: Callable[..., Result], trial: Path) -> None:
    """All at once, exit code 2, and nothing is made."""
    result = run_here(
        *("trial.yaml", "--for", "soon", "--until", "7", "--draws", "4", "--again", "joint pid", "--yes"),
        *("--limit", "5"),
    )
    assert result.exit_code == 2
    for words in (
        "trial.yaml: --for: 'soon' is no span of time; expected hours, minutes and seconds",
        "trial.yaml: --until: '7' is no time of day; expected hours and minutes",
        "trial.yaml: --draws: 4 draws are wished for; expected at most the 3 declared",
        "trial.yaml: --again: there is no law 'joint pid'; expected one of joint pd, computed torque (did you",
        "trial.yaml: --yes: confirms --fresh, which is not given",
        "trial.yaml: --limit: '5' is no span of time; expected hours, minutes and seconds",
        "6 faults",
    ):
        assert words in result.stderr
    assert not Path("results").exists()


def test_the_limit_of_a_run_is_the_workers(
    run_here: Callable[..., Result], in_process_of_its_own: Callable[..., Process], trial: Path
) -> None:
    """Without workers there is none, which is a fault; with them the command that goes on has it too."""
    result = run_here("trial.yaml", "--limit", "5m")
    assert result.exit_code == 2
    assert "trial.yaml: --limit: is kept by worker processes, and --jobs 0 does without them" in result.stderr
    part = ("run", "trial.yaml", "--limit", "5m", "--jobs", "1", "--draws", "1")
    done = in_process_of_its_own(*part)
    assert done.returncode == 0, done.stderr
    assert "'rigbench run trial.yaml --limit 5m' does the other 4 runs" in " ".join(done.stderr.split())


def test_draws_of_what_is_not_random(run_here: Callable[..., Result], trial_text: str, trial: Path) -> None:
    """Nominal runs alone have no draws: a fault."""
    lines = [line for line in trial_text.splitlines() if not line.startswith(("mismatch", "conditions"))]
    trial.write_text("\n".join(lines), encoding="utf-8")
    result = run_here("trial.yaml", "--draws", "2")
    assert result.exit_code == 2
    assert "--draws: nothing in it is random, so it has no draws" in result.stderr
    assert run_here("trial.yaml").exit_code == 0


def test_check_says_how_large_the_store_will_be(
    call: Callable[..., Result], run_here: Callable[..., Result], trial_text: str, trial: Path
) -> None:
    """Within a tenth of what it then is."""
    trial.write_text(trial_text.replace("draws: 3", "draws: 60"), encoding="utf-8")
    told = json.loads(call("check", "trial.yaml", "--json").stdout)["estimate"]["store_bytes"]
    run_here("trial.yaml")
    assert told == pytest.approx(Path("results/trial.sqlite").stat().st_size, rel=0.1)
    assert " kB when all is done" in call("check", "trial.yaml").stdout

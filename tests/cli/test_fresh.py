"""`rigbench run --fresh`: it asks, and whatever was stored is kept."""

from __future__ import annotations

import signal
import subprocess
from collections.abc import Callable
from datetime import date
from pathlib import Path

import pytest
from typer.testing import Result

from rigbench.campaign.reading import Record
from rigbench.campaign.store import Store
from rigbench.experiment import load_experiment

Process = subprocess.CompletedProcess[str]

STORE = Path("results/trial.sqlite")


def stores() -> list[str]:
    return sorted(path.name for path in Path("results").glob("*.sqlite*"))


def held(path: Path) -> list[Record]:
    """All runs of a store, with their times of the clock."""
    with Store.open_for_reading(path) as store:
        return list(store.records())


def aside() -> str:
    return f"trial-{date.today().isoformat()}.sqlite"


def test_with_yes_nobody_is_asked(run_here: Callable[..., Result], trial: Path) -> None:
    """All is done anew; the old runs are whole under a name with the date, which is said."""
    run_here("trial.yaml")
    before = held(STORE)
    result = run_here("trial.yaml", "--fresh", "--yes")
    assert result.exit_code == 0
    assert f"the 8 runs stored so far are kept in results/{aside()}" in result.stderr
    assert "8 of 8 runs to do" in result.stderr
    assert stores() == sorted(["trial.sqlite", aside()])
    assert held(Path("results", aside())) == before
    new = held(STORE)
    assert len(new) == 8
    assert new != before
    assert [record.row.scores.keys() for record in new] == [record.row.scores.keys() for record in before]


def test_where_nobody_can_be_asked_it_needs_yes(
    in_process_of_its_own: Callable[..., Process], run_here: Callable[..., Result], trial: Path
) -> None:
    """Exit code 2, with how many runs and where; the store is as it was."""
    run_here("trial.yaml")
    before = held(STORE)
    done = in_process_of_its_own("run", "trial.yaml", "--fresh", stdin=subprocess.DEVNULL)
    assert done.returncode == 2
    assert "--fresh: would set aside 8 runs in results/trial.sqlite, and there is no terminal" in done.stderr
    assert "expected --yes" in done.stderr
    assert stores() == ["trial.sqlite"]
    assert held(STORE) == before


@pytest.mark.parametrize("answer", ["n", "", "\x04"])
def test_without_a_yes_nothing_is_changed(
    at_terminal: Callable[..., object], run_here: Callable[..., Result], trial: Path, answer: str
) -> None:
    """No, nothing said, or the end of the input: exit code 3 and how to go on."""
    run_here("trial.yaml")
    before = held(STORE)
    terminal = at_terminal("run", "trial.yaml", "--fresh", "--jobs", "0")
    terminal.wait_for("Set aside 8 runs in results/trial.sqlite, and do all anew? [y/N]")
    terminal.answer(answer)
    assert terminal.end() == 3
    assert "nothing is changed; 'rigbench run trial.yaml' goes on with what is stored" in terminal.said
    assert stores() == ["trial.sqlite"]
    assert held(STORE) == before


@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM])
def test_a_signal_is_no_yes(
    at_terminal: Callable[..., object],
    run_here: Callable[..., Result],
    trial: Path,
    number: signal.Signals,
) -> None:
    """Stopped at the question: exit code 3, nothing is changed."""
    run_here("trial.yaml")
    terminal = at_terminal("run", "trial.yaml", "--fresh", "--jobs", "0")
    terminal.wait_for("[y/N]")
    terminal.process.send_signal(number)
    assert terminal.end() == 3
    assert "Traceback" not in terminal.said
    assert stores() == ["trial.sqlite"]


def test_a_yes_at_the_terminal(
    at_terminal: Callable[..., object], run_here: Callable[..., Result], trial: Path
) -> None:
    """The campaign is done anew, with its bar; the old runs are kept."""
    run_here("trial.yaml")
    terminal = at_terminal("run", "trial.yaml", "--fresh", "--jobs", "0")
    terminal.wait_for("[y/N]")
    terminal.answer("y")
    assert terminal.end() == 0
    assert "8 of 8 runs to do" in terminal.said
    assert stores() == sorted(["trial.sqlite", aside()])


def test_where_nothing_is_stored_nobody_is_asked(run_here: Callable[..., Result], trial: Path) -> None:
    """No store, or one without runs: there is nothing to keep."""
    assert run_here("trial.yaml", "--fresh").exit_code == 0
    STORE.unlink()
    plan = load_experiment("trial.yaml").plan()
    with Store.open_for_writing(STORE, plan) as store:
        store.record_plan(plan)
    assert run_here("trial.yaml", "--fresh").exit_code == 0
    assert stores() == ["trial.sqlite"]


def test_not_while_another_process_writes(run_here: Callable[..., Result], trial: Path) -> None:
    """Exit code 5, whatever was confirmed."""
    run_here("trial.yaml")
    with Store.open_for_writing(STORE, load_experiment("trial.yaml").plan()):
        result = run_here("trial.yaml", "--fresh", "--yes")
    assert result.exit_code == 5
    assert "is writing to it" in result.stderr
    assert stores() == ["trial.sqlite"]


def test_not_the_store_of_another_experiment(
    run_here: Callable[..., Result], trial_text: str, trial: Path
) -> None:
    """It is refused as ever, and left where it is."""
    run_here("trial.yaml")
    Path("other").mkdir()
    Path("other/trial.yaml").write_text(trial_text.replace("A trial", "Another"), encoding="utf-8")
    result = run_here("other/trial.yaml", "--fresh", "--yes")
    assert result.exit_code == 5
    assert "belongs to the experiment 'A trial'" in result.stderr
    assert stores() == ["trial.sqlite"]

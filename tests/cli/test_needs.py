"""`rigbench needs`: from the key in the experiment file to what must be known."""

from __future__ import annotations

import json
import os
import signal
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest
from typer.testing import Result

from rigbench.campaign import campaign
from rigbench.campaign.progress import Progress

Call = Callable[..., Result]

NEEDS = "required_share: 0.5\nneeds: {law: computed torque, runs: 130, level: 2}\n"
"""One source, one motion: 16 x 3 runs for the shares, and twice 6 x 4 at most."""


@pytest.fixture
def asking(trial: Path, trial_text: str) -> Path:
    """The trial, asking what must be known."""
    trial.write_text(trial_text + NEEDS, encoding="utf-8")
    return trial


def test_what_must_be_known(asking: Path, call: Call, run_here: Call) -> None:
    """The plan says the price; then text, JSON and picture say the same: a lone source has the whole variance."""
    checked = call("check", str(asking))
    assert checked.exit_code == 0, checked.output
    assert "needs: at most 96 runs more, after those of the plan" in " ".join(checked.output.split())
    [told] = json.loads(call("check", str(asking), "--json").stdout)["studies"]
    assert (told["name"], told["most_runs"]) == ("needs", 96)
    assert run_here(str(asking)).exit_code == 0
    store = "results/trial.sqlite"
    text = call("needs", store)
    assert text.exit_code == 0, text.output
    assert "link mass" in text.stdout
    assert "Variance of the tool peak at level 2; 16 rows, 6 draws, of which 50 % must keep" in " ".join(
        text.stdout.split()
    )
    said = call("needs", store, "--json", "-o", "needs.svg")
    found = json.loads(said.stdout)
    assert found["finished"] is True
    assert found["runs"]["stored"] <= found["runs"]["most"] == 96
    [law] = found["laws"]
    assert (law["law"], law["finished"], law["runs_missing"]) == ("computed torque", True, 0)
    [source] = law["sources"]
    assert source["source"] == "link_mass_percent"
    assert 0.5 < source["total"]["value"] < 2.0  # 1, of 16 rows
    assert source["spread"]["declared"] == {"all": pytest.approx(10.0)}
    assert source["tolerated_alone"] == law["tolerated_together"]  # the same machines
    assert Path("needs.svg").stat().st_size > 10_000
    wrong = call("needs", store, "--law", "computed torqe")
    assert wrong.exit_code == 2
    assert "did you mean 'computed torque'?" in wrong.stderr
    assert call("needs", store, "--law", "computed torque").stdout == text.stdout
    for picture in ("needs.txt", store):
        assert call("needs", store, "-o", picture).exit_code == 2
    assert call("needs", "nowhere.sqlite").exit_code == 5


def test_a_store_whose_experiment_does_not_ask(trial: Path, call: Call, run_here: Call) -> None:
    """It is said how to ask."""
    run_here(str(trial))
    answer = call("needs", "results/trial.sqlite")
    assert answer.exit_code == 2
    assert "does not ask what must be known" in answer.stderr
    assert "needs: {law: LAW}" in answer.stderr
    faults = json.loads(call("needs", "results/trial.sqlite", "--json").stdout)["faults"]
    assert len(faults) == 1


def test_before_it_has_begun(asking: Path, call: Call, run_here: Call) -> None:
    """The first draws alone leave the study for later; it is said what does it."""
    assert run_here(str(asking), "--draws", "1").exit_code == 0
    answer = call("needs", "results/trial.sqlite")
    assert answer.exit_code == 2
    assert "has not begun" in answer.stderr
    assert "rigbench run trial.yaml" in answer.stderr


def test_while_it_is_not_finished(
    asking: Path, call: Call, run_here: Call, monkeypatch: pytest.MonkeyPatch
) -> None:
    """What there is is shown, with how many runs are missing, and exit code 0; the next run goes on to the end."""
    original = campaign.Studying.go

    def stopping(self: Any, report: Callable[[Progress], None]) -> None:
        def then_stop(progress: Progress) -> None:
            report(progress)
            if progress.done == 10:
                os.kill(os.getpid(), signal.SIGINT)

        original(self, then_stop)

    with monkeypatch.context() as patch:
        patch.setattr(campaign.Studying, "go", stopping)
        assert run_here(str(asking)).exit_code == 3
    answer = call("needs", "results/trial.sqlite", "-o", "needs.png")
    assert answer.exit_code == 0, answer.output
    found = json.loads(call("needs", "results/trial.sqlite", "--json").stdout)
    missing = found["laws"][0]["runs_missing"]
    assert missing == 48 - found["runs"]["stored"] > 0
    assert f"{missing} runs of the shares are missing" in " ".join(answer.stdout.split())
    assert "the study is not finished: 'rigbench run trial.yaml" in " ".join(answer.stderr.split())
    assert found["finished"] is False
    assert run_here(str(asking)).exit_code == 0
    assert "issing" not in call("needs", "results/trial.sqlite").stdout

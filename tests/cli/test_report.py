"""`rigbench report`: the page of a store, and what keeps it from being written."""

from __future__ import annotations

import json
import os
from collections.abc import Callable
from pathlib import Path

import pytest
from typer.testing import Result

STORE, PAGE = "results/trial.sqlite", Path("results/trial-report.html")
Call = Callable[..., Result]


@pytest.fixture
def done(trial: Path, run_here: Call) -> None:
    """The trial's campaign, done."""
    assert run_here("trial.yaml").exit_code == 0


@pytest.mark.usefixtures("done")
def test_the_page_is_written_beside_the_store(call: Call) -> None:
    """Its path is the result; what is replayed is said, and the page has the experiment's own text."""
    before = Path(STORE).read_bytes()
    result = call("report", STORE)
    assert (result.exit_code, result.stdout) == (0, f"{PAGE}\n")
    assert "replaying " in result.stderr
    assert "not a safety case" in result.stderr
    page = PAGE.read_text("utf-8")
    assert page.startswith("<!DOCTYPE html>")
    assert page.rstrip().endswith("</html>")
    assert Path("trial.yaml").read_text("utf-8").split("\n")[1] in page
    assert f"rigbench status {STORE} --json" in page
    assert Path(STORE).read_bytes() == before


@pytest.mark.usefixtures("done")
def test_json_says_what_was_written_and_replayed(call: Call) -> None:
    """One document; --traces bounds the replays, and with none nothing is said of them."""
    result = call("report", STORE, "-o", "deep/er/page.html", "--traces", "1", "--json")
    written = json.loads(result.stdout)
    assert (written["store"], written["page"]) == (STORE, "deep/er/page.html")
    assert written["runs"]["replayed"] == 1
    assert written["runs"]["named"] > 1
    assert Path("deep/er/page.html").stat().st_size > 20_000
    none = call("report", STORE, "--traces", "0")
    assert none.exit_code == 0
    assert "replaying" not in none.stderr


@pytest.mark.usefixtures("done")
@pytest.mark.parametrize(("output", "problem"), [(STORE, "is the store itself"), ("page.pdf", "no ending")])
def test_an_output_that_can_not_be_is_a_fault(call: Call, output: str, problem: str) -> None:
    """Exit code 2, as JSON on demand, and nothing is written."""
    result = call("report", STORE, "-o", output, "--json")
    assert result.exit_code == 2
    assert problem in json.loads(result.stdout)["faults"][0]["problem"]
    assert not Path("page.pdf").exists()
    assert Path(STORE).read_bytes().startswith(b"SQLite")


def test_no_store_and_an_empty_one(call: Call, trial: Path) -> None:
    """Exit code 5 with what to do; no page is left."""
    Path("not.sqlite").write_text("no store")
    for store in ("missing.sqlite", "not.sqlite"):
        result = call("report", store)
        assert result.exit_code == 5
        assert store in result.stderr
    assert not list(Path().glob("*.html"))


@pytest.mark.usefixtures("done")
def test_a_page_is_whole_or_not_there(call: Call) -> None:
    """Where a folder stands in its place the disk refuses: exit code 5, and no part of it is left."""
    PAGE.mkdir()
    result = call("report", STORE, "--traces", "0")
    assert result.exit_code == 5
    assert "can't be written" in result.stderr
    assert sorted(os.listdir("results")) == ["trial-matrix.png", "trial-report.html", "trial.sqlite"]

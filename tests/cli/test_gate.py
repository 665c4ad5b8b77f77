"""``rigbench gate``: its exit code is the answer, and it says why."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path
from xml.etree import ElementTree

import pytest
from typer.testing import Result

from rigbench.campaign.store import Store
from rigbench.experiment import load_experiment

STORE = "results/trial.sqlite"


@pytest.fixture
def gated(trial: Path, trial_text: str, run_here: Callable[..., Result]) -> Path:
    """A campaign in which three draws of three show that the required 40 % keep the tolerance."""
    trial.write_text(f"{trial_text}required_share: 0.4\n", "utf-8")
    assert run_here(str(trial)).exit_code == 0
    return trial


def test_a_law_that_keeps_passes(gated: Path, call: Callable[..., Result]) -> None:
    """Exit code 0, and one sentence; the level's column is found by its number."""
    done = call("gate", STORE, "--law", "computed torque", "--level", "1")
    assert done.exit_code == 0, done.stdout
    assert done.stdout.startswith(
        "passes: 'computed torque' under 'all at 1' keeps the tolerance: 3 of 3 draws"
    )
    assert call("gate", STORE, "--law", "computed torque").stdout == done.stdout
    assert call("gate", STORE, "--law", "computed torque", "--condition", "all at 1").stdout == done.stdout


def test_a_law_that_misses_does_not(
    trial: Path, run_here: Callable[..., Result], call: Callable[..., Result]
) -> None:
    """Exit code 4 if one of several fails, each with its reason, in XML too."""
    assert run_here(str(trial)).exit_code == 0
    laws = ("--law", "joint pd", "--law", "computed torque")
    done = call("gate", STORE, *laws, "--level", "0", "--junit", "x/gate.xml")
    assert done.exit_code == 4
    said = "fails: 'joint pd' under 'nominal' misses the tolerance: its one exact run does not."
    assert said in done.stdout
    assert "passes: 'computed torque'" in done.stdout
    (suite,) = ElementTree.parse("x/gate.xml").getroot()
    assert (suite.get("tests"), suite.get("failures")) == ("2", "1")


def test_an_open_law_passes_only_where_that_is_allowed(
    trial: Path, run_here: Callable[..., Result], call: Callable[..., Result]
) -> None:
    """Three draws show no share of 0.95."""
    assert run_here(str(trial)).exit_code == 0
    arguments = ("gate", STORE, "--law", "computed torque", "--level", "1")
    assert call(*arguments).exit_code == 4
    assert "is open" in call(*arguments).stdout
    assert call(*arguments, "--allow-open").exit_code == 0


def test_where_nothing_was_run_it_does_not_pass(trial: Path, call: Callable[..., Result]) -> None:
    """A campaign that is planned and no more: exit code 4, whatever is allowed, and as JSON too."""
    Path("results").mkdir()
    plan = load_experiment(str(trial)).plan()
    with Store.open_for_writing(STORE, plan) as store:
        store.record_plan(plan)
    done = call("gate", STORE, "--law", "joint pd", "--allow-open", "--json")
    assert done.exit_code == 4
    (check,) = json.loads(done.stdout)["checks"]
    assert check["why"] == "no result"
    assert check["said"] == "'joint pd' under 'all at 1' was not run: no draw counts."


def test_worse_than_a_baseline_does_not_pass(
    gated: Path, run_here: Callable[..., Result], call: Callable[..., Result]
) -> None:
    """Softer gains make the exact nominal run worse, though it keeps; the other way round it is better."""
    text = gated.read_text("utf-8").replace(
        "computed-torque, natural_hz: 3", "computed-torque, natural_hz: 1"
    )
    text = text.replace("together: [1]", "cases: {loaded: {link_mass_percent: 20}}")
    gated.write_text(text, "utf-8")
    Path("soft.yaml").write_text(text, "utf-8")
    Path("stiff.yaml").write_text(text.replace("natural_hz: 1", "natural_hz: 4"), "utf-8")
    for name in ("soft", "stiff"):
        assert run_here(f"{name}.yaml").exit_code == 0
    arguments = ("--law", "computed torque", "--condition", "loaded", "--allow-open")
    worse = call("gate", "results/soft.sqlite", *arguments, "--baseline", "results/stiff.sqlite")
    assert worse.exit_code == 4
    assert (
        "fails: 'computed torque' under 'loaded' got worse than the baseline: tool peak by +" in worse.stdout
    )
    better = call("gate", "results/stiff.sqlite", *arguments, "--baseline", "results/soft.sqlite")
    assert "got better than the baseline" in better.stdout
    assert better.exit_code == 0


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (
            ["--law", "computed torq"],
            "--law: no law is called 'computed torq' (did you mean 'computed torque'?)",
        ),
        (["--law", "joint pd", "--condition", "all at 2"], "(did you mean 'all at 1'?)"),
        (["--law", "joint pd", "--level", "7"], "not run at level 7; expected one of 0, 1"),
        (["--law", "joint pd", "--level", "1", "--condition", "nominal"], "both name a column"),
        (["--law", "joint pd", "--sheet", "x"], "--sheet: no sheet is called 'x'"),
        ([], "--law"),
    ],
)
def test_faults(gated: Path, call: Callable[..., Result], arguments: list[str], said: str) -> None:
    """Unknown names leave with 2, with the nearest, and all at once."""
    done = call("gate", STORE, *arguments)
    assert done.exit_code == 2
    assert said in done.stderr


def test_without_a_tolerance_there_is_nothing_to_keep(
    trial: Path, trial_text: str, run_here: Callable[..., Result], call: Callable[..., Result]
) -> None:
    """A fault, unless a baseline is asked about."""
    trial.write_text(trial_text.replace("tolerance: {tool_peak_mm: 15}\n", ""), "utf-8")
    assert run_here(str(trial)).exit_code == 0
    assert call("gate", STORE, "--law", "joint pd").exit_code == 2
    done = call("gate", STORE, "--law", "joint pd", "--baseline", STORE)
    assert done.exit_code == 0
    assert "not shown to differ" in done.stdout


def test_a_disk_that_refuses_the_xml(gated: Path, call: Callable[..., Result]) -> None:
    """Exit code 5, named; the store itself is never written over."""
    Path("file").write_text("")
    assert call("gate", STORE, "--law", "joint pd", "--junit", "file/gate.xml").exit_code == 5
    assert call("gate", STORE, "--law", "joint pd", "--junit", STORE).exit_code == 2
    Path("old.sqlite").write_bytes(Path(STORE).read_bytes())
    baseline = ("--baseline", "old.sqlite", "--junit", "old.sqlite")
    assert call("gate", STORE, "--law", "joint pd", *baseline).exit_code == 2
    assert Path("old.sqlite").read_bytes() == Path(STORE).read_bytes()

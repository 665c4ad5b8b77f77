"""``rigbench matrix``: other numbers, curves, drivers and changes, from real campaigns."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
from typer.testing import Result

from rigbench.campaign.opened import open_store

STORE = "results/trial.sqlite"


@pytest.fixture
def stored(trial: Path, run_here: Callable[..., Result]) -> Path:
    """A campaign of 8 runs; beside it one of stiffer gains, in which 'pd' has another name."""
    assert run_here(str(trial)).exit_code == 0
    text = trial.read_text("utf-8").replace("natural_hz: 3", "natural_hz: 4").replace("joint pd:", "pd:")
    Path("stiffer.yaml").write_text(text, "utf-8")
    assert run_here("stiffer.yaml", "--store", "stiffer.sqlite").exit_code == 0
    return trial


def test_each_view_has_a_picture_of_its_own(stored: Path, call: Callable[..., Result]) -> None:
    """Named by what it shows, or as asked."""
    for arguments, file in (
        ([], "results/trial-matrix.png"),
        (["--show", "median"], "results/trial-median.png"),
        (["--show", "p95", "--score", "settle_ms"], "results/trial-p95.png"),
        (["--show", "ratio", "--score", "joint_peak_deg.elbow", "-o", "x/ratio.svg"], "x/ratio.svg"),
        (["--curves"], "results/trial-curves.png"),
        (["--curves", "--show", "median", "-o", "curves.pdf"], "curves.pdf"),
    ):
        done = call("matrix", STORE, *arguments)
        assert done.exit_code == 0, done.stderr
        assert done.stdout == f"{file}\n"
        assert Path(file).stat().st_size > 1000


def test_text_tells_how_laws_compare(stored: Path, call: Callable[..., Result]) -> None:
    """It prints and draws nothing."""
    Path("results/trial-matrix.png").unlink()
    done = call("matrix", STORE, "--text", "--show", "ratio")
    assert done.exit_code == 0
    assert "median ratio to nominal" in done.stdout
    assert "Draw by draw against" in done.stdout
    assert not Path("results/trial-matrix.png").exists()


def test_changes_are_told_with_what_only_one_has(stored: Path, call: Callable[..., Result]) -> None:
    """In words, in the picture's place and as JSON; the stiffer nominal run of the kept law is better."""
    done = call("matrix", "stiffer.sqlite", "--against", STORE)
    assert done.exit_code == 0, done.stderr
    assert "only in trial.sqlite: law 'joint pd'" in done.stdout
    assert "not in trial.sqlite: law 'pd'" in done.stdout
    assert done.stdout.endswith("stiffer-changes.png\n")
    document = json.loads(call("matrix", "stiffer.sqlite", "--against", STORE, "--text", "--json").stdout)
    assert document["picture"] is None
    kinds = {(c["law"], c["condition"]): c["change"] for c in document["changes"]["cells"]}
    assert kinds["computed torque", "nominal"] == "better"
    assert kinds["pd", "nominal"] == "new"


def test_sheets_have_the_values_of_their_own_parameters(
    trial: Path, run_here: Callable[..., Result], call: Callable[..., Result]
) -> None:
    """One factor for all links in one sheet, one for each in the other: the export and the drivers keep them apart."""
    own = {True: {"link_mass_percent.all"}, False: {"link_mass_percent.upper", "link_mass_percent.fore"}}
    text = trial.read_text("utf-8").replace("link_mass_percent: 10", "link_mass_percent: {all: 10}")
    text += "vary: {mismatch: {link_mass_percent: {shared: [true, false]}}}\n"
    trial.write_text(text.replace("draws: 3", "draws: 24"), "utf-8")
    assert run_here(str(trial)).exit_code == 0
    with open_store(STORE) as store:
        runs, names = store.runs(), [column.name for column in store.columns()]
        for shared, parameters in own.items():
            here = (runs["sheet"] == f"link_mass_percent.shared {str(shared).lower()}") & (runs["draw"] >= 0)
            filled = {
                name for name in names if name.startswith("draw.") and np.isfinite(runs[name][here]).all()
            }
            empty = {name for name in names if name.startswith("draw.") and np.isnan(runs[name][here]).all()}
            assert filled == {f"draw.{name}" for name in parameters}
            assert len(filled | empty) == 3
    for shared, parameters in own.items():
        arguments = (
            "--drivers",
            "joint pd",
            "--sheet",
            f"link_mass_percent.shared {str(shared).lower()}",
            "--json",
        )
        document = json.loads(call("matrix", STORE, *arguments).stdout)["drivers"]
        assert document["draws"] == 24
        (source,) = document["sources"]
        assert source["with_score"]["parameter"] in parameters


def test_drivers_print_and_draw(stored: Path, call: Callable[..., Result]) -> None:
    """The table on standard output, the picture beside the store; as JSON one document."""
    done = call("matrix", STORE, "--drivers", "joint pd")
    assert done.exit_code == 0, done.stderr
    assert "under 'all at 1'" in done.stdout
    assert "link mass" in done.stdout
    assert Path("results/trial-drivers.png").exists()
    arguments = ("--drivers", "joint pd", "--condition", "all at 1", "--score", "energy_j", "--json")
    document = json.loads(call("matrix", STORE, *arguments).stdout)
    assert document["drivers"]["score"] == "energy_j"
    assert document["drivers"]["draws"] == 3


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (["--show", "medain"], "no view of the matrix is called 'medain' (did you mean 'median'?)"),
        (["--score", "setle_ms"], "(did you mean 'settle_ms'?)"),
        (["--drivers", "joint dp"], "no law is called 'joint dp' (did you mean 'joint pd'?)"),
        (["--drivers", "joint pd", "--condition", "nominal"], "nothing is random under 'nominal'"),
        (["--drivers", "joint pd", "--condition", "all at 11"], "(did you mean 'all at 1'?)"),
        (["--drivers", "joint pd", "--sheet", "x"], "no sheet is called 'x'"),
        (["--drivers", "joint pd", "--curves"], "are views of their own"),
        (["--condition", "all at 1"], "narrows --drivers"),
        (["--text", "--curves"], "has no form for --curves"),
        (["--text", "-o", "x.png"], "prints and -o writes a picture"),
        (["--text", "--json"], "status STORE --json"),
        (["-o", "x.jpg"], "is no format of a picture"),
        (["-o", STORE], "is the store itself"),
    ],
)
def test_faults(stored: Path, call: Callable[..., Result], arguments: list[str], said: str) -> None:
    """Each names what is wrong and what would be right, and leaves with 2."""
    done = call("matrix", STORE, *arguments)
    assert done.exit_code == 2
    assert said in done.stderr
    assert "Traceback" not in done.stderr


def test_a_store_of_another_experiment_is_no_baseline(
    stored: Path, trial_text: str, run_here: Callable[..., Result], call: Callable[..., Result]
) -> None:
    """Another title and file: the cells would not mean the same."""
    Path("other.yaml").write_text(trial_text.replace("A trial", "Another"), "utf-8")
    assert run_here("other.yaml", "--store", "other.sqlite").exit_code == 0
    done = call("matrix", STORE, "--against", "other.sqlite")
    assert done.exit_code == 2
    assert "belongs to the experiment 'Another'" in done.stderr

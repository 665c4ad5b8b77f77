"""`mismatch: {from: ...}`: machines drawn from what an identification left unknown."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from rigbench.arm.files import load_arm
from rigbench.campaign.doing import Draws
from rigbench.errors import Fault, InputFaults
from rigbench.experiment import Experiment, load_experiment
from rigbench.experiment.identification import load_identification
from rigbench.identify.base import base_of
from rigbench.identify.consistent import Consistent
from rigbench.identify.covariance_file import covariance_document, covariance_text
from rigbench.identify.estimate import Estimate
from rigbench.identify.regressor import Terms, parameter_labels, parameter_values

Load = Callable[..., Experiment]
Faults = Callable[..., list[Fault]]
FROM = {"from": "known.json"}
SHEETS = {"vary": {"mismatch": {"from": ["known.json", "better.json"]}}}


@pytest.fixture(autouse=True)
def _known(folder: Path) -> None:
    """known.json and better.json: the arm of arm.yaml, known to 10 % and to 1 %; links.json: its links alone."""
    arm = load_arm(folder / "arm.yaml")
    for name, deviation, terms in (
        ("known", 0.1, Terms()),
        ("better", 0.01, Terms()),
        ("links", 0.1, Terms(rotor=False, viscous=False, coulomb=False)),
    ):
        base, count = base_of(arm, (0.0, 0.0, -9.81), terms), len(parameter_labels(arm, terms))
        values = base.combination @ parameter_values(arm, terms)
        found = Estimate(base, values, np.diag(values**2), np.ones(2), np.zeros(2, int), 100, 10.0)
        scales = parameter_values(arm, terms)[20:]
        result = Consistent(arm, np.zeros(2), deviation**2 * np.eye(count), scales)
        text = covariance_text(covariance_document(result, terms, found))
        (folder / f"{name}.json").write_text(text, encoding="utf-8")


def test_it_is_a_source_like_others(load: Load) -> None:
    """A column of its own beside that of friction, both in the ladder, its parameters named by their sums."""
    experiment = load(mismatch=FROM | {"coulomb_percent": 20})
    sheet = experiment.sheets[0]
    assert [one.column.name for one in sheet.conditions] == [
        "nominal", "coulomb", "identification", "all at 0.5", "all at 1",
    ]  # fmt: skip
    assert [one.sources for one in sheet.conditions][2] == ("identification",)
    entry = next(entry for entry in experiment.plan().entries if entry.condition == "identification")
    assert "identification.coulomb.j2" in entry.run.factors()
    machine, arm = entry.run.plant(), entry.run.arm.arm()
    assert not np.allclose(machine.drives.viscous, arm.drives.viscous, rtol=1e-3)


def test_better_knowledge_makes_a_sheet_of_its_own(load: Load) -> None:
    """In `vary`: the same draws, ten times nearer to the arm."""
    sheets = load(**SHEETS).sheets
    assert [sheet.name for sheet in sheets] == ["from known.json", "from better.json"]
    entries = {entry.sheet: entry for entry in load(**SHEETS).plan().entries if entry.condition == "all at 1"}
    off = [
        np.log(entries[name].run.plant().drives.viscous / entries[name].run.arm.arm().drives.viscous)
        for name in ("from known.json", "from better.json")
    ]
    assert np.abs(off[0]).max() > 5 * np.abs(off[1]).max() > 0


@pytest.mark.parametrize(
    "sweep",
    [
        {"mismatch": {"from": ["links.json", "known.json"]}},
        {"mismatch": {"coulomb_percent": {"shared": [True, False]}}},
    ],
    ids=["other sums", "other factors"],
)
def test_draws_of_every_sheet_are_told(load: Load, sweep: dict[str, Any]) -> None:
    """Where sheets have parameters of their own, the values of all of them are put down, those alike once."""
    mismatch = FROM | {"coulomb_percent": {"all": 20, "shared": False}}
    draws, told = Draws(), dict[tuple[int, str], float]()
    entries = load(mismatch=mismatch, vary=sweep, draws=3).plan().entries
    for entry in entries:
        for _, draw, values in draws.of(entry):
            told |= {(draw, name): u for name, u in values.items()}
    assert told == {
        (entry.draw, name): u
        for entry in entries
        for name, u in entry.run.factors().items()
        if entry.draw is not None
    }


def test_another_arm_than_the_identified_is_noted(load: Load) -> None:
    """With other drives the errors are put about them, and `check` says so; with its own there is no note."""
    assert not load(mismatch=FROM).notes
    notes = load(mismatch=FROM, drives={"j1": {"viscous": 3.0}}).notes
    assert [(note.key, "of other parameters" in note.problem) for note in notes] == [("mismatch.from", True)]


def test_faults(faults: Faults, folder: Path) -> None:
    """A file that isn't there, is of another arm, a key that is misspelt: each with its place."""
    (fault,) = faults(mismatch={"from": "knwon.json"})
    assert fault.key == "mismatch.from"
    assert "'knwon.json' does not exist" in fault.problem
    found = faults(mismatch=FROM, arm="lift.yaml")
    assert ("known.json", "kinds") in [(Path(fault.file).name, fault.key) for fault in found]
    (fault,) = faults(mismatch={"form": "known.json"})
    assert fault.near == "from"
    (fault,) = faults(vary={"mismatch": {"form": ["known.json"]}})
    assert fault.near == "from"
    (fault,) = faults(mismatch={"from": 3})
    assert fault.key == "mismatch.from"
    data: dict[str, Any] = json.loads((folder / "known.json").read_text(encoding="utf-8"))
    (folder / "known.json").write_text(
        json.dumps(data | {"terms": ["rotor", "slip", "coulomb"]}), encoding="utf-8"
    )
    assert [(Path(fault.file).name, fault.key) for fault in faults(mismatch=FROM)] == [
        ("trial.yaml", "mismatch.from"),
        ("known.json", "terms[1]"),
    ]


def test_faults_of_a_hidden_machine_have_their_own_place(folder: Path) -> None:
    """Under `simulate` of an identification file the addresses begin there."""
    path = folder / "practise.yaml"
    mismatch = (
        "{link_mass_percent: {l3: 5}, from: nix.json, payload: {believed_kg: 3, least_kg: 0, most_kg: 2}}"
    )
    path.write_text(f"rigbench: 1\narm: arm.yaml\nsimulate:\n  mismatch:\n    {mismatch}\n", encoding="utf-8")
    with pytest.raises(InputFaults) as caught:
        load_identification(path)
    assert sorted((fault.key, fault.line) for fault in caught.value.faults) == [
        ("simulate.mismatch.from", 5),
        ("simulate.mismatch.link_mass_percent.l3", 5),
        ("simulate.mismatch.payload.believed_kg", 5),
    ]


def test_the_file_it_came_from_does_not_count(write: Callable[..., Path]) -> None:
    """Paths are no part of a run: the same numbers under another name are the same runs."""
    path = write(mismatch=FROM, draws=2)
    keys = [entry.run.key() for entry in load_experiment(path).plan().entries]
    (path.parent / "known.json").rename(path.parent / "renamed.json")
    path = write(mismatch={"from": "renamed.json"}, draws=2)
    assert [entry.run.key() for entry in load_experiment(path).plan().entries] == keys

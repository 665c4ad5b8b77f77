"""find_level and stop_early in the experiment file: defaults, cross-checks, and the study that comes of it."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import pytest

from rigbench.campaign.plan import Entry
from rigbench.campaign.studies.find_level import FindLevel
from rigbench.errors import Fault
from rigbench.experiment import Experiment
from rigbench.scores.row import Row

Load = Callable[..., Experiment]
Faults = Callable[..., list[Fault]]


def study_of(experiment: Experiment) -> FindLevel:
    [study] = experiment.plan().studies
    assert isinstance(study, FindLevel)
    return study


def kept(entry: Entry) -> Row:
    place = entry.sheet, entry.law, entry.motion, entry.condition, entry.level, entry.draw
    return Row(*place, "finished", {})


@pytest.mark.parametrize(
    ("given", "conditions", "expected"),
    [
        ({}, {"together": [0.5, 1]}, (2.0, 6, 100)),
        ({}, {"together": [80]}, (100.0, 6, 100)),
        ({}, {"each_alone": 1}, (4.0, 6, 100)),
        ({"most": 3, "steps": 4, "draws": 80}, {"together": [0.5, 1]}, (3.0, 4, 80)),
    ],
)
def test_defaults(
    load: Load, given: dict[str, Any], conditions: dict[str, Any], expected: tuple[float, int, int]
) -> None:
    """Twice the largest level of the conditions, 4 without one; all draws."""
    study = study_of(load(find_level=given, conditions=conditions))
    assert (study.most, study.steps, study.draws) == expected


def test_without_the_key_there_is_no_study(load: Load) -> None:
    assert load().plan().studies == ()
    assert not load().plan().stop_early
    assert load(stop_early=True, draws=200).plan().stop_early


@pytest.mark.parametrize("more", [{}, {"sensing": {"noise_deg": 0.001}}])
def test_its_first_levels_are_runs_of_the_matrix(load: Load, more: dict[str, Any]) -> None:
    """Level 0 and the rungs have the matrix's keys, exact nominal or noisy; levels beyond are runs of its own."""
    experiment = load(find_level={"draws": 2}, draws=3, motions=None or MOTIONS, **more)
    plan, study = experiment.plan(), study_of(experiment)
    entries = [entry for entries in study.rounds(kept) for entry in entries]
    keys = {entry.key: (entry.law, entry.motion, entry.condition, entry.draw) for entry in plan.entries}
    own = [entry for entry in entries if entry.level == 2.0]
    assert all(
        keys[entry.key] == (entry.law, entry.motion, entry.condition, entry.draw)
        for entry in entries
        if entry not in own
    )
    assert {entry.level for entry in entries} == {0.0, 0.5, 1.0, 2.0}
    assert len(own) == 2 * 2 * 2  # laws, motions, draws
    assert not {entry.key for entry in own} & set(keys)
    assert all(entry.run.sources == ("link_mass_percent", "coulomb_percent") for entry in own)
    assert {entry.condition for entry in own} == {"all at 2"}
    assert {entry.run.sources for entry in entries if entry.level == 0.0} == {()}


MOTIONS = {
    "swing": {"via_deg": [[0, 0], [30, 40], [0, 0]], "leg_s": 0.4, "rest_s": 0.1},
    "reach": {"via_deg": [[0, 0], [10, 20]], "leg_s": 0.4, "rest_s": 0.1},
}


def test_every_sheet_and_variant_is_searched(load: Load) -> None:
    """Sheets x rows; a level of the ladder stands in each."""
    experiment = load(
        find_level={},
        vary={"rates": {"control_hz": [500, 1000]}, "laws": {"joint pd": {"natural_hz": [4, 5]}}},
    )
    searching = study_of(experiment).searching
    assert len(searching) == 2 * 3
    assert {one.sheet for one in searching} == {"control_hz 500", "control_hz 1000"}
    assert all([rung.level for rung in one.rungs] == [0.0, 0.5, 1.0] for one in searching)


def test_what_it_needs(faults: Faults) -> None:
    """A tolerance and a source, at the address of the key."""
    told = faults(find_level={}, tolerance=None, mismatch=None, conditions=None)
    assert [(fault.key, fault.problem) for fault in told] == [
        ("find_level", "needs a mismatch"),
        ("find_level", "needs a tolerance to be kept"),
    ]
    assert all(fault.line is not None for fault in told)


def test_all_faults_come_at_once(faults: Faults) -> None:
    """Too many draws, too low a level, a slip in a key, and a range."""
    told = faults(find_level={"draws": 101, "most": 0.9, "step": 3})
    assert {(fault.key, fault.near) for fault in told} == {
        ("find_level.draws", None),
        ("find_level.most", None),
        ("find_level.step", "steps"),
    }
    assert {fault.expected for fault in told} >= {"at most the 100 declared", "at least 1"}
    [fault] = faults(find_level={"steps": 0})
    assert fault.key == "find_level.steps"


@pytest.mark.parametrize("key", ["find_level", "stop_early"])
def test_it_can_t_be_varied(faults: Faults, key: str) -> None:
    """All sheets share it."""
    value = {"steps": [4, 5]} if key == "find_level" else [True, False]
    [fault] = faults(vary={key: value})
    assert fault.key.startswith(f"vary.{key}")


def test_too_few_draws_are_worth_a_note(load: Load) -> None:
    """72 draws show no level that 0.95 keep, 73 do."""
    notes = {n: [note.key for note in load(find_level={"draws": n}).notes] for n in (72, 73)}
    assert notes == {72: ["find_level.draws"], 73: []}


def test_stop_early_needs_a_tolerance(faults: Faults) -> None:
    [fault] = faults(stop_early=True, tolerance=None)
    assert (fault.key, fault.problem) == ("stop_early", "needs a tolerance to be kept")


def test_draws_that_can_t_settle_are_worth_a_note(load: Load) -> None:
    """Looked at as they come, 157 draws can't show 0.95, 158 can; without chance there is nothing to stop."""
    for draws, expected in ((157, ["draws"]), (158, [])):
        assert [note.key for note in load(stop_early=True, draws=draws).notes] == expected
    notes = load(stop_early=True, mismatch=None, conditions=None).notes
    assert [note.key for note in notes] == ["stop_early"]

"""Spreads by name, and cases: stated departures as columns of their own."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import pytest

from rigbench.arm.mismatch import Spread, plant
from rigbench.errors import Fault
from rigbench.experiment import Experiment

Load = Callable[..., Experiment]
Faults = Callable[..., list[Fault]]

PAYLOAD = {"believed_kg": 1.0, "least_kg": 0.5, "most_kg": 2.0}


def cased(load: Load, cases: dict[str, Any], **more: Any) -> Experiment:
    return load(conditions={"together": [1], "cases": cases}, **more)


def machine(experiment: Experiment, condition: str) -> Any:
    """The plant of a condition's first run."""
    entry = next(e for e in experiment.plan().entries if e.condition == condition)
    run = entry.run
    return plant(run.arm.arm(), run.mismatch, run.level, run.sources, run.seed, run.draw, run.case)


def test_spreads_by_name_reach_the_mismatch(load: Load) -> None:
    """A number for all, others by link or joint, and one factor for all if they share it."""
    mismatch = {
        "link_mass_percent": {"all": 5, "l2": 25},
        "link_cog_mm": {"l1": 3},
        "coulomb_percent": {"all": 20, "shared": True},
        "viscous_percent": 30,
    }
    found = load(mismatch=mismatch).sheets[0].first.mismatch
    assert found.link_mass_percent == Spread(5, (("l2", 25),))
    assert found.link_cog_mm == Spread(0, (("l1", 3),))
    assert found.coulomb_percent == Spread(20, (), shared=True)
    assert found.viscous_percent == Spread(30)
    assert found.sources == ("link_mass_percent", "link_cog_mm", "coulomb_percent", "viscous_percent")


def test_a_case_is_a_column_after_the_others(load: Load) -> None:
    """Exact at level 0, random on top of a level; never a step of the ladder that carries the tolerated level."""
    cases = {"cold": {"viscous_percent": +60}, "cold and worn": {"viscous_percent": +60, "level": 0.5}}
    experiment = cased(load, cases, draws=3)
    assert [(c.name, c.level, c.random, c.ladder) for c in experiment.columns] == [
        ("nominal", 0, False, True), ("all at 1", 1, True, True),
        ("cold", 0, False, False), ("cold and worn", 0.5, True, False),
    ]  # fmt: skip
    entries = [e for e in experiment.plan().entries if e.law == "joint pd"]
    assert [e.draw for e in entries if e.condition == "cold"] == [None]
    assert [e.draw for e in entries if e.condition == "cold and worn"] == [0, 1, 2]
    assert {e.run.sources for e in entries if e.condition == "cold and worn"} == {
        ("link_mass_percent", "coulomb_percent")
    }


def test_what_a_case_states_is_what_the_plant_is(load: Load) -> None:
    """+60 is exactly times 1.6, -10 times 0.9, by name or for all; a payload is the one stated, beyond its range too."""
    cases = {
        "cold": {"viscous_percent": +60, "coulomb_percent": {"all": 10, "j2": -10}},
        "heavy": {"payload_kg": 3, "payload_cog_mm": [0, 0, 50]},
        "light": {"link_mass_percent": {"l2": -50}},
        "bent": {"link_cog_mm": {"l2": [10, 0, 0]}},
    }
    experiment = cased(load, cases, mismatch={"payload": PAYLOAD, "coulomb_percent": 20})
    nominal = machine(experiment, "nominal")
    cold = machine(experiment, "cold")
    assert (cold.drives.viscous / nominal.drives.viscous).tolist() == pytest.approx([1.6, 1.6], rel=1e-12)
    assert (cold.drives.coulomb / nominal.drives.coulomb).tolist() == pytest.approx([1.1, 0.9], rel=1e-12)
    heavy = machine(experiment, "heavy")
    assert heavy.parameters[-1][0] - nominal.parameters[-1][0] == pytest.approx(2.0, rel=1e-12)
    light = machine(experiment, "light")
    assert light.parameters[-1][0] == pytest.approx(1.5 + 1.0, rel=1e-12)  # half the link, and the payload
    bent = machine(experiment, "bent")
    assert bent.parameters[-1][1] - nominal.parameters[-1][1] == pytest.approx(3 * 0.01, rel=1e-12)


def test_a_case_changes_no_other_run(load: Load) -> None:
    """The keys of all other runs are those without it."""
    without = {
        (e.law, e.condition, e.draw): e.key for e in cased(load, {"a": {"payload_kg": 1}}).plan().entries
    }
    more = {"a": {"payload_kg": 1}, "b": {"viscous_percent": 5}}
    keys = {(e.law, e.condition, e.draw): e.key for e in cased(load, more).plan().entries}
    assert {place: key for place, key in keys.items() if place[1] != "b"} == without
    assert len(set(keys.values())) == len(keys)


def test_cases_need_no_mismatch(load: Load) -> None:
    """Stated departures alone make a matrix without anything random."""
    experiment = load(mismatch=None, conditions={"cases": {"tray": {"payload_kg": 1}}})
    assert [column.random for column in experiment.columns] == [False, False]
    assert experiment.runs == 2 * 2
    assert not any("draws" in note.key for note in experiment.notes)


def test_what_has_no_effect_is_noted(load: Load) -> None:
    """An offset of no payload, and friction that the arm has not."""
    experiment = load(
        mismatch=None,
        drives={"all": {"viscous": 0.0}},
        conditions={"cases": {"a": {"payload_cog_mm": [1, 0, 0]}, "b": {"viscous_percent": 60}}},
    )
    assert [(n.key, n.problem.partition(":")[0]) for n in experiment.notes] == [
        ("conditions.cases.a.payload_cog_mm", "has no effect"),
        ("conditions.cases.b.viscous_percent", "has no effect"),
    ]


CASES: list[tuple[dict[str, Any], str, str, str | None]] = [
    ({}, "", "states nothing", None),
    ({"level": 1}, "", "states nothing", None),
    ({"payload": 3}, ".payload", "unknown key", "payload_kg"),
    ({"payload_kg": -1}, ".payload_kg", "-1 is out of range", None),
    ({"payload_kg": "3 kg"}, ".payload_kg", "'3 kg' is not a number", None),
    ({"payload_kg": 1, "payload_cog_mm": [1, 2]}, ".payload_cog_mm", "2 entries given", None),
    ({"viscous_percent": -100}, ".viscous_percent", "-100 is out of range", None),
    ({"viscous_percent": {"all": -100}}, ".viscous_percent.all", "-100 is out of range", None),
    ({"viscous_percent": {"j11": 60}}, ".viscous_percent.j11", "the arm has no joint 'j11'", "j1"),
    ({"viscous_percent": {"all": 0}}, ".viscous_percent", "states nothing", None),
    ({"viscous_percent": {"all": 60, "shared": True}}, ".viscous_percent.shared", "true is not a number", None),
    ({"link_mass_percent": {"l11": 10}}, ".link_mass_percent.l11", "the arm has no link 'l11'", "l1"),
    ({"link_cog_mm": {"l11": [1, 0, 0]}}, ".link_cog_mm.l11", "the arm has no link 'l11'", "l1"),
    ({"link_cog_mm": {"l1": [1, 0]}}, ".link_cog_mm.l1", "2 entries given", None),
    ({"link_cog_mm": 5}, ".link_cog_mm", "5 is not", None),
    ({"payload_kg": 1, "level": -1}, ".level", "-1 is out of range", None),
]  # fmt: skip


@pytest.mark.parametrize(("case", "key", "problem", "near"), CASES, ids=[f"{k}-{p}" for _, k, p, _ in CASES])
def test_one_slip_in_a_case(
    faults: Faults, case: dict[str, Any], key: str, problem: str, near: str | None
) -> None:
    """One fault, at its key, with the value given and the nearest name."""
    (fault,) = faults(conditions={"cases": {"a": case}})
    assert fault.key == f"conditions.cases.a{key}"
    assert problem in fault.problem
    assert fault.near == near
    assert fault.line is not None


@pytest.mark.parametrize("name", ["nominal", "all at 1", "coulomb", "", " a", "a  b"])
def test_names_of_cases(faults: Faults, name: str) -> None:
    """A case has a name of its own that fits the head of a column."""
    conditions = {"each_alone": 1, "together": [1], "cases": {name: {"payload_kg": 1}}}
    (fault,) = faults(conditions=conditions)
    assert fault.key.startswith("conditions.cases.")
    assert "name" in fault.problem


def test_a_case_at_a_level_needs_a_mismatch(faults: Faults) -> None:
    """There is nothing to draw otherwise."""
    (fault,) = faults(mismatch=None, conditions={"cases": {"a": {"payload_kg": 1, "level": 1}}})
    assert (fault.key, fault.problem) == ("conditions.cases.a.level", "needs a mismatch")


SPREADS: list[tuple[dict[str, Any], str, str, str | None]] = [
    ({"link_mass_percent": {"l11": 5}}, "link_mass_percent.l11", "the arm has no link 'l11'", "l1"),
    ({"coulomb_percent": {"all": 5, "l1": 5}}, "coulomb_percent.l1", "the arm has no joint 'l1'", None),
    ({"link_mass_percent": {"all": -5}}, "link_mass_percent.all", "-5 is out of range", None),
    ({"link_mass_percent": {"shared": True}}, "link_mass_percent", "spreads nothing", None),
    ({"link_mass_percent": {"all": 5, "shared": "yes"}}, "link_mass_percent.shared", "'yes' is not true or false", None),
    ({"link_mass_percent": [5, 5]}, "link_mass_percent", "a list is not a number or a mapping", None),
    ({"link_cog_mm": {"l1": "far"}}, "link_cog_mm.l1", "'far' is not a number", None),
]  # fmt: skip


@pytest.mark.parametrize(
    ("mismatch", "key", "problem", "near"), SPREADS, ids=[f"{k}-{p}" for _, k, p, _ in SPREADS]
)
def test_one_slip_in_a_spread(
    faults: Faults, mismatch: dict[str, Any], key: str, problem: str, near: str | None
) -> None:
    """One fault, at its key, with the nearest name of the arm's links or joints."""
    (fault,) = faults(mismatch=mismatch, conditions=None)
    assert fault.key == f"mismatch.{key}"
    assert problem in fault.problem
    assert fault.near == near

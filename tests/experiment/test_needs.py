"""The key needs: what it makes of an experiment, and what is wrong with it."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import pytest

from rigbench.campaign.studies.needs import NeedsStudy
from rigbench.errors import Fault
from rigbench.experiment import Experiment
from rigbench.scores.needs_design import NeedsDesign

Load = Callable[..., Experiment]
Faults = Callable[..., list[Fault]]

MISMATCH = {
    "link_mass_percent": {"all": 5, "l2": 20},
    "coulomb_percent": {"all": 20, "shared": True},
    "viscous_percent": {"j2": 30},
    "payload": {"believed_kg": 1, "least_kg": 0, "most_kg": 3, "cog_mm": 10},
    "delay_ms": 1,
}


def study_of(experiment: Experiment) -> NeedsStudy:
    [study] = experiment.plan().studies
    assert isinstance(study, NeedsStudy)
    return study


def test_without_the_key_nothing_is_asked(load: Load) -> None:
    """And with it, of one law, at the declared spread, by the main score, with what the required share takes."""
    assert load().plan().studies == ()
    design = study_of(load(needs={"law": "joint pd"})).design
    assert [(subject.sheet, subject.law, subject.motions) for subject in design.subjects] == [
        ("", "joint pd", ("swing",))
    ]
    assert (design.level, design.score, design.points, design.draws) == (1.0, "tool_peak_mm", 128, 73)
    assert (
        study_of(load(needs={"law": "joint pd"}, tolerance={"path_peak_mm": 3})).design.score
        == "path_peak_mm"
    )


def test_sources_are_groups_with_what_is_declared_of_them(load: Load) -> None:
    """A source's parameters as one group; per_link each link or joint by itself, where there is anything to know."""
    design = study_of(load(needs={"law": "joint pd"}, mismatch=MISMATCH)).design
    groups = {group.name: group for group in design.subjects[0].groups}
    assert list(groups) == ["link mass", "payload", "coulomb", "viscous", "delay"]
    assert groups["link mass"].spread == {"grows": "factor", "unit": "%", "values": {"all": 5, "l2": 20}}
    assert groups["viscous"].spread["values"] == {"j2": 30}
    assert groups["delay"].spread == {"grows": "shift", "unit": "ms", "values": {"all": 1}}
    assert groups["payload"].spread["values"] == {"believed_kg": 1, "least_kg": 0, "most_kg": 3, "cog_mm": 10}
    assert groups["link mass"].parameters == ("link_mass_percent.l1", "link_mass_percent.l2")
    design = study_of(load(needs={"law": "joint pd", "per_link": True}, mismatch=MISMATCH)).design
    parts = {group.name: group for group in design.subjects[0].groups}
    assert list(parts) == [
        "link mass of l1",
        "link mass of l2",
        "payload",
        "coulomb",
        "viscous of j2",
        "delay",
    ]
    assert parts["link mass of l2"].spread["values"] == {"l2": 20}
    assert parts["viscous of j2"].parameters == ("viscous_percent.j2",)
    assert NeedsDesign.of(study_of(load(needs={"law": "joint pd"})).declared()).declared()


def test_runs_bound_the_price(load: Load, faults: Faults) -> None:
    """The largest design that fits is taken; where none does the fault says what it takes."""
    for runs in (1200, 1500, 4000):
        study = study_of(load(needs={"law": ["joint pd"], "runs": runs}))
        assert study.most_runs <= runs
        assert study.most_runs + study.design.share_runs > runs  # with twice the rows it would not fit
    [fault] = faults(needs={"law": "joint pd", "runs": 100})
    assert (fault.key, fault.expected) == ("needs.runs", "at least 1132")  # 16 x 4 + 3 x 356
    assert study_of(load(needs={"law": "joint pd", "runs": 1132})).most_runs == 1132


def test_a_law_that_varies_is_asked_in_all_its_variants_and_sheets(load: Load) -> None:
    """By the law's own name all, by a variant's that alone; in each sheet."""
    vary: dict[str, Any] = {
        "laws": {"joint pd": {"natural_hz": [4, 5]}},
        "rates": {"control_hz": [500, 1000]},
    }
    for law, rows in (
        ("joint pd", ["joint pd (natural_hz 4)", "joint pd (natural_hz 5)"]),
        ("joint pd (natural_hz 4)", ["joint pd (natural_hz 4)"]),
    ):
        design = study_of(load(needs={"law": law}, vary=vary)).design
        assert [(subject.sheet, subject.law) for subject in design.subjects] == [
            (sheet, row) for sheet in ("control_hz 500", "control_hz 1000") for row in rows
        ]


@pytest.mark.parametrize(
    ("needs", "changes", "key", "said"),
    [
        ({"law": "joint pdd"}, {}, "needs.law", "did you mean 'joint pd'?"),
        ({"law": ["joint pd", "x"]}, {}, "needs.law[1]", "one of joint pd, computed torque"),
        ({"law": []}, {}, "needs.law", "at least 1"),
        ({}, {}, "needs.law", "missing"),
        ({"law": "joint pd", "level": 0}, {}, "needs.level", "above 0"),
        ({"law": "joint pd", "level": 21}, {}, "needs.level", "20"),
        ({"law": "joint pd", "rows": 3}, {}, "needs.rows", "unknown key"),
        ({"law": "joint pd"}, {"tolerance": None}, "needs", "a limit under tolerance"),
        ({"law": "joint pd"}, {"mismatch": None, "conditions": None}, "needs", "needs a mismatch"),
        ({"law": "joint pd", "score": "tool_peek_mm"}, {}, "needs.score", "did you mean 'tool_peak_mm'?"),
        ({"law": "joint pd", "score": "joint_peak_deg.j3"}, {}, "needs.score", "is not a score"),
        ({"law": "joint pd", "score": "law_us"}, {}, "needs.score", "about this computer"),
        ({"law": "joint pd", "score": "joint_peak_mm"}, {}, "needs.score", "every joint is revolute"),
    ],
)
def test_faults_have_their_address(
    faults: Faults, needs: dict[str, Any], changes: dict[str, Any], key: str, said: str
) -> None:
    """Each at its key, with what would be right."""
    found = [fault for fault in faults(needs=needs, **changes) if fault.key.startswith("needs")]
    assert [fault.key for fault in found] == [key]
    assert said in str(found[0])
    assert found[0].line


def test_a_score_of_one_joint_may_be_shared_out(load: Load) -> None:
    """As of any that the runs have."""
    needs = {"law": "joint pd", "score": "joint_peak_deg.j2"}
    assert study_of(load(needs=needs)).design.score == "joint_peak_deg.j2"


def test_the_searches_share_the_matrix_s_machines(load: Load) -> None:
    """Draw by draw the same runs at the same level: what the matrix has is not done again."""
    plan = load(needs={"law": "joint pd"}).plan()
    [study] = plan.studies
    keys: dict[str, set[str]] = {}
    for entry in plan.entries:
        if entry.law == "joint pd":
            keys.setdefault(entry.condition, set()).add(entry.key)
    asked: dict[tuple[str, float | None], list[str]] = {}
    from rigbench.scores.row import Row

    def known(entry: Any) -> Row | None:
        asked.setdefault((entry.condition, entry.level), []).append(entry.key)
        if entry.condition.startswith("shares"):
            place = entry.sheet, entry.law, entry.motion, entry.condition, entry.level, entry.draw
            return Row(*place, "finished", {"tool_peak_mm": 1.0, "settle_ms": 1.0})
        return None

    study.rounds(known)
    for condition, column in (
        ("link mass alone", "link mass"),
        ("coulomb alone", "coulomb"),
        ("together", "all at 1"),
    ):
        own = asked[condition, 1.0]
        assert own
        assert set(own) <= keys[column]

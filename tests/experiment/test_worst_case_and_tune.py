"""worst_case and tune in the experiment file: what they make of it, and their faults."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import pytest

from rigbench.campaign.studies.tune import Tune
from rigbench.campaign.studies.worst_case import WorstCase
from rigbench.errors import Fault
from rigbench.experiment import Experiment

Load = Callable[..., Experiment]
Faults = Callable[..., list[Fault]]

VARY = {"laws": {"computed torque": {"natural_hz": [4, 8]}}, "rates": {"control_hz": [500, 1000]}}


def worst_case_of(experiment: Experiment) -> WorstCase:
    (study,) = experiment.plan().studies
    assert isinstance(study, WorstCase)
    return study


def tune_of(experiment: Experiment) -> Tune:
    assert experiment.tune is not None
    return experiment.tune


def test_without_the_keys_there_are_no_studies(load: Load) -> None:
    """Nothing is searched that is not asked for."""
    plan = load().plan()
    assert (plan.studies, plan.first) == ((), None)


def test_worst_case_by_default(load: Load) -> None:
    """Every law, all sources, the levels under together, 600 runs each."""
    study = worst_case_of(load(worst_case={}))
    assert [subject.law for subject in study.subjects] == ["joint pd", "computed torque"]
    assert study.levels == (0.5, 1.0)
    assert (study.runs, study.most_runs) == (600, 1200)
    subject = study.subjects[0]
    assert list(subject.runs) == ["swing"]
    assert subject.runs["swing"].sources == ("link_mass_percent", "coulomb_percent")
    assert subject.parameters == (
        "link_mass_percent.l1", "link_mass_percent.l2", "coulomb_percent.j1", "coulomb_percent.j2",
    )  # fmt: skip
    assert worst_case_of(load(worst_case={}, conditions={"each_alone": 1})).levels == (1.0,)


def test_worst_case_of_laws_by_name(load: Load) -> None:
    """A law stands for all its variants, in all sheets; a variant for itself."""
    named = worst_case_of(load(worst_case={"law": "computed torque", "levels": [2]}, vary=VARY))
    assert len(named.subjects) == 4
    one = "computed torque (natural_hz 4)"
    assert {
        subject.law for subject in worst_case_of(load(worst_case={"law": [one]}, vary=VARY)).subjects
    } == {one}


def test_tune_by_default(load: Load) -> None:
    """Every law, natural_hz and damping, the main score, 1 ms of margin within the tolerance."""
    tune = tune_of(load(tune={}))
    assert [(gain.name, gain.low, gain.high) for gain in tune.gains] == [
        ("natural_hz", 1.0, 30.0), ("damping", 0.3, 2.0),
    ]  # fmt: skip
    assert [(subject.law, subject.declared) for subject in tune.subjects] == [
        ("joint pd", (5.0, 1.0)), ("computed torque", (5.0, 1.0)),
    ]  # fmt: skip
    assert (tune.runs, tune.aim.score, tune.aim.most, tune.aim.delay_margin_ms) == (
        120,
        "tool_peak_mm",
        {},
        1.0,
    )
    assert tune.aim.tolerance == {"swing": {"tool_peak_mm": 3.0, "settle_ms": 150.0}}
    assert tune.subjects[0].given == {"law": "independent-joint", "natural_hz": 5}
    run = tune.subjects[0].runs["swing"]
    assert (run.level, run.sources, run.draw) == (0.0, (), None)


def test_gains_found_are_those_of_every_run(load: Load) -> None:
    """Matrix and studies have them, under the same names; what was not found stays as declared."""
    experiment = load(tune={}, worst_case={})
    tuned = experiment.tuned({("", "joint pd"): {"natural_hz": 9.0, "damping": 0.7}})
    plan = tuned.plan()
    assert plan.laws == experiment.plan().laws
    for entry in plan.entries:
        options = dict(entry.run.law.options)
        expected = (9.0, 0.7) if entry.law == "joint pd" else (5.0, 1.0)
        assert (options["natural_hz"], options["damping"]) == expected
    searched = {s.law: dict(s.runs["swing"].law.options)["natural_hz"] for s in worst_case_of(tuned).subjects}
    assert searched == {"joint pd": 9.0, "computed torque": 5.0}
    assert plan.first == experiment.tune
    pasted = load(laws={"joint pd": {"law": "independent-joint", "natural_hz": 9, "damping": 0.7}})
    keys = {entry.key for entry in plan.entries if entry.law == "joint pd"}
    assert keys == {entry.key for entry in pasted.plan().entries}


def test_laws_that_tune_leaves_alone(load: Load) -> None:
    """Explicit gains, varied ones and laws without them keep theirs, and that is noted at the law."""
    laws = {
        "joint pd": {"law": "independent-joint"},
        "explicit": {"law": "independent-joint", "kp": [100, 100], "kd": [10, 10]},
        "computed torque": {"law": "computed-torque"},
        "mine": {"law": "mine.py:Mine"},
    }
    vary = {"laws": {"computed torque": {"natural_hz": [4, 8]}, "joint pd": {"friction": ["none", "full"]}}}
    experiment = load(laws=laws, tune={}, vary=vary)
    assert [s.law for s in tune_of(experiment).subjects] == [
        "joint pd (friction none)",
        "joint pd (friction full)",
    ]
    assert tune_of(experiment).subjects[1].given == {"law": "independent-joint", "friction": "full"}
    told = {note.key: note.problem for note in experiment.notes if "left alone by tune" in note.problem}
    assert set(told) == {"laws.explicit", "laws.computed torque", "laws.mine"}
    assert "kp and kd" in told["laws.explicit"]
    assert told["laws.computed torque"] == "is left alone by tune: its natural_hz is varied"
    assert "no gain natural_hz" in told["laws.mine"]
    other = load(laws=laws, tune={"gains": {"k": [10, 1000]}, "law": "mine"})
    assert [(s.law, s.declared) for s in tune_of(other).subjects] == [("mine", (100.0,))]


def test_each_sheet_has_gains_of_its_own(load: Load) -> None:
    """The nominal machine of each sheet decides its gains."""
    tune = tune_of(load(tune={}, vary={"rates": {"control_hz": [500, 1000]}}))
    assert [(s.sheet, s.law) for s in tune.subjects] == [
        (f"control_hz {hz}", law) for hz in (500, 1000) for law in ("joint pd", "computed torque")
    ]


@pytest.mark.parametrize(
    ("changes", "key", "words"),
    [
        ({"worst_case": {"law": "computed torqe"}}, "worst_case.law", "(did you mean 'computed torque'?)"),
        ({"worst_case": {"law": ["joint pd", "x"]}}, "worst_case.law[1]", "there is no law 'x'"),
        ({"worst_case": {}, "mismatch": None, "conditions": None}, "worst_case", "needs a mismatch"),
        ({"worst_case": {}, "tolerance": None}, "worst_case", "needs a tolerance"),
        ({"worst_case": {"levels": [1, 1]}}, "worst_case.levels[1]", "1 after 1; expected levels that rise"),
        ({"worst_case": {"levels": [0]}}, "worst_case.levels[0]", "above 0"),
        ({"worst_case": {"runs": 31}}, "worst_case.runs", "2 levels and 1 motion; expected at least 32"),
        ({"worst_case": {"direction": 1}}, "worst_case.direction", "unknown"),
        ({"tune": {"law": "pd"}}, "tune.law", "there is no law 'pd'"),
        ({"tune": {"gains": ["natural_hertz"]}}, "tune.gains[0]", "(did you mean 'natural_hz'?)"),
        ({"tune": {"gains": ["damping", "damping"]}}, "tune.gains[1]", "a second time"),
        ({"tune": {"gains": {"damping": [2, 1]}}}, "tune.gains.damping", "2 to 1 is no range"),
        ({"tune": {"gains": {"damping": [1]}}}, "tune.gains.damping", "2"),
        ({"tune": {"gains": {"damping": [0, 1]}}}, "tune.gains.damping[0]", "above 0"),
        ({"tune": {"gains": {"k": [1, 2]}}}, "tune", "leaves every law alone ('joint pd': it has no gain k"),
        ({"tune": {"score": "tool_rsm_mm"}}, "tune.score", "(did you mean 'tool_rms_mm'?)"),
        ({"tune": {"score": "law_us"}}, "tune.score", "not a score of the arm"),
        ({"tune": {"score": "joint_peak_mm"}}, "tune.score", "revolute"),
        ({"tune": {"most": {"tool_peek_mm": 1}}}, "tune.most.tool_peek_mm", "(did you mean 'tool_peak_mm'?)"),
        ({"tune": {"most": {"chatter": -1}}}, "tune.most.chatter", "above 0"),
        ({"tune": {"most": {"settle_band_mm": 1}}}, "tune.most.settle_band_mm", "no limit"),
        ({"tune": {"most": {"delay_margin_ms": 1}}}, "tune.most.delay_margin_ms", "is not a score"),
        ({"tune": {"runs": 15}}, "tune.runs", "1 motion; expected at least 16"),
        ({"tune": {}, "vary": {"tune": {"runs": [1, 2]}}}, "vary.tune", "can't be varied"),
    ],
)  # fmt: skip
def test_faults_have_an_address(faults: Faults, changes: dict[str, Any], key: str, words: str) -> None:
    """Each fault is told once, at its key with its line, and nothing else is."""
    (fault,) = faults(**changes)
    assert fault.key == key
    assert words in str(fault)
    assert fault.line is not None


def test_faults_come_all_at_once(faults: Faults) -> None:
    """Those of both sections, and of others, are told together, each once in a sweep as well."""
    found = faults(
        worst_case={"law": "x", "levels": [1, 0.5]}, tune={"law": "y", "most": {"z": 1}, "runs": 1}, vary=VARY
    )
    assert {fault.key for fault in found} == {
        "worst_case.law", "worst_case.levels[1]", "tune.law", "tune.most.z", "tune.runs",
    }  # fmt: skip
    assert len(found) == 5

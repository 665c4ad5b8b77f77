"""Sensing, timing, base tilt and the sources of a drive's imperfections: from the file to the runs."""

from __future__ import annotations

import io
import math
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import yaml

from rigbench.arm.mismatch import Case, Spread, believed
from rigbench.campaign.campaign import run_campaign
from rigbench.campaign.executor import InProcess, Processes
from rigbench.campaign.export import export_csv
from rigbench.campaign.store import Store
from rigbench.errors import Fault
from rigbench.experiment import Experiment, load_experiment
from rigbench.experiment.condition_keys import CaseKeys
from rigbench.experiment.expand import NAMES
from rigbench.experiment.mismatch_keys import MismatchKeys
from rigbench.rig.sampled import Sensing, Timing
from rigbench.scores.row import MACHINE_OUTCOMES

Load = Callable[..., Experiment]
Faults = Callable[..., list[Fault]]

TRAY6 = Path(__file__).resolve().parents[2] / "robots_demo" / "tray6" / "arm.yaml"
SOURCES = {
    "torque_constant_percent": {"all": 5, "shared": True},
    "torque_bias_percent": 1,
    "encoder_offset_deg": {"all": 0.05, "j1": 0.1},
    "stiffness_percent": 30,
    "delay_ms": 0.5,
    "base_tilt_deg": 0.2,
}


def columns(experiment: Experiment) -> dict[str, bool]:
    return {column.name: column.random for column in experiment.columns}


# --- sensing, timing, tilt


def test_the_declared_reach_every_run(load: Load) -> None:
    """Noise, filter, side, delay, jitter, dropped and late ticks as declared; tilt in rad."""
    experiment = load(
        rates={"control_hz": 500, "physics_hz": 1000},
        sensing={"encoder": "link", "noise_deg": 0.01, "velocity_corner_hz": 80},
        timing={"delay_ms": 1.5, "jitter_percent": 50, "dropped_percent": 2, "model_late": True},
        base_tilt_deg=[1, -2],
        drives={"j1": {"stiffness": 1e4}},
    )
    runs = [entry.run for entry in experiment.plan().entries]
    assert {run.sensing for run in runs} == {Sensing("link", 0.01, 80.0)}
    assert {run.timing for run in runs} == {Timing(1.5, 50.0, 2.0, True)}
    assert {run.base_tilt for run in runs} == {(math.radians(1), math.radians(-2))}
    assert experiment.notes == ()


def test_undeclared_they_are_ideal_and_leave_no_trace(load: Load) -> None:
    """Without these keys runs are as they were: nothing of them is in a run's inputs."""
    run = load().plan().entries[0].run
    assert (run.sensing, run.timing, run.base_tilt) == (Sensing(), Timing(), (0.0, 0.0))
    assert not {"sensing", "timing", "base_tilt"} & run.inputs().keys()


@pytest.mark.parametrize(
    ("changes", "key", "said"),
    [
        ({"sensing": {"encoder": "moter"}}, "sensing.encoder", "did you mean 'motor'"),
        ({"sensing": {"noise_deg": -0.1}}, "sensing.noise_deg", "at least 0"),
        ({"sensing": {"noise": 0.1}}, "sensing.noise", "did you mean 'noise_deg'"),
        ({"sensing": {"velocity_corner_hz": 0}}, "sensing.velocity_corner_hz", "above 0"),
        ({"timing": {"delay_ms": "2 ms"}}, "timing.delay_ms", "'2 ms' is not a number"),
        ({"timing": {"delay_ms": -1}}, "timing.delay_ms", "at least 0"),
        ({"timing": {"jitter_percent": 101}}, "timing.jitter_percent", "at most 100"),
        ({"timing": {"dropped_percent": 100}}, "timing.dropped_percent", "below 100"),
        ({"timing": {"model_late": 1}}, "timing.model_late", "true or false"),
        ({"base_tilt_deg": [1]}, "base_tilt_deg", "a list of 2 numbers"),
        ({"base_tilt_deg": [0, 200]}, "base_tilt_deg[1]", "at most 180"),
        ({"base_tilt_deg": 1}, "base_tilt_deg", "1 is not a list"),
        ({"mismatch": {"delay_ms": {"all": 1}}}, "mismatch.delay_ms", "a mapping is not a number"),
        ({"mismatch": {"base_tilt_deg": [1, 1]}}, "mismatch.base_tilt_deg", "a list is not a number"),
        ({"mismatch": {"torque_bias_percent": 101}}, "mismatch.torque_bias_percent", "at most 100"),
        ({"mismatch": {"encoder_offset_deg": {"j9": 1}}}, "mismatch.encoder_offset_deg.j9", "no joint 'j9'"),
        ({"mismatch": {"stiffness_percent": {"all": 0}}}, "mismatch.stiffness_percent", "spreads nothing"),
        (
            {"conditions": {"cases": {"a": {"torque_bias_percent": {"j1": -101}}}}},
            "conditions.cases.a.torque_bias_percent.j1",
            "at least -100",
        ),
        (
            {"conditions": {"cases": {"a": {"encoder_offset_deg": {"l1": 1}}}}},
            "conditions.cases.a.encoder_offset_deg.l1",
            "no joint 'l1'",
        ),
        (
            {"conditions": {"cases": {"a": {"delay_ms": -1}}}},
            "conditions.cases.a.delay_ms",
            "at least 0",
        ),
        (
            {"conditions": {"cases": {"a": {"base_tilt_deg": 1}}}},
            "conditions.cases.a.base_tilt_deg",
            "1 is not a list",
        ),
        (
            {"conditions": {"cases": {"a": {"torque_constant_percent": -100}}}},
            "conditions.cases.a.torque_constant_percent",
            "above -100",
        ),
    ],
)
def test_what_can_not_be_is_one_fault(faults: Faults, changes: dict[str, Any], key: str, said: str) -> None:
    """Each slip is told once, at its key, with what was expected."""
    (fault,) = faults(**changes)
    assert fault.key == key
    assert said in str(fault)


def test_jitter_needs_steps_within_a_control_period(faults: Faults, load: Load) -> None:
    """At physics_hz = control_hz a tick has no later step to come at: a fault; in a sweep a sheet less."""
    timing, rates = {"jitter_percent": 20}, {"control_hz": 1000, "physics_hz": 1000}
    (fault,) = faults(timing=timing, rates=rates)
    assert fault.key == "timing.jitter_percent"
    assert "physics_hz is control_hz, 1000" in fault.problem
    assert load(timing={"jitter_percent": 0}, rates=rates).notes == ()
    swept = load(timing=timing, rates=rates, vary={"rates": {"physics_hz": [1000, 10_000]}})
    assert [sheet.name for sheet in swept.sheets] == ["physics_hz 10000"]
    assert [skipped.sheet for skipped in swept.skipped] == ["physics_hz 1000"]


def test_jitter_below_a_step_is_noted(load: Load) -> None:
    """20 percent is less than the step of half a period that a late tick takes; at 5 steps it is one."""
    notes = load(timing={"jitter_percent": 20}, rates={"control_hz": 1000, "physics_hz": 2000}).notes
    assert [(note.key, note.problem) for note in notes] == [
        (
            "timing.jitter_percent",
            "less than a step of the engine, 50 percent: some ticks come late by a whole one",
        )
    ]
    assert load(timing={"jitter_percent": 20}, rates={"control_hz": 1000, "physics_hz": 5000}).notes == ()


def test_what_acts_on_nothing_is_noted(load: Load, folder: Path) -> None:
    """The side of encoders and stiffness on rigid joints, a bias where no torque limit is."""
    text = (folder / "arm.urdf").read_text("utf-8").replace('effort="150" ', "").replace('effort="60" ', "")
    (folder / "arm.urdf").write_text(text, encoding="utf-8")
    experiment = load(
        sensing={"encoder": "link"},
        mismatch={"stiffness_percent": 30, "torque_bias_percent": 1, "encoder_offset_deg": 0.1},
        conditions={"together": [1], "cases": {"soft": {"stiffness_percent": -50, "delay_ms": 0}}},
    )
    assert {(note.key, note.problem) for note in experiment.notes} == {
        ("sensing.encoder", "has no effect: every transmission is rigid"),
        ("mismatch.stiffness_percent", "has no effect: every transmission is rigid"),
        ("mismatch.torque_bias_percent", "has no effect: no drive has a torque limit"),
        ("conditions.cases.soft.stiffness_percent", "has no effect: every transmission is rigid"),
    }
    elastic = load(
        sensing={"encoder": "link"},
        mismatch={"stiffness_percent": 30},
        drives={"j2": {"stiffness": 1e4}},
    )
    assert elastic.notes == ()


# --- what is random


@pytest.mark.parametrize(
    "noisy",
    [
        {"sensing": {"noise_deg": 0.01}},
        {"timing": {"jitter_percent": 50}},
        {"timing": {"dropped_percent": 1}},
    ],
)
def test_where_ticks_or_sensing_are_random_every_column_is(load: Load, noisy: dict[str, Any]) -> None:
    """Nominal and an exact case have draws as the others, each another run; the plan holds them in fair order."""
    cases = {"heavy": {"payload_kg": 2}}
    plain = load(conditions={"together": [1], "cases": cases}, draws=5)
    assert columns(plain) == {"nominal": False, "all at 1": True, "heavy": False}
    experiment = load(conditions={"together": [1], "cases": cases}, draws=5, **noisy)
    assert set(columns(experiment).values()) == {True}
    plan = experiment.plan()
    assert len(plan.entries) == experiment.runs == 2 * 3 * 5
    assert [entry.draw for entry in plan.entries] == [draw for draw in range(5) for _ in range(6)]
    assert len({entry.key for entry in plan.entries}) == len(plan.entries)
    assert plan.seed == 0


@pytest.mark.parametrize("fixed", [{"sensing": {"velocity_corner_hz": 50}}, {"timing": {"delay_ms": 2}}])
def test_what_is_fixed_makes_nothing_random(load: Load, fixed: dict[str, Any]) -> None:
    """A delay or a filter is the same in each run: nominal stays one exact run."""
    assert columns(load(**fixed))["nominal"] is False


def test_a_sweep_of_noise_from_0_judges_all_its_sheets_alike(load: Load) -> None:
    """One column 'nominal' in both sheets, with draws in both; in the quiet one they are one and the same run."""
    experiment = load(mismatch=None, conditions=None, draws=4, vary={"sensing": {"noise_deg": [0, 0.01]}})
    assert columns(experiment) == {"nominal": True}
    assert experiment.absent == ()
    plan = experiment.plan()
    assert len(plan.entries) == experiment.runs == 2 * 2 * 4
    keys = {sheet: {e.key for e in plan.entries if e.sheet == sheet} for sheet in plan.sheets}
    assert {sheet: len(found) for sheet, found in keys.items()} == {"noise_deg 0": 2, "noise_deg 0.01": 8}
    quiet = load(mismatch=None, conditions=None).plan()
    assert {entry.key for entry in quiet.entries} == keys["noise_deg 0"]


def test_a_mismatch_that_nothing_uses_is_noted_beside_noise(load: Load) -> None:
    """Noise makes columns random, but that is no use of the mismatch."""
    notes = load(sensing={"noise_deg": 0.01}, conditions={}).notes
    assert [note.key for note in notes] == ["mismatch"]


# --- sources and cases


def test_each_source_has_a_column_and_a_draw(load: Load) -> None:
    """Alone under a short name; by name and shared as the others; each with its parameters."""
    experiment = load(
        mismatch=SOURCES, conditions={"each_alone": 1}, drives={"j2": {"stiffness": 1e4}}, draws=1
    )
    short = ["torque constant", "torque bias", "encoder offset", "stiffness", "delay", "base tilt"]
    assert list(columns(experiment)) == ["nominal", *short]
    mismatch = experiment.sheets[0].first.mismatch
    assert mismatch.torque_constant_percent == Spread(5, shared=True)
    assert mismatch.encoder_offset_deg == Spread(0.05, (("j1", 0.1),))
    assert (mismatch.delay_ms, mismatch.base_tilt_deg) == (0.5, 0.2)
    assert {run.sources for run in (entry.run for entry in experiment.plan().entries)} == {
        (),
        *((source,) for source in SOURCES),
    }


def test_every_source_has_a_name_and_a_key_of_a_case() -> None:
    """The schema's sources are the columns' heads, and each but what was identified can be stated."""
    assert list(MismatchKeys.model_fields) == list(NAMES)
    assert {"payload", "identification", *CaseKeys.model_fields} >= set(NAMES)
    assert len(set(NAMES.values())) == len(NAMES)


def test_a_case_states_them(load: Load) -> None:
    """Each key of the file is that of the case."""
    stated = {
        "torque_constant_percent": -10,
        "torque_bias_percent": {"j1": -5},
        "encoder_offset_deg": -0.2,
        "stiffness_percent": {"all": -20, "j2": 10},
        "delay_ms": 0,
        "base_tilt_deg": [1, -2],
    }
    experiment = load(conditions={"cases": {"delay": stated}}, drives={"j2": {"stiffness": 1e4}})
    assert experiment.notes[0].key == "mismatch"  # nothing random here
    (condition,) = experiment.sheets[0].conditions[1:]
    assert condition.case == Case(
        torque_constant_percent=-10,
        torque_bias_percent=Spread(0, (("j1", -5),)),
        encoder_offset_deg=-0.2,
        stiffness_percent=Spread(-20, (("j2", 10),)),
        delay_ms=0,
        base_tilt_deg=(1, -2),
    )


def test_a_case_may_have_a_sources_name_where_that_has_no_column(load: Load, faults: Faults) -> None:
    """'delay' is free unless the source stands alone in a column of that name."""
    cases = {"delay": {"delay_ms": 2}}
    mismatch = {"delay_ms": 1}
    assert "delay" in columns(load(mismatch=mismatch, conditions={"together": [1], "cases": cases}))
    (fault,) = faults(mismatch=mismatch, conditions={"each_alone": 1, "cases": cases})
    assert fault.key == "conditions.cases.delay"


def test_all_of_it_can_be_swept(load: Load) -> None:
    """Each key of sensing and timing, the tilt and the sources make sheets, with labels that tell them apart."""
    experiment = load(
        mismatch={"delay_ms": 1},
        conditions={"together": [1]},
        draws=1,
        drives={"j1": {"stiffness": 1e4}},
        vary={
            "sensing": {"encoder": ["motor", "link"], "velocity_corner_hz": [None, 50]},
            "timing": {"delay_ms": [0, 1], "model_late": [False, True]},
            "base_tilt_deg": [[0, 0], [0, 1]],
            "mismatch": {"delay_ms": [1, 2]},
        },
    )
    assert len(experiment.sheets) == 64
    last = experiment.sheets[-1]
    assert last.name == (
        "encoder link, velocity_corner_hz 50, timing.delay_ms 1, model_late true, base_tilt_deg [0, 1], "
        "mismatch.delay_ms 2"
    )
    assert last.first.sensing == Sensing("link", 0.0, 50.0)
    assert last.first.timing == Timing(1.0, model_late=True)
    assert last.first.mismatch.delay_ms == 2.0
    assert len({sheet.first.key() for sheet in experiment.sheets}) == 32  # a spread that is idle has no key


# --- the demo arm with everything on


@pytest.fixture(scope="module")
def everything(tmp_path_factory: pytest.TempPathFactory) -> Experiment:
    """tray6 with every imperfection that a file can declare, and every source of mismatch, on."""
    drive = {
        "stiffness": 3e4,
        "spring_damping": 30,
        "gear_efficiency": 0.85,
        "lugre_stiffness": 5e4,
        "lugre_damping": 200,
        "encoder_counts": 16384,
        "torque_lag_ms": 0.5,
        "motor_torque_step": 0.002,
        "motor_ripple": 0.02,
        "ripple_periods": 6,
    }
    file = tmp_path_factory.mktemp("everything") / "everything.yaml"
    data = {
        "rigbench": 1,
        "arm": str(TRAY6),
        "seed": 3,
        "rates": {"control_hz": 1000, "physics_hz": 2000},
        "drives": {"all": drive},
        "sensing": {"encoder": "motor", "noise_deg": 0.001, "velocity_corner_hz": 150},
        "timing": {"delay_ms": 0.7, "jitter_percent": 50, "dropped_percent": 0.5, "model_late": True},
        "base_tilt_deg": [0.2, -0.1],
        "motions": {
            "short": {
                "via_deg": [[0, -60, 90, 0, 60, 0], [10, -50, 85, 5, 55, 0]],
                "leg_s": 0.3,
                "rest_s": 0.1,
            }
        },
        "laws": {
            "pd": {"law": "gravity-compensated", "natural_hz": 5},
            "computed torque": {"law": "computed-torque", "natural_hz": 5, "model_hz": 100},
        },
        "mismatch": {
            "link_mass_percent": 5,
            "link_cog_mm": 5,
            "link_inertia_percent": 15,
            "payload": {"believed_kg": 1.5, "least_kg": 0, "most_kg": 3, "cog_mm": 30},
            "coulomb_percent": 30,
            "viscous_percent": 30,
            "rotor_inertia_percent": 15,
            **SOURCES,
        },
        "conditions": {
            "together": [1],
            "cases": {"tilted": {"base_tilt_deg": [3, 0], "delay_ms": 2, "encoder_offset_deg": {"j1": 0.2}}},
        },
        "draws": 2,
        "tolerance": {"tool_peak_mm": 30},
    }
    file.write_text(yaml.safe_dump(data, sort_keys=False), encoding="utf-8")
    return load_experiment(file)


def test_everything_on_gives_the_same_rows_with_any_workers(everything: Experiment, tmp_path: Path) -> None:
    """Each run ends as the machine's verdict, its scores are numbers, and two workers give the same bits.

    Draws differ in every column, nominal too; the export tells what was drawn.
    """
    rows = []
    for name, executor in (("one", InProcess()), ("two", Processes(2))):
        plan = everything.plan()
        with Store.open_for_writing(tmp_path / f"{name}.sqlite", plan) as store:
            run_campaign(plan, store, executor=executor)
            records = list(store.records())
            results, text = store.results(), io.StringIO()
            export_csv(store, text)
        host = ("law_us", "law_share_percent")
        rows.append(
            {
                record.key: (
                    record.row.outcome,
                    {name: value for name, value in record.row.scores.items() if name not in host},
                    record.residual,
                )
                for record in records
            }
        )
        assert len(records) == 2 * 3 * 2
    one, two = rows
    assert one == two
    assert len({repr(found) for found in one.values()}) == len(one)
    for outcome, scores, residual in one.values():
        assert outcome in MACHINE_OUTCOMES
        assert residual < 1e-9
        assert not np.isnan(list(scores.values())).any()
        assert outcome != "finished" or scores["tool_peak_mm"] > 0
    assert {cell.draws for cell in results.cells} == {2}
    drawn = {
        "draw.delay_ms",
        "draw.base_tilt_deg.y",
        "draw.stiffness_percent.j6",
        "draw.torque_constant_percent.all",
    }
    assert drawn <= set(text.getvalue().partition("\n")[0].split(","))


def test_the_model_of_everything_is_the_plain_arm(everything: Experiment) -> None:
    """Controllers believe the arm with its declared drives and payload: no source or case is in it."""
    run = everything.plan().entries[-1].run
    arm = run.arm.arm()
    model = believed(arm, run.mismatch)
    assert model.drives is arm.drives
    assert np.all(model.drives.torque_gain == 1.0)
    assert not model.drives.torque_bias.any()
    assert not model.drives.encoder_offset.any()

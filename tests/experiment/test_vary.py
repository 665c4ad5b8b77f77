"""The sweep: what becomes rows and what sheets, what they are called, what can't be, and what is at fault."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from rigbench.errors import Fault
from rigbench.experiment import Experiment, load_experiment

Load = Callable[..., Experiment]
Faults = Callable[..., list[Fault]]

LAWS = {"pd": {"law": "independent-joint"}, "ff": {"law": "torque-feedforward", "model_hz": 100}}
SWING = {"via_deg": [[0, 0], [30, 40], [0, 0]], "leg_s": 0.4, "rest_s": 0.1}


def swept(load: Load, vary: dict[str, Any], **more: Any) -> Experiment:
    return load(**({"laws": LAWS, "vary": vary, "draws": 2} | more))


def names(experiment: Experiment) -> tuple[list[str], list[str]]:
    """Sheets and rows."""
    return [sheet.name for sheet in experiment.sheets], list(experiment.laws)


def test_options_of_a_law_make_rows_in_place_of_it(load: Load) -> None:
    """All combinations of its options, named law (option value, ...), where the law stood; one sheet without a name."""
    experiment = swept(load, {"laws": {"pd": {"natural_hz": [4, 6.5], "damping": [0.7, 1]}}})
    assert names(experiment) == (
        [""],
        [
            "pd (natural_hz 4, damping 0.7)", "pd (natural_hz 4, damping 1)",
            "pd (natural_hz 6.5, damping 0.7)", "pd (natural_hz 6.5, damping 1)", "ff",
        ],
    )  # fmt: skip
    options = dict(experiment.sheets[0].laws["pd (natural_hz 6.5, damping 0.7)"].options)
    assert (options["natural_hz"], options["damping"]) == (6.5, 0.7)
    assert experiment.sheets[0].laws["ff"].plugin == "torque-feedforward"


def test_all_else_makes_sheets(load: Load) -> None:
    """Rates, drives, a motion's time and pace, mismatch, gravity and poses reach every run of their sheet."""
    vary = {
        "rates": {"control_hz": [500, 1000]},
        "drives": {"all": {"gear_ratio": [25, 80]}},
        "motions": {"swing": {"pace_percent": [50, 100]}},
        "mismatch": {"coulomb_percent": [20, 40]},
        "gravity_m_s2": [[0, 0, -9.81], [0, 0, -1.62]],
        "gain_pose_deg": [[0, 0], [10, 20]],
    }
    experiment = swept(load, vary)
    assert len(experiment.sheets) == 2**6
    assert len(set(names(experiment)[0])) == 2**6
    last = experiment.sheets[-1]
    assert last.name == (
        "control_hz 1000, gear_ratio 80, pace_percent 100, coulomb_percent 40, gravity_m_s2 [0, 0, -1.62], "
        "gain_pose_deg [10, 20]"
    )
    for sheet in (experiment.sheets[0], last):
        high = sheet is last
        run = sheet.first
        assert (run.rates.control_hz, run.rates.physics_hz) == ((1000, 2000) if high else (500, 1000))
        assert run.arm.arm().drives.gear_ratio.tolist() == ([80, 80] if high else [25, 25])
        assert sheet.motions["swing"].duration_s == pytest.approx(1.0 if high else 1.8, rel=1e-12)
        assert run.mismatch.coulomb_percent is not None
        assert run.mismatch.coulomb_percent.all == (40 if high else 20)
        assert run.gravity == ((0, 0, -1.62) if high else (0, 0, -9.81))
        np.testing.assert_allclose(run.gain_pose, np.radians([10, 20]) if high else [0, 0], atol=1e-15)


def test_all_combinations_are_run(load: Load) -> None:
    """Sheets x laws x motions x columns x draws, each once; the plan counts what it holds."""
    experiment = swept(
        load, {"rates": {"control_hz": [500, 1000]}, "laws": {"ff": {"model_hz": [50, 100, 250]}}}
    )
    plan = experiment.plan()
    assert len(plan.entries) == experiment.runs == 2 * 4 * (1 + 4 * 2)
    assert plan.absent == ()
    places = Counter((e.sheet, e.law, e.motion, e.condition, e.draw) for e in plan.entries)
    assert set(places.values()) == {1}
    assert {e.sheet for e in plan.entries} == set(plan.sheets)


def test_a_sweep_leaves_the_runs_that_were_there_alone(load: Load) -> None:
    """The sheet with the values of the file as it was has its runs, with their keys, and so has the law."""
    before = {(e.law, e.condition, e.draw): e.key for e in load(laws=LAWS, draws=2).plan().entries}
    vary = {"rates": {"control_hz": [500, 1000]}, "laws": {"ff": {"model_hz": [50, 100]}}}
    entries = swept(load, vary).plan().entries
    after = {
        (e.law.removesuffix(" (model_hz 100)"), e.condition, e.draw): e.key
        for e in entries
        if e.sheet == "control_hz 1000" and not e.law.endswith("(model_hz 50)")
    }
    assert after == before


def test_draws_are_shared_by_all_sheets(load: Load) -> None:
    """Draw by draw across the sheets, the same seed and number in each: machines are compared like with like."""
    entries = swept(load, {"drives": {"all": {"gear_ratio": [25, 80]}}}).plan().entries
    draws = [-1 if e.draw is None else e.draw for e in entries]
    assert draws == sorted(draws)
    assert len({e.run.seed for e in entries}) == 1


def test_models_believe_the_swept_drives_too(load: Load, folder: Path) -> None:
    """drives in the experiment stand in place of those of the arm's file and of the model's."""
    (folder / "identified.yaml").write_text((folder / "arm.yaml").read_text("utf-8"), encoding="utf-8")
    experiment = load(
        model="identified.yaml", drives={"all": {"gear_ratio": 80}, "j2": {"gear_ratio": 30, "viscous": 7}}
    )
    run = experiment.sheets[0].first
    assert run.model is not None
    for arm in (run.arm.arm(), run.model.arm()):
        assert arm.drives.gear_ratio.tolist() == [80, 30]
        assert arm.drives.viscous.tolist() == [2, 7]


def test_names_are_short_unless_two_are_alike(load: Load) -> None:
    """Keys that end alike are told apart by their whole path; long values by their number."""
    vary: dict[str, Any] = {"drives": {"j1": {"gear_ratio": [25]}, "j2": {"gear_ratio": [80]}}}
    assert names(swept(load, vary))[0] == ["drives.j1.gear_ratio 25, drives.j2.gear_ratio 80"]
    vary = {"motions": {"swing": {"via_deg": [SWING["via_deg"], [[0, 0], [10, 12.5], [20, 30], [0, 0]]]}}}
    assert names(swept(load, vary))[0] == ["via_deg [[0, 0], [30, 40], [0, 0]]", "via_deg no. 2"]


def test_long_paths_are_called_by_their_files(load: Load, folder: Path) -> None:
    """Unless two files of different folders have one name: then their numbers stand there."""
    places = [folder / "some-long-way-down" / "a-folder", folder / "some-long-way-down" / "another-folder"]
    for place in places:
        place.mkdir(parents=True)
        for name in ("arm.yaml", "arm.urdf"):
            (place / name).write_bytes((folder / name).read_bytes())
    (places[0] / "identified.yaml").write_bytes((folder / "arm.yaml").read_bytes())
    paths = [str(place.relative_to(folder) / "arm.yaml") for place in places]
    identified = str(places[0].relative_to(folder) / "identified.yaml")
    models = ["arm.yaml", paths[0], identified]
    assert names(swept(load, {"model": models}))[0] == [
        "model arm.yaml",
        "model no. 2",
        "model identified.yaml",
    ]
    assert names(swept(load, {"model": paths}))[0] == ["model no. 1", "model no. 2"]


def test_a_spread_by_name_is_swept_by_name(load: Load) -> None:
    """The link or joint stands behind the source."""
    mismatch = {"coulomb_percent": {"all": 10, "j1": 20}, "link_mass_percent": 10}
    experiment = swept(load, {"mismatch": {"coulomb_percent": {"j1": [5, 30]}}}, mismatch=mismatch)
    assert names(experiment)[0] == ["coulomb_percent.j1 5", "coulomb_percent.j1 30"]
    spreads = [sheet.first.mismatch.coulomb_percent for sheet in experiment.sheets]
    assert [spread.of(("j1", "j2")).tolist() for spread in spreads if spread] == [[5, 10], [30, 10]]


def test_whole_mappings_can_be_swept(load: Load) -> None:
    """Values that go together stand together, in a list of mappings."""
    loads = [{"believed_kg": kg, "least_kg": 0, "most_kg": 2 * kg} for kg in (1, 2)]
    experiment = swept(load, {"mismatch": {"payload": loads}})
    assert names(experiment)[0] == ["payload no. 1", "payload no. 2"]
    assert [sheet.first.mismatch.believed_kg for sheet in experiment.sheets] == [1, 2]


def test_the_model_and_the_arm_can_be_swept(load: Load, folder: Path) -> None:
    """One sheet an arm file."""
    text = (folder / "arm.yaml").read_text("utf-8").replace("coulomb: 3.0", "coulomb: 4.0")
    (folder / "other.yaml").write_text(text, encoding="utf-8")
    experiment = swept(load, {"arm": ["arm.yaml", "other.yaml"]})
    assert names(experiment)[0] == ["arm arm.yaml", "arm other.yaml"]
    assert [sheet.first.arm.arm().drives.coulomb[0] for sheet in experiment.sheets] == [3, 4]
    experiment = swept(load, {"model": ["arm.yaml", "other.yaml"]})
    assert [s.first.model.arm().drives.coulomb[0] for s in experiment.sheets if s.first.model] == [3, 4]
    assert experiment.model == ""  # the sheets' names say it


def test_a_key_that_the_file_leaves_out_can_be_swept(load: Load) -> None:
    """vary mirrors the schema, not only what the file says."""
    experiment = swept(load, {"rates": {"physics_hz": [1000, 4000]}, "start_offset_deg": [[0, 0], [1, 1]]})
    assert [sheet.first.rates.physics_hz for sheet in experiment.sheets] == [1000, 1000, 4000, 4000]


# Combinations that can't be ----------------------------------------------------------------------


def test_a_rate_that_does_not_fit_is_skipped_and_named(load: Load) -> None:
    """model_hz above control_hz, or not a whole part of it: no runs there, a note with the line, absent cells."""
    vary = {"rates": {"control_hz": [500, 1000]}, "laws": {"ff": {"model_hz": [100, 1000]}}}
    experiment = swept(load, vary)
    plan = experiment.plan()
    assert [(s.sheet, s.law) for s in experiment.skipped] == [("control_hz 500", "ff (model_hz 1000)")]
    assert "1000 is above control_hz (at most 500)" in experiment.skipped[0].reason
    columns = [column.name for column in plan.columns]
    assert plan.absent == tuple(("control_hz 500", "ff (model_hz 1000)", column) for column in columns)
    assert {(e.sheet, e.law) for e in plan.entries} == {
        ("control_hz 500", "pd"), ("control_hz 500", "ff (model_hz 100)"),
        ("control_hz 1000", "pd"), ("control_hz 1000", "ff (model_hz 100)"),
        ("control_hz 1000", "ff (model_hz 1000)"),
    }  # fmt: skip
    assert len(plan.entries) == experiment.runs == 5 * (1 + 4 * 2)
    (note,) = [note for note in experiment.notes if "skipped" in note.problem]
    assert note.key == "vary.laws.ff.model_hz[1]"
    assert note.line is not None
    assert note.problem == (
        "skipped 'ff (model_hz 1000)' with control_hz 500: 1000 is above control_hz (at most 500)"
    )


def test_a_sheet_that_can_not_be_is_skipped_and_named(load: Load) -> None:
    """physics_hz has to be a whole multiple of control_hz."""
    rates = {"control_hz": 1000, "physics_hz": 2000}
    experiment = swept(load, {"rates": {"control_hz": [500, 750, 1000]}}, rates=rates)
    assert names(experiment)[0] == ["control_hz 500", "control_hz 1000"]
    assert [(s.sheet, s.law) for s in experiment.skipped] == [("control_hz 750", "")]
    (note,) = [note for note in experiment.notes if "skipped" in note.problem]
    assert (note.key, note.problem.partition(":")[0]) == ("rates.physics_hz", "skipped with control_hz 750")


def test_a_variant_that_can_be_nowhere_has_no_row(load: Load) -> None:
    """It is named as skipped, and the law's other variants stay."""
    experiment = swept(load, {"laws": {"ff": {"model_hz": [100, 300]}}})
    assert names(experiment) == ([""], ["pd", "ff (model_hz 100)"])
    assert [(s.sheet, s.law) for s in experiment.skipped] == [("", "ff (model_hz 300)")]


def test_what_leaves_nothing_is_at_fault(faults: Faults) -> None:
    """A law that fits no sheet, all variants of a law, or all sheets: that is no sweep, and nothing would show it."""
    found = faults(laws=LAWS, vary={"laws": {"ff": {"model_hz": [300, 2000]}}})
    assert [fault.key for fault in found] == ["vary.laws.ff.model_hz[0]", "vary.laws.ff.model_hz[1]"]
    found = faults(laws=LAWS, vary={"rates": {"control_hz": [150, 250]}})
    assert {fault.key for fault in found} == {"laws.ff.model_hz"}
    found = faults(laws=LAWS, rates={"physics_hz": 1000}, vary={"rates": {"control_hz": [300, 400]}})
    assert {fault.key for fault in found} == {"rates.physics_hz"}


def test_where_the_arm_can_not_follow_is_the_price_of_a_sheet(load: Load, faults: Faults) -> None:
    """A speed limit passed in some sheets is noted and run; passed in all of them it is a fault of the motion."""
    drives = {"all": {"motor_speed_limit": 300.0}}
    vary = {"drives": {"all": {"gear_ratio": [50, 200]}}}
    experiment = swept(load, vary, drives=drives)
    (note,) = [note for note in experiment.notes if "follow" in note.problem]
    assert note.key == "motions.swing"
    assert "with gear_ratio 200: joint j1 passes its speed limit 85.94 deg/s" in note.problem
    assert names(experiment)[0] == ["gear_ratio 50", "gear_ratio 200"]
    found = faults(laws=LAWS, drives=drives, vary={"drives": {"all": {"gear_ratio": [200, 400]}}})
    assert {fault.key for fault in found} == {"motions.swing"}


def test_a_motion_file_is_not_followed_where_the_gear_is_too_slow(load: Load, folder: Path) -> None:
    """The same price for a motion that was planned elsewhere."""
    (folder / "m.csv").write_text("t_s,j1,j2\n0,0,0\n1,45,20\n2,90,40\n3,90,40\n", encoding="utf-8")
    experiment = swept(
        load,
        {"drives": {"all": {"gear_ratio": [50, 400]}}},
        motions={"m": {"file": "m.csv"}},
        drives={"all": {"motor_speed_limit": 300.0}},
    )
    notes = [note for note in experiment.notes if "follow" in note.problem]
    assert [Path(note.file).name for note in notes] == ["m.csv"]
    assert len(experiment.sheets) == 2


# A gear that costs nothing -----------------------------------------------------------------------


def test_a_gear_sweep_without_limits_of_the_motor_is_warned_of(load: Load) -> None:
    """Where the motor has neither limit a higher ratio costs nothing; one of the two, declared or swept, is a price."""

    def warned(vary: dict[str, Any], **more: Any) -> list[tuple[str, str]]:
        notes = swept(load, vary, **more).notes
        return [(n.key, n.problem.partition(":")[0]) for n in notes if "costs nothing" in n.problem]

    gears: dict[str, Any] = {"drives": {"all": {"gear_ratio": [25, 50]}}}
    everywhere = ("vary.drives.all.gear_ratio", "costs nothing at j1, j2")
    assert warned(gears) == [everywhere]
    one = {"drives": {"j2": {"motor_torque_limit": 5.0}}}
    assert warned(gears, **one) == [("vary.drives.all.gear_ratio", "costs nothing at j1")]
    assert warned(gears, drives={"all": {"motor_speed_limit": 500.0}}) == []
    assert warned({"drives": {"j2": {"gear_ratio": [25, 50]}}}, **one) == []
    assert warned({"drives": {"j1": {"viscous": [1, 2]}}}) == []
    assert warned({"drives": {"all": {"gear_ratio": [25], "motor_torque_limit": [5.0, 9.0]}}}) == []


# Faults ------------------------------------------------------------------------------------------

AT_FAULT: list[tuple[dict[str, Any], str, str, str | None]] = [
    ({"rates": {"control_hz": 500}}, "vary.rates.control_hz", "500 is not a list", None),
    ({"rates": {"control_hz": []}}, "vary.rates.control_hz", "an empty list", None),
    ({"rates": {"control_hz": {"a": [1]}}}, "vary.rates.control_hz", "a mapping is not a list", None),
    ({"rates": {"control_hz": [500, 1000, 500.0]}}, "vary.rates.control_hz[2]", "500 a second time", None),
    ({"rates": {"contol_hz": [500]}}, "vary.rates.contol_hz", "unknown key", "control_hz"),
    ({"rates": {}}, "vary.rates", "no entries given", None),
    ({"rates": None}, "vary.rates", "null is not a list", None),
    ({"rate": {"control_hz": [500]}}, "vary.rate", "unknown key", "rates"),
    ({"rates": {"control_hz": ["fast", 1000]}}, "vary.rates.control_hz[0]", "'fast' is not a number", None),
    ({"rates": {"control_hz": [500, -1]}}, "vary.rates.control_hz[1]", "-1 is out of range", None),
    ({"laws": [1]}, "vary.laws", "a list is not a mapping", None),
    ({"laws": {"ff": [1]}}, "vary.laws.ff", "a list is not a mapping", None),
    ({"laws": {"fff": {"model_hz": [5]}}}, "vary.laws.fff", "none of the laws is called 'fff'", "ff"),
    ({"laws": {"ff": {"modl_hz": [50, 100]}}}, "vary.laws.ff.modl_hz", "unknown key", "model_hz"),
    ({"laws": {"ff": {"model_hz": 50}}}, "vary.laws.ff.model_hz", "50 is not a list", None),
    ({"laws": {"ff": {"model_hz": [50, -5]}}}, "vary.laws.ff.model_hz[1]", "-5 is out of range", None),
    ({"laws": {"ff": {"kp": [100, 200]}}}, "vary.laws.ff.kp[0]", "100", None),
    ({"laws": {"ff": {"law": ["computed_torque"]}}}, "vary.laws.ff.law[0]", "not a registered law", "computed-torque"),
    ({"motions": {"swng": {"leg_s": [1]}}}, "vary.motions.swng", "none of the motions is called 'swng'", "swing"),
    ({"motions": {"swing": {"leg_s": [1, 0]}}}, "vary.motions.swing.leg_s[1]", "0 is out of range", None),
    ({"motions": {"swing": {"tolerance": {"settle_ms": [1]}}}}, "vary.motions.swing.tolerance", "can't be varied", None),
    ({"drives": {"j01": {"gear_ratio": [5, 6]}}}, "vary.drives.j01", "no driven joint is called 'j01'", "j1"),
    ({"drives": {"all": {"gear_rato": [5, 6]}}}, "vary.drives.all.gear_rato", "unknown key", "gear_ratio"),
    ({"drives": {"all": {"gear_ratio": [5, 0]}}}, "vary.drives.all.gear_ratio[1]", "0 is out of range", None),
    ({"drives": {"j1": {"static": [1.0, 9.0]}}}, "vary.drives.j1", "static", None),
    ({"mismatch": {"coulomb_percent": {"j1": [5]}}}, "vary.mismatch.coulomb_percent.j1", "no mapping at mismatch.coulomb_percent", None),
    ({"mismatch": {"viscous_percent": {"j9": [5, 6]}}}, "vary.mismatch.viscous_percent.j9", "no joint 'j9'", None),
    ({"mismatch": {"payload": {"believed_kg": [1], "least_kg": [0]}}}, "vary.mismatch.payload.most_kg", "missing", None),
    ({"draws": [10, 20]}, "vary.draws", "can't be varied", None),
    ({"tolerance": {"tool_peak_mm": [1]}}, "vary.tolerance", "can't be varied", None),
    ({"seed": [1, 2]}, "vary.seed", "can't be varied", None),
    ({"arm": ["arm.yaml", "nope.yaml"]}, "vary.arm[1]", "'nope.yaml' does not exist", None),
    ({"gain_pose_deg": [[0, 0], [1]]}, "vary.gain_pose_deg[1]", "1 entry given", None),
    ({"gain_pose_deg": [0, 0.5]}, "vary.gain_pose_deg[0]", "0 is not a list", None),
    ({"gravity_m_s2": [[0, 0]]}, "vary.gravity_m_s2[0]", "2 entries given", None),
    ({"rates": {"control_hz": list(range(100, 700))}}, "vary", "makes 600 sheets", None),
    ({"laws": {"pd": {"natural_hz": list(range(1, 5003))}}}, "vary", "makes 1 sheet with 5002 variants", None),
    ({"motions": {"swing": {"rest_s": [0.1, 0]}}}, "vary.motions.swing.rest_s[1]", "tolerance.settle_ms: no motion has a rest", None),
    ({"motions": {"swing": {"via_deg": [[[0, 0], [9, 9]], [[0, 0], [0, 170]]]}}}, "vary.motions.swing.via_deg[1][1]", "170 deg is beyond", None),
]  # fmt: skip


@pytest.mark.parametrize(
    ("vary", "key", "problem", "near"), AT_FAULT, ids=[f"{k}-{p}" for _, k, p, _ in AT_FAULT]
)
def test_one_slip_in_vary_is_told_where_it_stands(
    faults: Faults, vary: dict[str, Any], key: str, problem: str, near: str | None
) -> None:
    """With the line in vary, the value given, and the nearest valid name; nothing else is at fault."""
    found = faults(laws=LAWS, vary=vary)
    assert problem in found[0].problem
    assert near is None or found[0].near == near
    assert found[0].key == key
    assert {fault.key.partition("[")[0] for fault in found} == {key.partition("[")[0]}
    assert found[0].line is not None


def test_a_fault_that_some_values_make_is_told_at_them(faults: Faults) -> None:
    """What is wrong elsewhere in the file with one value of a sweep is told at that value, or else in its sheet."""
    axes = {"leg_s": [0.4, 3600], "rest_s": [0.2, 0.1]}
    (fault,) = faults(laws=LAWS, vary={"motions": {"swing": axes | {"rest_s": [0.2]}}})
    assert fault.key == "vary.motions.swing.leg_s[1]"
    assert fault.problem.startswith("motions.swing: lasts 7200.4 s")
    found = faults(laws=LAWS, vary={"motions": {"swing": axes}})
    assert {fault.key for fault in found} == {"motions.swing"}
    assert [fault.problem.partition("(")[2] for fault in found] == [
        "in sheet 'leg_s 3600, rest_s 0.2')", "in sheet 'leg_s 3600, rest_s 0.1')",
    ]  # fmt: skip


def test_names_that_collide_are_at_fault(faults: Faults) -> None:
    """A variant may not have the name of another law."""
    laws = LAWS | {"ff (model_hz 50)": {"law": "computed-torque"}}
    (fault,) = faults(laws=laws, vary={"laws": {"ff": {"model_hz": [50, 100]}}})
    assert fault.key == "vary.laws.ff"
    assert "a second row called 'ff (model_hz 50)'" in fault.problem


def test_faults_of_vary_come_with_all_others(faults: Faults) -> None:
    """One look finds what is wrong in vary, in the rest of the file, and with both together."""
    found = faults(
        laws=LAWS | {"x": {"law": "nope-law"}},
        draws=0,
        vary={"rates": {"control_hz": [500, "x"]}, "drives": {"j7": {"gear_ratio": [1]}}, "nope": [1]},
    )
    assert {fault.key for fault in found} == {
        "laws.x.law", "draws", "vary.rates.control_hz[1]", "vary.drives.j7", "vary.nope",
    }  # fmt: skip
    lines = [fault.line or 0 for fault in found]
    assert lines == sorted(lines)


def test_what_a_swept_value_replaces_is_still_looked_at(faults: Faults) -> None:
    """The file has to be in order without vary too."""
    found = faults(laws=LAWS, rates={"control_hz": "x"}, vary={"rates": {"control_hz": [500]}})
    assert [fault.key for fault in found] == ["rates.control_hz"]


def test_vary_that_is_no_mapping(faults: Faults) -> None:
    """A list or a number in its place is one fault."""
    for vary in ([1], 3, "all"):
        (fault,) = faults(vary=vary)
        assert fault.key == "vary"
        assert "not a mapping" in fault.problem


def test_the_same_sweep_twice_is_the_same_plan(write: Callable[..., Path]) -> None:
    """Loading depends on the file alone."""
    path = write(
        laws=LAWS, vary={"rates": {"control_hz": [500, 1000]}, "laws": {"ff": {"model_hz": [50, 100]}}}
    )
    one, two = (load_experiment(path).plan() for _ in range(2))
    assert [entry.key for entry in one.entries] == [entry.key for entry in two.entries]

"""What is wrong with an experiment file is told where it stands."""

from __future__ import annotations

import os
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from rigbench.errors import Fault, InputFaults
from rigbench.experiment import load_experiment

Faults = Callable[..., list[Fault]]

VIA = [[0, 0], [30, 40]]


def motion(**keys: Any) -> dict[str, Any]:
    return {"motions": {"m": {"via_deg": VIA, "leg_s": 0.5} | keys}}


def law(**keys: Any) -> dict[str, Any]:
    return {"laws": {"x": {"law": "computed-torque"} | keys}}


def load_of(**keys: Any) -> dict[str, Any]:
    return {"mismatch": {"payload": {"believed_kg": 1, "least_kg": 0, "most_kg": 2} | keys}}


REQUIRED = {
    "rigbench": "1",
    "arm": "arm.yaml",
    "motions": "{m: {via_deg: [[0, 0], [1, 1]]}}",
    "laws": "{x: {law: independent-joint}}",
}

CASES: list[tuple[dict[str, Any], str, str]] = [
    ({"rigbench": 2}, "rigbench", "2"),
    ({"rigbench": None}, "rigbench", "missing"),
    ({"rigbench": True}, "rigbench", "true"),
    ({"arm": None}, "arm", "missing"),
    ({"motions": None}, "motions", "missing"),
    ({"laws": None}, "laws", "missing"),
    ({"motions": {}}, "motions", "no entries"),
    ({"laws": {}}, "laws", "no entries"),
    ({"arm": "nope.yaml"}, "arm", "'nope.yaml' does not exist"),
    ({"arm": "."}, "arm", "is a folder"),
    ({"arm": 300 * "x"}, "arm", "can't be read (File name too long)"),
    ({"model": "nope.yaml"}, "model", "'nope.yaml' does not exist"),
    ({"model": "lift.yaml"}, "model", "its chain is j1, j2"),
    ({"vary": {}}, "vary", "no entries"),
    ({"conditions": {"cases": {}}}, "conditions.cases", "no entries"),
    ({"seed": 1.5}, "seed", "1.5"),
    ({"seed": -1}, "seed", "-1"),
    ({"draws": "many"}, "draws", "'many' is not a whole number"),
    ({"draws": 1_000_000}, "draws", "runs in all"),
    ({"required_share": 1}, "required_share", "1"),
    ({"gravity_m_s2": [0, 0]}, "gravity_m_s2", "2 entries"),
    ({"rates": {"control_hz": 0}}, "rates.control_hz", "0 is out of range"),
    ({"rates": {"control_hz": 1000, "physics_hz": 1500}}, "rates.physics_hz", "1500 is not a whole multiple"),
    ({"rates": {"control_hz": 1000, "physics_hz": 500}}, "rates.physics_hz", "500 is not a whole multiple"),
    ({"gain_pose_deg": [1]}, "gain_pose_deg", "1 entry given"),
    ({"start_offset_deg": [1, 2, 3]}, "start_offset_deg", "3 entries given"),
    ({"start_offset_deg": [0, -40]}, "start_offset_deg", "motion swing would start at -40 deg"),
    (motion(via_deg=[[0, 0]]), "motions.m.via_deg", "1 entry"),
    (motion(via_deg=[[0, 0], [1]]), "motions.m.via_deg[1]", "1 entry given"),
    (motion(via_deg=[[0, 0], [0, 150]]), "motions.m.via_deg[1]", "150 deg is beyond the limit of joint j2"),
    (motion(leg_s=0.01), "motions.m", "joint j1 passes its speed limit 229.2 deg/s at 0.00 s"),
    (motion(leg_s=0), "motions.m.leg_s", "0 is out of range"),
    (motion(rest_s=-0.1), "motions.m.rest_s", "-0.1 is out of range"),
    (motion(leg_s=3600, rest_s=3600), "motions.m", "lasts 7200 s"),
    (motion(file="a.csv"), "motions.m", "both via_deg and file"),
    ({"motions": {"m": {"leg_s": 1}}}, "motions.m", "its kind is not given"),
    ({"motions": {"m": {"file": "nope.csv"}}}, "motions.m.file", "'nope.csv' does not exist"),
    ({"motions": {"m": 3}}, "motions.m", "3 is not a mapping"),
    ({"motions": {" a": {"via_deg": VIA}}}, "motions. a", "odd blanks"),
    ({"laws": {"": {"law": "computed-torque"}}}, "laws.", "odd blanks"),
    ({"laws": {"x": {"natural_hz": 5}}}, "laws.x.law", "missing"),
    (law(law="zz"), "laws.x.law", "'zz' is not a registered law"),
    (law(natural_hz="fast"), "laws.x.natural_hz", "'fast' is not a number"),
    (law(natural_hz=-5), "laws.x.natural_hz", "-5 is out of range"),
    (law(friction="all"), "laws.x.friction", "'all'"),
    (law(kp=[1, 2, 3], kd=[1, 2]), "laws.x.kp", "3 entries given"),
    (law(kp=[1, 2]), "laws.x", "'kp' needs 'kd'"),
    (law(model_hz=2000), "laws.x.model_hz", "2000 is above control_hz"),
    (law(model_hz=300), "laws.x.model_hz", "300 does not go into control_hz"),
    (
        {"laws": {"x": {"law": "mine.py:Mine"}}, "rates": {"control_hz": 800}},
        "laws.x.model_hz",
        "500 does not go",
    ),
    ({"laws": {"x": {"law": "mine.py:Mine", "k": 0}}}, "laws.x.k", "0 is out of range"),
    ({"laws": {"x": {"law": "mine.py:Nope"}}}, "laws.x.law", "no such class"),
    ({"laws": {"x": {"law": "nope.py:Mine"}}}, "laws.x.law", "No such file"),
    ({"laws": {"x": {"law": "mine.py"}}}, "laws.x.law", "does not name a class in a file"),
    ({"mismatch": {"coulomb_percent": 0}}, "mismatch.coulomb_percent", "0 is out of range"),
    ({"mismatch": {"link_mass_percent": {"all": 0}}}, "mismatch.link_mass_percent", "spreads nothing"),
    ({"mismatch": {"link_mass_percent": float("inf")}}, "mismatch.link_mass_percent", "inf"),
    (load_of(least_kg=3), "mismatch.payload.least_kg", "3 is above most_kg"),
    (load_of(believed_kg=3), "mismatch.payload.believed_kg", "3 is not between"),
    (load_of(least_kg=-1), "mismatch.payload.least_kg", "-1 is out of range"),
    ({"mismatch": None}, "conditions.each_alone", "needs a mismatch"),
    ({"conditions": {"together": [1, 0.5]}}, "conditions.together[1]", "0.5 after 1"),
    ({"conditions": {"together": [1, 1]}}, "conditions.together[1]", "1 after 1"),
    ({"conditions": {"together": [0, 1]}}, "conditions.together[0]", "level 0 is the column 'nominal'"),
    ({"conditions": {"together": [-1]}}, "conditions.together[0]", "-1 is out of range"),
    ({"conditions": {"together": [1e6]}}, "conditions.together[0]", "1e+06 is out of range"),
    ({"conditions": {"together": []}}, "conditions.together", "no entries"),
    ({"conditions": {"each_alone": 0}}, "conditions.each_alone", "0 is out of range"),
    ({"tolerance": {"tool_peek_mm": 3}}, "tolerance.tool_peek_mm", "is not a score"),
    ({"tolerance": {"tool_peak_mm": "3"}}, "tolerance.tool_peak_mm", "'3' is not a number"),
    ({"tolerance": {"tool_peak_mm": True}}, "tolerance.tool_peak_mm", "true is not a number"),
    ({"tolerance": {"tool_peak_mm": [3]}}, "tolerance.tool_peak_mm", "a list is not a number"),
    ({"tolerance": {"tool_peak_mm": 0}}, "tolerance.tool_peak_mm", "0 is out of range"),
    ({"tolerance": {"tool_peak_mm": float("inf")}}, "tolerance.tool_peak_mm", "inf is out of range"),
    ({"tolerance": {"tool_peak_mm": float("nan")}}, "tolerance.tool_peak_mm", "nan is not a number"),
    ({"tolerance": {"saturated_percent": -1}}, "tolerance.saturated_percent", "-1 is out of range"),
    ({"tolerance": {"tool_peak_mm": {"j1": 3}}}, "tolerance.tool_peak_mm", "has no values by joint"),
    ({"tolerance": {"joint_peak_deg": {"j3": 3}}}, "tolerance.joint_peak_deg.j3", "no joint 'j3'"),
    ({"tolerance": {"joint_peak_mm": 3}}, "tolerance.joint_peak_mm", "every joint is revolute"),
    ({"tolerance": {"law_us": 3}}, "tolerance.law_us", "tells about this computer"),
    ({"tolerance": {"settle_band_mm": 0}}, "tolerance.settle_band_mm", "0 is out of range"),
    (motion(rest_s=0) | {"tolerance": {"settle_ms": 3}}, "tolerance.settle_ms", "no motion has a rest"),
]


@pytest.mark.parametrize(("changes", "key", "problem"), CASES, ids=[f"{k}-{p}" for _, k, p in CASES])
def test_one_slip_is_one_fault(faults: Faults, changes: dict[str, Any], key: str, problem: str) -> None:
    """A file with one thing wrong has one fault (or one a joint), at its key, with a line and the value given."""
    changes = {"conditions": {"each_alone": 1}, "tolerance": {"tool_peak_mm": 3}} | changes
    found = faults(**changes)
    assert {fault.key for fault in found} == {key}
    assert problem in found[0].problem
    assert (found[0].line is None) == (found[0].problem == "missing" and "." not in key)


def test_limits_of_joints_of_the_other_kind(faults: Faults) -> None:
    """A limit in deg on a prismatic joint, or in mm on a revolute one, is a fault."""
    tolerance = {"joint_peak_deg": {"j1": 1, "j2": 1}, "joint_peak_mm": {"j1": 1, "j2": 1}}
    motions = {"m": {"via_deg": [[0, 0], [10, 100]]}}
    found = faults(arm="lift.yaml", motions=motions, tolerance=tolerance)
    assert [fault.key for fault in found] == ["tolerance.joint_peak_deg.j2", "tolerance.joint_peak_mm.j1"]
    assert [fault.expected for fault in found] == ["joint_peak_mm", "joint_peak_deg"]


def test_torque_over_no_limit(faults: Faults, folder: Path) -> None:
    """A limit on torque over its limit is a fault where the drives have none."""
    text = (folder / "arm.urdf").read_text("utf-8").replace('effort="150" ', "").replace('effort="60" ', "")
    (folder / "arm.urdf").write_text(text, encoding="utf-8")
    found = faults(tolerance={"torque_peak_percent": 90})
    assert found[-1].key == "tolerance.torque_peak_percent"


def test_rests_go_with_via_points(faults: Faults, folder: Path) -> None:
    """A motion from a file has its own times; leg_s and rest_s beside it are faults."""
    (folder / "m.csv").write_text("t_s,j1,j2\n0,0,0\n1,9,0\n", encoding="utf-8")
    found = faults(motions={"m": {"file": "m.csv", "rest_s": 1, "leg_s": 1}})
    assert {fault.key for fault in found} == {"motions.m.rest_s", "motions.m.leg_s"}


def test_a_key_of_a_later_version_lists_the_valid_ones(faults: Faults) -> None:
    """An unknown key that resembles none says which there are."""
    (fault,) = faults(quorum={})
    assert fault.problem == "unknown key"
    assert "mismatch" in fault.expected


@pytest.mark.parametrize(
    ("changes", "near"),
    [
        ({"laws": {"x": {"law": "computed_torque"}}}, "computed-torque"),
        ({"tolerance": {"tool_peek_mm": 3}}, "tool_peak_mm"),
        ({"tolerance": {"settle_band": 3}}, "settle_band_mm"),
        ({"conditions": {"togehter": [1]}}, "together"),
        ({"motions": {"m": {"via_deg": VIA, "legs_s": 1}}}, "leg_s"),
    ],
)
def test_the_nearest_name_is_offered(faults: Faults, changes: dict[str, Any], near: str) -> None:
    """A misspelt name comes with the one that was meant."""
    assert [fault.near for fault in faults(**changes)] == [near]


def test_faults_come_in_the_order_of_their_lines(faults: Faults) -> None:
    """Structural faults and those of the cross-checks are told in one go, by line."""
    found = faults(
        seed=-1,
        motions={"a": {"via_deg": [[0, 0], [0, 999]]}, "b": {"via_deg": VIA, "leg_s": "x"}},
        laws={"x": {"law": "computed-torque", "model_hz": 7, "kp": [1], "friction": 3}},
        draws=0,
    )
    assert {fault.key for fault in found} == {
        "seed", "motions.a.via_deg[1]", "motions.b.leg_s",
        "laws.x.model_hz", "laws.x.kp", "laws.x.friction", "draws",
    }  # fmt: skip
    lines = [fault.line for fault in found]
    assert lines == sorted(lines)


def test_what_hangs_on_a_faulty_key_is_not_faulted_too(faults: Faults) -> None:
    """A rate that is no rate makes no fault of the model rates that it would have to fit."""
    found = faults(rates={"control_hz": "x"}, laws={"x": {"law": "computed-torque", "model_hz": 5000}})
    assert [fault.key for fault in found] == ["rates.control_hz"]


def test_faults_of_all_files_come_together(faults: Faults, folder: Path) -> None:
    """Experiment, arm file and motion file are all looked through before anything is told."""
    (folder / "m.csv").write_text("t_s,j1,j2\n0,0,0\n1,x,0\n", encoding="utf-8")
    text = (folder / "lift.yaml").read_text("utf-8").replace("gear_ratio: 50", "gear_ratio: -50")
    (folder / "bad.yaml").write_text(text, encoding="utf-8")
    found = faults(draws=0, motions={"m": {"file": "m.csv"}}, model="bad.yaml")
    assert [Path(fault.file).name for fault in found] == ["trial.yaml", "bad.yaml", "bad.yaml", "m.csv"]


def test_a_file_named_twice_is_faulted_once(faults: Faults, folder: Path) -> None:
    """An arm file that is the model too tells its faults once."""
    text = (folder / "arm.yaml").read_text("utf-8").replace("gear_ratio: 50", "gear_ratio: -50")
    (folder / "bad.yaml").write_text(text, encoding="utf-8")
    assert [fault.key for fault in faults(arm="bad.yaml", model="bad.yaml")] == [
        "drives.j1.gear_ratio",
        "drives.j2.gear_ratio",
    ]


def test_a_law_that_fails_to_import_shows_its_own_traceback(faults: Faults, folder: Path) -> None:
    """The traceback of a user's file stands in the fault, with the line that failed."""
    (folder / "mine.py").write_text("import math\n\nhalf = 1 / 0\n", encoding="utf-8")
    (fault,) = faults(laws={"x": {"law": "mine.py:Mine"}})
    assert "ZeroDivisionError: division by zero" in fault.problem
    assert "half = 1 / 0" in fault.problem


def test_a_law_whose_rate_comes_from_its_class_is_checked_too(faults: Faults) -> None:
    """The default of a user's model_hz has to fit the control rate like a given one."""
    (fault,) = faults(laws={"x": {"law": "mine.py:Mine"}}, rates={"control_hz": 300})
    assert (fault.key, fault.problem) == ("laws.x.model_hz", "500 is above control_hz")


@pytest.mark.parametrize("text", ["", "- 1\n", "3\n", "a: [\n", "a: 1\na: 2\n", "1: 2\n"])
def test_a_file_that_is_no_experiment(folder: Path, text: str) -> None:
    """Empty, a list, a number, broken YAML, a key twice: faults with the file's name."""
    path = folder / "odd.yaml"
    path.write_text(text, encoding="utf-8")
    with pytest.raises(InputFaults) as caught:
        load_experiment(path)
    assert {fault.file for fault in caught.value.faults} == {str(path)}


def test_a_file_that_can_not_be_read(folder: Path) -> None:
    """Missing, a folder, not UTF-8: one fault each."""
    (folder / "latin.yaml").write_bytes("title: Tr\xe4ger\n".encode("latin-1"))
    for name, words in (("nope.yaml", "does not exist"), (".", "is a folder"), ("latin.yaml", "not UTF-8")):
        with pytest.raises(InputFaults) as caught:
            load_experiment(folder / name)
        (fault,) = caught.value.faults
        assert words in fault.problem


@pytest.mark.skipif(os.geteuid() == 0, reason="root may read everything")
def test_a_file_without_permission(write: Callable[..., Path]) -> None:
    """A file that may not be read is one fault."""
    path = write()
    path.chmod(0)
    with pytest.raises(InputFaults) as caught:
        load_experiment(path)
    assert len(caught.value.faults) == 1


def test_a_fault_of_the_arm_hides_none_of_motions(faults: Faults) -> None:
    """What of a motion needs no arm is checked without one."""
    motions = {
        "lost": {"file": "nope.csv"},
        "odd": {"leg_s": 1},
        "loop": {"circle": {"centre_m": [0, 0, 0], "radius_m": 1, "normal": [0, 0, 0], "turn_s": 1}},
        "all": {"chain": ["lots"]},
    }
    found = faults(arm="nope.yaml", motions=motions)
    keys = ["arm", "motions.lost.file", "motions.odd", "motions.loop.circle.normal", "motions.all.chain[0]"]
    assert {fault.key for fault in found} == set(keys)
    assert next(fault.near for fault in found if fault.key == keys[-1]) == "lost"


@pytest.mark.parametrize("key", ["arm", "motions", "laws", "rigbench"])
def test_what_is_required_but_empty_has_a_line(folder: Path, key: str) -> None:
    """``arm:`` without a value is at fault on its line."""
    text = "\n".join(f"{name}:" if name == key else f"{name}: {value}" for name, value in REQUIRED.items())
    (folder / "empty.yaml").write_text(text, encoding="utf-8")
    with pytest.raises(InputFaults) as raised:
        load_experiment(folder / "empty.yaml")
    (fault,) = raised.value.faults
    assert (fault.key, fault.line, fault.problem) == (key, 1 + list(REQUIRED).index(key), "is empty")


def test_a_start_beyond_a_limit_reads_well(faults: Faults) -> None:
    """The position and the limit are in one sentence."""
    (fault,) = faults(start_offset_deg=[0, -40])
    assert fault.problem.startswith("motion swing would start at -40 deg, beyond the limit of joint j2")


@pytest.mark.parametrize(
    ("changes", "expected"),
    [
        ({"gravity_m_s2": [0, 0]}, "a list of 3 numbers"),
        ({"base_tilt_deg": [0, 0, 0]}, "a list of 2 numbers"),
        ({"motions": {"m": {"line": {"to_m": [1, 2], "from_m": [1, 2, 3]}}}}, "a list of 3 numbers"),
        ({"motions": {"m": {"line": {"to_m": [1, 2, 3], "from_m": [1, 2]}}}}, "a list of 3 numbers"),
        ({"seed": 2**63}, "below 9223372036854775808"),
        ({"draws": 2_000_000}, "at most 1000000"),
        ({"required_share": 1.5}, "below 1"),
    ],
)
def test_expectations_are_exact(faults: Faults, changes: dict[str, Any], expected: str) -> None:
    """A list of one length only says so; a bound is printed with all its digits."""
    (fault,) = faults(**changes)
    assert fault.expected == expected


@pytest.mark.parametrize("key", ["tolerance", "vary", "find_level", "needs", "worst_case", "tune"])
def test_a_key_without_a_value_is_a_fault(write: Callable[..., Path], key: str) -> None:
    """As 'find_level:' with nothing behind it, which may not pass for one that was left out."""
    path = write(**{key: None})
    path.write_text(f"{path.read_text('utf-8')}{key}:\n", encoding="utf-8")
    with pytest.raises(InputFaults) as caught:
        load_experiment(path)
    [fault] = caught.value.faults
    assert (fault.key, fault.problem) == (key, "an empty value is not a mapping of keys")

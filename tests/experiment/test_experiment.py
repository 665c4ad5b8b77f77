"""What an experiment file in order becomes: defaults, units, columns and runs."""

from __future__ import annotations

import math
import pickle
from collections import Counter
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

from rigbench.experiment import Experiment, load_experiment

Load = Callable[..., Experiment]

DEMOS = sorted((Path(__file__).resolve().parents[2] / "experiments").glob("[!p]*.yaml"))
"""All but those named practise-, which are identifications."""


@pytest.mark.parametrize("path", DEMOS, ids=lambda path: path.stem)
def test_the_demo_experiments_are_in_order(path: Path) -> None:
    """Every experiment that comes with rigbench loads without a fault, and notes nothing but a sweep's own price."""
    of_sweep = ("skipped ", "the arm can't follow it with ")
    assert [note for note in load_experiment(path).notes if not note.problem.startswith(of_sweep)] == []


def test_defaults(load: Load) -> None:
    """What is left out has the value that the schema documents."""
    experiment = load(mismatch=None, conditions=None, draws=None, tolerance=None)
    run = experiment.sheets[0].first
    assert experiment.title == "trial"
    assert experiment.draws == 128
    assert (run.rates.control_hz, run.rates.physics_hz) == (1000, 2000)
    assert run.seed == 0
    assert run.gravity == (0, 0, -9.81)
    assert run.gain_pose == (0, 0)
    assert run.start_offset == ()
    assert run.model is None
    assert run.settle_band_mm == 0.5
    assert experiment.tolerance is None


def test_physics_defaults_to_twice_the_control_rate(load: Load) -> None:
    """physics_hz follows control_hz where it is not given."""
    assert load(rates={"control_hz": 500}).sheets[0].first.rates.physics_hz == 1000


def test_degrees_become_radians_and_millimetres_metres(load: Load) -> None:
    """Positions of a prismatic joint are in mm, in via points, gain pose and start offset alike."""
    experiment = load(
        arm="lift.yaml",
        motions={"lift": {"via_deg": [[90, 100], [0, 250]], "leg_s": 2}},
        gain_pose_deg=[45, 10],
        start_offset_deg=[1, -2],
        tolerance={"tool_peak_mm": 3},
    )
    q, _, _ = experiment.sheets[0].motions["lift"].reference(np.array([0.0, 2.0]))
    np.testing.assert_allclose(q, [[math.pi / 2, 0.1], [0, 0.25]], atol=1e-15)
    np.testing.assert_allclose(experiment.sheets[0].first.gain_pose, [math.pi / 4, 0.01], rtol=1e-15)
    np.testing.assert_allclose(experiment.sheets[0].first.start_offset, [math.pi / 180, -0.002], rtol=1e-15)


def test_gain_pose_is_where_the_first_motion_starts(load: Load) -> None:
    """Without gain_pose_deg, natural_hz becomes gains at the first motion's first point."""
    motions = {"b": {"via_deg": [[20, 30], [0, 0]]}, "a": {"via_deg": [[1, 1], [0, 0]]}}
    np.testing.assert_allclose(
        load(motions=motions).sheets[0].first.gain_pose, np.radians([20, 30]), rtol=1e-15
    )


def test_pace_shortens_the_legs(load: Load) -> None:
    """At 200 percent a leg takes half its time; the rests stay."""
    motions = {"swing": {"via_deg": [[0, 0], [30, 40]], "leg_s": 1, "rest_s": 0.25, "pace_percent": 200}}
    assert load(motions=motions).sheets[0].motions["swing"].duration_s == pytest.approx(0.75, rel=1e-12)


def test_a_motion_file_is_read_relative_to_the_experiment(load: Load, folder: Path) -> None:
    """A table of times and positions makes a motion."""
    (folder / "planned.csv").write_text("t_s,j1,j2\n0,0,0\n1,10,20\n2,0,0\n", encoding="utf-8")
    experiment = load(motions={"planned": {"file": "planned.csv"}}, tolerance={"tool_peak_mm": 3})
    q, _, _ = experiment.sheets[0].motions["planned"].reference(np.array([1.0]))
    np.testing.assert_allclose(q, np.radians([[10, 20]]), atol=1e-12)


def test_columns(load: Load) -> None:
    """Nominal is always there and exact; then each source alone; then all by level, which make the ladder."""
    columns = load().plan().columns
    assert [(c.name, c.level, c.random, c.ladder) for c in columns] == [
        ("nominal", 0, False, True),
        ("link mass", 1, True, False),
        ("coulomb", 1, True, False),
        ("all at 0.5", 0.5, True, True),
        ("all at 1", 1, True, True),
    ]


def test_a_payload_that_is_certain_is_no_source(load: Load) -> None:
    """A payload without any spread is believed and carried, but has no column of its own."""
    certain = {"believed_kg": 2, "least_kg": 2, "most_kg": 2}
    experiment = load(mismatch={"payload": certain, "coulomb_percent": 10}, conditions={"each_alone": 1})
    assert [c.name for c in experiment.plan().columns] == ["nominal", "coulomb"]
    assert experiment.sheets[0].first.mismatch.payload is not None


def test_runs_are_counted_and_in_fair_order(load: Load) -> None:
    """Each law meets each motion and column on each draw once; what is exact comes first, then draw by draw."""
    experiment = load(draws=3)
    entries = experiment.plan().entries
    assert len(entries) == experiment.runs == 2 * (1 + 4 * 3)
    assert set(Counter((e.law, e.motion, e.condition, e.draw) for e in entries).values()) == {1}
    draws = [-1 if e.draw is None else e.draw for e in entries]
    assert draws == sorted(draws)
    for entry in entries:
        assert (entry.draw is None) == (entry.condition == "nominal")
        assert entry.run.draw == entry.draw
        assert entry.run.level == entry.level


def test_a_source_alone_acts_alone(load: Load) -> None:
    """In a source's own column only that source acts, in the others all do, in nominal none."""
    acting = {entry.condition: entry.run.sources for entry in load().plan().entries}
    both = ("link_mass_percent", "coulomb_percent")
    assert acting == {
        "nominal": (),
        "link mass": both[:1],
        "coulomb": both[1:],
        "all at 0.5": both,
        "all at 1": both,
    }


def test_what_is_added_changes_no_key_of_what_is_there(load: Load) -> None:
    """More draws, another law, another source or another condition leave the keys of the other runs as they are."""
    first = {(e.law, e.condition, e.draw): e.key for e in load(draws=2).plan().entries}
    more = load(
        draws=3,
        laws={
            "joint pd": {"law": "independent-joint", "natural_hz": 5},
            "feedforward": {"law": "torque-feedforward"},
            "computed torque": {"law": "computed-torque", "natural_hz": 5},
        },
        mismatch={"link_mass_percent": 10, "coulomb_percent": 20, "viscous_percent": 5},
        conditions={"each_alone": 1},
    )
    then = {(e.law, e.condition, e.draw): e.key for e in more.plan().entries}
    same = [place for place in first if place in then]
    assert len(same) == 2 * (1 + 2 * 2)
    for place in same:
        assert then[place] == first[place]


def test_runs_can_be_sent_to_a_worker(load: Load) -> None:
    """A run survives pickling with its key."""
    run = load().plan().entries[-1].run
    assert pickle.loads(pickle.dumps(run)).key() == run.key()


def test_laws_from_a_file(load: Load, folder: Path) -> None:
    """A class of the user's own is found beside the experiment, with its options checked and defaulted."""
    experiment = load(laws={"mine": {"law": "mine.py:Mine", "k": 7, "bounds": [1, 2]}})
    choice = experiment.sheets[0].laws["mine"]
    assert dict(choice.options) == {"k": 7.0, "bounds": (1.0, 2.0), "model_hz": 500.0}
    assert [name for name, _ in choice.files] == ["mine.py"]


def test_another_model(load: Load, folder: Path) -> None:
    """`model` names the arm file that the controllers believe."""
    text = (folder / "arm.yaml").read_text("utf-8").replace("coulomb: 3.0", "coulomb: 4.0")
    (folder / "identified.yaml").write_text(text, encoding="utf-8")
    experiment = load(model="identified.yaml")
    run = experiment.sheets[0].first
    assert experiment.plan().model == "identified.yaml"
    assert run.model is not None
    assert run.model.arm().drives.coulomb[0] == 4
    assert run.arm.arm().drives.coulomb[0] == 3


def test_tolerance(load: Load) -> None:
    """A score of joints takes one number or a number a joint; the band is no limit."""
    tolerance = {
        "tool_peak_mm": 3, "joint_peak_deg": {"j1": 0.05, "j2": 0.1}, "joint_rms_deg": 1,
        "saturated_percent": 0, "settle_band_mm": 0.2,
    }  # fmt: skip
    experiment = load(tolerance=tolerance, required_share=0.9)
    assert experiment.tolerance is not None
    assert dict(experiment.tolerance.limits) == {
        "tool_peak_mm": 3,
        "joint_peak_deg.j1": 0.05,
        "joint_peak_deg.j2": 0.1,
        "joint_rms_deg": 1,
        "saturated_percent": 0,
    }
    assert experiment.tolerance.required_share == 0.9
    assert experiment.sheets[0].first.settle_band_mm == 0.2


def test_the_plan_says_how_to_go_on(load: Load, write: Callable[..., Path]) -> None:
    """The command line that resumes is quoted for a shell."""
    experiment = load_experiment(write(name="my trial.yaml"))
    path = experiment.path
    assert experiment.plan().resume == f"rigbench run '{path}'"
    assert experiment.plan("s.sqlite").resume == f"rigbench run '{path}' --store s.sqlite"


@pytest.mark.parametrize(
    ("changes", "key", "words"),
    [
        ({"draws": 72}, "draws", "it takes 73"),
        ({"tolerance": None}, "", "no tolerance"),
        ({"tolerance": {"settle_band_mm": 1}}, "tolerance", "limits no score"),
        ({"conditions": None}, "mismatch", "no condition uses it"),
        (
            {
                "motions": {
                    "a": {"via_deg": [[0, 0], [9, 9]]},
                    "b": {"via_deg": [[0, 0], [9, 9]], "rest_s": 0},
                }
            },
            "tolerance.settle_ms",
            "not measured in b",
        ),
    ],
)
def test_notes(load: Load, changes: dict[str, object], key: str, words: str) -> None:
    """What is allowed but may not be meant is noted once, with its address."""
    notes = load(**changes).notes
    assert [(note.key, words in note.problem) for note in notes] == [(key, True)]


def test_73_draws_are_enough(load: Load) -> None:
    """Wilson's interval of 73 passes of 73 reaches 0.95: 73 / (73 + 1.96^2) = 0.95000."""
    assert load(draws=73).notes == ()


def test_a_source_of_nothing_is_noted(load: Load, folder: Path) -> None:
    """Scaling friction that is zero has no effect, which is said."""
    text = (
        (folder / "arm.yaml").read_text("utf-8").replace("viscous: 2.0, ", "").replace("viscous: 1.0, ", "")
    )
    (folder / "arm.yaml").write_text(text, encoding="utf-8")
    notes = load(mismatch={"viscous_percent": 10}).notes
    assert [(note.key, note.problem) for note in notes] == [
        ("mismatch.viscous_percent", "has no effect: no drive has viscous friction")
    ]


def test_notes_of_the_arm_are_passed_on(load: Load, folder: Path) -> None:
    """What the arm files note, the experiment notes."""
    mesh = '<visual><geometry><mesh filename="missing.stl"/></geometry></visual>'
    text = (folder / "arm.urdf").read_text("utf-8").replace('"base"/>', f'"base">{mesh}</link>', 1)
    (folder / "arm.urdf").write_text(text, encoding="utf-8")
    assert [Path(note.file).name for note in load().notes] == ["arm.urdf"]

"""Scenes: what a user's function adds to the world touches the arm, and leaves alone what is the rig's."""

from __future__ import annotations

import pickle
from dataclasses import replace
from importlib.metadata import EntryPoint
from pathlib import Path

import numpy as np
import pytest

from rigbench.arm.dynamics import tool_jacobian
from rigbench.arm.files import ArmFiles
from rigbench.campaign.work import do
from rigbench.errors import InputFaults, SceneError
from rigbench.laws.options import options_model
from rigbench.laws.registry import choose, registered
from rigbench.motion.via import ViaMotion
from rigbench.rig import Rates, Run, SceneChoice, simulate
from rigbench.rig.scene import load_file_scene, registered_scenes, scenes_of
from rigbench.scores.of_run import score_run

TRAY6 = Path(__file__).resolve().parents[2] / "robots_demo" / "tray6"
POSES = np.deg2rad([[0, -60, 90, 0, 60, 0], [20, -50, 82, 0, 58, 0]])

FAR_BALL = """
import pybullet

def far_ball(client, body, arm):
    shape = pybullet.createCollisionShape(pybullet.GEOM_SPHERE, radius=0.05, physicsClientId=client)
    pybullet.createMultiBody(0.3, shape, basePosition=[3, 0, 2], physicsClientId=client)
"""


@pytest.fixture(scope="module")
def run():
    choice = choose("computed-torque", options_model(registered().laws["computed-torque"].cls)())
    motion = ViaMotion(points=tuple(map(tuple, POSES.tolist())), leg_s=0.5, rest_s=0.3)
    return Run(ArmFiles.read(TRAY6 / "arm.yaml"), choice, motion, Rates(1000, 1000), motion.points[0], 0.5)


@pytest.fixture
def scene(tmp_path):
    """Write a scene into a file and choose it: scene(text, name)."""

    def build(text, name):
        (tmp_path / "scene.py").write_text(text)
        _, files = load_file_scene(tmp_path / "scene.py", name)
        return SceneChoice(f"scene.py:{name}", files)

    return build


def demo():
    _, files = load_file_scene(TRAY6 / "scene.py", "table_and_tray")
    return SceneChoice("scene.py:table_and_tray", files)


def bits(log):
    return [getattr(log, name).tobytes() for name in ("q", "v", "torque", "limited")], log.residual


def test_the_tray_of_the_demo_scene_reaches_the_arm(run):
    """A tray of 1.5 kg, which the law knows nothing of, lies loose in the gripper all the way: the log says
    that contacts were on, and the speeds were not those foreseen. At rest and without dry friction the
    motors bear what its weight asks, J' w at the tool point, within the 2 mm of play that it has there."""
    smooth = replace(run, arm=run.arm.with_drives([("all", "coulomb", 0.0)]))
    log, empty = simulate(replace(smooth, scene=demo())), simulate(smooth)
    assert log.outcome == "finished"
    assert log.contacts
    assert log.residual > 1e-3
    assert not log.in_doubt
    assert not empty.contacts
    assert empty.residual < 1e-9
    jacobian = tool_jacobian(log.plant.chain(log.gravity), log.q[-1])
    weight = jacobian[2] * 1.5 * 9.81
    np.testing.assert_allclose((log.torque - empty.torque)[-1], weight, atol=1.5 * 9.81 * 0.003)
    assert weight[1] < -7.0
    loaded, bare = (score_run(one, run.motion, 0.5) for one in (log, empty))
    assert 10 * bare["tool_peak_mm"] < loaded["tool_peak_mm"] < 4.0


def test_contacts_that_touch_nothing_change_nothing(run, scene):
    """With a ball that falls beside it the arm moves as alone, but for rounding in what contacts gave it."""
    log, alone = simulate(replace(run, scene=scene(FAR_BALL, "far_ball"))), simulate(run)
    assert log.contacts
    assert log.residual < 1e-9
    np.testing.assert_allclose(log.q, alone.q, atol=1e-10)


def test_a_run_with_a_scene_is_a_function_of_the_run(run, scene):
    """The same bits again after other runs, and what a scene sets in the engine reaches no other run."""
    loose = "import pybullet\n\ndef loose(client, body, arm):\n    pybullet.setPhysicsEngineParameter("
    loose += "numSolverIterations=1, contactBreakingThreshold=0.3, physicsClientId=client)\n"
    with_tray, alone = bits(simulate(replace(run, scene=demo()))), bits(simulate(run))
    simulate(replace(run, scene=scene(loose, "loose")))
    simulate(replace(run, scene=scene(FAR_BALL, "far_ball")))
    assert bits(simulate(replace(run, scene=pickle.loads(pickle.dumps(demo()))))) == with_tray
    assert bits(simulate(run)) == alone


def test_the_key_knows_the_scene_and_the_arm_s_shapes(run, scene):
    """Without a scene a run's inputs are what they were, whatever shapes the arm has; with one, its text and
    the shapes count, comments of the URDF do not."""
    urdf = run.arm.urdf_text
    bare = replace(
        run.arm, urdf_text=urdf.replace("<collision>", "<!--collision>").replace("</collision>", "-->")
    )
    thick = replace(run.arm, urdf_text=urdf.replace('size="0.008 0.029 0.24"', 'size="0.009 0.029 0.24"'))
    said = replace(run.arm, urdf_text=urdf.replace("<robot", "<!-- a remark --><robot"))
    assert "scene" not in run.inputs()
    assert {replace(run, arm=arm).key() for arm in (run.arm, bare, thick, said)} == {run.key()}
    with_scene = replace(run, scene=scene(FAR_BALL, "far_ball"))
    keys = {replace(with_scene, arm=arm).key() for arm in (run.arm, bare, thick)}
    keys |= {run.key(), replace(with_scene, scene=scene(FAR_BALL + "\n# changed", "far_ball")).key()}
    assert len(keys) == 5
    assert replace(with_scene, arm=said).key() == with_scene.key()


FAULTS = {
    "raises": "{}['x']",
    "turns gravity": "pybullet.setGravity(0, 0, 0, physicsClientId=client)",
    "changes the step": "pybullet.setTimeStep(0.01, physicsClientId=client)",
    "moves the arm": "pybullet.resetJointState(body, 1, 0.5, physicsClientId=client)",
    "loads the arm": "pybullet.changeDynamics(body, 5, mass=9, physicsClientId=client)",
    "clears the world": "pybullet.resetSimulation(physicsClientId=client)",
    "hurts the engine": "pybullet.getJointState(99, 0, physicsClientId=client)",
}


@pytest.mark.parametrize(
    ("what", "said"),
    [
        ("raises", "KeyError: 'x'"),
        ("turns gravity", "it changed gravity, which the rig has set"),
        ("changes the step", "it changed the time step"),
        ("moves the arm", "it changed the state of the arm"),
        ("loads the arm", "it changed the masses of the arm"),
        ("clears the world", "it took the arm out of the world"),
        ("hurts the engine", "error: getJointState failed"),
    ],
)
def test_a_scene_that_fails_or_does_what_is_not_its_own_is_named(run, scene, what, said):
    """Nothing is simulated then: the run ends as one whose law raised, with the scene's own traceback."""
    text = f"import pybullet\n\n\ndef bad(client, body, arm):\n    {FAULTS[what]}\n"
    choice = scene(text, "bad")
    with pytest.raises(SceneError) as caught:
        simulate(replace(run, scene=choice))
    error = pickle.loads(pickle.dumps(caught.value))
    assert said in str(error).splitlines()[0]
    assert "scene 'scene.py:bad'" in str(error)
    if what == "raises":
        assert 'File "scene.py", line 5, in bad' in error.trace
        assert "rigbench" not in error.trace
    outcome = do(replace(run, scene=choice))
    assert outcome.outcome == "law-error"
    assert outcome.reason.startswith("scene 'scene.py:bad': ")
    assert said in outcome.reason


def test_faults_of_a_scene_s_file_are_said_when_it_is_loaded(tmp_path):
    """No such file, no such function, one that takes other arguments, a file that raises."""
    with pytest.raises(InputFaults, match=r"can't be read.*expected a Python file with a scene"):
        load_file_scene(tmp_path / "none.py", "build")
    path = tmp_path / "scene.py"
    path.write_text("from math import sin\n\ndef bakery(client, arm):\n    pass\n\nclass Table:\n    pass\n")
    with pytest.raises(InputFaults, match=r"no such function in this file; expected one of bakery \(did you"):
        load_file_scene(path, "bakerie")
    with pytest.raises(InputFaults, match=r"takes \(client, arm\); expected \(client, body, arm\)"):
        load_file_scene(path, "bakery")
    with pytest.raises(InputFaults, match="is not a function"):
        load_file_scene(path, "Table")
    path.write_text("1 / 0\n")
    with pytest.raises(SceneError, match="ZeroDivisionError") as caught:
        load_file_scene(path, "bakery")
    assert 'scene.py", line 1' in caught.value.trace


def test_scenes_of_packages_come_by_entry_points(run):
    """A broken one is named and stops no other; one that isn't here fails when it is built."""
    points = [
        EntryPoint(name, value, "rigbench.scenes")
        for name, value in (
            ("good", "bisect:insort"),  # a function of other arguments
            ("absent", "no_such_module_anywhere:build"),
            ("twice", "a:b"),
            ("twice", "c:d"),
        )
    ]
    found = scenes_of(tuple(points))
    assert not found.scenes
    assert set(dict(found.broken)) == {"good", "absent", "twice"}
    assert not registered_scenes().broken
    with pytest.raises(SceneError, match="no such scene is registered here"):
        simulate(replace(run, scene=SceneChoice("nowhere")))

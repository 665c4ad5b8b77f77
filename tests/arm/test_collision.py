"""The collision shapes of an arm: the engine finds them on the plant where the URDF has them."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pybullet as engine
import pytest

from rigbench.arm.collision import collision
from rigbench.arm.dynamics import mass_matrix
from rigbench.arm.files import ArmFiles
from rigbench.arm.plant_urdf import plant_urdf
from rigbench.errors import InputFaults

TRAY6 = Path(__file__).resolve().parents[2] / "robots_demo" / "tray6"
SHAPES = {engine.GEOM_BOX: "box", engine.GEOM_CYLINDER: "cylinder", engine.GEOM_SPHERE: "sphere"}

BRANCHED = """<robot name="branched"><link name="floor"><collision><geometry><box size="1 2 0.1"/></geometry></collision></link>
<joint name="stand" type="fixed"><parent link="floor"/><child link="post"/><origin xyz="0.1 0 0.5" rpy="0.2 0.1 0.3"/></joint>
<link name="post"><collision><origin xyz="0 0.1 0" rpy="0.5 0 0"/><geometry><sphere radius="0.07"/></geometry></collision></link>
<joint name="shoulder" type="revolute"><parent link="post"/><child link="upper"/><origin xyz="0 0 0.1" rpy="0.2 0 0"/>
 <axis xyz="0 1 0"/><limit lower="-3" upper="3" effort="0" velocity="0"/></joint>
<link name="upper"><inertial><origin xyz="0.2 0.01 0"/><mass value="3"/>
 <inertia ixx="0.01" ixy="0.002" ixz="0.001" iyy="0.04" iyz="0" izz="0.045"/></inertial>
 <collision><origin xyz="0.1 0 0.02" rpy="0.3 -0.4 1.5"/><geometry><cylinder radius="0.05" length="0.3"/></geometry></collision>
 <collision><geometry><mesh filename="upper.stl"/></geometry></collision></link>
<joint name="thumb" type="revolute"><parent link="upper"/><child link="nail"/><origin xyz="0.2 0 0" rpy="0 0.6 0"/>
 <axis xyz="0 0 1"/><limit lower="-1" upper="1" effort="0" velocity="0"/></joint>
<link name="nail"><inertial><mass value="0.4"/><inertia ixx="0.001" ixy="0" ixz="0" iyy="0.001" iyz="0" izz="0.001"/></inertial>
 <collision><origin xyz="0.05 0 0" rpy="0 0 0.2"/><geometry><box size="0.1 0.02 0.03"/></geometry></collision></link>
</robot>"""


@pytest.fixture
def client():
    number = engine.connect(engine.DIRECT)
    yield number
    engine.disconnect(number)


@pytest.fixture
def branched(tmp_path):
    """An arm of one joint with a fixed link before it and a locked one behind; returns a builder."""

    def build(urdf=BRANCHED):
        (tmp_path / "branched.urdf").write_text(urdf)
        (tmp_path / "arm.yaml").write_text(
            "urdf: branched.urdf\ntool: upper\nlock: {thumb: 0.4}\ndrives: {shoulder: {}}\n"
        )
        return ArmFiles.read(tmp_path / "arm.yaml")

    return build


def standing(client, body, positions):
    """Every simple shape of a body in the world, by kind, size and place, in an order of its own."""
    for joint, q in positions.items():
        engine.resetJointState(body, joint, q, physicsClientId=client)
    found = []
    for link in range(-1, engine.getNumJoints(body, physicsClientId=client)):
        if link < 0:
            at = engine.getBasePositionAndOrientation(body, physicsClientId=client)
        else:
            at = engine.getLinkState(body, link, computeForwardKinematics=True, physicsClientId=client)[:2]
        for shape in engine.getCollisionShapeData(body, link, physicsClientId=client):
            if shape[2] in SHAPES:
                place, turned = engine.multiplyTransforms(*at, shape[5], shape[6])
                axes = (
                    np.abs(engine.getMatrixFromQuaternion(turned)) if shape[2] != engine.GEOM_SPHERE else []
                )
                found.append((SHAPES[shape[2]], *np.round([*shape[3], *place, *axes], 5)))
    return sorted(found)


@pytest.mark.parametrize("arm", ["tray6", "branched"])
def test_shapes_stand_on_the_plant_where_the_urdf_has_them(client, branched, tmp_path, arm):
    """Loaded into the engine, the arm's own URDF and the plant have the same shapes in the same places,
    those of fixed and locked links included; and the plant moves as without them."""
    files = ArmFiles.read(TRAY6 / "arm.yaml") if arm == "tray6" else branched()
    found = collision(files)
    (tmp_path / "plant.urdf").write_text(plant_urdf(files.arm(), found.shapes))
    flags = engine.URDF_USE_INERTIA_FROM_FILE | engine.URDF_USE_IMPLICIT_CYLINDER
    load = [files.urdf_path, str(tmp_path / "plant.urdf")]
    if arm == "branched":  # the engine refuses the mesh that isn't there
        (tmp_path / "whole.urdf").write_text(
            BRANCHED.replace('<collision><geometry><mesh filename="upper.stl"/></geometry></collision>', "")
        )
        load[0] = str(tmp_path / "whole.urdf")
    own, plant = (
        engine.loadURDF(path, useFixedBase=True, flags=flags, physicsClientId=client) for path in load
    )
    pose = {i: 0.3 - 0.2 * i for i in range(6)} if arm == "tray6" else {1: 0.7, 2: 0.4}
    at = pose if arm == "tray6" else {0: 0.7}
    theirs, ours = standing(client, own, pose), standing(client, plant, at)
    assert len(theirs) == len(found.shapes) == (23 if arm == "tray6" else 4)
    assert [name for name, *_ in ours] == [name for name, *_ in theirs]
    for one, other in zip(ours, theirs, strict=True):
        np.testing.assert_allclose(one[1:], other[1:], atol=2e-5)
    q = np.array(list(at.values()))
    engine_mass = engine.calculateMassMatrix(plant, q.tolist(), physicsClientId=client)
    np.testing.assert_allclose(engine_mass, mass_matrix(files.arm().chain((0, 0, 0)), q), atol=1e-9)


def test_meshes_are_left_out_and_noted(branched):
    """What can't be carried over is named with its line."""
    (note,) = collision(branched()).notes
    assert note.line == 9
    assert "kind mesh is left out" in str(note)
    assert collision(ArmFiles.read(TRAY6 / "arm.yaml")).notes == ()


def test_no_shapes_leave_the_plant_s_text_as_it_was(branched):
    """Without a scene no shape is written, though the URDF has some."""
    arm = branched().arm()
    assert "collision" not in plant_urdf(arm)
    assert '<link name="base"/>' in plant_urdf(arm)


def test_faults_of_shapes_come_all_at_once(branched):
    """Numbers that are none, sizes that are no sizes and shapes that are missing, each with its line."""
    text = BRANCHED.replace('size="1 2 0.1"', 'size="1 2"').replace('radius="0.07"', 'radius="-1"')
    text = text.replace('length="0.3"', 'length="long"').replace(
        'xyz="0.05 0 0" rpy="0 0 0.2"', 'xyz="1 2 nan"'
    )
    text = text.replace('<mesh filename="upper.stl"/>', "")
    with pytest.raises(InputFaults) as caught:
        collision(branched(text))
    assert [fault.line for fault in caught.value.faults] == [1, 3, 8, 9, 13]
    said = str(caught.value)
    for part in (
        "is not 3 numbers",
        "'radius' of <sphere> is not above 0",
        "is not a number",
        "has no shape",
    ):
        assert part in said

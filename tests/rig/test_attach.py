"""A rig on a world that is already there: the drive feels contacts, and touches nothing but the arm."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pybullet as engine
import pytest

from rigbench.arm import dynamics
from rigbench.arm.arm import Arm, Drives
from rigbench.arm.collision import Shape
from rigbench.arm.files import ArmFiles, load_arm
from rigbench.arm.plant_urdf import plant_urdf
from rigbench.errors import EngineError, InputFaults, LawError
from rigbench.laws import Law
from rigbench.laws.computed_torque import ComputedTorque
from rigbench.laws.gravity_compensated import GravityCompensated
from rigbench.laws.options import options_model
from rigbench.laws.registry import choose
from rigbench.motion.via import ViaMotion
from rigbench.rig import Rates, Rig, Run, simulate, tool_pose
from rigbench.rig.scene import load_file_scene
from rigbench.rig.world import World
from rigbench.scores.of_run import score_run

TRAY6 = Path(__file__).resolve().parents[2] / "robots_demo" / "tray6"
G = 9.81
LIFT, BLOCK = 3.0, 2.0  # kg
DT = 1e-3
RATES = Rates(1000, 1000)
FROM_FILE = engine.URDF_USE_INERTIA_FROM_FILE


@pytest.fixture
def connect():
    """Connect engines with gravity and a time step; they go when the test does."""
    clients = []

    def build(gravity=(0, 0, -G), dt=DT):
        clients.append(engine.connect(engine.DIRECT))
        engine.setGravity(*gravity, physicsClientId=clients[-1])
        engine.setTimeStep(dt, physicsClientId=clients[-1])
        return clients[-1]

    yield build
    for client in clients:
        engine.disconnect(client)


def lift(**drives):
    """A vertical slide of 3 kg."""
    arrays = {name: np.array([float(value)]) for name, value in drives.items()}
    arrays |= {"static": arrays["coulomb"]} if "coulomb" in arrays else {}
    one = np.ones(1)
    return Arm(
        name="lift",
        joints=("up",),
        links=("plate",),
        kinds=one,
        rotation=np.eye(3)[None],
        position=np.zeros((1, 3)),
        axis=np.array([[0.0, 0.0, 1.0]]),
        parameters=np.array([[LIFT, 0, 0, 0, 0.01, 0, 0.01, 0, 0, 0.01]]),
        tool_rotation=np.eye(3),
        tool_position=np.zeros(3),
        lower=-np.inf * one,
        upper=np.inf * one,
        drives=replace(Drives.ideal(1), **arrays),
    )


def lift_world(client, tmp_path, arm, above=None):
    """The lift with a plate of 20 mm; a block at rest ``above`` it [m], if any. Return body and block."""
    path = tmp_path / "lift.urdf"
    path.write_text(plant_urdf(arm, (Shape(1, "box", (("size", "0.4 0.4 0.02"),)),)))
    body = engine.loadURDF(str(path), useFixedBase=True, flags=FROM_FILE, physicsClientId=client)
    block = None
    if above is not None:
        shape = engine.createCollisionShape(
            engine.GEOM_BOX, halfExtents=[0.1, 0.1, 0.04], physicsClientId=client
        )
        block = engine.createMultiBody(
            BLOCK, shape, basePosition=[0, 0, 0.05 + above], physicsClientId=client
        )
        engine.changeDynamics(block, -1, linearDamping=0, angularDamping=0, physicsClientId=client)
    return body, block


class Push(Law):
    """A constant force on a spring and a damper."""

    force: float = 0.0
    stiffness: float = 0.0
    damping: float = 0.0

    def start(self, setup):
        pass

    def torque(self, t, q, v, ref, held):
        return self.force + self.stiffness * (ref.q - q) - self.damping * v


def standing(n=1, seconds=2.0):
    return ViaMotion(points=((0.0,) * n, (0.0,) * n), leg_s=seconds, rest_s=0.0)


def attached(connect, tmp_path, arm, law, above=0.0, **given):
    client = connect()
    body, block = lift_world(client, tmp_path, arm, above)
    return client, block, Rig.attach(client, body, arm, law=law, motion=standing(), rates=RATES, **given)


@pytest.mark.parametrize("rotor", [0.0, 2.0, 30.0])
def test_what_is_carried_is_accelerated_together_with_links_and_rotors(connect, tmp_path, rotor):
    """A lift of mass M with a rotor of inertia Jr at the joint and a loose block m on it: a force F gives
    a = (F - (M + m) g)/(M + m + Jr), and the block weighs m (g + a) on the joint. The engine knows M and m
    alone, so a push of the contact that the rotor doesn't take part in would show."""
    law = Push(force=(LIFT + BLOCK) * G + 10.0)
    *_, rig = attached(connect, tmp_path, lift(rotor_inertia=rotor), law)
    log = rig.run()
    a = 10.0 / (LIFT + BLOCK + rotor)
    assert np.diff(log.v[500:, 0]).mean() / DT == pytest.approx(a, rel=1e-6)
    assert rig.contact_torque[0] == pytest.approx(-BLOCK * (G + a), rel=1e-6)
    assert log.outcome == "finished"
    assert log.contacts
    assert log.residual > 1e-3  # the engine's speed was not the one foreseen
    assert not log.in_doubt


def test_a_spring_sags_by_what_the_block_weighs(connect, tmp_path):
    """Under PD control with the lift's own weight compensated the block's alone makes the error, m g/kp,
    and the motor holds (M + m) g, whatever the rotor."""
    law = Push(force=LIFT * G, stiffness=5e3, damping=800.0)
    *_, rig = attached(connect, tmp_path, lift(rotor_inertia=30.0), law)
    log = rig.run()
    assert log.q_ref[-1, 0] - log.q[-1, 0] == pytest.approx(BLOCK * G / 5e3, rel=1e-5)
    assert log.torque[-1, 0] == pytest.approx((LIFT + BLOCK) * G, rel=1e-5)


def test_dry_friction_holds_what_is_put_on_it(connect, tmp_path):
    """Below breakaway the loaded joint stands, to 1e-12 m in a second, once the block has come to rest;
    above it, it sinks at the rate of the force that is left."""
    law = Push(force=LIFT * G)
    *_, rig = attached(connect, tmp_path, lift(rotor_inertia=5.0, coulomb=1.2 * BLOCK * G), law)
    log = rig.run()
    assert np.ptp(log.q[1000:]) < 1e-12
    *_, rig = attached(connect, tmp_path, lift(rotor_inertia=5.0, coulomb=0.8 * BLOCK * G), law)
    log = rig.run()
    left = -0.2 * BLOCK * G / (LIFT + BLOCK + 5.0)
    assert np.diff(log.v[1000:, 0]).mean() / DT == pytest.approx(left, rel=1e-5)


@pytest.mark.parametrize("rotor", [0.0, 30.0])
def test_a_falling_block_gives_its_momentum_to_links_and_rotors(connect, tmp_path, rotor):
    """With the lift's weight compensated, gravity on the block is all that acts from outside, so
    (M + Jr) V + m v = -m g t before, in and after the impact, to within the share of one step's contact
    force that rotors take for nothing, (1 + Jr/M) m g dt, once the blow is over."""
    arm, law = lift(rotor_inertia=rotor), Push(force=LIFT * G)
    client, block, rig = attached(connect, tmp_path, arm, law, above=0.2)
    lost, step = [], 0
    while rig.step() and step < 400:
        step += 1
        (v,) = engine.getJointState(0, 0, client)[1:2]
        fall = engine.getBaseVelocity(block, client)[0][2]
        lost.append((LIFT + rotor) * v + BLOCK * fall + BLOCK * G * step * DT)
    landing = round(np.sqrt(2 * 0.2 / G) / DT)
    assert np.abs(lost[: landing - 2]).max() < 1e-9
    before = BLOCK * G * landing * DT
    assert np.abs(lost[landing + 50 :]).max() < min(1.2 * (1 + rotor / LIFT) * BLOCK * G * DT, 0.1 * before)


def test_running_into_a_stop_takes_the_momentum_of_links_and_rotors(connect, tmp_path):
    """Without gravity a lift with its rotor runs into a fixed body: the contact's torque over the steps of
    the blow adds up to (M + Jr) v, ten times what the links alone carry."""
    client, rotor, speed = connect(gravity=(0, 0, 0)), 27.0, 0.2
    arm = lift(rotor_inertia=rotor)
    body, _ = lift_world(client, tmp_path, arm)
    shape = engine.createCollisionShape(engine.GEOM_BOX, halfExtents=[0.3, 0.3, 0.1], physicsClientId=client)
    engine.createMultiBody(0, shape, basePosition=[0, 0, 0.1305], physicsClientId=client)
    engine.resetJointState(body, 0, 0.0, speed, physicsClientId=client)
    rig = Rig.attach(client, body, arm, law=Push(), motion=standing(seconds=0.5), rates=RATES)
    impulse = 0.0
    while rig.step():
        impulse += rig.contact_torque[0] * DT
    assert rig.log.v[0, 0] == speed
    assert impulse == pytest.approx((LIFT + rotor) * (rig.log.v[-1, 0] - speed), rel=0.02)
    assert abs(rig.log.v[-1, 0]) < 0.05 * speed
    assert rig.log.q[-1, 0] < 0.0215


# --- tray6 in a world of its own URDF -----------------------------------------------------------------

POSES = np.deg2rad([[0, -60, 90, 0, 60, 0], [40, -40, 75, 0, 55, 0]])
MOTION = ViaMotion(points=tuple(map(tuple, POSES.tolist())), leg_s=0.8, rest_s=0.4)


def demo_scene():
    """The demo scene's module, for its table and its tray."""
    build, _ = load_file_scene(TRAY6 / "scene.py", "table_and_tray")
    return build.__globals__


def tray6_world(client, position=(0, 0, 0), orientation=(0, 0, 0, 1), weighed=True):
    body = engine.loadURDF(
        str(TRAY6 / "tray6.urdf"), position, orientation, useFixedBase=True, flags=FROM_FILE,
        physicsClientId=client,
    )  # fmt: skip
    for joint, q in enumerate(POSES[0]):
        engine.resetJointState(body, joint, q, physicsClientId=client)
    if weighed:  # the engine gives the massless tool point 1 kg
        engine.changeDynamics(body, 6, mass=0, localInertiaDiagonal=(0, 0, 0), physicsClientId=client)
    return body


def tray6_rig(client, body, law=None, arm=None, motion=MOTION, **given):
    arm = load_arm(TRAY6 / "arm.yaml") if arm is None else arm
    law = ComputedTorque() if law is None else law
    return Rig.attach(client, body, arm, law=law, motion=motion, rates=RATES, **given)


def test_a_world_without_contacts_is_the_rig_itself(connect):
    """The arm's own URDF in a world of the user's, attached, runs as the rig's own plant does: both solve
    the same equations, and what is left is rounding in turning full tensors into principal ones."""
    client = connect()
    log = tray6_rig(client, tray6_world(client)).run()
    choice = choose("computed-torque", options_model(ComputedTorque)())
    run = Run(ArmFiles.read(TRAY6 / "arm.yaml"), choice, MOTION, RATES, tuple(POSES[0]), 0.5)
    own = simulate(run)
    np.testing.assert_allclose(log.q, own.q, atol=1e-10)
    np.testing.assert_allclose(log.torque, own.torque, atol=1e-6)
    assert log.residual < 1e-9
    assert not own.contacts
    mine, theirs = score_run(log, MOTION, 0.5), score_run(own, MOTION, 0.5)
    assert mine.keys() == theirs.keys()
    assert mine["tool_peak_mm"] == pytest.approx(theirs["tool_peak_mm"], rel=1e-5)


def test_a_loose_tray_on_the_tool_reaches_the_joints(connect):
    """With a table and a loose tray the law tracks, and at rest each joint carries what the tray's weight
    asks of it, J' w at its centre of gravity, within 2 % of the largest: it still creeps a little."""
    client, scene = connect(), demo_scene()
    body, arm = tray6_world(client), load_arm(TRAY6 / "arm.yaml")
    scene["table"](client)
    tray = scene["tray"](client, *tool_pose(client, body, arm))
    rig = tray6_rig(client, body)
    log = rig.run()
    bare = connect()
    alone = tray6_rig(bare, tray6_world(bare)).run()
    weight = _weight_on_joints(client, body, tray, arm, log.q[-1])
    np.testing.assert_allclose(rig.contact_torque, weight, atol=0.02 * np.abs(weight).max())
    loaded, empty = score_run(log, MOTION, 0.5), score_run(alone, MOTION, 0.5)
    assert log.outcome == "finished"
    assert log.contacts
    assert 10 * empty["tool_peak_mm"] < loaded["tool_peak_mm"] < 4.0
    assert log.torque[-1, 1] - alone.torque[-1, 1] == pytest.approx(
        -weight[1], rel=0.2
    )  # friction holds some


def test_the_tray_s_weight_is_what_the_joints_sag_by(connect):
    """Without friction, PD control with gravity compensation gives way by J' w/kp in each joint."""
    kp = [900.0, 1500.0, 900.0, 200.0, 200.0, 60.0]
    declared = load_arm(TRAY6 / "arm.yaml")
    still = {"coulomb": np.zeros(6), "static": np.zeros(6)}
    arm = declared.replaced(drives=replace(declared.drives, **still))
    client = connect()
    body = tray6_world(client)
    tray = demo_scene()["tray"](client, *tool_pose(client, body, arm))
    law = GravityCompensated(kp=kp, kd=[2 * np.sqrt(k) for k in kp])
    hold = ViaMotion(points=(MOTION.points[0], MOTION.points[0]), leg_s=1.0, rest_s=0.5)
    log = tray6_rig(client, body, law=law, arm=arm, motion=hold).run()
    weight = _weight_on_joints(client, body, tray, arm, log.q[-1])
    sag = (log.q[-1] - log.q_ref[-1]) * kp
    np.testing.assert_allclose(sag, weight, atol=0.01 * np.abs(weight).max())


def _weight_on_joints(client, body, tray, arm, q):
    """What the tray's weight asks of the joints [N m], from where the engine has it."""
    cog = np.array(engine.getBasePositionAndOrientation(tray, client)[0])
    tool = np.array(tool_pose(client, body, arm)[0])
    force = np.array([0, 0, -1.5 * G])
    return dynamics.tool_jacobian(arm.chain((0, 0, -G)), q).T @ np.r_[force, np.cross(cog - tool, force)]


def test_the_rest_of_the_world_is_left_alone(connect):
    """A ball that falls on a table, and another arm whose motors hold it, go to the last bit as they do in
    a world that nobody is attached to; so do the engine's parameters."""
    states, parameters = [], []
    for attach in (True, False):
        client = connect()
        body, other = tray6_world(client), tray6_world(client, position=(3, 0, 0))
        engine.setPhysicsEngineParameter(numSolverIterations=33, physicsClientId=client)
        demo_scene()["table"](client)
        shape = engine.createCollisionShape(engine.GEOM_SPHERE, radius=0.05, physicsClientId=client)
        ball = engine.createMultiBody(0.3, shape, basePosition=[0.22, 0.62, 0.3], physicsClientId=client)
        if attach:
            tray6_rig(client, body).run()
        else:
            for _ in range(round(MOTION.duration_s * 1000)):
                engine.stepSimulation(client)
        held = [s[:2] for s in engine.getJointStates(other, range(6), client)]
        states.append((engine.getBasePositionAndOrientation(ball, client), held))
        parameters.append(engine.getPhysicsEngineParameters(client))
    assert states[0] == states[1]
    assert parameters[0] == parameters[1]
    assert states[0][0][0][2] < 0.11  # the ball has landed
    assert np.abs([s[0] for s in states[0][1]] - POSES[0]).max() < 0.01  # the other arm has not sunk


def test_tick_by_tick_or_in_one_go_are_the_same_bits(connect):
    """Two worlds alike, one run in one go and one stepped, give the same log to the last bit."""
    logs = []
    for stepped in (True, False):
        client = connect()
        body = tray6_world(client)
        demo_scene()["tray"](client, *tool_pose(client, body, load_arm(TRAY6 / "arm.yaml")))
        rig = tray6_rig(client, body)
        steps = 0
        while stepped and rig.step():
            steps += 1
            if steps == 100:
                assert rig.log.outcome == "running"
                assert len(rig.log.t) == 100
                assert score_run(rig.log, MOTION, 0.5) == {}
        logs.append(rig.run())
        assert not rig.step()
    one, other = logs
    assert one.outcome == other.outcome == "finished"
    assert len(one.t) == 1201
    for name in ("q", "v", "torque", "limited"):
        assert getattr(one, name).tobytes() == getattr(other, name).tobytes()


def test_gravity_is_turned_into_the_base_s_frame(connect):
    """An arm that hangs on a wall and is turned about is held by gravity compensation alone: without
    friction it would fall by g t^2/2 otherwise, here it stays within rounding."""
    turned = engine.getQuaternionFromEuler([0.4, 1.2, -0.7])
    client = connect()
    body, declared = tray6_world(client, (0.3, -0.2, 1.0), turned), load_arm(TRAY6 / "arm.yaml")
    world = World(client, body, declared, 1000)
    rotation = np.array(engine.getMatrixFromQuaternion(turned)).reshape(3, 3)
    np.testing.assert_allclose(world.gravity(), rotation.T @ [0, 0, -G], atol=1e-12)
    arm = declared.replaced(drives=replace(Drives.ideal(6), rotor_inertia=0.1 * np.ones(6)))
    law = GravityCompensated(kp=[1e-6] * 6, kd=[1e-6] * 6)
    hold = ViaMotion(points=(MOTION.points[0], MOTION.points[0]), leg_s=0.4, rest_s=0.1)
    log = tray6_rig(client, body, law=law, arm=arm, motion=hold).run()
    assert np.abs(log.q - POSES[0]).max() < 1e-9


HALF = np.sqrt(0.5)
SHUFFLED = """<robot name="two"><link name="floor"/>
<joint name="stand" type="fixed"><parent link="floor"/><child link="post"/><origin xyz="0.1 0 0.5" rpy="0 0 0.3"/></joint>
<link name="post"><inertial><mass value="0"/><inertia ixx="0" ixy="0" ixz="0" iyy="0" iyz="0" izz="0"/></inertial></link>
<joint name="flap" type="revolute"><parent link="post"/><child link="lid"/><origin xyz="0 0.4 0"/>
 <axis xyz="1 0 0"/><limit lower="-1" upper="1" effort="0" velocity="0"/></joint>
<link name="lid"><inertial><mass value="0.2"/><inertia ixx="0.001" ixy="0" ixz="0" iyy="0.001" iyz="0" izz="0.001"/></inertial></link>
<joint name="shoulder" type="revolute"><parent link="post"/><child link="upper"/><origin xyz="0 0 0" rpy="0.2 0 0"/>
 <axis xyz="0 1 0"/><limit lower="-3" upper="3" effort="0" velocity="0"/></joint>
<link name="upper"><inertial><origin xyz="0.2 0.01 0"/><mass value="3"/>
 <inertia ixx="0.01" ixy="0.002" ixz="0.001" iyy="0.04" iyz="0" izz="0.045"/></inertial></link>
<joint name="thumb" type="prismatic"><parent link="lower"/><child link="nail"/><origin xyz="0.2 0 0"/>
 <axis xyz="0 0 1"/><limit lower="-0.1" upper="0.1" effort="0" velocity="0"/></joint>
<link name="nail"><inertial><origin xyz="0 0.05 0"/><mass value="0.4"/>
 <inertia ixx="0.001" ixy="0" ixz="0" iyy="0.001" iyz="0" izz="0.001"/></inertial></link>
<joint name="elbow" type="revolute"><parent link="upper"/><child link="lower"/><origin xyz="0.4 0 0"/>
 <axis xyz="0 1 1"/><limit lower="-3" upper="3" effort="0" velocity="0"/></joint>
<link name="lower"><inertial><origin xyz="0.1 0 0.02" rpy="0 0.4 0"/><mass value="1"/>
 <inertia ixx="0.003" ixy="0" ixz="0" iyy="0.01" iyz="0.001" izz="0.011"/></inertial></link>
</robot>"""


def test_joints_are_found_by_name_and_others_keep_their_motors(connect, tmp_path):
    """In a body with a base plate, a flap and a thumb beside the chain, the arm's joints are driven and the
    thumb, which the arm file locks, stays where its motor holds it."""
    (tmp_path / "two.urdf").write_text(SHUFFLED.replace("0 1 1", f"0 {HALF} {HALF}"))
    lock = "lock: {thumb: 0.03, flap: 0.0}\n"
    drive = "{gear_ratio: 60, rotor_inertia: 1.0e-5}"
    (tmp_path / "arm.yaml").write_text(
        f"urdf: two.urdf\ntool: lower\n{lock}drives: {{shoulder: {drive}, elbow: {drive}}}\n"
    )
    arm, client = load_arm(tmp_path / "arm.yaml"), connect()
    body = engine.loadURDF(
        str(tmp_path / "two.urdf"), [1, 2, 3], useFixedBase=True, flags=FROM_FILE, physicsClientId=client
    )
    names = [engine.getJointInfo(body, i, client)[1].decode() for i in range(5)]
    thumb = names.index("thumb")
    engine.resetJointState(body, thumb, 0.03, physicsClientId=client)
    engine.setJointMotorControl2(
        body, thumb, engine.POSITION_CONTROL, 0.03, force=200, physicsClientId=client
    )
    motion = ViaMotion(points=((0.0, 0.0), (0.5, -0.4)), leg_s=0.6, rest_s=0.2)
    (tmp_path / "long.urdf").write_text(SHUFFLED)
    long = engine.loadURDF(
        str(tmp_path / "long.urdf"), useFixedBase=True, flags=FROM_FILE, physicsClientId=client
    )
    assert "axis of its joint 'elbow' is 1.41421 long" in faults_of(client, long, arm, motion=motion)["body"]
    world = World(client, body, arm, 1000)
    assert [names[i] for i in world.joints] == ["shoulder", "elbow"]
    rig = Rig.attach(client, body, arm, law=ComputedTorque(), motion=motion, rates=RATES)
    log = rig.run()
    assert np.abs(log.q - log.q_ref).max() < 1e-3
    assert engine.getJointState(body, thumb, client)[0] == pytest.approx(0.03, abs=1e-4)


# --- what can't be attached ---------------------------------------------------------------------------


def faults_of(client, body, arm, rates=RATES, motion=MOTION, **given):
    law = given.pop("law", ComputedTorque())
    with pytest.raises(InputFaults) as caught:
        Rig.attach(client, body, arm, law=law, motion=motion, rates=rates, **given)
    assert {fault.file for fault in caught.value.faults} == {"Rig.attach"}
    return {fault.key: str(fault) for fault in caught.value.faults}


def test_what_is_wrong_with_a_world_is_said_before_anything_is_changed(connect):
    """Each trap of the engine is named with what to do, all at once, and the arm's motors stay on."""
    arm, client = load_arm(TRAY6 / "arm.yaml"), connect(dt=1 / 240)
    body = tray6_world(client, weighed=False)
    free = engine.loadURDF(str(TRAY6 / "tray6.urdf"), [3, 0, 1], flags=FROM_FILE, physicsClientId=client)
    said = faults_of(client, free, arm)
    assert "useFixedBase" in said["body"]
    assert "expected physics_hz 240" in said["rates"]
    said = faults_of(client, 99, arm, Rates(240, 240))
    assert f"one of [{body}, {free}]" in said["body"]
    said = faults_of(client, body, arm, Rates(240, 240))
    assert "links without <inertial>: 6;" in said["body"]
    engine.changeDynamics(body, 6, mass=0, localInertiaDiagonal=(0, 0, 0), physicsClientId=client)
    engine.setPhysicsEngineParameter(numSubSteps=4, physicsClientId=client)
    assert "4 substeps" in faults_of(client, body, arm, Rates(240, 240))["client"]
    engine.setPhysicsEngineParameter(numSubSteps=0, physicsClientId=client)
    other = replace(arm, joints=(*arm.joints[:5], "j6b"))
    assert (
        "no joint called 'j6b' (did you mean 'j6'?)"
        in faults_of(client, body, other, Rates(240, 240))["body"]
    )
    slides = replace(arm, kinds=np.array([0.0, 0, 0, 0, 0, 1.0]))
    assert "'j6' is revolute; expected prismatic" in faults_of(client, body, slides, Rates(240, 240))["body"]
    for _ in range(240):
        engine.stepSimulation(client)
    held = [s[0] for s in engine.getJointStates(body, range(6), client)]
    np.testing.assert_allclose(held, POSES[0], atol=0.01)
    tray6_rig_rates = Rig.attach(
        client, body, arm, law=ComputedTorque(), motion=MOTION, rates=Rates(240, 240)
    )
    assert tray6_rig_rates.run().outcome == "finished"


def test_inertia_that_the_engine_made_up_is_found(connect):
    """Loaded without the flag the engine takes inertias from collision shapes: the masses are right, the
    mass matrix is not."""
    client = connect()
    body = engine.loadURDF(str(TRAY6 / "tray6.urdf"), useFixedBase=True, physicsClientId=client)
    engine.changeDynamics(body, 6, mass=0, localInertiaDiagonal=(0, 0, 0), physicsClientId=client)
    assert "URDF_USE_INERTIA_FROM_FILE" in faults_of(client, body, load_arm(TRAY6 / "arm.yaml"))["body"]


def test_arguments_that_do_not_fit_are_said(connect):
    """Joints of the motion and of the model, whole ratios of rates, an engine that isn't there."""
    arm, client = load_arm(TRAY6 / "arm.yaml"), connect()
    body = tray6_world(client)
    said = faults_of(
        client, body, arm, Rates(300, 1000), standing(2), model=lift(), law=ComputedTorque(model_hz=250)
    )
    assert set(said) == {"motion", "model", "rates"}
    assert "control_hz / model_hz is 1.2" in said["rates"]
    assert "no engine is connected as 77" in faults_of(77, body, arm)["client"]


def test_errors_of_law_and_engine_come_as_our_own(connect):
    """A law that raises shows its own traceback; a body that is gone is the engine's failure."""

    class Fragile(Law):
        def start(self, setup):
            pass

        def torque(self, t, q, v, ref, held):
            if t > 0.01:
                raise ValueError("I can't go on")
            return 0 * q

    client = connect()
    body = tray6_world(client)
    rig = tray6_rig(client, body, law=Fragile())
    with pytest.raises(LawError, match="I can't go on") as caught:
        rig.run()
    assert "rig/loop.py" not in caught.value.trace
    rig = tray6_rig(client, body)
    engine.removeBody(body, client)
    with pytest.raises(EngineError, match="stepping"):
        rig.step()

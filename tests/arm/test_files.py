"""Reading an arm: against an independent library, and every fault with its text and line."""

from __future__ import annotations

import pickle
import re
from collections.abc import Mapping
from pathlib import Path

import numpy as np
import pinocchio
import pybullet_data
import pytest

from rigbench.arm.arm import PRISMATIC, REVOLUTE, Arm
from rigbench.arm.declaration import ArmDeclaration, DriveDeclaration, drives_of
from rigbench.arm.dynamics import forward_kinematics, inverse_dynamics
from rigbench.arm.files import ArmFiles, load_arm
from rigbench.errors import InputFaults

SHIPPED = Path(pybullet_data.getDataPath())
GRAVITY = (0.3, -1.2, -9.81)

GANTRY = Path(__file__).parent / "gantry"
ARM, URDF = (GANTRY / "arm.yaml").read_text(), (GANTRY / "a.urdf").read_text()


@pytest.fixture
def here(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """An empty current folder, so that messages name files as short as a user would."""
    monkeypatch.chdir(tmp_path)
    return tmp_path


def read(arm: str = ARM, urdf: str = URDF) -> Arm:
    """Write both files and read them."""
    Path("arm.yaml").write_text(arm, "utf-8")
    Path("a.urdf").write_text(urdf, "utf-8")
    return load_arm("arm.yaml")


def assert_same_as_library(arm: Arm, urdf: str, tool: str, lock: Mapping[str, float]) -> None:
    """Compare an arm with the library's reduced model: parameters, tool pose and inverse dynamics.

    Tolerance 1e-12 relative to the largest entry: a few thousand roundings of 1e-16 each.
    """
    model = pinocchio.buildModelFromXML(urdf)
    neutral = pinocchio.neutral(model)
    for name, position in lock.items():
        joint = model.joints[model.getJointId(name)]
        turned = joint.nq == 2  # the library holds an unbounded angle as its cosine and sine
        neutral[joint.idx_q : joint.idx_q + joint.nq] = (
            (np.cos(position), np.sin(position)) if turned else position
        )
    model = pinocchio.buildReducedModel(model, [model.getJointId(name) for name in lock], neutral)
    model.gravity.linear = np.array(GRAVITY)
    data = model.createData()
    assert tuple(model.names)[1:] == arm.joints
    ours = np.array([model.inertias[i].toDynamicParameters() for i in range(1, model.njoints)])
    np.testing.assert_allclose(arm.parameters, ours, rtol=1e-12, atol=1e-13 * np.abs(ours).max())
    rng = np.random.default_rng(7)
    chain = arm.chain(GRAVITY)
    for _ in range(5):
        q, v, a = rng.uniform(-1.5, 1.5, (3, arm.n))
        inside = pinocchio.integrate(model, pinocchio.neutral(model), q)
        expected = pinocchio.rnea(model, data, inside, v, a)
        np.testing.assert_allclose(
            inverse_dynamics(chain, q, v, a), expected, rtol=0, atol=1e-12 * np.abs(expected).max()
        )
        pinocchio.framesForwardKinematics(model, data, inside)
        pose = data.oMf[model.getFrameId(tool)]
        placed = forward_kinematics(chain, q)[-1]
        np.testing.assert_allclose(placed[:9].reshape(3, 3), pose.rotation, rtol=0, atol=1e-13)
        np.testing.assert_allclose(placed[9:], pose.translation, rtol=0, atol=1e-13)


@pytest.mark.parametrize(
    ("lock", "tool"),
    [
        ({"grip_a": 0.02, "grip_b": 0.02}, "tip"),
        ({"grip_a": 0.03, "grip_b": 0.0, "tilt": 0.7}, "finger_a"),
        ({"grip_a": 0.03, "grip_b": 0.0, "swing": -0.4}, "hand"),
        ({"grip_a": 0.03, "grip_b": 0.01, "lift": 0.25, "wrist": 1.0}, "tip"),
        ({"grip_b": 0.01, "swing": 1.0, "lift": 0.1}, "finger_a"),
    ],
    ids=["fingers", "mid-chain", "base", "several", "finger-moves"],
)
def test_reader_agrees_with_an_independent_library(here: Path, lock: dict[str, float], tool: str) -> None:
    """Skew axes, turned origins, side branches, locked joints on and off the chain: all merge alike."""
    drives = "".join(f"  {j}: {{}}\n" for j in ("swing", "lift", "tilt", "wrist", "grip_a") if j not in lock)
    arm = read(f"urdf: a.urdf\ntool: {tool}\nlock: {lock}\ndrives:\n{drives}".replace("'", ""))
    assert_same_as_library(arm, URDF, tool, lock)


def test_kinds_limits_and_names(here: Path) -> None:
    """Joints keep their order, kind and limits; an effort or velocity limit of the URDF acts, 0 is none."""
    arm = read()
    assert arm.name == "gantry"
    assert arm.joints == ("swing", "lift", "tilt", "wrist")
    assert arm.links == ("column", "slide", "spare", "hand")
    assert arm.kinds.tolist() == [REVOLUTE, PRISMATIC, REVOLUTE, REVOLUTE]
    assert arm.lower.tolist() == [-np.inf, -0.5, -1, -2]
    assert arm.upper.tolist() == [np.inf, 0.8, 2, 2]
    assert arm.drives.torque_limit.tolist() == [90, 400, 60, np.inf]
    assert arm.drives.speed_limit.tolist() == [np.inf, 0.7, 3, np.inf]
    np.testing.assert_allclose(arm.axis[0], np.array([1, 2, -2]) / 3, rtol=1e-15)
    assert [str(note) for note in arm.notes] == [
        "a.urdf:15: the mesh file looks/slide.stl can't be found (only looks are affected)"
    ]


def test_horizontal_cart_and_pole(here: Path) -> None:
    """A slide that carries a pendulum obeys the closed form (from memory, as in any textbook).

    Force = (M + m) a + m l (cos(q) w' - sin(q) w^2); torque = m l cos(q) a + (I + m l^2) w' + m g l sin(q),
    with the pendulum hanging down at q = 0 and lifting towards +x.
    """
    urdf = """<robot name="cart">
      <link name="rail"/>
      <link name="cart"><inertial><mass value="3"/>
        <inertia ixx="1" ixy="0" ixz="0" iyy="1" iyz="0" izz="1"/></inertial></link>
      <link name="pole"><inertial><origin xyz="0 0 -0.6"/><mass value="0.5"/>
        <inertia ixx="0.02" ixy="0" ixz="0" iyy="0.02" iyz="0" izz="0.001"/></inertial></link>
      <joint name="slide" type="prismatic"><parent link="rail"/><child link="cart"/>
        <limit lower="-1" upper="1"/></joint>
      <joint name="hinge" type="continuous"><parent link="cart"/><child link="pole"/>
        <axis xyz="0 -1 0"/></joint></robot>"""
    arm = read("urdf: a.urdf\ntool: pole\ndrives: {slide: {}, hinge: {}}", urdf)
    q, w, a, alpha = 0.8, 1.3, -0.7, 2.1
    force = 3.5 * a + 0.3 * (np.cos(q) * alpha - np.sin(q) * w**2)
    torque = 0.3 * np.cos(q) * a + (0.02 + 0.5 * 0.36) * alpha + 0.3 * 9.81 * np.sin(q)
    tau = inverse_dynamics(
        arm.chain((0, 0, -9.81)), np.array([0.2, q]), np.array([0.4, w]), np.array([a, alpha])
    )
    np.testing.assert_allclose(tau, [force, torque], rtol=1e-13)


def shipped_arm(folder: Path, urdf: str, text: str, tool: str, lock: Mapping[str, float]) -> Arm:
    """Read an open data file as an arm whose movable joints all have a bare drive."""
    path = folder / "arm.yaml"
    model = pinocchio.buildModelFromXML(text)
    drives = "".join(f"  {name}: {{}}\n" for name in list(model.names)[1:] if name not in lock)
    held = "".join(f"  {name}: {position}\n" for name, position in lock.items()) or "  {}\n"
    path.write_text(f"urdf: {urdf}\ntool: {tool}\nlock:\n{held}drives:\n{drives}")
    return load_arm(path)


OTHER_LEGS = {f"{leg}_{part}_joint": -1.0 for leg in ("FR", "FL", "RL") for part in ("hip", "upper", "lower")}
DROID = ("right_front_wheel", "right_back_wheel", "left_front_wheel", "left_back_wheel", "right_gripper")


@pytest.mark.parametrize(
    ("file", "tool", "lock"),
    [
        ("kuka_iiwa/model.urdf", "lbr_iiwa_link_7", {}),
        ("cartpole.urdf", "pole", {}),
        ("pendulum5.urdf", "link4", {}),
        ("a1/a1.urdf", "RR_lower", {name: -1.2 if "lower" in name else 0.3 for name in OTHER_LEGS}),
        ("r2d2.urdf", "left_tip", {"head_swivel": 0.4} | {f"{name}_joint": 0.2 for name in DROID}),
    ],
)
def test_open_data_files_agree_with_the_library(
    tmp_path: Path, file: str, tool: str, lock: dict[str, float]
) -> None:
    """Files that others made, as the physics engine's data package ships them, are read as the library does."""
    text = (SHIPPED / file).read_text()
    arm = shipped_arm(tmp_path, str(SHIPPED / file), text, tool, lock)
    assert_same_as_library(arm, text, tool, lock)


def test_open_data_file_with_impossible_links(tmp_path: Path) -> None:
    """A shipped arm whose published inertias miss the triangle inequality by 0.7 % and 13 % is refused."""
    file = SHIPPED / "xarm/xarm6_robot.urdf"
    with pytest.raises(InputFaults) as caught:
        shipped_arm(tmp_path, str(file), file.read_text(), "link6", {})
    assert [(fault.line, fault.key, fault.problem) for fault in caught.value.faults] == [
        (
            109,
            "link link2",
            "its principal inertias are 0.00305792, 0.0236436, 0.0268997 kg m^2, which no body has",
        ),
        (
            137,
            "link link3",
            "its principal inertias are 0.00202307, 0.00429974, 0.0073062 kg m^2, which no body has",
        ),
    ]


def test_open_data_file_with_fingers(tmp_path: Path) -> None:
    """A shipped arm with fingers: what to lock is said; its massless frames with inertia are added as the
    library adds them, and each is named."""
    file = SHIPPED / "franka_panda/panda.urdf"
    text = file.read_text()
    tool, lock = "panda_grasptarget", {"panda_finger_joint1": 0.02, "panda_finger_joint2": 0.03}
    with pytest.raises(InputFaults) as caught:
        shipped_arm(tmp_path, str(file), text, tool, {})
    assert "'lock: {panda_finger_joint1: 0.0, panda_finger_joint2: 0.0}' in the arm file" in str(caught.value)
    arm = shipped_arm(tmp_path, str(file), text, tool, lock)
    assert arm.n == 7
    assert_same_as_library(arm, text, tool, lock)
    assert [(note.key, note.problem) for note in arm.notes if note.key.startswith("link")] == [
        (
            f"link {name}",
            "its mass is 0 kg, but it has inertia (added as it stands to link panda_link7, which carries it)",
        )
        for name in ("panda_link8", "panda_grasptarget")
    ]
    # without mass its place doesn't count: the body's inertia grows by the tensor of each, 0.1 kg m^2 alike
    weightless = re.compile(r'(<mass value="0.0"/>\s*)<inertia [^>]*>')
    nothing = '<inertia ixx="0" ixy="0" ixz="0" iyy="0" iyz="0" izz="0"/>'
    mended = tmp_path / "mended.urdf"
    mended.write_text(weightless.sub(lambda found: found[1] + nothing, text))
    bare = shipped_arm(tmp_path, str(mended), text, tool, lock)
    added = np.zeros((7, 10))
    added[-1] = [0, 0, 0, 0, 0.2, 0, 0.2, 0, 0, 0.2]
    np.testing.assert_allclose(arm.parameters - bare.parameters, added, atol=1e-14)


MASSLESS = (
    '<link name="tip"><inertial><origin xyz="1 2 3"/><mass value="0"/>'
    '<inertia ixx="{}" ixy="0" ixz="0" iyy="{}" iyz="0" izz="{}"/></inertial></link>'
)


@pytest.mark.parametrize(
    ("moments", "said"),
    [
        # no body has 1, 0, 0 either, but it takes no inertia away
        ((1e-4, 0, 0), None),
        ((1e-4, 1e-4, -1e-4), "link tip: its mass is 0 kg, but it has inertia; expected a mass above 0 and"),
        (
            (9, 0, 0),
            "link hand: with all that is fixed to it, its principal inertias about the centre of gravity",
        ),
    ],
)
def test_inertia_without_mass_must_not_take_any_away(
    here: Path, moments: tuple[float, float, float], said: str | None
) -> None:
    """A massless frame's inertia is added if it is at least 0 about every axis, and the body that results
    is judged as any other; one with less than 0 about an axis is a fault."""
    urdf = URDF.replace('<link name="tip"/>', MASSLESS.format(*moments))
    assert urdf != URDF
    if said is None:
        assert_same_as_library(read(urdf=urdf), urdf, "tip", {"grip_a": 0.02, "grip_b": 0.02})
        return
    with pytest.raises(InputFaults) as caught:
        read(urdf=urdf)
    (fault,) = caught.value.faults
    assert said in str(fault)


def test_drives_carry_over_to_the_joint() -> None:
    """Torque by G, speed by 1/G, viscous by G^2, Coulomb by G (also onto breakaway); the tighter limit acts."""
    ideal = DriveDeclaration()
    geared = DriveDeclaration(
        gear_ratio=50, rotor_inertia=1e-5, motor_torque_limit=2, motor_speed_limit=300, motor_viscous=1e-4,
        motor_coulomb=0.02, viscous=3, coulomb=4, static=6, stribeck_speed=0.1, torque_limit=120,
        speed_limit=5, torque_lag_ms=0.5,
    )  # fmt: skip
    rated = DriveDeclaration(gear_ratio=50, motor_torque_limit=2, motor_speed_limit=300, torque_limit=80)
    effort = np.array([7.0, np.inf, 90.0])
    velocity = np.array([np.inf, np.inf, 4.0])
    drives = drives_of([ideal, geared, rated], effort, velocity)
    assert drives.torque_limit.tolist() == [7, 100, 80]
    assert drives.speed_limit.tolist() == [np.inf, 5, 4]
    np.testing.assert_allclose(drives.viscous, [0, 3 + 2500e-4, 0])
    np.testing.assert_allclose(drives.coulomb, [0, 5, 0])
    np.testing.assert_allclose(drives.static, [0, 7, 0])
    assert drives.stribeck_speed.tolist() == [1, 0.1, 1]
    np.testing.assert_allclose(drives.reflected, [0, 0.025, 0])
    assert drives.torque_lag.tolist() == [0, 5e-4, 0]
    assert drives.gear_ratio.tolist() == [1, 50, 50]


def test_impossible_base_is_a_note(here: Path) -> None:
    """What doesn't move has no dynamics, so an odd inertia in it stops nobody."""
    odd = '<link name="base"><inertial><mass value="0"/><inertia ixx="1" ixy="0" ixz="0" iyy="1" iyz="0" izz="1"/>'
    arm = read(urdf=URDF.replace('<link name="base"/>', odd + "</inertial></link>"))
    assert str(arm.notes[0]) == (
        "a.urdf:3: link base: its mass is 0 kg, but it has inertia (without effect: it is part of the base)"
    )


def test_digest_follows_the_numbers_only(here: Path) -> None:
    """Comments, looks and defaults written out leave the digest alone; any number that acts changes it."""
    read()
    files = ArmFiles.read("arm.yaml")
    same = ArmFiles(
        "other.yaml",
        ARM.replace("{coulomb: 1}", "{coulomb: 1, viscous: 0} # why"),
        "b.urdf",
        URDF.replace("looks/slide.stl", "x.stl").replace("<link", "<!-- -->\n<link", 1),
    )
    assert same.digest == files.digest
    changed = {
        ArmFiles("arm.yaml", ARM.replace("coulomb: 1", "coulomb: 1.0001"), "a.urdf", URDF).digest,
        ArmFiles("arm.yaml", ARM.replace("grip_a: 0.02", "grip_a: 0.021"), "a.urdf", URDF).digest,
        ArmFiles("arm.yaml", ARM, "a.urdf", URDF.replace('upper="2"', 'upper="2.1"')).digest,
        ArmFiles("arm.yaml", ARM, "a.urdf", URDF.replace("0.01 0.02 0.15", "0.01 0.02 0.16")).digest,
        ArmFiles(
            "arm.yaml", ARM.replace("wrist", "hinge"), "a.urdf", URDF.replace('"wrist"', '"hinge"')
        ).digest,
    }
    assert len(changed | {files.digest}) == 6


def test_files_travel_by_pickle_and_give_the_same_object(here: Path) -> None:
    """A worker elsewhere makes the arm from the texts alone; a second call costs nothing."""
    read()
    files = ArmFiles.read("arm.yaml")
    Path("a.urdf").unlink()
    again = pickle.loads(pickle.dumps(files))
    assert again == files
    assert again.digest == files.digest
    assert again.arm() is files.arm()


def test_schema_of_the_arm_file() -> None:
    """The JSON Schema names every key with its unit, for editors."""
    schema = ArmDeclaration.model_json_schema()
    drive = schema["$defs"]["DriveDeclaration"]["properties"]
    assert set(schema["properties"]) == {"urdf", "tool", "lock", "drives"}
    assert all(entry["description"] for entry in (*drive.values(), *schema["properties"].values()))

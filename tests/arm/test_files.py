"""Reading an arm: against an independent library, and every fault with its text and line."""

from __future__ import annotations

import pickle
from collections.abc import Mapping
from pathlib import Path

import numpy as np
import pinocchio
import pybullet_data
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rigbench.arm.arm import PRISMATIC, REVOLUTE, Arm
from rigbench.arm.declaration import ArmDeclaration, DriveDeclaration, drives_of
from rigbench.arm.dynamics import forward_kinematics, inverse_dynamics
from rigbench.arm.files import ArmFiles, load_arm
from rigbench.errors import InputFaults

SHIPPED = Path(pybullet_data.getDataPath())
GRAVITY = (0.3, -1.2, -9.81)

URDF = """\
<?xml version="1.0"?>
<robot name="gantry">
  <link name="base"/>
  <link name="column">
    <inertial><origin xyz="0.1 -0.2 0.3" rpy="0.3 0.2 -0.5"/><mass value="5"/>
      <inertia ixx="0.3" ixy="0.01" ixz="-0.02" iyy="0.2" iyz="0.03" izz="0.25"/></inertial>
  </link>
  <link name="bracket">
    <inertial><origin xyz="0.02 0 0"/><mass value="0.5"/>
      <inertia ixx="0" ixy="0" ixz="0" iyy="0" iyz="0" izz="0"/></inertial>
  </link>
  <link name="slide">
    <inertial><origin xyz="0 0.05 0.1"/><mass value="3"/>
      <inertia ixx="0.03" ixy="0" ixz="0" iyy="0.03" iyz="0" izz="0.01"/></inertial>
    <visual><geometry><mesh filename="looks/slide.stl"/></geometry></visual>
  </link>
  <link name="spare">
    <inertial><origin xyz="0 0 0.3"/><mass value="1"/>
      <inertia ixx="0.02" ixy="0" ixz="0" iyy="0.02" iyz="0" izz="0.01"/></inertial>
  </link>
  <link name="hand">
    <inertial><mass value="1"/>
      <inertia ixx="0.01" ixy="0" ixz="0" iyy="0.01" iyz="0" izz="0.01"/></inertial>
  </link>
  <link name="finger_a">
    <inertial><mass value="0.1"/>
      <inertia ixx="1e-4" ixy="0" ixz="0" iyy="1e-4" iyz="0" izz="1e-4"/></inertial>
  </link>
  <link name="finger_b">
    <inertial><mass value="0.1"/>
      <inertia ixx="1e-4" ixy="0" ixz="0" iyy="1e-4" iyz="0" izz="1e-4"/></inertial>
  </link>
  <link name="tip"/>

  <joint name="swing" type="continuous">
    <parent link="base"/><child link="column"/>
    <origin xyz="0 0.1 0.4" rpy="0.1 -0.4 1.2"/><axis xyz="1 2 -2"/>
  </joint>
  <joint name="weld" type="fixed">
    <parent link="column"/><child link="bracket"/>
    <origin xyz="0.2 0 0.1" rpy="1 0.5 -2"/>
  </joint>
  <joint name="lift" type="prismatic">
    <parent link="bracket"/><child link="slide"/>
    <origin xyz="0 0 0.2" rpy="0.3 0 0"/><axis xyz="0 0.6 0.8"/>
    <limit lower="-0.5" upper="0.8" effort="400" velocity="0.7"/>
  </joint>
  <joint name="tilt" type="revolute">
    <parent link="slide"/><child link="spare"/>
    <origin xyz="0.1 0 0.3" rpy="0 0.7 0"/><axis xyz="0 1 1"/>
    <limit lower="-1" upper="2" effort="60" velocity="3"/>
  </joint>
  <joint name="wrist" type="revolute">
    <parent link="spare"/><child link="hand"/>
    <origin xyz="0 0 0.3" rpy="0 0 0.4"/><axis xyz="1 0 0"/>
    <limit lower="-2" upper="2" effort="0" velocity="0"/>
  </joint>
  <joint name="grip_a" type="prismatic">
    <parent link="hand"/><child link="finger_a"/>
    <origin xyz="0 0.01 0.1"/><axis xyz="0 1 0"/>
    <limit lower="0.01" upper="0.04"/>
  </joint>
  <joint name="grip_b" type="prismatic">
    <parent link="hand"/><child link="finger_b"/>
    <origin xyz="0 -0.01 0.1"/><axis xyz="0 -1 0"/>
    <limit lower="0" upper="0.04"/>
    <mimic joint="grip_a"/>
  </joint>
  <joint name="nose" type="fixed">
    <parent link="hand"/><child link="tip"/>
    <origin xyz="0.01 0.02 0.15" rpy="0.2 0.1 0"/>
  </joint>
</robot>
"""

ARM = """\
urdf: a.urdf
tool: tip
lock: {grip_a: 0.02, grip_b: 0.02}
drives:
  swing: {gear_ratio: 100, rotor_inertia: 2e-5, torque_limit: 90}
  lift: {gear_ratio: 200, rotor_inertia: 1e-5}
  tilt: {coulomb: 2}
  wrist: {coulomb: 1}
"""


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
        neutral[model.joints[model.getJointId(name)].idx_q] = position
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
        "a.urdf:18: the mesh file looks/slide.stl can't be found (only looks are affected)"
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


@pytest.mark.parametrize(
    ("file", "tool"),
    [
        ("kuka_iiwa/model.urdf", "lbr_iiwa_link_7"),
        ("xarm/xarm6_robot.urdf", "link6"),
        ("cartpole.urdf", "pole"),
    ],
)
def test_open_data_files_agree_with_the_library(tmp_path: Path, file: str, tool: str) -> None:
    """Files that others made, as the physics engine's data package ships them, are read like the library does."""
    text = (SHIPPED / file).read_text()
    arm = shipped_arm(tmp_path, str(SHIPPED / file), text, tool, {})
    assert_same_as_library(arm, text, tool, {})


def test_open_data_file_with_fingers_and_an_impossible_link(tmp_path: Path) -> None:
    """One shipped arm has a massless flange with inertia: a fault as it stands, an arm once that is mended."""
    file = SHIPPED / "franka_panda/panda.urdf"
    text = file.read_text()
    lock = {"panda_finger_joint1": 0.02, "panda_finger_joint2": 0.02}
    with pytest.raises(InputFaults) as caught:
        shipped_arm(tmp_path, str(file), text, "panda_grasptarget", lock)
    flange = line_of(text, '<mass value="0.0"/>') - 2
    assert f"{file}:{flange}: link panda_link8: its mass is 0 kg, but it has inertia" in str(caught.value)

    mended = tmp_path / "mended.urdf"
    head, flange_mass, tail = text.partition('<mass value="0.0"/>')
    mended.write_text(head + flange_mass + tail.replace('"0.1"', '"0"', 3))
    for wrong in ('<inertia ixx="0.1" ixy="0"',):
        assert wrong in text
    with pytest.raises(InputFaults) as caught:
        shipped_arm(tmp_path, str(mended), text, "panda_grasptarget", {})
    assert "lock: {panda_finger_joint1: 0.0, panda_finger_joint2: 0.0}" in str(caught.value)


def line_of(text: str, marker: str) -> int:
    """Line (from 1) of the first place where ``marker`` stands."""
    assert marker in text, marker
    return text[: text.index(marker)].count("\n") + 1


INERTIA = '<inertia ixx="0.01" ixy="0" ixz="0" iyy="0.01" iyz="0" izz="0.01"/>'
HAND = f'<inertial><mass value="1"/>\n      {INERTIA}</inertial>'
LIFT = '<limit lower="-0.5" upper="0.8" effort="400" velocity="0.7"/>'
KINDS = "revolute, continuous, prismatic, fixed, floating, planar"

URDF_FAULTS: dict[str, tuple[list[tuple[str, str]], list[tuple[str, str]]]] = {
    # name: (edits of the URDF), (text on the line of the fault, what the fault says)
    "not XML": ([("</robot>", "")], [("", "not valid XML: no element found")]),
    "tag": ([('<link name="tip"/>', '<link name="tip">')], [("</robot>", "not valid XML: mismatched tag")]),
    "document type": (
        [("<robot", '<!DOCTYPE robot [<!ENTITY a "b">]>\n<robot')],
        [("<!DOCTYPE", "a document type (DOCTYPE) is not allowed; expected a plain URDF")],
    ),
    "template": (
        [('<link name="tip"/>', '<link name="tip"/>\n<xacro:arm/>')],
        [
            (
                "<xacro",
                "<xacro:arm> belongs to a template, not to a URDF: expand it first; expected a plain URDF",
            )
        ],
    ),
    "deep": (
        [('<link name="tip"/>', "<a>" * 70 + "</a>" * 70)],
        [("<a><a>", "nested more than 60 deep; expected a plain URDF")],
    ),
    "other XML": (
        [('<robot name="gantry">', "<arm>"), ("</robot>", "</arm>")],
        [("<arm>", "its outermost element is <arm>; expected <robot>")],
    ),
    "link twice": (
        [('<link name="tip"/>', '<link name="base"/>')],
        [
            ('<link name="base"/>\n\n', "link base: the name is taken, by the link on line 3; expected names that differ"),
            ('name="nose"', "joint nose: no link is called 'tip'"),
        ],
    ),
    "joint twice": (
        [('name="nose"', 'name="weld"')],
        [
            (
                '<joint name="weld" type="fixed">\n    <parent link="hand"/>',
                "joint weld: the name is taken, by the joint on line 43; expected names that differ",
            )
        ],
    ),
    "no name": ([('<link name="tip"/>', '<link name="tip"/><link/>')], [("<link/>", "link: it has no name")]),
    "unknown parent": (
        [('<parent link="spare"/>', '<parent link="sparre"/>')],
        [('name="wrist"', "joint wrist: no link is called 'sparre' (did you mean 'spare'?)")],
    ),
    "no child": (
        [('<child link="tip"/>', "")],
        [('name="nose"', 'joint nose: no child link is given; expected <child link="..."/>')],
    ),
    "joint type": (
        [('name="tilt" type="revolute"', 'name="tilt" type="revolut"')],
        [
            (
                'name="tilt"',
                f"joint tilt: the type 'revolut' is not known; expected {KINDS} (did you mean 'revolute'?)",
            )
        ],
    ),
    "zero axis": (
        [('<axis xyz="1 0 0"/>', '<axis xyz="0 0 0"/>')],
        [('"0 0 0"/>\n    <limit', "joint wrist: its axis has no length; expected a direction, such as 0 0 1")],
    ),
    "axis": (
        [('<axis xyz="1 0 0"/>', '<axis xyz="1 0"/>')],
        [('"1 0"', 'joint wrist: xyz="1 0" of <axis> is not 3 numbers; expected 3 numbers')],
    ),
    "number": (
        [('<mass value="3"/>', '<mass value="3 kg"/>')],
        [('"3 kg"', 'link slide: value="3 kg" of <mass> is not a number; expected a number')],
    ),
    "huge": (
        [('<mass value="3"/>', '<mass value="1e300"/>')],
        [('"1e300"', 'link slide: value="1e300" of <mass> is not a number; expected a number')],
    ),
    "not a number": (
        [('<mass value="3"/>', '<mass value="nan"/>')],
        [('"nan"', 'link slide: value="nan" of <mass> is not a number; expected a number')],
    ),
    "no limit": (
        [(LIFT, "")],
        [
            (
                'name="lift"',
                'joint lift: a prismatic joint lacks <limit>; expected <limit lower=".." upper=".."/>',
            )
        ],
    ),
    "limits crossed": (
        [(LIFT, '<limit lower="1" upper="0.8"/>')],
        [('lower="1"', "joint lift: its lower limit 1 is above its upper limit 0.8")],
    ),
    "no inertia entry": (
        [('<inertia ixx="0.01" ixy="0"', '<inertia ixx="0.01"')],
        [('<inertia ixx="0.01" ixz', "link hand: <inertia> lacks 'ixy'; expected ixy=\"...\"")],
    ),
    "no inertia": ([(INERTIA, "")], [('<inertial><mass value="1"/>\n      <', "link hand: <inertial> lacks <inertia>")]),
    "negative mass": (
        [('<mass value="3"/>', '<mass value="-3"/>')],
        [('<inertial><origin xyz="0 0.05', "link slide: its mass is -3 kg")],
    ),
    "mass 0": (
        [('<mass value="3"/>', '<mass value="0"/>')],
        [('<inertial><origin xyz="0 0.05', "link slide: its mass is 0 kg, but it has inertia")],
    ),
    "triangle": (
        # the example of an impossible body in Wensing, Kim, Slotine 2018: principal inertias 1, 1, 3
        [(INERTIA, '<inertia ixx="1" ixy="0" ixz="0" iyy="1" iyz="0" izz="3"/>')],
        [
            (
                '<inertial><mass value="1"/>\n      <inertia ixx="1"',
                "link hand: its principal inertias are 1, 1, 3 kg m^2: one of them is negative or above "
                "the sum of the other two",
            )
        ],
    ),
    "not positive": (
        [(INERTIA, '<inertia ixx="0.1" ixy="0.2" ixz="0" iyy="0.1" iyz="0" izz="0.1"/>')],
        [
            (
                '<inertial><mass value="1"/>\n      <inertia ixx="0.1"',
                "link hand: its principal inertias are -0.1, 0.1, 0.3 kg m^2: one of them is negative or "
                "above the sum of the other two",
            )
        ],
    ),
    "no mass": (
        [('<mass value="3"/>', '<mass value="0"/>'), ('ixx="0.03"', 'ixx="0"'), ('iyy="0.03"', 'iyy="0"'),
         ('izz="0.01"/></inertial>\n    <visual>', 'izz="0"/></inertial>\n    <visual>')],
        [
            (
                '<link name="slide">',
                "link slide: it moves (joint lift) but has no mass, nor has what is fixed to it; expected an "
                "<inertial> with a mass above 0",
            )
        ],
    ),
    "point mass": (
        [('ixx="0.03"', 'ixx="0"'), ('iyy="0.03"', 'iyy="0"'),
         ('izz="0.01"/></inertial>\n    <visual>', 'izz="0"/></inertial>\n    <visual>')],
        [
            (
                '<link name="slide">',
                "link slide: with all that is fixed to it, its principal inertias about the centre of gravity "
                "are 0, 0, 0 kg m^2, and in a body that can exist each is less than the sum of the other two; "
                "expected the inertia of a body with extent in all directions",
            )
        ],
    ),
    "floating": (
        [('name="tilt" type="revolute"', 'name="tilt" type="floating"')],
        [
            (
                'name="tilt"',
                "joint tilt: a floating joint can't be part of an arm; expected revolute, continuous or prismatic",
            )
        ],
    ),
    "floating aside": (
        [('<link name="tip"/>', '<link name="tip"/>\n<link name="kite"/>\n<joint name="rope" type="planar">'
          '<parent link="hand"/><child link="kite"/></joint>')],
        [('name="rope"', "joint rope: a planar joint can't be part of an arm; expected a fixed joint")],
    ),
    "two parents": (
        [('<child link="tip"/>', '<child link="hand"/>'), ('<parent link="hand"/><child link="hand"/>',
          '<parent link="spare"/><child link="hand"/>')],
        [
            (
                'name="nose"',
                "joint nose: its child 'hand' hangs on joint wrist (line 57) already; expected one parent for "
                "each link",
            ),
            ('<link name="tip"/>', "link tip: no joint holds it, as none holds 'base' (line 3); expected one base link"),
        ],
    ),
    "two bases": (
        [('<link name="tip"/>', '<link name="tip"/><link name="table"/>')],
        [
            (
                '<link name="table"/>',
                "link table: no joint holds it, as none holds 'base' (line 3); expected one base link",
            )
        ],
    ),
    "loop": (
        [('<parent link="base"/>', '<parent link="hand"/>'), ('<link name="base"/>', "")],
        [('name="swing"', "joint swing: the joints around it form a loop; expected a chain from one base link")],
    ),
    "still": (
        [('lower="-2" upper="2"', 'lower="1" upper="1"')],
        [
            (
                'name="wrist"',
                "joint wrist: its limits are both 1, so it can't move; expected 'lock: {wrist: 1.0}' in the arm file",
            )
        ],
    ),
    "mimic": (
        [('<axis xyz="1 0 0"/>', '<axis xyz="1 0 0"/><mimic joint="tilt"/>')],
        [
            (
                'name="wrist"',
                "joint wrist: it follows joint 'tilt' (mimic), so no drive of its own moves it; expected "
                "'lock: {wrist: 0.0}' in the arm file",
            )
        ],
    ),
    "branch": (
        [('<link name="tip"/>', '<link name="tip"/>\n<link name="lamp"/>\n<joint name="nod" type="continuous">'
          '<parent link="bracket"/><child link="lamp"/></joint>')],
        [
            (
                'name="nod"',
                "joint nod: nod (line 38) is not part of the chain to the tool; expected 'lock: {nod: 0.0}' in "
                "the arm file",
            ),
            (
                'name="lift"',
                "joint lift: the chain branches: nod (line 38) moves on the same link; expected one movable "
                "joint on each link; lock the others",
            ),
        ],
    ),
    "no links": (
        [(URDF, '<robot name="none">\n</robot>')],
        [("<robot", "no links; expected at least a base and one moving link")],
    ),
}


@pytest.mark.parametrize("name", URDF_FAULTS)
def test_faults_of_the_urdf(here: Path, name: str) -> None:
    """Each fault says what is wrong, where, and what was expected."""
    edits, expected = URDF_FAULTS[name]
    urdf = URDF
    for old, new in edits:
        assert urdf.count(old) == 1 or name == "two parents", (old, urdf.count(old))
        urdf = urdf.replace(old, new)
    with pytest.raises(InputFaults) as caught:
        read(urdf=urdf)
    lines = [line_of(urdf, marker) if marker else urdf.count("\n") + 1 for marker, _ in expected]
    assert [str(fault) for fault in caught.value.faults] == [
        f"a.urdf:{line}: {text}" for line, (_, text) in zip(lines, expected, strict=True)
    ]


ARM_FAULTS: dict[str, tuple[list[tuple[str, str]], list[tuple[str, str]]]] = {
    "tool": (
        [("tool: tip", "tool: tipp")],
        [("tool:", "tool: no link of a.urdf is called 'tipp'; expected the link at the tool point (did you mean 'tip'?)")],
    ),
    "tool is base": (
        [("tool: tip", "tool: base")],
        [("", "no joint moves between the base link and 'base'; expected a tool at the end of the chain")],
    ),
    "no tool": ([("tool: tip\n", "")], [("urdf:", "tool: missing")]),
    "tool is a number": ([("tool: tip", "tool: 5")], [("tool:", "tool: 5 is not text; expected text")]),
    "unknown key": (
        [("tool: tip", "tool: tip\ntolerance: 1")],
        [("tolerance:", "tolerance: unknown key; expected one of urdf, tool, lock, drives")],
    ),
    "lock name": (
        [("grip_a: 0.02", "gripa: 0.02")],
        [("lock:", "lock.gripa: no joint of a.urdf is called 'gripa'; expected a movable joint (did you mean 'grip_a'?)")],
    ),
    "lock value": ([("grip_a: 0.02", "grip_a: in")], [("lock:", "lock.grip_a: 'in' is not a number; expected a number")]),
    "lock range": (
        [("grip_a: 0.02", "grip_a: 2")],
        [("lock:", "lock.grip_a: 2 is outside the joint's limits; expected 0.01 to 0.04")],
    ),
    "lock fixed": (
        [("grip_b: 0.02}", "grip_b: 0.02, nose: 0}")],
        [("lock:", "lock.nose: a fixed joint can't be locked; expected a movable joint")],
    ),
    "locked and driven": (
        [("grip_b: 0.02}", "grip_b: 0.02, tilt: 0}")],
        [
            (
                "  tilt:",
                "drives.tilt: the joint 'tilt' is locked or fixed, so it needs no drive; expected drives for "
                "swing, lift, wrist",
            )
        ],
    ),
    "drive name": (
        [("  wrist:", "  wirst:")],
        [("  wirst:", "drives.wirst: no joint is called 'wirst' (did you mean 'wrist'?)")],
    ),
    "drive too many": (
        [("  wrist: {coulomb: 1}", "  wrist: {coulomb: 1}\n  motor7: {}")],
        [("  motor7:", "drives.motor7: no joint is called 'motor7'; expected drives for swing, lift, tilt, wrist")],
    ),
    "drive key": (
        [("{coulomb: 2}", "{coulumb: 2}")],
        [("  tilt:", "drives.tilt.coulumb: unknown key (did you mean 'coulomb'?)")],
    ),
    "gear": (
        [("gear_ratio: 100", "gear_ratio: 0")],
        [("  swing:", "drives.swing.gear_ratio: 0 is out of range; expected above 0")],
    ),
    "friction": (
        [("{coulomb: 2}", "{coulomb: -2}")],
        [("  tilt:", "drives.tilt.coulomb: -2 is out of range; expected at least 0")],
    ),
    "infinite": (
        [("torque_limit: 90", "torque_limit: .inf")],
        [("  swing:", "drives.swing.torque_limit: inf is not a finite number; expected a finite number")],
    ),
    "counts": (
        [("{coulomb: 2}", "{encoder_counts: 1000.5}")],
        [("  tilt:", "drives.tilt.encoder_counts: 1000.5 is not a whole number; expected a whole number")],
    ),
    "static alone": (
        [("{coulomb: 2}", "{coulomb: 2, static: 3}")],
        [("  tilt:", "drives.tilt: static is given without stribeck_speed; expected stribeck_speed in rad/s")],
    ),
    "stribeck alone": (
        [("{coulomb: 2}", "{coulomb: 2, stribeck_speed: 0.1}")],
        [("  tilt:", "drives.tilt: stribeck_speed is given without static; expected static in N m")],
    ),
    "static low": (
        [("{coulomb: 2}", "{coulomb: 2, static: 1.5, stribeck_speed: 0.1}")],
        [("  tilt:", "drives.tilt: static 1.5 is below coulomb 2; expected at least coulomb")],
    ),
    "fingers": (
        [("lock: {grip_a: 0.02, grip_b: 0.02}\n", "")],
        [
            (
                "a.urdf:62",
                "joint grip_a: grip_a (line 62), grip_b (line 67) are not part of the chain to the tool; "
                "expected 'lock: {grip_a: 0.01, grip_b: 0.0}' in the arm file",
            )
        ],
    ),
    "no drives": (
        [("  tilt: {coulomb: 2}\n  wrist: {coulomb: 1}\n", "")],
        [
            (
                "drives:",
                "drives: missing for tilt, wrist; expected \ndrives:\n"
                "  tilt: {gear_ratio: 1, rotor_inertia: 0, viscous: 0, coulomb: 0}\n"
                "  wrist: {gear_ratio: 1, rotor_inertia: 0, viscous: 0, coulomb: 0}\n",
            )
        ],
    ),
    "drives are a list": (
        [("  swing:", "  - swing:"), ("\n  lift", "\n  - lift"), ("\n  tilt", "\n  - tilt"), ("\n  wrist", "\n  - wrist")],
        [("drives:", "drives: a list is not a mapping of keys; expected a mapping of keys")],
    ),
    "URDF missing": (
        [("urdf: a.urdf", "urdf: aa.urdf"), ("gear_ratio: 100", "gear_ratio: x")],
        [
            ("urdf:", "urdf: the URDF 'aa.urdf' does not exist; expected a file that can be read (did you mean 'a.urdf'?)"),
            ("  swing:", "drives.swing.gear_ratio: 'x' is not a number; expected a number"),
        ],
    ),
    "no URDF": (
        [("urdf: a.urdf\n", ""), ("gear_ratio: 100", "gear_ratio: x")],
        [
            ("tool:", "urdf: missing"),
            ("  swing:", "drives.swing.gear_ratio: 'x' is not a number; expected a number"),
        ],
    ),
    "a list": ([(ARM, "- 1\n- 2\n")], [("- 1", "a list is not a mapping of keys; expected a mapping of keys")]),
}


@pytest.mark.parametrize("name", ARM_FAULTS)
def test_faults_of_the_arm_file(here: Path, name: str) -> None:
    """Each fault says what is wrong, where, and what was expected; one slip makes one fault."""
    edits, expected = ARM_FAULTS[name]
    text = ARM
    for old, new in edits:
        assert text.count(old) == 1, old
        text = text.replace(old, new)
    with pytest.raises(InputFaults) as caught:
        read(text)
    addresses = []
    for marker, _ in expected:
        elsewhere = marker.startswith("a.urdf:") or marker == ""
        addresses.append((marker or "a.urdf:2") if elsewhere else f"arm.yaml:{line_of(text, marker)}")
    assert [str(fault) for fault in caught.value.faults] == [
        f"{address}: {said}" for address, (_, said) in zip(addresses, expected, strict=True)
    ]


def test_faults_of_both_files_come_at_once(here: Path) -> None:
    """A fault in the URDF doesn't hide those of the arm file, nor the other way round."""
    with pytest.raises(InputFaults) as caught:
        read(ARM.replace("gear_ratio: 100", "gear_ratio: -1"), URDF.replace('value="3"', 'value="three"'))
    assert [fault.file for fault in caught.value.faults] == ["arm.yaml", "a.urdf"]


def test_missing_files(here: Path) -> None:
    """A file that isn't there is a fault with its name, not an exception of the system."""
    for name, said in (("none.yaml", "does not exist"), (".", "is a folder"), ("arm.yaml/x", "does not exist")):
        with pytest.raises(InputFaults, match=said):
            ArmFiles.read(name)
    Path("latin.yaml").write_bytes(b"urdf: a.urdf\ntool: \xe9\n")
    with pytest.raises(InputFaults, match=r"latin\.yaml:2: the arm file is not UTF-8 text"):
        ArmFiles.read(Path("latin.yaml"))


def test_urdf_is_named_as_the_user_named_the_arm_file(here: Path) -> None:
    """The URDF stands beside the arm file, and messages name it from where the user is."""
    Path("robots").mkdir()
    Path("robots/arm.yaml").write_text(ARM)
    Path("robots/a.urdf").write_text("<robot>")
    with pytest.raises(InputFaults, match=r"^robots/a\.urdf:1: not valid XML"):
        load_arm("robots/arm.yaml")


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


def test_encoder_counts_are_noted(here: Path) -> None:
    """What has no effect in this version is accepted and said."""
    arm = read(ARM.replace("{coulomb: 2}", "{coulomb: 2, encoder_counts: 4096}"))
    assert str(arm.notes[-1]) == (
        "arm.yaml:7: drives.tilt.encoder_counts: without effect (tilt): positions are sensed exactly in this version"
    )


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
        ArmFiles("arm.yaml", ARM.replace("wrist", "hinge"), "a.urdf", URDF.replace('"wrist"', '"hinge"')).digest,
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


@settings(max_examples=150, deadline=None)
@given(st.data())
def test_damaged_files_give_faults_and_nothing_else(data: st.DataObject) -> None:
    """Whatever is cut out of or put into the two files, the reader ends in an arm or in faults."""
    texts = [ARM, URDF]
    for _ in range(data.draw(st.integers(1, 3))):
        which = data.draw(st.integers(0, 1))
        text = texts[which]
        start = data.draw(st.integers(0, len(text)))
        end = min(len(text), start + data.draw(st.integers(0, 12)))
        piece = data.draw(
            st.sampled_from(["", "0", "-", "1e9", "1e-9", "<", ">", '"', "/>", ": ", "{", "}", "\n", "&a", "*a"])
            | st.text(max_size=3)
        )
        texts[which] = text[:start] + piece + text[end:]
    try:
        arm = ArmFiles("arm.yaml", texts[0], "a.urdf", texts[1]).arm()
    except InputFaults as error:
        assert error.faults
        assert all(str(fault) for fault in error.faults)
    else:
        assert np.isfinite(arm.parameters).all()

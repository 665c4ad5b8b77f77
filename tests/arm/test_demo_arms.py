"""The demo arms are what their files say in words."""

from __future__ import annotations

from pathlib import Path
from xml.etree import ElementTree

import numpy as np
import pytest
from scipy.spatial.transform import Rotation

from rigbench.arm.arm import Arm, Floats
from rigbench.arm.dynamics import forward_kinematics, gravity_torque, inverse_dynamics, mass_matrix
from rigbench.arm.files import load_arm
from rigbench.arm.physical import add_point_mass, inertia

DEMO = Path(__file__).resolve().parents[2] / "robots_demo"
GRAVITY = (0.0, 0.0, -9.81)
SHELF, TABLE = np.radians([0, -60, 90, 0, 60, 0]), np.radians([70, -20, 60, 0, 50, 0])


@pytest.fixture(scope="module")
def tray6() -> Arm:
    return load_arm(DEMO / "tray6" / "arm.yaml")


@pytest.fixture(scope="module")
def planar2() -> Arm:
    return load_arm(DEMO / "planar2" / "arm.yaml")


def test_demo_files_have_no_notes(tray6: Arm, planar2: Arm) -> None:
    """What users copy from is without warnings, and its drives have the published shape."""
    assert tray6.notes == planar2.notes == ()
    assert tray6.joints == ("j1", "j2", "j3", "j4", "j5", "j6")
    assert (planar2.drives.reflected == 0).all()
    assert (planar2.drives.coulomb + planar2.drives.viscous == 0).all()
    np.testing.assert_array_equal(tray6.drives.static, tray6.drives.coulomb)
    assert (tray6.drives.torque_lag == 0).all()


def test_planar2_obeys_its_closed_form(planar2: Arm) -> None:
    """The equations that stand in planar2.urdf give the kernels' torque, to rounding."""
    l1, c1, m1, i1, c2, m2, i2, g = 0.5, 0.25, 4.0, 0.1, 0.2, 2.0, 0.03, 9.81
    rng = np.random.default_rng(0)
    for _ in range(10):
        q, v, a = rng.uniform(-3, 3, (3, 2))
        m11 = i1 + i2 + m1 * c1**2 + m2 * (l1**2 + c2**2 + 2 * l1 * c2 * np.cos(q[1]))
        m12 = i2 + m2 * (c2**2 + l1 * c2 * np.cos(q[1]))
        m22 = i2 + m2 * c2**2
        k = m2 * l1 * c2 * np.sin(q[1])
        fore = g * m2 * c2 * np.cos(q[0] + q[1])
        h1 = -k * (2 * v[0] * v[1] + v[1] ** 2) + g * (m1 * c1 + m2 * l1) * np.cos(q[0]) + fore
        h2 = k * v[0] ** 2 + fore
        expected = [m11 * a[0] + m12 * a[1] + h1, m12 * a[0] + m22 * a[1] + h2]
        found = inverse_dynamics(planar2.chain(GRAVITY), q, v, a)
        np.testing.assert_allclose(found, expected, rtol=0, atol=1e-12)


def test_planar2_stands_where_its_file_says(planar2: Arm) -> None:
    """Level along x at (0, 0), upright at (90, 0) degrees, and the gravity torque of its comments."""
    chain = planar2.chain(GRAVITY)
    for q, tip in (((0, 0), (0.9, 0, 0)), ((np.pi / 2, 0), (0, 0, 0.9)), ((0, np.pi / 2), (0.5, 0, 0.4))):
        np.testing.assert_allclose(forward_kinematics(chain, np.array(q, float))[-1, 9:], tip, atol=1e-15)
    np.testing.assert_allclose(gravity_torque(chain, np.zeros(2)), [23.5, 3.9], atol=0.05)
    assert (planar2.drives.torque_limit == [90, 30]).all()


def body_inertia(shape: ElementTree.Element, mass: float) -> Floats:
    """Inertia about the centre of an evenly dense box, ball or cylinder along z (any textbook's table)."""
    if shape.tag == "box":
        a, b, c = (float(side) for side in shape.attrib["size"].split())
        return mass / 12 * np.diag([b * b + c * c, a * a + c * c, a * a + b * b])
    r = float(shape.attrib["radius"])
    if shape.tag == "sphere":
        return 0.4 * mass * r * r * np.eye(3)
    length = float(shape.attrib["length"])
    across = mass / 12 * (3 * r * r + length * length)
    return np.diag([across, across, mass / 2 * r * r])


def test_tray6_inertials_are_those_of_the_bodies_it_shows(tray6: Arm) -> None:
    """Each link's mass, centre of gravity and tensor follow from its visuals and the masses in their names.

    Tolerance: the file gives six digits, of the centre of gravity too, about which the tensor is taken.
    """
    root = ElementTree.parse(DEMO / "tray6" / "tray6.urdf").getroot()
    for i, name in enumerate(tray6.links):
        total, first, tensor = 0.0, np.zeros(3), np.zeros((3, 3))
        for visual in root.findall(f"link[@name='{name}']/visual"):
            origin, shape = visual.find("origin"), visual.find("geometry/*")
            assert origin is not None
            assert shape is not None
            mass = float(visual.attrib["name"].split(", ")[1].removesuffix(" kg"))
            at = np.array([float(x) for x in origin.attrib["xyz"].split()])
            turned = Rotation.from_euler("xyz", [float(x) for x in origin.attrib["rpy"].split()]).as_matrix()
            total, first = total + mass, first + mass * at
            tensor += turned @ body_inertia(shape, mass) @ turned.T
            tensor += mass * (at @ at * np.eye(3) - np.outer(at, at))
        mass, cog, central = inertia(tray6.parameters[i])
        expected = tensor - total * (first @ first * np.eye(3) - np.outer(first, first)) / total**2
        np.testing.assert_allclose(mass, total, rtol=1e-6)
        np.testing.assert_allclose(cog, first / total, rtol=0, atol=1e-6)
        np.testing.assert_allclose(central, expected, rtol=0, atol=2e-6 * np.trace(expected))
        # motors sit sideways: no centre of gravity on the axis, no tensor that is diagonal
        assert np.linalg.norm(np.cross(cog, tray6.axis[i])) > 1e-3
        assert (np.abs(central[np.triu_indices(3, 1)]) > 0).any()


def test_tray6_carries_a_level_tray_in_front(tray6: Arm) -> None:
    """In the poses of its motions the tray is level; before the arm in the first, 70 degrees aside and lower then."""
    chain = tray6.chain(GRAVITY)
    shelf, table = forward_kinematics(chain, SHELF)[-1], forward_kinematics(chain, TABLE)[-1]
    np.testing.assert_allclose(shelf[:9].reshape(3, 3), np.eye(3), atol=1e-12)
    np.testing.assert_allclose(
        table[:9].reshape(3, 3), Rotation.from_euler("z", 70, degrees=True).as_matrix(), atol=1e-12
    )
    # lengths of tray6.urdf: 0.34 m up to the shoulder, 0.40 and 0.36 m of arm, 0.15 m down to the tray
    s, c = np.sin, np.cos
    for pose, (q1, q2, q3, *_) in ((shelf, SHELF), (table, TABLE)):
        forward = 0.40 * c(q2) + 0.36 * c(q2 + q3)
        height = 0.34 - 0.40 * s(q2) - 0.36 * s(q2 + q3) - 0.15
        np.testing.assert_allclose(pose[9:], [forward * c(q1), forward * s(q1), height], atol=1e-12)
    assert np.linalg.norm(forward_kinematics(chain, np.zeros(6))[-1, 9:] - [0, 0, 0.34]) == pytest.approx(
        0.91
    )


def test_tray6_reaches_the_rim_of_the_circle(tray6: Arm) -> None:
    """A circle of 0.12 m about (0.45, 0, 0.4) m is within reach and joint limits, the tray held level and ahead.

    By hand: the wrist is 0.15 m above the tray, q1 points at it, the cosine rule gives the elbow.
    """
    chain = tray6.chain(GRAVITY)
    for angle in np.linspace(0, 2 * np.pi, 24, endpoint=False):
        x, y, z = 0.45 + 0.12 * np.cos(angle), 0.12 * np.sin(angle), 0.4
        forward, up = np.hypot(x, y), z + 0.15 - 0.34
        q3 = np.arccos((forward**2 + up**2 - 0.40**2 - 0.36**2) / (2 * 0.40 * 0.36))
        q2 = -np.arctan2(up, forward) - np.arctan2(0.36 * np.sin(q3), 0.40 + 0.36 * np.cos(q3))
        # the hand keeps its direction: turned back by q1 about the vertical, which is the flange's axis
        q = np.array([np.arctan2(y, x), q2, q3, 0.0, np.pi / 2 - q2 - q3, np.arctan2(y, x)])
        assert (q > tray6.lower).all()
        assert (q < tray6.upper).all()
        pose = forward_kinematics(chain, q)[-1]
        np.testing.assert_allclose(pose[9:], [x, y, z], atol=1e-12)
        np.testing.assert_allclose(pose[:9].reshape(3, 3), np.eye(3), atol=1e-12)


def quintic_leg(start: Floats, end: Floats, seconds: float) -> tuple[Floats, Floats, Floats]:
    """Positions, velocities and accelerations of 10 s^3 - 15 s^4 + 6 s^5 from rest to rest."""
    s = np.linspace(0, 1, 201)[:, None]
    way = end - start
    return (
        start + (10 * s**3 - 15 * s**4 + 6 * s**5) * way,
        (30 * s**2 - 60 * s**3 + 30 * s**4) * way / seconds,
        (60 * s - 180 * s**2 + 120 * s**3) * way / seconds**2,
    )


def test_tray6_has_the_torque_and_speed_for_its_work(tray6: Arm) -> None:
    """With 3 kg on the tray and friction and rotors counted, 70 degrees in 1 s take 15 to 75 % of the limits."""
    parameters = tray6.parameters.copy()
    parameters[-1] = add_point_mass(parameters[-1], 3.0, tray6.tool_position + np.array([0.03, 0, 0.03]))
    chain, drives = tray6.replaced(parameters=parameters).chain(GRAVITY), tray6.drives
    seventy = np.radians(70) * np.array([1, 0.6, 0.6, 1, 1, 1])  # the arm would hit the floor with all of it
    legs = [(SHELF, TABLE), (TABLE, SHELF), (SHELF, SHELF + seventy), (SHELF, SHELF - seventy)]
    used = np.zeros(6)
    for start, end in legs:
        for q, v, a in zip(*quintic_leg(start, end, 1.0), strict=True):
            torque = inverse_dynamics(chain, q, v, a) + drives.reflected * a
            torque += drives.viscous * v + drives.coulomb * np.sign(v)
            used = np.maximum(used, np.abs(torque) / drives.torque_limit)
            assert (np.abs(v) < drives.speed_limit).all()
    assert (used > 0.15).all()
    assert (used < 0.75).all()
    assert (np.radians(70) * 15 / 8 < drives.speed_limit).all()  # 15/8 of the mean is a quintic's peak


def test_tray6_drives_are_believable(tray6: Arm) -> None:
    """Friction 3 to 6 % of the torque limit, and rotors that outweigh the links at the wrist."""
    share = tray6.drives.coulomb / tray6.drives.torque_limit
    assert (share > 0.03).all()
    assert (share < 0.06).all()
    links = np.diag(mass_matrix(tray6.chain(GRAVITY), SHELF))
    assert (tray6.drives.reflected[3:] > links[3:]).all()
    assert 35 < tray6.parameters[:, 0].sum() + 13 < 45  # the base, which doesn't move, weighs 13 kg

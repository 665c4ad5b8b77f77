"""Changes of the drives, as a sweep makes them: what follows a gear ratio and what does not."""

from __future__ import annotations

import pickle
from pathlib import Path

import numpy as np
import pytest

from rigbench.arm.arm import Drives
from rigbench.arm.files import ArmFiles
from rigbench.errors import InputFaults

URDF = (Path(__file__).parent / "gantry" / "a.urdf").read_text()
SWING = (
    "rotor_inertia: 2.0e-5, motor_torque_limit: 1.5, motor_speed_limit: 300, motor_viscous: 1.0e-5, "
    "motor_coulomb: 0.01, viscous: 6, coulomb: 5, static: 7, stribeck_speed: 0.1, torque_limit: 80, "
    "speed_limit: 20, torque_lag_ms: 0.5"
)
ARM = f"""
urdf: a.urdf
tool: tip
lock: {{grip_a: 0.02, grip_b: 0.02}}
drives:
  swing: {{gear_ratio: 25, {SWING}}}
  lift: {{gear_ratio: 200, rotor_inertia: 1.0e-5, viscous: 3}}
  tilt: {{coulomb: 2}}
  wrist: {{coulomb: 1}}
"""
FILES = ArmFiles("arm.yaml", ARM, "a.urdf", URDF)
FOLLOWING = {"gear_ratio", "viscous", "coulomb", "static", "torque_limit", "speed_limit"}


def drives(*changes: tuple[str, str, float]) -> Drives:
    return FILES.with_drives(changes).arm().drives


def faults(*changes: tuple[str, str, object]) -> list[str]:
    with pytest.raises(InputFaults) as caught:
        FILES.with_drives(changes).arm()  # type: ignore[arg-type]
    return [str(fault) for fault in caught.value.faults]


# --- a gear ratio alone


def test_reflected_inertia_goes_by_the_ratio_squared():
    """From 25 to 50 turns a turn, the rotor is felt four times as heavy, and is the same rotor."""
    before, after = drives(), drives(("swing", "gear_ratio", 50))
    assert after.rotor_inertia.tolist() == before.rotor_inertia.tolist()
    np.testing.assert_allclose(after.reflected, before.reflected * [4, 1, 1, 1], rtol=1e-15)
    assert before.reflected[0] > 0


def test_the_motor_gives_torque_by_the_ratio_until_the_gearbox_is_at_its_rating():
    """Torque limit min(80, 1.5 G) N m: by the ratio up to 53.3, then the rating stops it."""
    for gear, limit in ((25, 37.5), (50, 75.0), (53, 79.5), (54, 80.0), (400, 80.0)):
        assert drives(("swing", "gear_ratio", gear)).torque_limit[0] == limit


def test_the_motor_loses_speed_by_the_ratio():
    """Speed limit min(20, 300 / G) rad/s: what the joint allows, then what the motor does."""
    for gear, limit in ((10, 20.0), (15, 20.0), (25, 12.0), (50, 6.0)):
        assert drives(("swing", "gear_ratio", gear)).speed_limit[0] == limit


def test_friction_at_the_joint_stays_and_the_motors_follows():
    """Viscous 6 + 1e-5 G^2, Coulomb 5 + 0.01 G, static 7 + 0.01 G."""
    for gear in (1, 50, 200):
        got = drives(("swing", "gear_ratio", gear))
        np.testing.assert_allclose(got.viscous[0], 6 + 1e-5 * gear**2, rtol=1e-15)
        np.testing.assert_allclose(got.coulomb[0], 5 + 0.01 * gear, rtol=1e-15)
        np.testing.assert_allclose(got.static[0], 7 + 0.01 * gear, rtol=1e-15)


def test_nothing_else_follows():
    """Neither the other joints' drives nor any other number of the arm depends on one joint's ratio."""
    before, after = FILES.arm(), FILES.with_drives([("swing", "gear_ratio", 50)]).arm()
    for name, value in vars(before.drives).items():
        theirs = getattr(after.drives, name)
        np.testing.assert_array_equal(theirs[1:], value[1:])
        assert name in FOLLOWING or theirs[0] == value[0], name
    for name, value in vars(before).items():
        if isinstance(value, np.ndarray):
            np.testing.assert_array_equal(getattr(after, name), value)


# --- whose change counts


def test_all_means_every_joint_and_a_joint_goes_before():
    """'all' reaches each joint; a joint's own change wins whichever comes first; else the later one."""
    everywhere, own = ("all", "gear_ratio", 60), ("lift", "gear_ratio", 90)
    assert drives(everywhere).gear_ratio.tolist() == [60, 60, 60, 60]
    assert drives(everywhere, own).gear_ratio.tolist() == [60, 90, 60, 60]
    assert drives(own, everywhere).gear_ratio.tolist() == [60, 90, 60, 60]
    assert drives(everywhere, ("all", "gear_ratio", 70)).gear_ratio.tolist() == [70, 70, 70, 70]
    assert drives(own, ("lift", "gear_ratio", 95)).gear_ratio.tolist() == [25, 95, 1, 1]
    once = FILES.with_drives([own]).with_drives([everywhere])
    assert once.arm().drives.gear_ratio.tolist() == [60, 90, 60, 60]


def test_changes_are_as_good_as_another_arm_file():
    """The arm, and so its digest, are those of the file that says the same."""
    other = ARM.replace("gear_ratio: 25", "gear_ratio: 50").replace("viscous: 3", "viscous: 4.5")
    other = other.replace("static: 7", "static: 8")
    edited = ArmFiles("edited.yaml", other, "a.urdf", URDF)
    changed = FILES.with_drives(
        [("swing", "gear_ratio", 50), ("swing", "static", 8), ("lift", "viscous", 4.5)]
    )
    assert changed.digest == edited.digest
    assert changed.digest != FILES.digest
    assert FILES.with_drives([("swing", "gear_ratio", 25.0)]).digest == FILES.digest
    assert FILES.with_drives([]) == FILES


def test_they_travel_with_the_files():
    """Pickled files make the same arm; equal files make it once."""
    changed = FILES.with_drives([("all", "gear_ratio", 50)])
    again = pickle.loads(pickle.dumps(changed))
    assert again == changed
    assert again.arm() is changed.arm()
    assert changed.arm() is not FILES.arm()


# --- faults


def test_unknown_joints_and_keys_have_their_nearest_name():
    """All come at once, addressed to what the change names."""
    assert faults(
        ("swign", "gear_ratio", 50), ("finger", "viscous", 1), ("lift", "gear", 50), ("all", "viscuos", 1)
    ) == [
        "arm.yaml: drives.swign: no driven joint is called 'swign' (did you mean 'swing'?)",
        "arm.yaml: drives.finger: no driven joint is called 'finger'; expected all, swing, lift, tilt, wrist",
        "arm.yaml: drives.all.viscuos: unknown key (did you mean 'viscous'?)",
        "arm.yaml: drives.lift.gear: unknown key (did you mean 'gear_ratio'?)",
    ]


def test_a_locked_joint_has_no_drive_to_change():
    """The finger moves, but not in this arm."""
    (said,) = faults(("grip_a", "gear_ratio", 50))
    assert said.startswith("arm.yaml: drives.grip_a: no driven joint is called 'grip_a'")


@pytest.mark.parametrize(
    ("value", "said"),
    [
        (0, "0 is out of range; expected above 0"),
        (-5, "-5 is out of range; expected above 0"),
        (float("nan"), "nan is not a finite number; expected a finite number"),
        ("fast", "'fast' is not a number; expected a number"),
        (True, "true is not a number; expected a number"),
    ],
)
def test_a_value_is_judged_as_in_the_arm_file_and_once(value, said):
    """A value for all joints that no drive can have is one fault, not one a joint."""
    assert faults(("all", "gear_ratio", value)) == [f"arm.yaml: drives.all.gear_ratio: {said}"]


def test_a_change_may_contradict_what_stays():
    """Raising Coulomb friction past the declared breakaway is a fault of that joint."""
    assert faults(("all", "coulomb", 9)) == [
        "arm.yaml: drives.swing: static 7 is below coulomb 9; expected at least coulomb"
    ]
    assert drives(("all", "coulomb", 9), ("swing", "static", 9)).coulomb[0] == 9 + 0.01 * 25


def test_faults_of_the_files_come_first():
    """What is wrong in the file itself is said without the changes."""
    broken = ArmFiles("arm.yaml", ARM.replace("viscous: 3", "viscous: -3"), "a.urdf", URDF)
    with pytest.raises(InputFaults) as caught:
        broken.with_drives([("all", "gear_ratio", 0)]).arm()
    assert [fault.key for fault in caught.value.faults] == ["drives.lift.viscous"]

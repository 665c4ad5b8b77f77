"""Cases: stated departures of the plant, on top of level 0 or of a level's draw."""

from __future__ import annotations

import dataclasses
import json
import pickle
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rigbench.arm.arm import Arm
from rigbench.arm.files import ArmFiles
from rigbench.arm.mismatch import Case, Mismatch, Payload, Spread, believed, plant, uniform
from rigbench.arm.physical import add_point_mass, central_moments, inertia, possible
from rigbench.errors import InputFaults
from rigbench.laws.options import options_model
from rigbench.laws.registry import choose, registered
from rigbench.motion.via import ViaMotion
from rigbench.rig import Rates, Run, simulate

FILES = ArmFiles.read(Path(__file__).resolve().parents[2] / "robots_demo" / "tray6" / "arm.yaml")
# a tool frame turned against the last link's, so that the two can't be mixed up
ARM = dataclasses.replace(FILES.arm(), tool_rotation=np.array([[0.0, 0, 1], [1, 0, 0], [0, 1, 0]]))
FULL = Mismatch(5, 5, 15, Payload(1.5, 0, 3, 30), 30, 30, 15)
SEED, DRAW = 5, 2


def stated(case: Case | None, level: float = 0.0, mismatch: Mismatch = FULL, arm: Arm = ARM) -> Arm:
    draw = None if level == 0 else DRAW
    return plant(arm, mismatch, level, mismatch.sources, SEED, draw, case)


def changed(one: Arm, other: Arm) -> set[str]:
    """Names of the arrays in which two arms differ in any bit."""
    names = set()
    for mine, theirs in ((vars(one), vars(other)), (vars(one.drives), vars(other.drives))):
        names |= {
            name
            for name, value in mine.items()
            if isinstance(value, np.ndarray) and value.tobytes() != theirs[name].tobytes()
        }
    return names


# --- friction and rotors


@pytest.mark.parametrize("level", [0.0, 1.0, 2.5])
def test_a_cold_morning_is_exactly_times_its_factor(level):
    """Viscous +60 and Coulomb +40 percent: times 1.6 and 1.4, static along with Coulomb, nothing else;
    at level 0 of the model, above it of that level's draw, in every bit."""
    without, cold = (stated(case, level) for case in (None, Case(viscous_percent=60, coulomb_percent=40)))
    assert changed(without, cold) == {"viscous", "coulomb", "static"}
    assert cold.drives.viscous.tobytes() == (without.drives.viscous * 1.6).tobytes()
    assert cold.drives.coulomb.tobytes() == (without.drives.coulomb * 1.4).tobytes()
    assert cold.drives.static.tobytes() == (without.drives.static * 1.4).tobytes()
    if level == 0:
        assert changed(without, believed(ARM, FULL)) == set()


def test_a_case_takes_names():
    """{all: -20, j2: +50}: each joint its own factor; a rotor's inertia as stated."""
    got = stated(Case(rotor_inertia_percent=Spread(-20, (("j2", 50),))))
    np.testing.assert_array_equal(
        got.drives.rotor_inertia / ARM.drives.rotor_inertia, [0.8, 1.5, 0.8, 0.8, 0.8, 0.8]
    )
    assert changed(got, stated(None)) == {"rotor_inertia"}


def test_a_case_needs_no_mismatch():
    """Without declared sources a case acts on the arm itself."""
    got = stated(Case(viscous_percent=60, payload_kg=2), mismatch=Mismatch())
    assert changed(got, ARM) == {"viscous", "parameters"}
    np.testing.assert_allclose(got.parameters[:, 0] - ARM.parameters[:, 0], [0, 0, 0, 0, 0, 2], atol=1e-15)


# --- the payload


def test_a_full_tray_is_the_point_mass_that_the_model_lacks():
    """3 kg against a belief of 1.5: the arm with 3 kg at the tool point, which is the model with 1.5 more."""
    full = stated(Case(payload_kg=3))
    for base, missing in ((ARM, 3.0), (believed(ARM, FULL), 1.5)):
        last = add_point_mass(base.parameters[-1], missing, ARM.tool_position)
        np.testing.assert_allclose(full.parameters[-1], last, rtol=1e-13, atol=1e-16)
    assert full.parameters[:-1].tobytes() == ARM.parameters[:-1].tobytes()
    assert changed(full, stated(None)) == {"parameters"}


@pytest.mark.parametrize("mass", [0.0, 0.5, 7.0])
def test_the_stated_mass_replaces_drawn_and_believed_and_may_leave_the_range(mass):
    """At level 2 the mass is the stated one exactly, where the draw puts the payload."""
    got = stated(Case(payload_kg=mass), 2.0)
    without = stated(None, 2.0, dataclasses.replace(FULL, payload=None))
    u = np.array([uniform(SEED, f"payload.cog.{axis}", DRAW) for axis in "xyz"])
    at = ARM.tool_position + ARM.tool_rotation @ (0.06 * u)
    np.testing.assert_allclose(
        got.parameters[-1], add_point_mass(without.parameters[-1], mass, at), rtol=1e-13
    )


def test_the_stated_offset_replaces_the_drawn_one():
    """(10, 20, 30) mm lie along the axes of the tool frame, here z, x, y of the link's; the mass is drawn."""
    got = stated(Case(payload_cog_mm=(10, 20, 30)), 1.0)
    without = stated(None, 1.0, dataclasses.replace(FULL, payload=None))
    mass = min(max(1.5 + 1.5 * uniform(SEED, "payload.mass", DRAW), 0), 3)
    at = ARM.tool_position + np.array([0.03, 0.01, 0.02])
    np.testing.assert_allclose(
        got.parameters[-1], add_point_mass(without.parameters[-1], mass, at), rtol=1e-13
    )
    believed_mass = stated(Case(payload_cog_mm=(10, 20, 30)))
    np.testing.assert_allclose(
        believed_mass.parameters[-1], add_point_mass(ARM.parameters[-1], 1.5, at), rtol=1e-13
    )


# --- links


@pytest.mark.parametrize("level", [0.0, 1.0])
def test_a_link_mass_scales_the_link_and_not_its_load(level):
    """+10 percent on the gripper: its ten parameters times 1.1, of the draw; the payload stays."""
    bare = dataclasses.replace(FULL, payload=None)
    got = stated(Case(link_mass_percent=Spread(0, (("gripper", 10),))), level)
    without, load = (
        stated(None, level, bare),
        stated(None, level).parameters - stated(None, level, bare).parameters,
    )
    factor = np.array([1, 1, 1, 1, 1, 1.1])[:, None]
    np.testing.assert_allclose(got.parameters, factor * without.parameters + load, rtol=1e-12, atol=1e-14)


@pytest.mark.parametrize("level", [0.0, 1.0])
def test_a_centre_of_gravity_shifts_in_its_link_frame(level):
    """(4, -5, 6) mm on the forearm, at constant mass and central inertia; other links as they were."""
    got, without = (stated(case, level) for case in (Case(link_cog_mm=(("forearm", (4, -5, 6)),)), None))
    (mass, cog, tensor), (mass_before, cog_before, tensor_before) = map(
        inertia, (got.parameters, without.parameters)
    )
    shift = np.zeros((6, 3))
    shift[ARM.links.index("forearm")] = [0.004, -0.005, 0.006]
    np.testing.assert_allclose(cog - cog_before, shift, atol=1e-15)
    np.testing.assert_allclose(mass, mass_before, rtol=1e-15)
    np.testing.assert_allclose(tensor, tensor_before, atol=1e-14)


@pytest.mark.parametrize("level", [0.0, 1.0])
def test_a_stated_inertia_scales_about_the_centre_of_gravity(level):
    """-30 percent: the second moments about the centre of gravity times 0.7, so I_c too; m and c stay."""
    bare = dataclasses.replace(FULL, payload=None)
    got, without = (stated(case, level, bare) for case in (Case(link_inertia_percent=-30), None))
    for one, other, factor in zip(
        central_moments(got.parameters), central_moments(without.parameters), (1, 1, 0.7), strict=True
    ):
        np.testing.assert_allclose(one, factor * other, rtol=1e-12, atol=1e-15)


def test_an_empty_case_is_none():
    """A case that states nothing gives the plant that no case gives, bit for bit."""
    for level in (0.0, 1.0):
        assert changed(stated(Case(), level), stated(None, level)) == set()
    assert Case().inputs() == {}


# --- what can't exist

percents = st.one_of(
    st.none(), st.floats(-90, 300), st.builds(lambda p: Spread(0, (("wrist", p),)), st.floats(-90, 300))
)


@settings(max_examples=100, deadline=None)
@given(
    st.builds(
        Case,
        payload_kg=st.one_of(st.none(), st.floats(0, 50)),
        payload_cog_mm=st.one_of(st.none(), st.tuples(*[st.floats(-300, 300)] * 3)),
        link_mass_percent=percents,
        link_cog_mm=st.just((("forearm", (300, -300, 300)),)),
        link_inertia_percent=percents,
        viscous_percent=st.floats(-90, 300),
    ),
    st.floats(0, 3),
)
def test_every_stated_plant_can_exist(case, level):
    """Whatever is stated, on whatever draw, the links are bodies that can exist."""
    got = plant(ARM, FULL, level, FULL.sources, SEED, DRAW, case)
    assert possible(got.parameters)


@pytest.mark.parametrize(
    ("case", "key", "said"),
    [
        (Case(link_cog_mm=(("wrist", (1e12, 0, 0)),)), "link_cog_mm", "link 'wrist' can't exist"),
        (Case(link_inertia_percent=-100 + 1e-13), "link_inertia_percent", "can't exist"),
        (Case(payload_kg=3, payload_cog_mm=(1e300, 0, 0)), "payload_cog_mm", "link 'gripper' can't exist"),
        (
            Case(payload_kg=1e300, link_inertia_percent=-100 + 1e-13, viscous_percent=60),
            "payload_kg",
            "link 'gripper' can't exist",
        ),
    ],
)
@pytest.mark.parametrize("level", [0.0, 1.0])
def test_an_impossible_case_names_its_key(case, key, said, level):
    """Numbers past all bodies end as a fault that names the first key, in order, that breaks the plant."""
    with pytest.raises(InputFaults) as caught:
        stated(case, level)
    (fault,) = caught.value.faults
    assert fault.key == f"case.{key}"
    assert said in fault.problem


def test_a_source_is_blamed_before_the_case():
    """Where the draw alone is impossible already, its source is named."""
    with pytest.raises(InputFaults) as caught:
        plant(ARM, FULL, 1e6, ("viscous_percent",), 1, 1, Case(payload_kg=1e300))
    assert caught.value.faults[0].key == "mismatch.viscous_percent"


@pytest.mark.parametrize(
    "nonsense",
    [
        lambda: Case(payload_kg=-1),
        lambda: Case(payload_kg=float("nan")),
        lambda: Case(payload_cog_mm=(1, 2)),
        lambda: Case(payload_cog_mm=(1, 2, float("inf"))),
        lambda: Case(viscous_percent=-100),
        lambda: Case(viscous_percent=Spread(0, (("j1", -101),))),
        lambda: Case(viscous_percent=Spread(5, shared=True)),
        lambda: Case(link_cog_mm=(("wrist", (1, 2, 3)), ("wrist", (0, 0, 0)))),
    ],
)
def test_nonsense_is_no_case(nonsense):
    """What can't be stated is refused."""
    with pytest.raises(ValueError):  # noqa: PT011 - the class says it in its own words
        nonsense()


def test_a_link_that_the_arm_lacks_is_refused():
    """A case for another arm is a mistake of the caller, never ignored."""
    for case in (Case(link_cog_mm=(("wirst", (1, 0, 0)),)), Case(viscous_percent=Spread(0, (("wrist", 1),)))):
        with pytest.raises(ValueError, match=r"wirst|wrist"):
            stated(case)


# --- as part of a run


def run_of(case: Case | None, level: float = 0.0, law: str = "gravity-compensated") -> Run:
    pose = (0.0, -1.0, 1.5, 0.0, 1.0, 0.0)
    return Run(
        arm=FILES,
        law=choose(law, options_model(registered().laws[law].cls)()),
        motion=ViaMotion(points=(pose, (0.2, *pose[1:])), leg_s=0.2, rest_s=0.1),
        rates=Rates(500, 1000),
        gain_pose=pose,
        settle_band_mm=0.5,
        seed=SEED,
        mismatch=FULL,
        level=level,
        sources=FULL.sources if level else (),
        draw=DRAW if level else None,
        case=case,
    )


def test_inputs_hold_the_case_only_where_there_is_one():
    """Runs without a case keep their key; each thing stated makes another; names in any order the same."""
    assert "case" not in run_of(None).inputs()
    assert run_of(None).inputs()["draw"] is None
    cases = [
        None,
        Case(payload_kg=3),
        Case(payload_kg=2),
        Case(payload_cog_mm=(1, 2, 3)),
        Case(link_cog_mm=(("wrist", (1, 2, 3)),)),
        Case(viscous_percent=60),
        Case(viscous_percent=Spread(60, (("j2", 10),))),
        Case(link_mass_percent=60),
    ]
    assert len({run_of(case).key() for case in cases}) == len(cases)
    with_case = run_of(Case(payload_kg=3)).inputs()
    assert with_case.pop("case") == {"payload_kg": 3.0}
    assert json.dumps(with_case) == json.dumps(run_of(None).inputs())
    one = Case(link_cog_mm=(("wrist", (1, 2, 3)), ("forearm", (0, 0, 1))), viscous_percent=60)
    other = Case(link_cog_mm=(("forearm", (0.0, 0, 1)), ("wrist", (1, 2, 3))), viscous_percent=Spread(60.0))
    assert one == other
    assert run_of(one).key() == run_of(other).key()
    assert run_of(one).inputs()["case"] == {
        "link_cog_mm": {"forearm": [0.0, 0.0, 1.0], "wrist": [1.0, 2.0, 3.0]},
        "viscous_percent": 60.0,
    }


def test_a_case_travels_by_pickle():
    """Equal after pickling, with the same hash, alone and in its run."""
    case = Case(payload_kg=3, viscous_percent=Spread(60, (("j2", 10),)), link_cog_mm=(("wrist", (1, 2, 3)),))
    assert pickle.loads(pickle.dumps(case)) == case
    assert hash(pickle.loads(pickle.dumps(case))) == hash(case)
    assert pickle.loads(pickle.dumps(run_of(case))).key() == run_of(case).key()


@pytest.mark.parametrize("level", [0.0, 1.0])
def test_the_rig_moves_the_stated_plant_and_the_law_believes_the_model(level):
    """The log's plant is the stated one, and the law's first torque is the same with and without a case."""
    full, without = (simulate(run_of(case, level)) for case in (Case(payload_kg=3, viscous_percent=60), None))
    wanted = stated(Case(payload_kg=3, viscous_percent=60), level, arm=FILES.arm())
    assert changed(full.plant, wanted) == set()
    assert full.outcome == "finished"
    assert full.torque[0].tobytes() == without.torque[0].tobytes()
    assert np.abs(full.q - without.q).max() > 1e-4

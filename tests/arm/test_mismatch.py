"""The plant: the model with its mismatch."""

from __future__ import annotations

import dataclasses
import json
import pickle
import time

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats

from rigbench.arm.arm import Arm, Drives
from rigbench.arm.mismatch import (
    Mismatch,
    Payload,
    believed,
    draw_values,
    parameter_names,
    plant,
    uniform,
)
from rigbench.arm.physical import central_moments, from_inertia, inertia, possible
from rigbench.errors import InputFaults

N = 6
FULL = Mismatch(
    link_mass_percent=5,
    link_cog_mm=5,
    link_inertia_percent=15,
    payload=Payload(1.5, 0, 3, 30),
    coulomb_percent=30,
    viscous_percent=30,
    rotor_inertia_percent=15,
)
FRICTION = ("coulomb_percent", "viscous_percent", "rotor_inertia_percent")
TOOL_ROTATION = np.array([[0.0, 0, 1], [1, 0, 0], [0, 1, 0]])


def make_arm(seed: int = 0, n: int = N) -> Arm:
    """A chain of n joints with links that can exist, each turned and shifted in its frame."""
    rng = np.random.default_rng(seed)
    axes = np.linalg.qr(rng.normal(size=(n, 3, 3)))[0]
    sigma = axes * rng.uniform(0.001, 0.05, (n, 1, 3)) @ axes.transpose(0, 2, 1)
    tensor = np.trace(sigma, axis1=1, axis2=2)[:, None, None] * np.eye(3) - sigma
    return Arm(
        name="mock",
        joints=tuple(f"j{i + 1}" for i in range(n)),
        links=tuple(f"link{i + 1}" for i in range(n)),
        kinds=np.zeros(n),
        rotation=np.tile(np.eye(3), (n, 1, 1)),
        position=np.tile([0.0, 0, 0.3], (n, 1)),
        axis=np.tile([0.0, 0, 1], (n, 1)),
        parameters=from_inertia(rng.uniform(0.5, 10, n), rng.normal(0, 0.1, (n, 3)), tensor),
        tool_rotation=TOOL_ROTATION,
        tool_position=np.array([0.0, 0, 0.1]),
        lower=np.full(n, -np.inf),
        upper=np.full(n, np.inf),
        drives=dataclasses.replace(
            Drives.ideal(n),
            gear_ratio=np.full(n, 100.0),
            rotor_inertia=rng.uniform(1e-5, 1e-4, n),
            viscous=rng.uniform(1, 6, n),
            coulomb=rng.uniform(1, 6, n),
            static=rng.uniform(6, 8, n),
        ),
    )


ARM = make_arm()


def arrays(arm: Arm) -> dict[str, np.ndarray]:
    """Every array of an arm by name."""
    values = {**vars(arm), **vars(arm.drives)}
    return {name: value for name, value in values.items() if isinstance(value, np.ndarray)}


def same_bits(one: Arm, other: Arm) -> bool:
    """Whether two arms agree in every bit."""
    theirs = arrays(other)
    return all(value.tobytes() == theirs[name].tobytes() for name, value in arrays(one).items())


def alone(source: str, level: float = 1.0, draw: int = 4, mismatch: Mismatch = FULL) -> Arm:
    """The plant of one source."""
    return plant(ARM, mismatch, level, (source,), 2026, draw)


# --- the streams


def test_uniform_is_the_digest_it_says():
    """The factor of a name is the standard digest of its key, as an independent program gives it."""
    # GNU core utilities: printf '2026|payload.mass|3' | b2sum -l 64; its first 53 bits over 2^52, less 1.
    assert uniform(2026, "payload.mass", 3) == (0xCCD41E6472C4C071 >> 11) * 2.0**-52 - 1


def test_draws_are_uniform():
    """4,000 draws of one parameter, and the parameters of one draw, are uniform in [-1, 1)."""
    by_draw = [uniform(1, "link_mass_percent.link1", draw) for draw in range(4000)]
    by_name = list(draw_values(make_arm(n=400), FULL, FULL.sources, 1, 0).values())
    for sample in (by_draw, by_name):
        assert -1 <= min(sample) < -0.99
        assert 0.99 < max(sample) < 1
        # Fixed seed, so the outcome is fixed; a fair stream falls below 0.001 once in a thousand seeds.
        assert stats.kstest(sample, stats.uniform(-1, 2).cdf).pvalue > 0.001


def test_streams_are_independent():
    """Over 4,000 draws no two of 64 parameters are correlated, nor one with itself a draw later."""
    names = [name for source in FULL.sources for name in parameter_names(ARM, source)]
    values = np.array([[uniform(5, name, draw) for draw in range(4000)] for name in names])
    correlation = np.corrcoef(values) - np.eye(len(names))
    later = [np.corrcoef(row[1:], row[:-1])[0, 1] for row in values]
    # Standard deviation 1/sqrt(4000) = 0.0158; the largest of 2,016 normal values stays below 4.5 of it
    # in 98 of 100 seeds.
    assert np.abs(correlation).max() < 4.5 / np.sqrt(4000)
    assert np.abs(later).max() < 4.5 / np.sqrt(4000)


def test_seed_name_and_draw_all_count():
    """Changing any one of the three changes the factor; keys can't run into each other."""
    base = uniform(1, "a", 2)
    assert base not in (uniform(2, "a", 2), uniform(1, "b", 2), uniform(1, "a", 3), uniform(1, "a|2", 2))
    assert base == uniform(np.int64(1), "a", np.int64(2))


def test_every_parameter_has_a_name_of_its_own():
    """Six links and joints have 7 x 6 + 4 + 3 x 6 factors, all named apart, in [-1, 1)."""
    values = draw_values(ARM, FULL, FULL.sources, 1, 0)
    assert len(values) == 7 * N + 4 + 3 * N
    assert {"link_cog_mm.link2.x", "link_inertia_percent.link6.3", "payload.mass"} <= values.keys()
    assert {"payload.cog.z", "coulomb_percent.j1", "rotor_inertia_percent.j6"} <= values.keys()
    assert all(-1 <= value < 1 for value in values.values())


@pytest.mark.parametrize("source", FULL.sources)
def test_adding_a_source_changes_no_draw(source):
    """What a source draws, and does to what it alone touches, is the same bits beside any others."""
    few = draw_values(ARM, Mismatch(**{source: getattr(FULL, source)}), (source,), 9, 1)
    many = draw_values(ARM, FULL, FULL.sources, 9, 1)
    assert few == {name: many[name] for name in few}


def test_sources_that_share_nothing_leave_each_other_bit_identical():
    """Friction drawn beside link sources equals friction drawn alone, bit for bit, and conversely."""
    links = plant(ARM, FULL, 1, FULL.sources[:4], 9, 1)
    drives = plant(ARM, FULL, 1, FRICTION, 9, 1)
    both = plant(ARM, FULL, 1, FULL.sources, 9, 1)
    assert same_bits(both, links.replaced(drives=drives.drives))


def test_the_order_of_sources_does_not_matter():
    """Sources are a set: naming them in another order builds the same plant."""
    assert same_bits(
        plant(ARM, FULL, 1, FULL.sources, 9, 1), plant(ARM, FULL, 1, tuple(reversed(FULL.sources)), 9, 1)
    )


# --- nothing random


@pytest.mark.parametrize("mismatch", [Mismatch(), FULL, Mismatch(payload=Payload(0, 0, 2))])
def test_at_level_0_the_plant_is_the_model(mismatch):
    """At level 0, and without sources, plant and model agree in every bit, and no draw is needed."""
    model = believed(ARM, mismatch)
    assert same_bits(plant(ARM, mismatch, 0, mismatch.sources, 1, None), model)
    assert same_bits(plant(ARM, mismatch, 2, (), 1, None), model)
    assert same_bits(plant(ARM, mismatch, 0, mismatch.sources, 1, 3), model)


def test_without_payload_the_model_is_the_arm():
    """No payload, or one believed to weigh nothing, leaves the arm itself."""
    assert believed(ARM, Mismatch(link_cog_mm=3)) is ARM
    assert believed(ARM, Mismatch(payload=Payload(0, 0, 2))) is ARM


def test_the_believed_payload_sits_at_the_tool_point():
    """Only the last link changes: by m, m r and m (r.r 1 - r r^T) with r the tool point (0, 0, 0.1)."""
    model = believed(ARM, FULL)
    np.testing.assert_array_equal(model.parameters[:-1], ARM.parameters[:-1])
    added = [1.5, 0, 0, 0.15, 0.015, 0, 0.015, 0, 0, 0]
    np.testing.assert_allclose(model.parameters[-1] - ARM.parameters[-1], added, atol=1e-14)


def test_the_arm_itself_is_left_alone():
    """Building a plant writes into none of the arm's arrays."""
    before = {name: value.copy() for name, value in arrays(ARM).items()}
    plant(ARM, FULL, 2, FULL.sources, 1, 1)
    for name, value in arrays(ARM).items():
        np.testing.assert_array_equal(value, before[name])


# --- closed forms, source by source


def test_link_mass_scales_all_ten_parameters():
    """A link's ten parameters are multiplied by (1 + spread)^(level u), and nothing else changes."""
    mismatch = Mismatch(link_mass_percent=30)
    got = alone("link_mass_percent", 2.0, mismatch=mismatch)
    u = np.array(list(draw_values(ARM, mismatch, ("link_mass_percent",), 2026, 4).values()))
    np.testing.assert_allclose(
        got.parameters, ARM.parameters * 1.3 ** (2 * u)[:, None], rtol=1e-12, atol=1e-15
    )
    assert same_bits(got.replaced(ARM.parameters), ARM)


def test_the_centre_of_gravity_moves_at_constant_central_inertia():
    """c shifts by level u spread [mm] in each component of the link frame; m and I_c stay."""
    mismatch = Mismatch(link_cog_mm=5)
    mass, cog, tensor = inertia(ARM.parameters)
    mass_got, cog_got, tensor_got = inertia(alone("link_cog_mm", 2.0, mismatch=mismatch).parameters)
    u = [[uniform(2026, f"link_cog_mm.{link}.{axis}", 4) for axis in "xyz"] for link in ARM.links]
    np.testing.assert_allclose(cog_got - cog, 0.010 * np.array(u), atol=1e-15)
    np.testing.assert_allclose(mass_got, mass, rtol=1e-15)
    np.testing.assert_allclose(tensor_got, tensor, atol=1e-15)


def test_principal_second_moments_scale_each_by_its_own_factor():
    """Eigenvalues of Sigma_c are multiplied by 1.15^(level u), ascending; directions, m and c stay."""
    mismatch = Mismatch(link_inertia_percent=15)
    mass, cog, sigma = central_moments(ARM.parameters)
    got = central_moments(alone("link_inertia_percent", 2.0, mismatch=mismatch).parameters)
    np.testing.assert_allclose(got[0], mass, rtol=1e-15)
    np.testing.assert_allclose(got[1], cog, rtol=1e-13)
    for i, link in enumerate(ARM.links):
        values, axes = np.linalg.eigh(sigma[i])
        u = np.array([uniform(2026, f"link_inertia_percent.{link}.{k}", 4) for k in (1, 2, 3)])
        np.testing.assert_allclose(axes.T @ got[2][i] @ axes, np.diag(values * 1.15 ** (2 * u)), atol=1e-15)


def test_link_sources_act_in_their_order():
    """Together: m f, c + d, and f times the scaled Sigma_c; the payload comes on top, unscaled."""
    got = plant(ARM, FULL, 1.0, FULL.sources[:3], 2026, 4)
    bare = dataclasses.replace(FULL, payload=None)
    u = draw_values(ARM, FULL, FULL.sources, 2026, 4)
    factor = np.array([1.05 ** u[f"link_mass_percent.{link}"] for link in ARM.links])
    shift = np.array([[0.005 * u[f"link_cog_mm.{link}.{axis}"] for axis in "xyz"] for link in ARM.links])
    mass, cog, _ = central_moments(ARM.parameters)
    scaled = central_moments(alone("link_inertia_percent").parameters[:5])[2]
    got_mass, got_cog, got_sigma = central_moments(plant(ARM, bare, 1.0, bare.sources, 2026, 4).parameters)
    np.testing.assert_allclose(got_mass, mass * factor, rtol=1e-14)
    np.testing.assert_allclose(got_cog, cog + shift, atol=1e-15)
    np.testing.assert_allclose(got_sigma[:5], scaled * factor[:5, None, None], atol=1e-15)
    on_top = got.parameters[-1] - plant(ARM, bare, 1.0, bare.sources[:3], 2026, 4).parameters[-1]
    np.testing.assert_allclose(on_top, [1.5, 0, 0, 0.15, 0.015, 0, 0.015, 0, 0, 0], atol=1e-14)


@pytest.mark.parametrize(
    ("source", "names"),
    [
        ("coulomb_percent", ("coulomb", "static")),
        ("viscous_percent", ("viscous",)),
        ("rotor_inertia_percent", ("rotor_inertia",)),
    ],
)
def test_friction_and_rotor_scale_joint_by_joint(source, names):
    """Each array is multiplied by (1 + spread)^(level u) of its joint; static goes with Coulomb."""
    got = alone(source, 2.0)
    spread = 1 + getattr(FULL, source).all / 100
    u = np.array([uniform(2026, f"{source}.{joint}", 4) for joint in ARM.joints])
    changed = arrays(believed(ARM, FULL)) | {
        name: getattr(ARM.drives, name) * spread ** (2 * u) for name in names
    }
    for name, value in arrays(got).items():
        np.testing.assert_allclose(value, changed[name], rtol=1e-14)


@pytest.mark.parametrize("spread", [30.0, -20.0, 300.0])
def test_percent_factors_are_symmetric_in_the_logarithm(spread):
    """Over draws, log(factor) / log(1 + spread) is u itself: from -1 to 1 at level 1, mean near 0."""
    mismatch = Mismatch(viscous_percent=spread)
    ratio = np.array(
        [
            plant(ARM, mismatch, 1, ("viscous_percent",), 3, draw).drives.viscous / ARM.drives.viscous
            for draw in range(300)
        ]
    )
    u = np.log(ratio) / np.log1p(spread / 100)
    assert np.abs(u).max() < 1
    # 1,800 uniform values: their mean's standard deviation is 1/sqrt(3 x 1800) = 0.0136.
    assert abs(u.mean()) < 4 * 0.0136
    assert (ratio > 0).all()


# --- the payload


def payload_of(draw: int, level: float, payload: Payload) -> tuple[float, np.ndarray]:
    """Mass and place [m, link frame] of the payload, read back from what was added to the last link."""
    added = (
        plant(ARM, Mismatch(payload=payload), level, ("payload",), 1, draw).parameters[-1]
        - ARM.parameters[-1]
    )
    return added[0], added[1:4] / added[0] if added[0] > 1e-9 else np.zeros(3)


@pytest.mark.parametrize("level", [0.5, 1.0, 2.5])
def test_the_payload_is_drawn_between_its_ends_and_stays_there(level):
    """Upwards by level u (most - believed), downwards by level u (believed - least), then clipped."""
    payload = Payload(believed_kg=1.5, least_kg=0.5, most_kg=4.0, cog_mm=30)
    for draw in range(40):
        u = uniform(1, "payload.mass", draw)
        wanted = 1.5 + level * u * (2.5 if u > 0 else 1.0)
        assert payload_of(draw, level, payload)[0] == pytest.approx(min(max(wanted, 0.5), 4.0), abs=1e-13)


def test_the_payload_shifts_along_the_tool_frame():
    """Its centre of gravity is the tool point plus level u cog_mm along each axis of the tool frame."""
    u = np.array([uniform(1, f"payload.cog.{axis}", 0) for axis in "xyz"])
    _, at = payload_of(0, 2.0, Payload(1.5, 0.5, 4.0, 30))
    np.testing.assert_allclose(at, [0.06 * u[2], 0.06 * u[0], 0.1 + 0.06 * u[1]], atol=1e-13)


def test_a_payload_of_no_mass_is_nothing():
    """A range from 0 to 0 adds nothing, and a draw at 0 kg leaves the last link bit for bit."""
    nothing = Mismatch(payload=Payload(0, 0, 0, 10))
    assert same_bits(plant(ARM, nothing, 3, ("payload",), 1, 1), ARM)


def test_an_idle_payload_source_leaves_the_believed_payload():
    """While other sources act, the plant carries the believed payload at the tool point exactly."""
    got = plant(ARM, FULL, 1, ("viscous_percent",), 1, 1)
    assert got.parameters.tobytes() == believed(ARM, FULL).parameters.tobytes()


# --- what can't exist


@settings(max_examples=150, deadline=None)
@given(
    st.integers(0, 50),
    st.floats(0, 4),
    st.integers(0, 1000),
    st.builds(
        Mismatch,
        link_mass_percent=st.floats(-90, 300),
        link_cog_mm=st.floats(0, 100),
        link_inertia_percent=st.floats(-90, 300),
        payload=st.just(Payload(1, 0, 5, 100)),
        viscous_percent=st.floats(-90, 300),
    ),
)
def test_every_plant_can_exist(seed, level, draw, mismatch):
    """Whatever the spreads, the draw and the level up to 4, a plant is a body that can exist."""
    arm = make_arm(seed, 3)
    got = plant(arm, mismatch, level, mismatch.sources, seed, draw)
    assert possible(got.parameters)
    moments = np.linalg.eigvalsh(inertia(got.parameters)[2])
    assert (moments[:, 0] + moments[:, 1] > moments[:, 2]).all()


@pytest.mark.parametrize(
    ("source", "level", "said"),
    [
        ("link_mass_percent", 1e6, "its mass is 0 kg"),
        ("link_cog_mm", 1e9, "can't exist"),
        ("link_inertia_percent", 1e6, "parameters are not finite"),
        ("viscous_percent", 1e6, "viscous is not finite"),
        ("rotor_inertia_percent", 1e6, "rotor inertia is not finite"),
    ],
)
def test_an_impossible_plant_names_its_source(source, level, said):
    """A level past all numbers ends as a fault that names the source at work, not as a plant."""
    with pytest.raises(InputFaults) as caught:
        alone(source, level)
    (fault,) = caught.value.faults
    assert fault.key == f"mismatch.{source}"
    assert said in fault.problem
    assert "less spread or level" in str(fault)


def test_an_impossible_plant_names_the_first_source():
    """With all sources at work, the first in their order that breaks the plant is the one named."""
    mild = dataclasses.replace(FULL, link_mass_percent=0, link_cog_mm=0)
    with pytest.raises(InputFaults) as caught:
        plant(ARM, mild, 1e6, mild.sources, 1, 1)
    assert caught.value.faults[0].key == "mismatch.link_inertia_percent"


def test_an_impossible_arm_is_the_arms_fault():
    """An arm with principal inertias 1, 1, 3 is refused at level 0 and above, and no source is blamed."""
    parameters = ARM.parameters.copy()
    parameters[2] = from_inertia(2.0, np.zeros(3), np.diag([1.0, 1.0, 3.0]))
    broken = ARM.replaced(parameters)
    for level in (0, 1):
        with pytest.raises(InputFaults, match="link 'link3' can't exist: its principal inertias") as caught:
            plant(broken, FULL, level, FRICTION, 1, 1)
        assert caught.value.faults[0].key == ""


@pytest.mark.parametrize("level", [-1, np.nan, np.inf])
def test_a_level_is_finite_and_not_negative(level):
    """Any other level is a mistake of the caller."""
    with pytest.raises(ValueError, match="level"):
        plant(ARM, FULL, level, FULL.sources, 1, 1)


def test_random_sources_need_a_draw_and_must_be_declared():
    """No draw number, or a source without a spread, is a mistake of the caller."""
    with pytest.raises(ValueError, match="draw"):
        plant(ARM, FULL, 1, FULL.sources, 1, None)
    with pytest.raises(ValueError, match="link_cog_mm"):
        plant(ARM, Mismatch(viscous_percent=3), 1, ("link_cog_mm",), 1, 1)
    with pytest.raises(ValueError, match="wobble"):
        draw_values(ARM, FULL, ("wobble",), 1, 1)


@pytest.mark.parametrize(
    "nonsense",
    [
        lambda: Mismatch(link_mass_percent=-100),
        lambda: Mismatch(viscous_percent=float("nan")),
        lambda: Mismatch(link_cog_mm=-1),
        lambda: Mismatch(coulomb_percent=float("inf")),
        lambda: Payload(1, 2, 3),
        lambda: Payload(4, 2, 3),
        lambda: Payload(1, -1, 3),
        lambda: Payload(1, 0, float("inf")),
        lambda: Payload(1, 0, 3, -1),
    ],
)
def test_nonsense_is_refused(nonsense):
    """Spreads of -100 percent and below, not finite or out of order are no mismatch."""
    with pytest.raises(ValueError):  # noqa: PT011 - the two classes say it in their own words
        nonsense()


# --- as a value


def test_sources_are_those_declared_in_order():
    """A spread of 0 is declared; None is not."""
    fields = tuple(field.name for field in dataclasses.fields(Mismatch))
    assert Mismatch(**dict.fromkeys(fields, 0) | {"payload": FULL.payload}).sources == fields
    assert FULL.sources == tuple(name for name in fields if getattr(FULL, name) is not None)
    assert Mismatch(viscous_percent=0, link_cog_mm=1).sources == ("link_cog_mm", "viscous_percent")
    assert Mismatch().sources == ()


def test_inputs_hold_what_acts_and_nothing_else():
    """Idle sources leave no trace but the believed payload; 5 and 5.0 are the same spread."""
    assert FULL.inputs(()) == {"believed_kg": 1.5}
    assert FULL.inputs(("link_cog_mm", "payload")) == {
        "believed_kg": 1.5,
        "link_cog_mm": 5.0,
        "payload": [0.0, 3.0, 30.0],
    }
    assert Mismatch().inputs(()) == Mismatch(payload=Payload(0, 0, 9)).inputs(())
    floats = Mismatch(link_mass_percent=5.0)
    assert json.dumps(floats.inputs(floats.sources)) == json.dumps(
        FULL.inputs(("link_mass_percent",))
    ).replace("1.5", "0.0")
    with pytest.raises(ValueError, match="viscous"):
        Mismatch().inputs(("viscous_percent",))


def test_it_survives_pickling_and_hashes_by_value():
    """Equal mismatches are equal after pickling and as keys."""
    again = pickle.loads(pickle.dumps(FULL))
    assert again == FULL
    assert hash(again) == hash(FULL)


@pytest.mark.evidence
def test_a_plant_takes_under_a_millisecond():
    """Six links with every source at work: 0.3 ms here, draws included, so a run hardly notices."""
    plant(ARM, FULL, 1, FULL.sources, 1, 0)
    took = []
    for draw in range(200):
        start = time.perf_counter()
        plant(ARM, FULL, 1, FULL.sources, 1, draw)
        took.append(time.perf_counter() - start)
    assert np.median(took) < 1e-3

"""Spreads: one number for all, one for each link or joint, one factor for all."""

from __future__ import annotations

import json
import pickle
from pathlib import Path

import numpy as np
import pytest

from rigbench.arm.arm import Arm
from rigbench.arm.files import load_arm
from rigbench.arm.mismatch import (
    Mismatch,
    Payload,
    Spread,
    carriers,
    draw_values,
    parameter_names,
    plant,
    uniform,
    unknown_names,
)
from rigbench.arm.physical import central_moments

ARM = load_arm(Path(__file__).resolve().parents[2] / "robots_demo" / "tray6" / "arm.yaml")
PERCENT = (
    "link_mass_percent", "link_inertia_percent", "coulomb_percent", "viscous_percent", "rotor_inertia_percent"
)  # fmt: skip
SEED, DRAW, LEVEL = 11, 3, 1.5


def drawn(mismatch: Mismatch, level: float = LEVEL) -> Arm:
    return plant(ARM, mismatch, level, mismatch.sources, SEED, DRAW)


def bits(arm: Arm) -> list[bytes]:
    return [arm.parameters.tobytes(), *(value.tobytes() for value in vars(arm.drives).values())]


# --- plain numbers


def test_a_plain_number_is_a_spread_for_all():
    """5 and Spread(5), and Spread(5) with a name that says 5 again, are the same: value, inputs, plant."""
    plain = Mismatch(5, 6, 7, Payload(1, 0, 2, 10), 8, 9, 10)
    spelled = Mismatch(
        Spread(5), Spread(6), Spread(all=7), Payload(1, 0, 2, 10), Spread(8), Spread(9), Spread(10)
    )
    again = Mismatch(Spread(5, (("wrist", 5),)), 6, 7, Payload(1, 0, 2, 10), Spread(8, (("j2", 8.0),)), 9, 10)
    assert plain == spelled
    assert hash(plain) == hash(spelled)
    assert isinstance(plain.link_mass_percent, Spread)
    for other in (spelled, again):
        assert json.dumps(plain.inputs(plain.sources)) == json.dumps(other.inputs(other.sources))
        assert bits(drawn(plain)) == bits(drawn(other))


def test_plain_inputs_are_numbers_as_ever():
    """The inputs of plain spreads, of which stored keys are digests, are what they were before spreads."""
    mismatch = Mismatch(5, 5, 15, Payload(1.5, 0, 3, 30), 30, 30, 15)
    assert json.dumps(mismatch.inputs(mismatch.sources)) == (
        '{"believed_kg": 1.5, "link_mass_percent": 5.0, "link_cog_mm": 5.0, "link_inertia_percent": 15.0, '
        '"payload": [0.0, 3.0, 30.0], "coulomb_percent": 30.0, "viscous_percent": 30.0, '
        '"rotor_inertia_percent": 15.0}'
    )


# --- by name


def test_names_replace_the_number_for_all():
    """{all: 5, wrist: 25}: 25 for the wrist, 5 for the others, in the order of the arm's links."""
    spread = Spread.declared({"all": 5, "wrist": 25})
    assert spread == Spread(5, (("wrist", 25),))
    assert spread.of(ARM.links).tolist() == [5, 5, 5, 5, 25, 5]
    assert Spread.declared({"wrist": 25}).of(ARM.links).tolist() == [0, 0, 0, 0, 25, 0]
    assert Spread.declared(5) == Spread(5)
    assert Spread.declared({"all": 5, "shared": True}) == Spread(5, shared=True)


@pytest.mark.parametrize("source", PERCENT)
def test_a_percentage_by_name_scales_what_it_names(source):
    """(1 + p_i / 100)^(level u_i) with p_i of its own link or joint, and u_i that of a plain number."""
    names = carriers(ARM, source)
    percent = np.array([5.0, 0, 12, 300, -40, 5])
    mismatch = Mismatch(**{source: Spread(5, tuple(zip(names, percent, strict=True)))})
    got = drawn(mismatch)
    ends = (".1", ".2", ".3") if source == "link_inertia_percent" else ("",)
    u = np.array([[uniform(SEED, f"{source}.{name}{end}", DRAW) for end in ends] for name in names])
    wanted = (1 + percent[:, None] / 100) ** (LEVEL * u)
    if source == "link_inertia_percent":
        ratio = np.linalg.eigvalsh(central_moments(got.parameters)[2]) / np.linalg.eigvalsh(
            central_moments(ARM.parameters)[2]
        )
        # eigenvalues ascend, so compare what survives a change of their order
        np.testing.assert_allclose(ratio.prod(axis=1), wanted.prod(axis=1), rtol=1e-9)
    elif source == "link_mass_percent":
        np.testing.assert_allclose(got.parameters, ARM.parameters * wanted, rtol=1e-9, atol=1e-15)
    else:
        name = source.removesuffix("_percent")
        np.testing.assert_allclose(
            getattr(got.drives, name), getattr(ARM.drives, name) * wanted[:, 0], rtol=1e-14
        )


def test_a_centre_of_gravity_by_name_moves_by_its_own_millimetres():
    """Each link's centre of gravity shifts by level u times its own spread."""
    got = drawn(Mismatch(link_cog_mm=Spread(2, (("forearm", 20), ("turret", 0)))))
    shift = central_moments(got.parameters)[1] - central_moments(ARM.parameters)[1]
    u = np.array(
        [[uniform(SEED, f"link_cog_mm.{link}.{axis}", DRAW) for axis in "xyz"] for link in ARM.links]
    )
    np.testing.assert_allclose(shift, 1e-3 * LEVEL * u * np.array([0, 2, 20, 2, 2, 2])[:, None], atol=1e-15)


@pytest.mark.parametrize("source", [*PERCENT, "link_cog_mm"])
def test_detail_for_one_changes_no_other(source):
    """Naming one link or joint leaves every u as it was, and all other links and joints bit for bit."""
    names = carriers(ARM, source)
    plain = Mismatch(**{source: Spread(5)})
    detailed = Mismatch(**{source: Spread(5, ((names[4], 25),))})
    assert draw_values(ARM, plain, (source,), SEED, DRAW) == draw_values(ARM, detailed, (source,), SEED, DRAW)
    others = [0, 1, 2, 3, 5]
    one, other = drawn(plain), drawn(detailed)
    assert one.parameters[others].tobytes() == other.parameters[others].tobytes()
    for name, value in vars(one.drives).items():
        assert value[others].tobytes() == getattr(other.drives, name)[others].tobytes()
    assert bits(one) != bits(other)


# --- shared


def test_what_is_shared_has_one_set_of_names():
    """'all' stands in place of links and joints, once; a payload is one thing anyway."""
    names = {source: parameter_names(ARM, source, shared=True) for source in (*PERCENT, "link_cog_mm")}
    assert names.pop("link_cog_mm") == tuple(f"link_cog_mm.all.{axis}" for axis in "xyz")
    assert names.pop("link_inertia_percent") == tuple(f"link_inertia_percent.all.{k}" for k in (1, 2, 3))
    assert names == {source: (f"{source}.all",) for source in names}
    assert parameter_names(ARM, "payload", shared=True) == parameter_names(ARM, "payload")


@pytest.mark.parametrize("source", ["link_mass_percent", "coulomb_percent", "rotor_inertia_percent"])
def test_a_shared_percentage_is_one_factor(source):
    """All links or joints are multiplied by the same 1.05^(level u), u that of the name 'all'."""
    mismatch = Mismatch(**{source: Spread(5, shared=True)})
    factor = 1.05 ** (LEVEL * uniform(SEED, f"{source}.all", DRAW))
    got = drawn(mismatch)
    if source == "link_mass_percent":
        np.testing.assert_allclose(got.parameters, factor * ARM.parameters, rtol=1e-9, atol=1e-15)
    else:
        name = source.removesuffix("_percent")
        np.testing.assert_allclose(getattr(got.drives, name), factor * getattr(ARM.drives, name), rtol=1e-15)
    assert draw_values(ARM, mismatch, (source,), SEED, DRAW) == {
        f"{source}.all": uniform(SEED, f"{source}.all", DRAW)
    }


def test_a_shared_factor_goes_with_spreads_by_name():
    """With {all: 30, j2: 60, shared: true} log(ratio) / log(1 + spread) is one number: level times u."""
    mismatch = Mismatch(viscous_percent=Spread(30, (("j2", 60),), shared=True))
    ratio = drawn(mismatch).drives.viscous / ARM.drives.viscous
    exponent = np.log(ratio) / np.log([1.3, 1.6, 1.3, 1.3, 1.3, 1.3])
    u = uniform(SEED, "viscous_percent.all", DRAW)
    np.testing.assert_allclose(exponent, LEVEL * u, rtol=1e-12)


def test_a_shared_centre_of_gravity_has_one_factor_an_axis():
    """Every link shifts alike in its own frame, each axis by its own u."""
    got = drawn(Mismatch(link_cog_mm=Spread(5, shared=True)))
    shift = central_moments(got.parameters)[1] - central_moments(ARM.parameters)[1]
    u = [uniform(SEED, f"link_cog_mm.all.{axis}", DRAW) for axis in "xyz"]
    np.testing.assert_allclose(shift, np.tile(5e-3 * LEVEL * np.array(u), (6, 1)), atol=1e-15)
    assert len(set(u)) == 3


def test_a_shared_inertia_has_one_factor_a_principal_moment():
    """Every link's principal second moments, ascending, are multiplied by the same three factors."""
    got = drawn(Mismatch(link_inertia_percent=Spread(15, shared=True)))
    u = np.array([uniform(SEED, f"link_inertia_percent.all.{k}", DRAW) for k in (1, 2, 3)])
    before, after = (central_moments(arm.parameters)[2] for arm in (ARM, got))
    np.testing.assert_allclose(
        np.linalg.eigvalsh(after),
        np.sort(np.linalg.eigvalsh(before) * 1.15 ** (LEVEL * u), axis=1),
        rtol=1e-9,
    )


def test_sharing_one_source_changes_no_other():
    """The draw of other sources stays bit for bit when one becomes shared."""
    apart = drawn(Mismatch(coulomb_percent=20, viscous_percent=30))
    shared = drawn(Mismatch(coulomb_percent=20, viscous_percent=Spread(30, shared=True)))
    assert apart.drives.coulomb.tobytes() == shared.drives.coulomb.tobytes()
    assert not np.array_equal(apart.drives.viscous, shared.drives.viscous)


# --- as a value


def test_inputs_say_what_acts_whatever_the_order():
    """Names in another order are the same spread with the same inputs; what is shared is said."""
    one, other = Spread(5, (("wrist", 25), ("turret", 1))), Spread(5, (("turret", 1), ("wrist", 25)))
    assert one == other
    assert json.dumps(one.inputs()) == json.dumps(other.inputs())
    assert one.inputs() == {"all": 5.0, "each": {"turret": 1.0, "wrist": 25.0}, "shared": False}
    assert Spread(5, shared=True).inputs() == {"all": 5.0, "each": {}, "shared": True}
    assert pickle.loads(pickle.dumps(one)) == one


@pytest.mark.parametrize(
    "nonsense",
    [
        lambda: Spread(float("nan")),
        lambda: Spread(5, (("wrist", float("inf")),)),
        lambda: Spread(5, (("wrist", 1), ("wrist", 2))),
        lambda: Spread(5, (("all", 1),)),
        lambda: Spread(5, (("shared", 1),)),
        lambda: Mismatch(link_mass_percent=Spread(5, (("wrist", -100),))),
        lambda: Mismatch(link_cog_mm=Spread(5, (("wrist", -1),))),
    ],
)
def test_nonsense_is_no_spread(nonsense):
    """What isn't finite, names twice, names a reserved word or leaves nothing is refused."""
    with pytest.raises(ValueError):  # noqa: PT011 - each class says it in its own words
        nonsense()


def test_names_that_the_arm_lacks_are_found():
    """Links for what links have, joints for what joints have; each unknown name with its nearest."""
    assert carriers(ARM, "link_cog_mm") == ARM.links
    assert carriers(ARM, "viscous_percent") == ARM.joints
    assert carriers(ARM, "payload") == ()
    assert unknown_names(ARM, "link_mass_percent", ("wrist", "wirst", "j1")) == (
        ("wirst", "wrist"),
        ("j1", None),
    )
    assert unknown_names(ARM, "viscous_percent", ("wrist", "j2")) == (("wrist", None),)
    with pytest.raises(ValueError, match="fore_arm"):
        drawn(Mismatch(Spread(5, (("fore_arm", 1),))))

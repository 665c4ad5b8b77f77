"""The built-in laws: plain and compiled paths, gains, and what they ask of the drive at rest."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rigbench.laws.law import A_REF, CLOCK, Q_REF, TAU, V_REF, Q, Reference, Setup, V
from rigbench.laws.model import Model
from rigbench.laws.registry import registered

GRAVITY = (0.0, 0.0, -9.81)
VARIANTS = [
    ("independent-joint", {}),
    ("independent-joint-pid", {}),
    ("joint-cascade", {}),
    ("disturbance-observer", {}),
    ("gravity-compensated", {}),
    ("torque-feedforward", {}),
    ("torque-feedforward", {"terms": "diagonal", "look_ahead": 0.5, "model_hz": 100.0}),
    ("computed-torque", {}),
    ("computed-torque", {"filter_hz": 20.0}),
    ("robust-outer-loop", {}),
    ("sliding-mode", {}),
    ("sliding-mode", {"boundary": 2.0}),
    ("pd-plus", {}),
    *(("slotine-li", {"adapts": adapts}) for adapts in ("all", "links", "masses", "payload", "friction")),
    ("robust-passivity", {}),
    ("robust-passivity", {"bound_percent": 100.0, "boundary": 20.0}),
]
LAWS = tuple(dict.fromkeys(name for name, _ in VARIANTS))
TICKS = 6


def setup_for(arm, pose=(0.3, -0.4)):
    limits = arm.drives.torque_limit, arm.drives.speed_limit
    return Setup(arm.joints, Model(arm, GRAVITY), 1000.0, np.array(pose), *limits)


def started(name, arm, **options):
    law = registered().laws[name].cls(**options)
    law.start(setup_for(arm))
    return law


def plain_torques(law, course):
    """Torques and model terms of the Python methods along ``course``, tick by tick."""
    torques, terms = [], []
    for k, (q, v, *ref) in enumerate(course):
        held = law.model_term(k / 1000, q, v, Reference(*ref))
        torques.append(law.torque(k / 1000, q, v, Reference(*ref), held))
        terms.append(held)
    return np.array(torques), np.array(terms)


def compiled_torques(law, course):
    """The same of the kernels."""
    kernels, chain = law.compiled(), law._model.chain
    io, kept = np.zeros((CLOCK + 1, 2)), np.zeros(kernels.held_size)
    torques, terms = [], []
    for k, rows in enumerate(course):
        io[[Q, V, Q_REF, V_REF, A_REF]], io[CLOCK, 0] = rows, k / 1000
        if kernels.model_term is not None:
            kernels.model_term(io, kept, chain, kernels.own)
        kernels.torque(io, kept, chain, kernels.own)
        torques.append(io[TAU].copy())
        terms.append(kept.copy())
    return np.array(torques), np.array(terms)


def test_every_built_in_law_is_tested_here():
    """No law of the package goes without the tests below."""
    assert set(LAWS) == {name for name, law in registered().laws.items() if law.package == "rigbench"}


@pytest.mark.parametrize("name", LAWS)
def test_each_law_says_what_happens_between_ticks_and_at_the_limit(name):
    """What `rigbench laws NAME` prints of a built-in law says what is held, and what the drive's limit does."""
    text = registered().laws[name].cls.__doc__
    assert "held" in text
    assert "limit" in text


@pytest.mark.parametrize("friction", ["none", "viscous", "full"])
@pytest.mark.parametrize(("name", "options"), VARIANTS, ids=str)
@settings(max_examples=15, deadline=None)
@given(seed=st.integers(0, 2**32), size=st.sampled_from([0.01, 1.0]))
def test_plain_and_compiled_paths_are_equal(name, options, friction, seed, size, request):
    """A law's kernels give its Python methods' torque, to rounding, tick after tick, within limits and beyond.

    And a law that is started again has nothing left of the run before.
    """
    build = request.getfixturevalue("published_two_link")
    dry = {"coulomb": [3.0, 1.0], "static": [4.0, 1.0], "stribeck_speed": 0.1}
    limits = {"torque_limit": [40.0, 25.0], "speed_limit": [1.0, 2.0]}
    arm = build(**dry, **limits, viscous=[2.0, 0.5], rotor_inertia=1e-4, gear_ratio=40.0)
    law = started(name, arm, friction=friction, **options)
    course = size * np.random.default_rng(seed).normal(size=(TICKS, 5, 2))
    torques, terms = compiled_torques(law, course)
    plain, held = plain_torques(law, course)
    scale = np.abs(plain).max() + 1
    np.testing.assert_allclose(torques, plain, atol=1e-11 * scale)
    np.testing.assert_allclose(terms, held, atol=1e-11 * scale)
    law.start(setup_for(arm))
    np.testing.assert_array_equal(plain_torques(law, course)[0], plain)
    np.testing.assert_array_equal(
        compiled_torques(started(name, arm, friction=friction, **options), course)[0], torques
    )


def test_gains_from_frequency(published_two_link):
    """kp = J' w^2 and kd = 2 damping J' w, with J' = G^2 Jm + M_jj at the gain pose."""
    arm = published_two_link(rotor_inertia=2e-5, gear_ratio=[100.0, 50.0])
    law = started("independent-joint", arm, natural_hz=3.0, damping=0.7)
    c2, w = np.cos(-0.4), 2 * np.pi * 3.0
    m11 = 6.5225 * 0.0983**2 + 2.0458 * (0.26**2 + 0.0229**2 + 2 * 0.26 * 0.0229 * c2) + 0.1213 + 0.0116
    m22 = 2.0458 * 0.0229**2 + 0.0116
    inertia = np.array([m11 + 2e-5 * 1e4, m22 + 2e-5 * 2500])
    np.testing.assert_allclose(law._kp, inertia * w**2, rtol=1e-12)
    np.testing.assert_allclose(law._kd, 2 * 0.7 * inertia * w, rtol=1e-12)
    through = started("computed-torque", arm, natural_hz=3.0, damping=0.7)
    np.testing.assert_allclose(through._kp, w**2)
    np.testing.assert_allclose(through._kd, 2 * 0.7 * w)


def test_explicit_gains_pass_unchanged(published_two_link):
    """kp and kd given joint by joint are used as they stand."""
    law = started("computed-torque", published_two_link(), kp=(1500.0, 14000.0), kd=(77.46, 236.64))
    np.testing.assert_array_equal(law._kp, [1500.0, 14000.0])
    np.testing.assert_array_equal(law._kd, [77.46, 236.64])


@pytest.mark.parametrize(
    ("given", "words"),
    [
        ({"kp"}, "'kp' needs 'kd'"),
        ({"kd", "damping"}, "'kd' needs 'kp'"),
        ({"kp", "kd", "natural_hz"}, "twice"),
    ],
)
def test_half_or_double_gains_are_refused(given, words):
    """Half a set of gains, or two sets, is a conflict with a reason."""
    assert words in registered().laws["independent-joint"].cls.conflict(frozenset(given))


def test_friction_has_no_sign_at_rest(published_two_link):
    """Noise of 1e-12 in a reference at rest asks for no Coulomb torque; motion asks for all of it."""
    model = Model(published_two_link(coulomb=[5.0, 2.0], viscous=0.0), GRAVITY)
    np.testing.assert_array_equal(model.friction(np.array([1e-12, -1e-12])), [0.0, -0.0])
    np.testing.assert_array_equal(model.friction(np.array([0.2, -0.2])), [5.0, -2.0])


def test_stribeck_curve_of_the_model(one_joint):
    """(Fc + (Fs - Fc) exp(-(v/vs)^2)) sign v + B v at v = vs: Armstrong-Helouvry, Dupont, Canudas de Wit 1994."""
    model = Model(one_joint(coulomb=1.0, static=1.5, stribeck_speed=0.01, viscous=0.4), GRAVITY)
    expected = 1.0 + 0.5 * np.exp(-1) + 0.4 * 0.01
    assert model.friction(np.array([-0.01]))[0] == pytest.approx(-expected, rel=1e-12)
    assert model.friction(np.array([0.01]), "viscous")[0] == pytest.approx(0.004)

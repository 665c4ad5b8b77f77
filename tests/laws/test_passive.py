"""M a_r + C(q, v) v_r + g: the factorisation that PD+ and the adaptive law rest on."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rigbench.arm.arm import LINK
from rigbench.arm.dynamics import mass_matrix, place
from rigbench.arm.files import load_arm
from rigbench.laws.model import Model
from rigbench.laws.passive import link_motion, parameter_power, regressor

ROOT = Path(__file__).resolve().parents[2]
GRAVITY = (0.0, 0.0, -9.81)
SEEDS = st.integers(0, 2**32)


@pytest.fixture(scope="module")
def models():
    """tray6, and the same chain with its second and fifth joint made prismatic."""
    arm = load_arm(ROOT / "robots_demo/tray6/arm.yaml")
    sliding = replace(arm, kinds=np.array([0.0, 1.0, 0.0, 0.0, 1.0, 0.0]))
    return {"revolute": Model(arm, GRAVITY), "prismatic": Model(sliding, (1.0, 2.0, -9.0))}


def coriolis(model, q, v):
    """C(q, v), column by column."""
    still = np.zeros(model.n)
    gravity = model.gravity_torque(q)
    return np.column_stack([model.passive_torque(q, v, unit, still) - gravity for unit in np.eye(model.n)])


def christoffel(model, q, v, step=1e-5):
    """M' along v, and C by Christoffel symbols, from central differences of M(q)."""
    slopes = np.array(
        [
            (mass_matrix(model.chain, q + d) - mass_matrix(model.chain, q - d)) / (2 * step)
            for d in step * np.eye(model.n)
        ]
    )  # [k, i, j]: dM_ij / dq_k
    symbols = 0.5 * (slopes.transpose(1, 2, 0) + slopes.transpose(1, 0, 2) - slopes)
    return np.einsum("kij,k->ij", slopes, v), np.einsum("ijk,k->ij", symbols, v)


@pytest.mark.parametrize("kind", ["revolute", "prismatic"])
@settings(max_examples=20, deadline=None)
@given(seed=SEEDS)
def test_c_is_that_of_christoffel_symbols(kind, seed, models):
    """C equals c_ijk v_k of differences of M, and M' - 2 C is skew-symmetric.

    Central differences with a step of 1e-5 are good to 1e-9 of M's size.
    """
    model = models[kind]
    q, v = np.random.default_rng(seed).normal(size=(2, 6))
    c, (slope, expected) = coriolis(model, q, v), christoffel(model, q, v)
    scale = 1e-8 * (1 + np.abs(model.mass_matrix(q)).max() * np.abs(v).max())
    np.testing.assert_allclose(c, expected, atol=scale)
    skew = slope - 2 * c
    np.testing.assert_allclose(skew, -skew.T, atol=2 * scale)
    assert abs(v @ skew @ v) < 40 * scale * (1 + v @ v)


@settings(max_examples=50, deadline=None)
@given(seed=SEEDS)
def test_c_is_the_published_one(seed, request):
    """C = [[-h v2, -h (v1 + v2)], [h v1, 0]], h = m2 l1 lc2 sin q2: Kelly, Santibanez, Loria 2005, ch. 5."""
    q, v = np.random.default_rng(seed).normal(size=(2, 2))
    h = 2.0458 * 0.26 * 0.0229 * np.sin(q[1])
    model = Model(request.getfixturevalue("published_two_link")(), GRAVITY)
    expected = [[-h * v[1], -h * (v[0] + v[1])], [h * v[0], 0.0]]
    np.testing.assert_allclose(coriolis(model, q, v), expected, atol=1e-13)


@pytest.mark.parametrize("kind", ["revolute", "prismatic"])
@settings(max_examples=20, deadline=None)
@given(seed=SEEDS)
def test_what_it_is_made_of(kind, seed, models):
    """At v_r = v it is the inverse dynamics; it is linear in the ten parameters; Y^T s is their power."""
    model = models[kind]
    q, v, v_r, a, s = np.random.default_rng(seed).normal(size=(5, 6))
    np.testing.assert_allclose(model.passive_torque(q, v, v, a), model.inverse_dynamics(q, v, a), atol=1e-11)
    placed, moved, power = np.empty((6, 12)), np.empty((6, 12)), np.empty((6, 10))
    place(model.chain, q, placed)
    columns = regressor(model.chain, placed, v, v_r, a)
    linear = np.einsum("jik,ik->j", columns, model.chain[:-1, LINK])
    np.testing.assert_allclose(linear + model.reflected * a, model.passive_torque(q, v, v_r, a), atol=1e-11)
    link_motion(model.chain, placed, v, v_r, a, moved)
    parameter_power(model.chain, placed, moved, s, power)
    np.testing.assert_allclose(power, np.einsum("jik,j->ik", columns, s), atol=1e-11)

"""Identified arms can exist, and are as near to the truth as the torques allow."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rigbench.arm.dynamics import inverse_dynamics
from rigbench.arm.log_cholesky import Coordinates, from_log_cholesky
from rigbench.arm.physical import from_pseudo_inertia, possible
from rigbench.identify.base import base_of
from rigbench.identify.consistent import consistent
from rigbench.identify.estimate import Estimate, estimate
from rigbench.identify.filtering import Rows
from rigbench.identify.regressor import Terms, parameter_values, regressor

GRAVITY = (0.0, 0.0, -9.81)


def rows_of_formula(arm, terms, base, count, noise, seed=4):
    """Random states, and torques by the kernels and the drives' formulas, with noise [N m]."""
    rng = np.random.default_rng(seed)
    q, v, a = (
        rng.uniform(-2, 2, (count, arm.n)),
        rng.normal(size=(count, arm.n)),
        5 * rng.normal(size=(count, arm.n)),
    )
    links = np.array([inverse_dynamics(arm.chain(GRAVITY), *state) for state in zip(q, v, a, strict=True)])
    drives = arm.drives
    torque = links + drives.reflected * a + drives.viscous * v + drives.coulomb * np.sign(v)
    torque += noise * rng.normal(size=torque.shape)
    y, t = regressor(arm, GRAVITY, q, v, a, terms)[:, :, base.kept], np.arange(float(count))
    return Rows(y, torque, np.ones(q.shape, bool), "formulas", t, v)


def test_log_cholesky_is_the_published_map():
    """Rucker, Wensing 2022, formulas from memory; the numbers were computed independently of this program."""
    theta = np.array([0.3, -0.2, 0.1, 0.05, 0.2, -0.1, 0.15, 0.05, -0.02, 0.1])
    upper = from_log_cholesky(theta)
    m, mx, my, mz, *tensor = from_pseudo_inertia(upper @ upper.T)
    assert m == pytest.approx(1.8221188, abs=1e-7)
    assert [mx, my, mz] == pytest.approx([0.09110594, -0.03644238, 0.18221188], abs=1e-8)
    assert tensor == pytest.approx(  # Ixx, Ixy, Iyy, Ixz, Iyz, Izz
        [4.27646486, -0.37359664, 3.37181438, -0.29644172, 0.19519832, 3.58433144], abs=1e-8
    )


@settings(max_examples=50, deadline=None)
@given(st.lists(st.floats(-2, 2), min_size=20, max_size=20))
def test_every_coordinate_is_a_body_that_can_exist(planar2, z):
    """Two links at any z about the declared ones are possible; z = 0 is the declared arm."""
    about = Coordinates(planar2.parameters.ravel(), 2, np.empty(0))
    assert possible(about.values(np.array(z)).reshape(2, 10))
    assert np.allclose(about.values(np.zeros(20)), planar2.parameters.ravel(), rtol=1e-12, atol=1e-15)


def test_slope_is_the_change_of_values(planar2):
    """Central differences over 2e-5 meet it to 1e-9 of the largest entry (h^2 and rounding over h)."""
    about = Coordinates(np.append(planar2.parameters.ravel(), 3.0), 2, np.array([2.0]))
    z = 0.3 * np.random.default_rng(0).normal(size=21)
    steps = 1e-5 * np.eye(21)
    expected = np.column_stack([(about.values(z + step) - about.values(z - step)) / 2e-5 for step in steps])
    assert np.abs(about.slope(z) - expected).max() < 1e-9 * np.abs(expected).max()


def test_least_squares_gives_a_negative_mass_and_the_fit_does_not(chain):
    """A slide with a load of 0.1 kg under noise of 6 N: plain least squares finds less than no mass.

    Its interval holds the truth nevertheless, so nothing went wrong but physics was not asked.
    """
    arm = chain([[1, 0, 0], [0, 1, 0]], [[0, 0, 0], [0, 0, 0.1]], [1, 1])
    parameters = arm.parameters.copy()
    parameters[1] *= 0.1
    true = arm.replaced(parameters)
    terms = Terms(rotor=False, viscous=False, coulomb=False)
    base = base_of(arm, GRAVITY, terms)
    load = base.names.index("m.link2")
    found = estimate(base, [rows_of_formula(true, terms, base, 100, noise=6.0, seed=11)])
    assert found.values[load] < 0
    assert found.interval()[1][load] > 0.1
    result = consistent(arm, terms, found)
    assert possible(result.arm.parameters)
    assert 0 < result.arm.parameters[1, 0] < 1.0


def test_an_inertia_too_small_for_its_mass_is_mended_too(planar2):
    """An estimated inertia below m c^2 can't exist; the fit's own can, and stays near the other estimates."""
    terms = Terms(rotor=False, viscous=False, coulomb=False)
    base = base_of(planar2, GRAVITY, terms)
    values = base.combination @ parameter_values(planar2, terms)
    inertia = base.names.index("Iyy.fore")
    values[inertia] *= -0.5
    covariance = np.diag((0.01 * np.maximum(np.abs(values), 0.1)) ** 2)
    covariance[inertia, inertia] = 1.0
    found = Estimate(base, values, covariance, np.ones(2), np.zeros(2, int), 100, 10.0)
    plain = planar2.parameters.ravel() + np.linalg.pinv(base.combination) @ (
        values - base.combination @ planar2.parameters.ravel()
    )
    assert not possible(plain.reshape(2, 10))
    result = consistent(planar2, terms, found)
    assert possible(result.arm.parameters)
    error = base.combination @ result.arm.parameters.ravel() - values
    others = np.arange(base.count) != inertia
    assert (np.abs(error[others]) < 3 * np.sqrt(np.diag(covariance))[others]).all()


def wrong(arm):
    """CAD that is off: masses by +-15 %, friction and rotors by +-25 %."""
    rng = np.random.default_rng(2)
    factor = rng.uniform(0.85, 1.15, (arm.n, 1))
    changed = {
        name: getattr(arm.drives, name) * rng.uniform(0.75, 1.25, arm.n)
        for name in ("rotor_inertia", "viscous")
    }
    dry = rng.uniform(0.75, 1.25, arm.n)
    drives = replace(arm.drives, coulomb=arm.drives.coulomb * dry, static=arm.drives.static * dry, **changed)
    return arm.replaced(arm.parameters * factor, drives)


@pytest.mark.parametrize("name", ["rubbing", "tray6"])
def test_the_identified_arm_has_the_true_base_parameters(request, name):
    """From wrong CAD and torques without noise: base parameters as the truth's, to 1e-4 of what they are made of."""
    true = request.getfixturevalue(name)
    cad = wrong(true)
    base = base_of(cad, GRAVITY, Terms())
    found = estimate(base, [rows_of_formula(true, Terms(), base, 300, noise=0.0)])
    result = consistent(cad, Terms(), found)
    assert possible(result.arm.parameters)
    right, made_of = (
        base.combination @ parameter_values(true, Terms()),
        np.abs(base.combination) @ np.abs(parameter_values(true, Terms())),
    )
    error = np.abs(base.combination @ parameter_values(result.arm, Terms()) - right)
    assert (error < 1e-4 * np.maximum(made_of, 1e-3 * made_of.max())).all()
    before = np.abs(base.combination @ parameter_values(cad, Terms()) - right)
    assert before.max() > 100 * error.max()


def test_without_knowledge_the_declared_arm_stays(rubbing):
    """An estimate that knows nothing moves nothing: the declared arm comes back, with the spread it was given."""
    base = base_of(rubbing, GRAVITY, Terms())
    values = 3 * base.combination @ parameter_values(rubbing, Terms())
    vague = Estimate(base, values, 1e12 * np.eye(base.count), np.ones(2), np.zeros(2, int), 100, 10.0)
    result = consistent(rubbing, Terms(), vague, spread=0.2)
    assert np.allclose(result.arm.parameters, rubbing.parameters, rtol=1e-6, atol=1e-9)
    assert np.allclose(result.arm.drives.viscous, rubbing.drives.viscous, rtol=1e-6)
    assert np.allclose(result.covariance, 0.04 * np.eye(26), atol=1e-6)


def test_friction_is_never_below_zero(rubbing):
    """An estimate of -1 N m of dry friction, and well known, ends at none; breakaway goes with it."""
    base = base_of(rubbing, GRAVITY, Terms())
    values = base.combination @ parameter_values(rubbing, Terms())
    values[base.names.index("coulomb.elbow")] = -1.0
    found = Estimate(base, values, 1e-6 * np.eye(base.count), np.ones(2), np.zeros(2, int), 100, 10.0)
    drives = consistent(rubbing, Terms(), found).arm.drives
    assert 0 <= drives.coulomb[1] < 1e-6
    assert drives.static[1] == pytest.approx(drives.coulomb[1])
    assert drives.coulomb[0] == pytest.approx(1.5, rel=1e-3)


def test_none_is_the_least_friction_of_a_joint_declared_without(planar2):
    """Declared without friction and estimated below: exactly none or above, not a rounding below."""
    base = base_of(planar2, GRAVITY, Terms())
    values = base.combination @ parameter_values(planar2, Terms())
    values[[base.names.index("coulomb.elbow"), base.names.index("viscous.shoulder")]] = -1.0
    found = Estimate(base, values, 1e-6 * np.eye(base.count), np.ones(2), np.zeros(2, int), 100, 10.0)
    drives = consistent(planar2, Terms(), found).arm.drives
    for friction in (drives.coulomb, drives.viscous):
        assert (friction >= 0).all()
        assert friction.max() < 1e-3

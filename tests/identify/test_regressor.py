"""The regressor against the dynamics kernels and against pinocchio, an independent rigid-body dynamics library."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pinocchio as pin
import pytest

from rigbench.arm.dynamics import inverse_dynamics
from rigbench.identify.regressor import Terms, parameter_labels, parameter_values, regressor

ROOT = Path(__file__).resolve().parents[2]
GRAVITY = (0.3, -0.2, -9.81)
EVERY = Terms(offset=True)


def states(n, count=30, seed=3):
    rng = np.random.default_rng(seed)
    return rng.uniform(-3, 3, (count, n)), 2 * rng.normal(size=(count, n)), 9 * rng.normal(size=(count, n))


def of_formula(arm, q, v, a):
    """Torques by the kernels, and by what the drives add."""
    drives = arm.drives
    links = np.array([inverse_dynamics(arm.chain(GRAVITY), *state) for state in zip(q, v, a, strict=True)])
    return links + drives.reflected * a + drives.viscous * v + drives.coulomb * np.sign(v)


def test_regressor_times_parameters_is_the_torque(tray6, rubbing):
    """tau = Y x is what inverse dynamics and drives say, to rounding (1e-12 of the largest torque)."""
    for arm in (tray6, rubbing):
        q, v, a = states(arm.n)
        y = regressor(arm, GRAVITY, q, v, a, EVERY)
        assert y.shape == (30, arm.n, 14 * arm.n)
        tau = of_formula(arm, q, v, a)
        assert np.abs(y @ parameter_values(arm, EVERY) - tau).max() < 1e-12 * np.abs(tau).max()


def test_link_columns_equal_pinocchios(tray6):
    """Its joint-torque regressor has the same parameters in the same order; equal to 1e-11 of the largest."""
    model = pin.buildModelFromUrdf(str(ROOT / "robots_demo" / "tray6" / "tray6.urdf"))
    model.gravity.linear = np.array(GRAVITY)
    data = model.createData()
    q, v, a = states(6)
    y = regressor(tray6, GRAVITY, q, v, a, Terms(False, False, False))
    theirs = np.array([pin.computeJointTorqueRegressor(model, data, *s) for s in zip(q, v, a, strict=True)])
    assert np.abs(y - theirs).max() < 1e-11 * np.abs(theirs).max()


def test_prismatic_joints_have_a_regressor_too(chain):
    """A joint that slides, at an angle, between two that turn."""
    arm = chain([[0, 0, 1], [1, 0, 1], [0, 1, 0]], [[0, 0, 0.2], [0.1, 0.3, 0], [0, 0.2, 0.1]], [0, 1, 0])
    q, v, a = states(3)
    y = regressor(arm, GRAVITY, q, v, a, EVERY)
    tau = of_formula(arm, q, v, a)
    assert np.abs(y @ parameter_values(arm, EVERY) - tau).max() < 1e-12 * np.abs(tau).max()


def test_each_drive_term_stands_at_its_own_joint(rubbing):
    """The columns of a joint's drive are a, v, sign v and 1 in that joint's row, and 0 in the other's."""
    q, v, a = states(2)
    y = regressor(rubbing, GRAVITY, q, v, a, EVERY)
    for k, column in enumerate((a, v, np.sign(v), np.ones_like(a))):
        for joint in range(2):
            expected = np.zeros_like(a)
            expected[:, joint] = column[:, joint]
            assert np.array_equal(y[:, :, 20 + 2 * k + joint], expected)


@pytest.mark.parametrize("terms", [Terms(False, False, False), Terms(), EVERY])
def test_labels_and_values_fit_the_columns(rubbing, terms):
    """As many labels and values as columns, all labels different; G^2 Jm stands under rotor."""
    labels, values = parameter_labels(rubbing, terms), parameter_values(rubbing, terms)
    q, v, a = states(2)
    assert (
        len(labels) == len(values) == len(set(labels)) == regressor(rubbing, GRAVITY, q, v, a, terms).shape[2]
    )
    of = dict(zip(labels, values, strict=True))
    assert of["m.upper"] == rubbing.parameters[0, 0]
    assert of["Izz.fore"] == rubbing.parameters[1, 9]
    if terms.rotor:
        assert of["rotor.elbow"] == 30**2 * 1e-5

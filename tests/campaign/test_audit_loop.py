"""The exact sampled loop that an audit measures against."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy.linalg import expm

from rigbench.arm.arm import Arm, Drives
from rigbench.campaign.audit import sampled_loop
from rigbench.campaign.audit.sampled_loop import exact_loop
from rigbench.laws.registry import LawChoice
from rigbench.motion.via import ViaMotion


def linear_joint(**drives):
    """One joint about the vertical, 0.3 kg m^2 and a rotor of 0.2 kg m^2: a linear machine."""
    given = {name: np.array([value]) for name, value in drives.items()}
    return Arm(
        name="linear", joints=("j",), links=("l",), kinds=np.zeros(1), rotation=np.eye(3)[None],
        position=np.zeros((1, 3)), axis=np.array([[0.0, 0.0, 1.0]]),
        parameters=np.array([[1.0, 0, 0, 0, 0.3, 0, 0.3, 0, 0, 0.3]]), tool_rotation=np.eye(3),
        tool_position=np.zeros(3), lower=np.full(1, -np.inf), upper=np.full(1, np.inf),
        drives=replace(
            Drives.ideal(1), gear_ratio=np.array([100.0]), rotor_inertia=np.array([2e-5]),
            viscous=np.array([0.7]), **given,
        ),
    )  # fmt: skip


STIFF = [[0, 1], [0, -0.7 / 0.5]], [0, 1 / 0.5], 0
ELASTIC = (
    [[0, 1, 0, 0], [-900 / 0.3, -2 / 0.3, 900 / 0.3, 2 / 0.3], [0, 0, 0, 1], [900 / 0.2, 2 / 0.2, -900 / 0.2, -2.7 / 0.2]],
    [0, 0, 0, 1 / 0.2],
    2,
)  # fmt: skip
LAGGED = [[0, 1, 0], [0, -0.7 / 0.5, 1 / 0.5], [0, 0, -1 / 0.004]], [0, 0, 1 / 0.004], 0


@pytest.mark.parametrize(
    ("drives", "form"),
    [({}, STIFF), ({"stiffness": 900.0, "spring_damping": 2.0}, ELASTIC), ({"torque_lag": 0.004}, LAGGED)],
    ids=["stiff", "elastic", "lagged"],
)
def test_the_exact_loop_is_that_of_linear_theory(drives, form):
    """On a linear machine x' = A x + b u the loop from tick to tick is x+ = F x + g u with [F, g; 0, 1] =
    exp([A, b; 0, 0] T) (any textbook on sampled control). Stiff, elastic (fed back at the motor) and
    lagged joint; written out by hand from the equations of motion."""
    (a, b, sensed), period = form, 0.01
    size = len(b)
    block = np.zeros((size + 1, size + 1))
    block[:size, :size], block[:size, size] = a, b
    step = expm(period * block)
    motion = ViaMotion(((0.2,), (0.9,)), leg_s=0.4, rest_s=0.2)
    choice = LawChoice("independent-joint", (("kp", (40.0,)), ("kd", (6.0,))))
    found = exact_loop(linear_joint(**drives), choice, motion, 1 / period)
    q, v, _ = motion.reference(np.arange(len(found.q)) * period)
    x = np.zeros(size + 1)
    x[0] = x[sensed] = 0.2
    for k in range(len(found.q)):
        np.testing.assert_allclose([found.q[k, 0], found.v[k, 0]], x[:2], rtol=1e-9, atol=1e-9)
        x[size] = 40.0 * (q[k, 0] - x[sensed]) + 6.0 * (v[k, 0] - x[sensed + 1])
        x = step @ x


def test_what_is_too_stiff_for_the_solver_is_left(monkeypatch):
    """Beyond its budget the ODE solution gives up early, rather than keep one waiting."""
    monkeypatch.setattr(sampled_loop, "BUDGET", 500)
    motion = ViaMotion(((0.2,), (0.9,)), leg_s=0.4, rest_s=0.2)
    assert exact_loop(linear_joint(), LawChoice("independent-joint"), motion, 100.0) is None


def test_a_law_that_loses_the_arm_is_told():
    """Gains far beyond what the sampled loop bears end in words, not in numbers."""
    motion = ViaMotion(((0.2,), (0.9,)), leg_s=0.4, rest_s=0.2)
    choice = LawChoice("independent-joint", (("kp", (1e5,)), ("kd", (1e4,))))
    assert "does not hold" in exact_loop(linear_joint(), choice, motion, 100.0).note

"""Runs without an engine: the same as with it, and made-up arms that any machine could have."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from rigbench.arm.arm import PRISMATIC
from rigbench.arm.dynamics import forward_kinematics
from rigbench.arm.files import ArmFiles
from rigbench.arm.physical import possible
from rigbench.laws.registry import LawChoice
from rigbench.motion.via import ViaMotion
from rigbench.rig import Rates, Run, simulate
from rigbench.testing import SimulatedArm, make_arm, run_law

DEMO = Path(__file__).resolve().parents[2] / "robots_demo"
GRAVITY = (0.0, 0.0, -9.81)


@pytest.mark.parametrize("law", ["independent-joint", "computed-torque"])
@pytest.mark.parametrize("rates", [Rates(1000, 1000), Rates(500, 1000)])
@pytest.mark.parametrize(
    ("arm", "points"),
    [
        ("planar2", ((0.0, 0.0), (0.4, -0.3))),
        ("tray6", ((0.0, -1.0, 1.5, 0.0, 1.0, 0.0), (0.3, -0.8, 1.3, 0.1, 0.9, 0.2))),
    ],
)
def test_without_an_engine_as_with_it(arm, points, law, rates):
    """Position and torque are the engine's to 1e-9 of their size: both step the same equation of motion, and
    accelerations agree to 1e-10 (measured by the audit)."""
    files = ArmFiles.read(DEMO / arm / "arm.yaml")
    motion = ViaMotion(points=points, leg_s=0.4, rest_s=0.1)
    choice = LawChoice(law, (("natural_hz", 4.0),))
    told = simulate(Run(files, choice, motion, rates, points[0], 0.5))
    alone = run_law(choice.make(), files.arm(), motion, rates=rates)
    assert told.outcome == alone.outcome == "finished"
    assert alone.residual < 1e-9
    np.testing.assert_allclose(alone.q, told.q, rtol=0, atol=1e-9)
    np.testing.assert_allclose(alone.torque, told.torque, rtol=0, atol=1e-9 * np.abs(told.torque).max())


def test_a_simulated_arm_falls_as_it_should(one_joint):
    """A bar let go level falls by (m g c / I) t^2 / 2 at first; Euler's q+ lags by one step, dt/t of it."""
    arm, dt = one_joint(inertia=0.02, mass=2.0, cog=0.25), 1e-5
    simulated = SimulatedArm(arm, np.array([np.pi / 2]), np.zeros(1), GRAVITY, dt)
    for _ in range(1000):
        simulated.apply([0.0])
        simulated.step()
    ((q, v, _, _),) = simulated.read()
    rate = 2.0 * 9.81 * 0.25 / (0.02 + 2.0 * 0.25**2)
    assert v == pytest.approx(-rate * 0.01, rel=1e-4)
    assert q == pytest.approx(np.pi / 2 - rate * 0.01**2 / 2, abs=2e-3 * rate * 0.01**2)


def test_a_model_may_differ_from_the_machine():
    """The law believes the model it is given: with links of twice the mass its gravity torque is twice as much."""
    arm = make_arm("RR")
    heavy = arm.replaced(parameters=2.0 * arm.parameters)
    motion = ViaMotion(points=((0.5, 0.2), (0.5, 0.2)), leg_s=0.001)
    law = LawChoice("gravity-compensated").make()
    right = run_law(law, arm, motion).torque[0]
    wrong = run_law(law, arm, motion, model=heavy).torque[0]
    assert np.abs(right).max() > 1
    np.testing.assert_allclose(wrong, 2 * right, atol=1e-12)


@pytest.mark.parametrize("kinds", ["R", "P", "RP", "PRRPRRR"])
@pytest.mark.parametrize("limits", [True, False])
def test_made_up_arms_are_possible(kinds, limits):
    """As many joints as letters, of their kinds, links that any machine could have, and limits as asked."""
    arm = make_arm(kinds, limits)
    assert arm.n == len(kinds)
    assert "".join("P" if kind == PRISMATIC else "R" for kind in arm.kinds) == kinds
    assert possible(arm.parameters)
    assert np.isfinite(arm.drives.torque_limit).all() == limits
    reach = forward_kinematics(arm.chain(GRAVITY), np.zeros(arm.n))[-1, 9:]
    np.testing.assert_allclose(reach, [0.2 * arm.n, 0, 0], atol=1e-12)


@pytest.mark.parametrize("kinds", ["", "RX", "rr"])
def test_other_letters_are_refused(kinds):
    """An arm has a joint or more, each turning or sliding."""
    with pytest.raises(ValueError, match="letters R and P"):
        make_arm(kinds)


def test_checking_a_law_starts_no_engine():
    """The engine of the process is not connected by it."""
    code = (
        "from rigbench.laws.independent_joint import IndependentJoint\n"
        "from rigbench.rig.simulate import worker_engine\n"
        "from rigbench.testing import check_law\n"
        "check_law(IndependentJoint)\n"
        "print(worker_engine.cache_info().currsize)\n"
    )
    done = subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, timeout=120, check=True
    )
    assert done.stdout == "0\n"

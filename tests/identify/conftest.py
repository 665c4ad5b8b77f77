"""The demo arms, and chains built joint by joint."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from rigbench.arm.arm import Arm
from rigbench.arm.dynamics import inverse_dynamics
from rigbench.arm.files import load_arm
from rigbench.identify.fourier import FourierMotion
from rigbench.identify.recording import Recording

ROOT = Path(__file__).resolve().parents[2]
GRAVITY = (0.0, 0.0, -9.81)


@pytest.fixture(scope="session")
def planar2() -> Arm:
    return load_arm(ROOT / "robots_demo" / "planar2" / "arm.yaml")


@pytest.fixture(scope="session")
def tray6() -> Arm:
    return load_arm(ROOT / "robots_demo" / "tray6" / "arm.yaml")


@pytest.fixture(scope="session")
def rubbing(planar2) -> Arm:
    """planar2 behind gears: with rotors and with viscous and Coulomb friction."""
    given = {"gear_ratio": [50, 30], "rotor_inertia": [2e-5, 1e-5], "viscous": [0.8, 0.3]}
    dry = {"coulomb": [1.5, 0.4], "static": [1.5, 0.4]}
    arrays = {name: np.array(values, float) for name, values in (given | dry).items()}
    return planar2.replaced(drives=replace(planar2.drives, **arrays))


@pytest.fixture(scope="session")
def chain(built):
    """Build a chain of cubes from axes (n, 3) and positions (n, 3): chain(axis, position, kinds=None)."""

    def build(axis, position, kinds=None) -> Arm:
        axis = np.asarray(axis, float)
        cubes = np.tile([1.0, 0, 0, 0, 0.1, 0, 0.1, 0, 0, 0.1], (len(axis), 1))
        return built(cubes, position, axis / np.linalg.norm(axis, axis=1)[:, None], kinds)

    return build


@pytest.fixture(scope="session")
def tray6_motion() -> FourierMotion:
    """A motion that every joint of tray6 takes part in."""
    return FourierMotion(
        centre=(0.0, -0.9, 1.0, 0.1, 0.5, -0.2),
        sine=((0.9, -0.45), (0.5, -0.25), (0.6, -0.3), (0.5, -0.25), (-0.7, 0.35), (0.9, -0.45)),
        cosine=((0.4, -0.1), (-0.4, 0.1), (0.5, -0.125), (-0.8, 0.2), (0.4, -0.1), (0.8, -0.2)),
        period_s=4.0,
        periods=2,
    )


@pytest.fixture(scope="session")
def planar2_motion() -> FourierMotion:
    """The same of planar2."""
    return FourierMotion((0.2, -0.3), ((0.9, -0.45), (-0.7, 0.35)), ((0.4, -0.1), (0.8, -0.2)), 4.0, 2)


@pytest.fixture(scope="session")
def recorded(planar2_motion, tray6_motion):
    """Make a recording: recorded(arm, motion=None, v=False, rate=500), of two joints or six."""

    def build(arm, motion=None, v=False, rate=500) -> Recording:
        """Formulas' torques with a little noise."""
        motion = motion or (planar2_motion if arm.n == 2 else tray6_motion)
        t = np.arange(0, motion.duration_s, 1 / rate)
        q, speed, a = motion.reference(t)
        links = np.array(
            [inverse_dynamics(arm.chain(GRAVITY), *state) for state in zip(q, speed, a, strict=True)]
        )
        drives = arm.drives
        torque = links + drives.reflected * a + drives.viscous * speed + drives.coulomb * np.sign(speed)
        torque += 0.1 * np.random.default_rng(0).normal(size=torque.shape)
        return Recording("made", t, q, speed if v else None, torque)

    return build

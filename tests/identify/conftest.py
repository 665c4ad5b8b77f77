"""The demo arms, and chains built joint by joint."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from rigbench.arm.arm import Arm, Drives
from rigbench.arm.files import load_arm

ROOT = Path(__file__).resolve().parents[2]


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
def chain():
    """Build a chain of cubes from axes (n, 3) and positions (n, 3): chain(axis, position, kinds=None)."""

    def build(axis, position, kinds=None) -> Arm:
        axis, position = np.asarray(axis, float), np.asarray(position, float)
        n = len(axis)
        return Arm(
            name="built",
            joints=tuple(f"j{i + 1}" for i in range(n)),
            links=tuple(f"link{i + 1}" for i in range(n)),
            kinds=np.zeros(n) if kinds is None else np.asarray(kinds, float),
            rotation=np.tile(np.eye(3), (n, 1, 1)),
            position=position,
            axis=axis / np.linalg.norm(axis, axis=1)[:, None],
            parameters=np.tile([1.0, 0, 0, 0, 0.1, 0, 0.1, 0, 0, 0.1], (n, 1)),
            tool_rotation=np.eye(3),
            tool_position=np.zeros(3),
            lower=np.full(n, -np.inf),
            upper=np.full(n, np.inf),
            drives=Drives.ideal(n),
        )

    return build

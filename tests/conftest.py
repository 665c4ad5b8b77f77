"""Arms that several tests need, built by hand, and where the demo files are."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from rigbench.arm.arm import Arm, Drives

ROOT = Path(__file__).resolve().parent.parent
GRAVITY = (0.0, 0.0, -9.81)

collect_ignore = ["plugin_example"]  # a package of its own: test_own_law.py installs it and runs its tests


def build_drives(n: int, **given: Any) -> Drives:
    """Drives of n joints, ideal unless said; static is coulomb unless given."""
    if "coulomb" in given:
        given.setdefault("static", given["coulomb"])
    arrays = {name: np.broadcast_to(np.asarray(value, float), (n,)).copy() for name, value in given.items()}
    return replace(Drives.ideal(n), **arrays)


def build_arm(
    parameters: Any, position: Any, axis: Any, kinds: Any = None, tool: Any = (0, 0, 0), **drives: Any
) -> Arm:
    """A chain whose joint frames are all parallel at q = 0, without position limits."""
    parameters = np.atleast_2d(np.asarray(parameters, float))
    n = len(parameters)
    return Arm(
        name="built",
        joints=tuple(f"j{i + 1}" for i in range(n)),
        links=tuple(f"link{i + 1}" for i in range(n)),
        kinds=np.zeros(n) if kinds is None else np.asarray(kinds, float),
        rotation=np.tile(np.eye(3), (n, 1, 1)),
        position=np.atleast_2d(np.asarray(position, float)),
        axis=np.atleast_2d(np.asarray(axis, float)),
        parameters=parameters,
        tool_rotation=np.eye(3),
        tool_position=np.asarray(tool, float),
        lower=np.full(n, -np.inf),
        upper=np.full(n, np.inf),
        drives=build_drives(n, **drives),
    )


@pytest.fixture(scope="session")
def built() -> Callable[..., Arm]:
    """:func:`build_arm`, for the conftest files of folders."""
    return build_arm


def bar(mass: float, cog: float, inertia: float) -> np.ndarray:
    """Ten parameters of a bar along -z with its centre of gravity ``cog`` below the joint.

    ``inertia`` about the centre of gravity, alike about x and y, a hundredth about z.
    """
    about = inertia + mass * cog**2
    return np.array([mass, 0, 0, -mass * cog, about, 0, about, 0, 0, 0.01 * inertia])


@pytest.fixture
def published_two_link() -> Callable[..., Arm]:
    """The two-link vertical arm of Kelly, Santibanez, Loria 2005, ch. 5 (numbers as quoted elsewhere).

    Angles from the downward vertical, axes along -y so that a positive angle lifts towards +x.
    """

    def build(scale: float = 1.0, **drives: Any) -> Arm:
        links = [bar(6.5225, 0.0983, 0.1213), bar(2.0458, 0.0229, 0.0116)]
        return build_arm(
            scale * np.array(links),
            [[0, 0, 0], [0, 0, -0.26]],
            [[0, -1, 0], [0, -1, 0]],
            tool=(0, 0, -0.26),
            **drives,
        )

    return build


@pytest.fixture
def one_joint() -> Callable[..., Arm]:
    """One joint about a horizontal axis with a bar of 2 kg, its centre of gravity 0.25 m below."""

    def build(inertia: float = 0.02, mass: float = 2.0, cog: float = 0.25, **drives: Any) -> Arm:
        return build_arm([bar(mass, cog, inertia)], [[0, 0, 0]], [[0, -1, 0]], tool=(0, 0, -0.5), **drives)

    return build

"""An arm's dynamic parameters as one vector, and back."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from rigbench.arm.arm import PARAMETERS, Arm, Floats

__all__ = ["LINK", "vector_labels", "vector_of", "with_vector"]

LINK = len(PARAMETERS)
"""Parameters of a link."""


def vector_of(arm: Arm, terms: Sequence[str]) -> Floats:
    """Return the links' ten parameters, link by link, then each of ``terms`` joint by joint, shape (p,).

    Terms: 'rotor', G^2 Jm [kg m^2]; 'viscous' [N m s/rad]; 'coulomb' [N m]; 'offset', a constant torque
    [N m], of which an arm has none.
    """
    drives = arm.drives
    own = {
        "rotor": drives.reflected,
        "viscous": drives.viscous,
        "coulomb": drives.coulomb,
        "offset": np.zeros(arm.n),
    }
    return np.concatenate([arm.parameters.ravel(), *(own[name] for name in terms)])


def vector_labels(links: Sequence[str], joints: Sequence[str], terms: Sequence[str]) -> tuple[str, ...]:
    """Name the entries of a vector: 'Ixx.<link>' and so on, then '<term>.<joint>'."""
    bodies = [f"{name}.{link}" for link in links for name in PARAMETERS]
    return (*bodies, *(f"{term}.{joint}" for term in terms for joint in joints))


def with_vector(arm: Arm, vector: Floats, terms: Sequence[str]) -> Arm:
    """Return the arm with the parameters of a vector (p,); breakaway keeps its ratio to Coulomb friction.

    An offset has no place in an arm and is left out.
    """
    n, drives = arm.n, arm.drives
    of = {name: vector[(LINK + k) * n : (LINK + k + 1) * n].copy() for k, name in enumerate(terms)}
    changes: dict[str, Floats] = {}
    if "rotor" in of:
        changes["rotor_inertia"] = of["rotor"] / drives.gear_ratio**2
    if "viscous" in of:
        changes["viscous"] = of["viscous"]
    if "coulomb" in of:
        dry = drives.coulomb > 0
        ratio = np.where(dry, drives.static / np.where(dry, drives.coulomb, 1.0), 1.0)
        changes |= {"coulomb": of["coulomb"], "static": of["coulomb"] * ratio}
    return arm.replaced(vector[: LINK * n].reshape(n, LINK).copy(), replace(drives, **changes))

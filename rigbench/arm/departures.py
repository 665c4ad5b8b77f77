"""What sources and a case do to an arm's numbers: to its links, its payload and its drives.

``exponents`` holds, for each source that acts, level times u of its parameters, in the order of their
names; a source without an entry is idle.
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from rigbench.arm.arm import PRISMATIC, Arm, Floats
from rigbench.arm.case import Case
from rigbench.arm.physical import add_point_mass, central_moments, from_central_moments, principal_moments
from rigbench.arm.sources import Mismatch
from rigbench.arm.spread import LINK_SOURCES, Spread, carriers

__all__ = ["drives", "links", "loaded", "with_payload"]

Exponents = Mapping[str, Floats]

SCALED = {
    "coulomb_percent": ("coulomb", "static"),
    "viscous_percent": ("viscous",),
    "rotor_inertia_percent": ("rotor_inertia",),
    "torque_constant_percent": ("torque_gain",),
    "stiffness_percent": ("stiffness",),
}
"""Percent sources of the joints, and the arrays of the drives that they scale."""


def links(arm: Arm, mismatch: Mismatch, exponents: Exponents, case: Case) -> Floats:
    """Return the parameters (n, 10) with mass, centre of gravity and second moments changed.

    The principal directions are those of the arm itself, whatever else changes.
    """
    if not {*exponents, *case.keys}.intersection(LINK_SOURCES):
        return arm.parameters
    mass, cog, sigma = central_moments(arm.parameters)
    scale = np.ones(arm.n)
    if "link_mass_percent" in exponents:
        scale = _drawn(arm, mismatch, "link_mass_percent", exponents)
    if "link_cog_mm" in exponents:
        assert mismatch.link_cog_mm is not None
        reach = mismatch.link_cog_mm.of(arm.links)[:, None]
        cog = cog + 1e-3 * reach * exponents["link_cog_mm"].reshape(-1, 3)
    if "link_inertia_percent" in exponents:
        moments, axes = principal_moments(sigma)
        moments = moments * _drawn(arm, mismatch, "link_inertia_percent", exponents).reshape(-1, 3)
        sigma = (axes * moments[:, None, :]) @ axes.transpose(0, 2, 1)
    if case.link_mass_percent is not None:
        scale = scale * _stated(case.link_mass_percent, arm.links)
    for link, shift in case.link_cog_mm:
        if link not in arm.links:
            raise ValueError(f"no part is called '{link}'; there are {', '.join(arm.links)}")
        cog[arm.links.index(link)] += 1e-3 * np.array(shift)
    if case.link_inertia_percent is not None:
        sigma = sigma * _stated(case.link_inertia_percent, arm.links)[:, None, None]
    return from_central_moments(scale * mass, cog, scale[:, None, None] * sigma)


def loaded(arm: Arm, parameters: Floats, mass: float, offset: Floats) -> Floats:
    """Add a point mass [kg] to the last link, ``offset`` (3,) [m, tool frame] from the tool point."""
    with_mass = parameters.copy()
    with_mass[-1] = add_point_mass(parameters[-1], mass, arm.tool_position + arm.tool_rotation @ offset)
    return with_mass


def with_payload(
    arm: Arm, mismatch: Mismatch, exponents: Exponents, case: Case, parameters: Floats
) -> Floats:
    """Add the payload: as believed, or off by level u in mass and place; then as the case states."""
    mass, offset, payload = mismatch.believed_kg, np.zeros(3), mismatch.payload
    if payload is not None and "payload" in exponents:
        off = float(exponents["payload"][0])
        reach = payload.most_kg - mass if off > 0 else mass - payload.least_kg
        mass = min(max(mass + off * reach, payload.least_kg), payload.most_kg)
        offset = 1e-3 * payload.cog_mm * exponents["payload"][1:]
    if case.payload_kg is not None:
        mass = case.payload_kg
    if case.payload_cog_mm is not None:
        offset = 1e-3 * np.array(case.payload_cog_mm)
    return parameters if mass == 0 else loaded(arm, parameters, mass, offset)


def drives(arm: Arm, mismatch: Mismatch, exponents: Exponents, case: Case) -> dict[str, Floats]:
    """Return the arrays of the drives that may change, by the names of their fields.

    What is rigid (a stiffness of inf) stays so. A torque bias is a share of the torque limit, and
    nothing where there is none.
    """
    changed: dict[str, Floats] = {}
    for source, names in SCALED.items():
        for name in names:
            value = getattr(arm.drives, name)
            if source in exponents:
                value = value * _drawn(arm, mismatch, source, exponents)
            if (stated := getattr(case, source)) is not None:
                value = value * _stated(stated, arm.joints)
            changed[name] = value
    limit = arm.drives.torque_limit
    for source, name, unit in (
        ("torque_bias_percent", "torque_bias", 1e-2 * np.where(np.isfinite(limit), limit, 0.0)),
        ("encoder_offset_deg", "encoder_offset", np.where(arm.kinds == PRISMATIC, 1e-3, np.pi / 180)),
    ):
        value = getattr(arm.drives, name)
        if source in exponents:
            value = value + unit * getattr(mismatch, source).of(arm.joints) * exponents[source]
        if (stated := getattr(case, source)) is not None:
            value = value + unit * stated.of(arm.joints)
        changed[name] = value
    return changed


def _drawn(arm: Arm, mismatch: Mismatch, source: str, exponents: Exponents) -> Floats:
    """Return (1 + spread)^(level u) for every parameter of a percent source."""
    spread: Spread = getattr(mismatch, source)
    names = carriers(arm, source)
    base = np.repeat(1 + spread.of(names) / 100, len(exponents[source]) // len(names))
    factor: Floats = np.power(base, exponents[source])
    return factor


def _stated(percent: Spread, names: tuple[str, ...]) -> Floats:
    """Return 1 + p/100 for every link or joint."""
    factor: Floats = 1 + percent.of(names) / 100
    return factor

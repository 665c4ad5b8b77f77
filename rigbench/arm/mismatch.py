"""The mismatch: the stated ways in which the plant departs from the model.

Each source names its parameters, and each parameter of each link and joint has its own factor u,
uniform in [-1, 1), from its own stream: u depends on (seed, parameter's name, draw) and on nothing
else, so another source, draw or law changes no u that exists. At a level L a percent source multiplies
by (1 + spread)^(L u): positive whatever L, and symmetric in the logarithm.

Links change in this order: mass, centre of gravity, principal second moments of mass, payload.
"""

from __future__ import annotations

import hashlib
import math
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, fields, replace
from typing import Any

import numpy as np

from rigbench.arm.arm import Arm, Floats
from rigbench.arm.physical import (
    add_point_mass,
    central_moments,
    from_central_moments,
    impossible,
    possible,
    principal_moments,
)
from rigbench.errors import InputFaults

__all__ = ["Mismatch", "Payload", "believed", "draw_values", "parameter_names", "plant", "uniform"]

AXES = ("x", "y", "z")


@dataclass(frozen=True)
class Payload:
    """A point mass that the arm carries: what the model believes, and what it may be.

    Believed at the tool point itself; ``cog_mm`` [mm] is the spread of its offset from there, in each
    component of the tool frame. The mass never leaves [least_kg, most_kg], whatever the level.
    """

    believed_kg: float
    least_kg: float
    most_kg: float
    cog_mm: float = 0.0

    def __post_init__(self) -> None:
        if not 0 <= self.least_kg <= self.believed_kg <= self.most_kg < math.inf:
            raise ValueError("a payload needs 0 <= least_kg <= believed_kg <= most_kg, all finite")
        if not 0 <= self.cog_mm < math.inf:
            raise ValueError("a payload's cog_mm is finite and not below 0")


@dataclass(frozen=True)
class Mismatch:
    """The declared sources with their spreads at level 1; None where a source is not declared.

    Percent spreads are above -100. ``link_cog_mm`` shifts the centre of gravity in each component of
    the link frame. ``coulomb_percent`` scales static friction along with Coulomb friction.
    """

    link_mass_percent: float | None = None
    link_cog_mm: float | None = None
    link_inertia_percent: float | None = None
    payload: Payload | None = None
    coulomb_percent: float | None = None
    viscous_percent: float | None = None
    rotor_inertia_percent: float | None = None

    def __post_init__(self) -> None:
        for name in self.sources:
            spread = getattr(self, name)
            least = 0.0 if name == "link_cog_mm" else np.nextafter(-100, 0)
            if name != "payload" and not least <= spread < math.inf:
                raise ValueError(f"{name} of {spread} is no spread")

    @property
    def sources(self) -> tuple[str, ...]:
        """Names of the declared sources, in the order of the fields."""
        return tuple(field.name for field in fields(self) if getattr(self, field.name) is not None)

    def active(self, sources: Iterable[str]) -> tuple[str, ...]:
        """Return ``sources`` in the order of the fields; ValueError if one is not declared."""
        wanted = set(sources)
        if not wanted <= set(self.sources):
            raise ValueError(f"not among the declared sources: {sorted(wanted - set(self.sources))}")
        return tuple(name for name in self.sources if name in wanted)

    def inputs(self, active: Iterable[str]) -> dict[str, Any]:
        """Return what acts when only ``active`` do, JSON-able: their spreads, and the believed payload."""
        acting: dict[str, Any] = {"believed_kg": _believed_kg(self)}
        for name in self.active(active):
            spread = getattr(self, name)
            if isinstance(spread, Payload):
                acting[name] = [float(spread.least_kg), float(spread.most_kg), float(spread.cog_mm)]
            else:
                acting[name] = float(spread)
        return acting


def uniform(seed: int, name: str, draw: int) -> float:
    """Return the factor u of a parameter in a draw: uniform in [-1, 1), a multiple of 2^-52.

    The first 53 bits of the BLAKE2b digest (8 bytes) of "seed|name|draw", so it is the same on every
    machine and with every version of every package.
    """
    digest = hashlib.blake2b(f"{seed}|{name}|{draw}".encode(), digest_size=8).digest()
    return (int.from_bytes(digest, "big") >> 11) * 2.0**-52 - 1.0


def parameter_names(arm: Arm, source: str) -> tuple[str, ...]:
    """Name the parameters of a source, each of which has its own factor.

    link_mass_percent.<link>; link_cog_mm.<link>.x, .y, .z; link_inertia_percent.<link>.1, .2, .3 (the
    principal second moments, ascending); payload.mass, payload.cog.x, .y, .z; and
    coulomb_percent.<joint>, viscous_percent.<joint>, rotor_inertia_percent.<joint>.
    """
    if source == "link_mass_percent":
        return tuple(f"{source}.{link}" for link in arm.links)
    if source == "link_cog_mm":
        return tuple(f"{source}.{link}.{axis}" for link in arm.links for axis in AXES)
    if source == "link_inertia_percent":
        return tuple(f"{source}.{link}.{number}" for link in arm.links for number in (1, 2, 3))
    if source == "payload":
        return ("payload.mass", *(f"payload.cog.{axis}" for axis in AXES))
    return tuple(f"{source}.{joint}" for joint in arm.joints)


def draw_values(
    arm: Arm, mismatch: Mismatch, sources: Iterable[str], seed: int, draw: int
) -> dict[str, float]:
    """Return the factor u in [-1, 1) of every parameter of the active sources, by its name."""
    return {
        name: uniform(seed, name, draw)
        for source in mismatch.active(sources)
        for name in parameter_names(arm, source)
    }


def believed(arm: Arm, mismatch: Mismatch) -> Arm:
    """Return the arm with the believed payload as a point mass at the tool point: the model."""
    mass = _believed_kg(mismatch)
    return arm if mass == 0 else arm.replaced(_loaded(arm, arm.parameters, mass, np.zeros(3)))


def plant(
    arm: Arm, mismatch: Mismatch, level: float, sources: Iterable[str], seed: int, draw: int | None
) -> Arm:
    """Return the arm as the given draw has it when ``sources`` act at ``level``.

    At level 0, and without sources, it is the model of :func:`believed` bit for bit. InputFaults if
    the outcome could not exist, naming the source that made it so; ValueError if the level is
    negative or not finite, if a source is not declared, or if something is random and ``draw`` is None.
    """
    if not 0 <= level < math.inf:
        raise ValueError(f"a level is finite and not below 0, not {level}")
    active = mismatch.active(sources) if level > 0 else ()
    if active and draw is None:
        raise ValueError("a plant of random sources needs the number of a draw")
    exponents = {
        source: level * np.array([uniform(seed, name, draw or 0) for name in parameter_names(arm, source)])
        for source in active
    }
    built = _built(arm, mismatch, exponents)
    if _flaw(built) is not None:
        raise _fault(arm, mismatch, exponents)
    return built


def _built(arm: Arm, mismatch: Mismatch, exponents: Mapping[str, Floats]) -> Arm:
    """Build the plant from level times u of every parameter, by source."""
    if not exponents:
        return believed(arm, mismatch)
    with np.errstate(over="ignore", invalid="ignore"):
        parameters = _with_payload(arm, mismatch, exponents, _links(arm, mismatch, exponents))
        return arm.replaced(parameters, replace(arm.drives, **_friction(arm, mismatch, exponents)))


def _factor(mismatch: Mismatch, source: str, exponents: Mapping[str, Floats]) -> Floats:
    """Return (1 + spread)^(level u) for every parameter of a percent source."""
    factor: Floats = np.power(1 + getattr(mismatch, source) / 100, exponents[source])
    return factor


def _links(arm: Arm, mismatch: Mismatch, exponents: Mapping[str, Floats]) -> Floats:
    """Return the parameters (n, 10) with mass, centre of gravity and principal moments changed.

    The principal directions are those of the arm itself, whatever else changes.
    """
    if not exponents.keys() & {"link_mass_percent", "link_cog_mm", "link_inertia_percent"}:
        return arm.parameters
    mass, cog, sigma = central_moments(arm.parameters)
    scale = np.ones(arm.n)
    if "link_mass_percent" in exponents:
        scale = _factor(mismatch, "link_mass_percent", exponents)
    if "link_cog_mm" in exponents:
        assert mismatch.link_cog_mm is not None
        cog = cog + 1e-3 * mismatch.link_cog_mm * exponents["link_cog_mm"].reshape(-1, 3)
    if "link_inertia_percent" in exponents:
        moments, axes = principal_moments(sigma)
        moments = moments * _factor(mismatch, "link_inertia_percent", exponents).reshape(-1, 3)
        sigma = (axes * moments[:, None, :]) @ axes.transpose(0, 2, 1)
    return from_central_moments(scale * mass, cog, scale[:, None, None] * sigma)


def _believed_kg(mismatch: Mismatch) -> float:
    return 0.0 if mismatch.payload is None else float(mismatch.payload.believed_kg)


def _loaded(arm: Arm, parameters: Floats, mass: float, offset: Floats) -> Floats:
    """Add a point mass [kg] to the last link, ``offset`` (3,) [m, tool frame] from the tool point."""
    loaded = parameters.copy()
    loaded[-1] = add_point_mass(parameters[-1], mass, arm.tool_position + arm.tool_rotation @ offset)
    return loaded


def _with_payload(
    arm: Arm, mismatch: Mismatch, exponents: Mapping[str, Floats], parameters: Floats
) -> Floats:
    """Add the payload: as believed, or with its mass and centre of gravity off by level u."""
    mass, offset, payload = _believed_kg(mismatch), np.zeros(3), mismatch.payload
    if payload is not None and "payload" in exponents:
        off = float(exponents["payload"][0])
        reach = payload.most_kg - mass if off > 0 else mass - payload.least_kg
        mass = min(max(mass + off * reach, payload.least_kg), payload.most_kg)
        offset = 1e-3 * payload.cog_mm * exponents["payload"][1:]
    return parameters if mass == 0 else _loaded(arm, parameters, mass, offset)


def _friction(arm: Arm, mismatch: Mismatch, exponents: Mapping[str, Floats]) -> dict[str, Floats]:
    """Return the arrays of the drives that change, by the names of their fields."""
    changed: dict[str, Floats] = {}
    for source, names in (
        ("coulomb_percent", ("coulomb", "static")),
        ("viscous_percent", ("viscous",)),
        ("rotor_inertia_percent", ("rotor_inertia",)),
    ):
        if source in exponents:
            factor = _factor(mismatch, source, exponents)
            changed |= {name: getattr(arm.drives, name) * factor for name in names}
    return changed


def _flaw(arm: Arm) -> str | None:
    """Say what of an arm could not exist, or return None."""
    if not possible(arm.parameters):
        for link, parameters in zip(arm.links, arm.parameters, strict=True):
            if (why := impossible(parameters)) is not None:
                return f"link '{link}' can't exist: {why}"
    drives = arm.drives
    for name in ("coulomb", "static", "viscous", "rotor_inertia"):
        if not np.isfinite(getattr(drives, name)).all():
            return f"{name.replace('_', ' ')} is not finite"
    return None


def _fault(arm: Arm, mismatch: Mismatch, exponents: Mapping[str, Floats]) -> InputFaults:
    """Name the first source, in order, that makes the plant impossible."""
    names = list(exponents)
    for count in range(len(names) + 1):
        flaw = _flaw(_built(arm, mismatch, {name: exponents[name] for name in names[:count]}))
        if flaw is not None and count == 0:
            return InputFaults.one(arm.name, "", flaw, "an arm that can exist before any mismatch")
        if flaw is not None:
            return InputFaults.one(arm.name, f"mismatch.{names[count - 1]}", flaw, "less spread or level")
    raise AssertionError("a plant that is impossible has a first source that made it so")

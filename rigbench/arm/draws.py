"""Draws: the factor u of every parameter, each from its own stream.

u depends on (seed, parameter's name, draw) and on nothing else, so another source, spread, draw or law
changes no u that exists.
"""

from __future__ import annotations

import hashlib
from collections.abc import Callable, Iterable, Mapping

import numpy as np

from rigbench.arm.arm import Arm, Floats
from rigbench.arm.knowledge import deviations
from rigbench.arm.sources import Mismatch
from rigbench.arm.spread import Spread, carriers

__all__ = ["Factors", "draw_values", "exponents_of", "factors_of", "names_of", "parameter_names", "uniform"]

Factors = Callable[[str], float]
"""Gives the factor u of a parameter by its name."""

AXES = ("x", "y", "z")

WHOLE = {
    "payload": ("payload.mass", *(f"payload.cog.{axis}" for axis in AXES)),
    "delay_ms": ("delay_ms",),
    "base_tilt_deg": tuple(f"base_tilt_deg.{axis}" for axis in AXES[:2]),
}
"""The parameters of sources that belong to the machine as a whole."""


def uniform(seed: int, name: str, draw: int) -> float:
    """Return the factor u of a parameter in a draw: uniform in [-1, 1), a multiple of 2^-52.

    The first 53 bits of the BLAKE2b digest (8 bytes) of "seed|name|draw", so it is the same on every
    machine and with every version of every package.
    """
    digest = hashlib.blake2b(f"{seed}|{name}|{draw}".encode(), digest_size=8).digest()
    return (int.from_bytes(digest, "big") >> 11) * 2.0**-52 - 1.0


def factors_of(seed: int, draw: int | None, directions: Mapping[str, float] | None = None) -> Factors:
    """Return what gives every parameter its u: the draw, or ``directions`` where they are given.

    It raises ValueError for a parameter that ``directions`` lack, and without them if ``draw`` is None.
    """

    def factor(name: str) -> float:
        if directions is None:
            if draw is None:
                raise ValueError("a plant of random sources needs the number of a draw")
            return uniform(seed, name, draw)
        if name not in directions:
            raise ValueError(f"no direction is given for {name}")
        return directions[name]

    return factor


def parameter_names(arm: Arm, source: str, shared: bool = False) -> tuple[str, ...]:
    """Name the parameters of a source, each of which has its own factor.

    link_mass_percent.<link>; link_cog_mm.<link>.x, .y, .z; link_inertia_percent.<link>.1, .2, .3 (the
    principal second moments, ascending); payload.mass, payload.cog.x, .y, .z; delay_ms;
    base_tilt_deg.x, .y; and <source>.<joint> for all others. With ``shared`` 'all' stands in place of
    every link or joint, once.
    """
    if source in WHOLE:
        return WHOLE[source]
    parts = ("all",) if shared else carriers(arm, source)
    return tuple(f"{source}.{part}{end}" for part in parts for end in _endings(source))


def _endings(source: str) -> tuple[str, ...]:
    """Return how the names of the parameters of one link or joint end."""
    if source == "link_cog_mm":
        return tuple(f".{axis}" for axis in AXES)
    return (".1", ".2", ".3") if source == "link_inertia_percent" else ("",)


def draw_values(
    arm: Arm, mismatch: Mismatch, sources: Iterable[str], seed: int, draw: int
) -> dict[str, float]:
    """Return the factor u in [-1, 1) of every parameter of the active sources, by its name."""
    return {
        name: uniform(seed, name, draw)
        for source in mismatch.active(sources)
        for name in names_of(arm, mismatch, source)
    }


def names_of(arm: Arm, mismatch: Mismatch, source: str) -> tuple[str, ...]:
    """Name the parameters of a declared source: as :func:`parameter_names`, or identification.<sum>."""
    if mismatch.identification is not None and source == "identification":
        return tuple(f"identification.{name}" for name in mismatch.identification.names)
    return parameter_names(arm, source, shared=_is_shared(mismatch, source))


def _is_shared(mismatch: Mismatch, source: str) -> bool:
    """Tell whether all links or joints have one factor in a source."""
    spread = getattr(mismatch, source)
    return isinstance(spread, Spread) and spread.shared


def exponents_of(
    arm: Arm, mismatch: Mismatch, level: float, active: Iterable[str], factor: Factors
) -> dict[str, Floats]:
    """Return level times u of every parameter of the ``active`` sources, one for each link or joint.

    Shape (parameters,) in the order of their names; what is shared is repeated. Of what was identified, level
    times the standard deviations that u means.
    """
    exponents = {}
    for source in active:
        u = np.array([factor(name) for name in names_of(arm, mismatch, source)])
        if source == "identification":
            u = deviations(u)
        elif _is_shared(mismatch, source):
            u = np.tile(u, len(carriers(arm, source)))
        exponents[source] = level * u
    return exponents

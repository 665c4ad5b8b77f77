"""A case: stated departures of the plant, not random ones (a full tray, a cold morning)."""

from __future__ import annotations

import math
from dataclasses import dataclass, fields
from typing import Any

import numpy as np

from rigbench.arm.spread import Spread

__all__ = ["Case"]

PERCENT = (
    "link_mass_percent",
    "link_inertia_percent",
    "coulomb_percent",
    "viscous_percent",
    "rotor_inertia_percent",
    "torque_constant_percent",
    "stiffness_percent",
)
ADDED = ("torque_bias_percent", "encoder_offset_deg")

Pair = tuple[float, float]
Triple = tuple[float, float, float]


@dataclass(frozen=True)
class Case:
    """What is stated of the plant, on top of level 0 or of a level's draw; None or () where nothing is.

    Percent p multiplies by exactly 1 + p/100, p above -100, for all links or joints or by name; a plain
    number stands for ``Spread(number)``. ``link_inertia_percent`` scales the second moments of mass
    about the centre of gravity, ``coulomb_percent`` static friction along with Coulomb friction.
    ``link_cog_mm``: ((link, (x, y, z)), ...), shifts [mm] in the link frame at constant central inertia.
    ``payload_kg`` is the mass of the payload itself, in place of the believed or drawn one, within its
    declared range or not, and ``payload_cog_mm`` (x, y, z) [mm] its offset from the tool point in the
    tool frame. ``torque_constant_percent`` scales the torque given for what the law asks,
    ``stiffness_percent`` that of the transmissions that are elastic. ``torque_bias_percent`` (of the
    drive's torque limit) and ``encoder_offset_deg`` [deg; mm for a prismatic joint] are added on top of
    what is drawn. ``delay_ms`` and ``base_tilt_deg`` (about the base's x, then y axis) are the whole
    delay and tilt, in place of those declared or drawn. ValueError for what can't be: numbers that
    aren't finite, a negative mass or delay, a shared spread (nothing is drawn), a link given twice.
    """

    payload_kg: float | None = None
    payload_cog_mm: Triple | None = None
    link_mass_percent: Spread | None = None
    link_cog_mm: tuple[tuple[str, Triple], ...] = ()
    link_inertia_percent: Spread | None = None
    coulomb_percent: Spread | None = None
    viscous_percent: Spread | None = None
    rotor_inertia_percent: Spread | None = None
    torque_constant_percent: Spread | None = None
    torque_bias_percent: Spread | None = None
    encoder_offset_deg: Spread | None = None
    stiffness_percent: Spread | None = None
    delay_ms: float | None = None
    base_tilt_deg: Pair | None = None

    def __post_init__(self) -> None:
        for name in ("payload_kg", "delay_ms"):
            given = getattr(self, name)
            if given is not None:
                object.__setattr__(self, name, _finite(name, given)[0])
                if given < 0:
                    raise ValueError(f"{name} of {given} is below 0")
        if self.base_tilt_deg is not None:
            x, y = _finite("base_tilt_deg", *self.base_tilt_deg)
            object.__setattr__(self, "base_tilt_deg", (x, y))
        if self.payload_cog_mm is not None:
            object.__setattr__(self, "payload_cog_mm", _triple("payload_cog_mm", self.payload_cog_mm))
        shifts = tuple(sorted((link, _triple("link_cog_mm", shift)) for link, shift in self.link_cog_mm))
        object.__setattr__(self, "link_cog_mm", shifts)
        if len(dict(shifts)) < len(shifts):
            raise ValueError("link_cog_mm names a link twice")
        for name in (*PERCENT, *ADDED):
            given = getattr(self, name)
            if given is not None:
                object.__setattr__(self, name, _stated(name, given))

    @property
    def keys(self) -> tuple[str, ...]:
        """Names of what the case states, in the order of the fields."""
        return tuple(field.name for field in fields(self) if getattr(self, field.name) not in (None, ()))

    def inputs(self) -> dict[str, Any]:
        """Return what the case states, JSON-able."""
        stated: dict[str, Any] = {}
        for name in self.keys:
            value = getattr(self, name)
            if isinstance(value, Spread):
                stated[name] = value.inputs()
            elif name == "link_cog_mm":
                stated[name] = {link: list(shift) for link, shift in value}
            else:
                stated[name] = list(value) if isinstance(value, tuple) else value
        return stated


def _finite(name: str, *values: float) -> tuple[float, ...]:
    if not all(math.isfinite(value) for value in values):
        raise ValueError(f"{name} of {values} is not finite")
    return tuple(float(value) for value in values)


def _triple(name: str, given: tuple[float, ...]) -> Triple:
    x, y, z = _finite(name, *given)
    return x, y, z


def _stated(name: str, given: Spread | float) -> Spread:
    spread = given if isinstance(given, Spread) else Spread(given)
    if name in PERCENT and min(spread.values) < np.nextafter(-100, 0):
        raise ValueError(f"{name} of {min(spread.values)} leaves nothing")
    if spread.shared:
        raise ValueError(f"{name} is stated, not drawn, so there is nothing to share")
    return spread

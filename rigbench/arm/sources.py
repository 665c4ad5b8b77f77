"""The declared sources of mismatch: how far at level 1 the plant may depart from the model, and in what."""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass, fields
from typing import Any

import numpy as np

from rigbench.arm.knowledge import Knowledge
from rigbench.arm.spread import WHOLE_SOURCES, Spread

__all__ = ["Mismatch", "Payload"]

NOT_NEGATIVE = ("link_cog_mm", "torque_bias_percent", "encoder_offset_deg")
"""Spreads of what is added; those of what multiplies are above -100 percent."""


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

    A plain number stands for ``Spread(number)``: the same for all links or joints. Spreads of factors
    are above -100 percent. ``link_cog_mm`` shifts the centre of gravity in each component of the link
    frame. ``coulomb_percent`` scales static friction along with Coulomb friction,
    ``torque_constant_percent`` the torque given for what the law asks, ``stiffness_percent`` that of the
    transmissions that are elastic. ``torque_bias_percent`` is added to the torque, in percent of the
    drive's torque limit (nothing where it has none); ``encoder_offset_deg`` to the sensed position [deg;
    mm for a prismatic joint]. Of the machine as a whole, plain numbers: ``delay_ms`` comes on top of the
    declared delay, which never falls below 0, ``base_tilt_deg`` on top of the declared tilt about each
    of the base's x and y axes. ``identification`` is what one left unknown; other sources come on top of it.
    ValueError for what is no spread.
    """

    link_mass_percent: Spread | None = None
    link_cog_mm: Spread | None = None
    link_inertia_percent: Spread | None = None
    payload: Payload | None = None
    coulomb_percent: Spread | None = None
    viscous_percent: Spread | None = None
    rotor_inertia_percent: Spread | None = None
    torque_constant_percent: Spread | None = None
    torque_bias_percent: Spread | None = None
    encoder_offset_deg: Spread | None = None
    stiffness_percent: Spread | None = None
    delay_ms: float | None = None
    base_tilt_deg: float | None = None
    identification: Knowledge | None = None

    def __post_init__(self) -> None:
        for name in self.sources:
            given = getattr(self, name)
            if name in WHOLE_SOURCES:
                if not isinstance(given, Payload | Knowledge) and not 0 <= given < math.inf:
                    raise ValueError(f"{name} of {given} is no spread")
                continue
            spread = given if isinstance(given, Spread) else Spread(given)
            least = 0.0 if name in NOT_NEGATIVE else np.nextafter(-100, 0)
            if min(spread.values) < least:
                raise ValueError(f"{name} of {min(spread.values)} is no spread")
            object.__setattr__(self, name, spread)

    @property
    def sources(self) -> tuple[str, ...]:
        """Names of the declared sources, in the order of the fields."""
        return tuple(field.name for field in fields(self) if getattr(self, field.name) is not None)

    @property
    def believed_kg(self) -> float:
        """Mass of the payload that the model believes in [kg]; 0 where none is declared."""
        return 0.0 if self.payload is None else float(self.payload.believed_kg)

    def active(self, sources: Iterable[str]) -> tuple[str, ...]:
        """Return ``sources`` in the order of the fields; ValueError if one is not declared."""
        wanted = set(sources)
        if not wanted <= set(self.sources):
            raise ValueError(f"not among the declared sources: {sorted(wanted - set(self.sources))}")
        return tuple(name for name in self.sources if name in wanted)

    def inputs(self, active: Iterable[str]) -> dict[str, Any]:
        """Return what acts when only ``active`` do, JSON-able: their spreads, and the believed payload."""
        acting: dict[str, Any] = {"believed_kg": self.believed_kg}
        for name in self.active(active):
            spread = getattr(self, name)
            if isinstance(spread, Knowledge):
                acting[name] = spread.digest
            elif isinstance(spread, Payload):
                acting[name] = [float(spread.least_kg), float(spread.most_kg), float(spread.cog_mm)]
            else:
                acting[name] = spread.inputs() if isinstance(spread, Spread) else float(spread)
        return acting

"""A source's spread at a level, in its own unit."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

__all__ = ["FACTOR", "LOAD", "SHIFT", "spread_at"]

FACTOR, SHIFT, LOAD = "factor", "shift", "load"
"""How a spread grows with the level L: as (1 + p/100)^L, in proportion, or as a payload does."""


def spread_at(spread: Mapping[str, Any], level: float) -> dict[str, float]:
    """Return the numbers of a spread at a level, by the names of ``spread["values"]``.

    ``spread`` holds ``grows``, ``unit`` and ``values``, the numbers at level 1. A factor's p percent becomes
    100 ((1 + p/100)^level - 1) percent, how far it reaches upwards; a shift level times its number. A load
    (``believed_kg``, ``least_kg``, ``most_kg``, ``cog_mm``) reaches as far, but never leaves its range:
    ``least_kg``, ``most_kg`` and ``cog_mm`` there.
    """
    values = spread["values"]
    if spread["grows"] == FACTOR:
        return {name: 100.0 * ((1.0 + value / 100.0) ** level - 1.0) for name, value in values.items()}
    if spread["grows"] == SHIFT:
        return {name: level * value for name, value in values.items()}
    believed, part = values["believed_kg"], min(level, 1.0)
    return {
        "least_kg": believed - part * (believed - values["least_kg"]),
        "most_kg": believed + part * (values["most_kg"] - believed),
        "cog_mm": level * values["cog_mm"],
    }

"""The curves that the tool point can be led along."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, TypeAlias

import numpy as np

from rigbench.arm.arm import Floats

__all__ = ["Circle", "Curve", "Line", "Vector"]

Vector: TypeAlias = tuple[float, float, float]

STEEP = np.cos(np.radians(30.0))
"""A normal within 30 degrees of the base's x axis leaves too little of x in the circle's plane."""


@dataclass(frozen=True)
class Circle:
    """``turns`` turns around ``centre`` [m] at ``radius`` [m], right-handed about the unit vector ``normal``.

    The angle 0 lies where the base's x axis, laid down into the circle's plane, points from the centre;
    the base's y axis takes its place where the normal is within 30 degrees of x. The circle starts at
    ``start_deg``. All in the base frame.
    """

    centre: Vector
    radius: float
    normal: Vector
    turns: float = 1.0
    start_deg: float = 0.0

    def points(self, shares: Floats, near: Floats) -> Floats:
        """Return the points (N, 3) [m] at the shares (N,) of the way, 0 to 1; ``near`` plays no part."""
        normal = np.array(self.normal)
        across = np.array([0.0, 1.0, 0.0] if abs(normal[0]) > STEEP else [1.0, 0.0, 0.0])
        first = across - (across @ normal) * normal
        first /= np.linalg.norm(first)
        second = np.cross(normal, first)
        angle = np.radians(self.start_deg) + 2 * np.pi * self.turns * np.asarray(shares, float)[:, None]
        points: Floats = self.centre + self.radius * (np.cos(angle) * first + np.sin(angle) * second)
        return points

    def inputs(self) -> dict[str, Any]:
        """Return centre, radius, normal, turns and start, JSON-able."""
        return {
            "kind": "circle",
            "centre": [value + 0.0 for value in self.centre],
            "radius": float(self.radius),
            "normal": [value + 0.0 for value in self.normal],
            "turns": float(self.turns),
            "start_deg": float(self.start_deg) + 0.0,
        }


@dataclass(frozen=True)
class Line:
    """The straight way to ``end`` from ``start``, or from where the tool is in the near pose if None.

    In m, in the base frame.
    """

    end: Vector
    start: Vector | None = None

    def points(self, shares: Floats, near: Floats) -> Floats:
        """Return the points (N, 3) [m] at the shares (N,) of the way; ``near`` (3,) [m]: see the class."""
        start = near if self.start is None else np.array(self.start)
        share = np.asarray(shares, float)[:, None]
        points: Floats = (1 - share) * start + share * np.array(self.end)
        return points

    def inputs(self) -> dict[str, Any]:
        """Return both ends, JSON-able."""
        return {
            "kind": "line",
            "end": [value + 0.0 for value in self.end],
            "start": None if self.start is None else [value + 0.0 for value in self.start],
        }


Curve: TypeAlias = Circle | Line

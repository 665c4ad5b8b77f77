"""Via points joined by quintic legs."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from rigbench.arm.arm import Floats
from rigbench.motion.quintic import elapsed, quintic

__all__ = ["ViaMotion"]


@dataclass(frozen=True)
class ViaMotion:
    """Straight legs in joint space from via point to via point, at rest in each.

    On a leg of duration T = leg_s / pace, q = p0 + s (p1 - p0) with s = 10 x^3 - 15 x^4 + 6 x^5 and
    x = t / T, so that velocity and acceleration are zero at both ends; the peaks are 15/8 (p1 - p0) / T
    and 10/sqrt(3) (p1 - p0) / T^2. After every leg, the last included, the reference rests for rest_s.

    ``points`` (two or more) in rad, or m for a prismatic joint; ``leg_s`` above 0 and ``rest_s`` not
    below 0 in s; ``pace`` above 0, 1.0 for 100 percent: it shortens the legs and leaves the rests as
    they are, for a rest is what settling is measured in. ValueError if any of this doesn't hold.
    """

    points: tuple[tuple[float, ...], ...]
    leg_s: float
    rest_s: float = 0.0
    pace: float = 1.0

    def __post_init__(self) -> None:
        if len(self.points) < 2 or len({len(point) for point in self.points}) != 1:
            raise ValueError("a motion needs two via points or more, all with as many joints")
        if not all(math.isfinite(position) for point in self.points for position in point):
            raise ValueError("via points are finite")
        if not (0 < self.leg_s < math.inf and 0 < self.pace < math.inf and 0 <= self.rest_s < math.inf):
            raise ValueError("leg_s and pace are above 0 and rest_s is not below 0, all finite")

    @property
    def _leg(self) -> float:
        return self.leg_s / self.pace

    @property
    def _legs(self) -> int:
        return len(self.points) - 1

    @property
    def duration_s(self) -> float:
        """Time of all legs and rests [s]."""
        return self._legs * (self._leg + self.rest_s)

    @property
    def rests(self) -> tuple[tuple[float, float], ...]:
        """(end of the leg, end of its rest) [s] of every leg; empty if rest_s is 0."""
        if self.rest_s == 0:
            return ()
        period = self._leg + self.rest_s
        return tuple((leg * period + self._leg, (leg + 1) * period) for leg in range(self._legs))

    def reference(self, t: Floats) -> tuple[Floats, Floats, Floats]:
        """Return q, v, a, each (N, n), at the times t (N,) [s], as every Motion does."""
        points = np.array(self.points, float)
        period = self._leg + self.rest_s
        t = np.clip(np.asarray(t, float), 0.0, self.duration_s)
        # A time a rounding error short of a leg's start falls into the leg before it, at x = 1: the same.
        leg = np.minimum((t / period).astype(int), self._legs - 1)
        x = elapsed(t - leg * period, self._leg)[:, None]
        start, end = points[leg], points[leg + 1]
        step = end - start
        s, ds, dds = quintic(x)
        q = np.where(x < 1, start + s * step, end)  # exactly on the point, as the rests hold it
        return q, ds * step / self._leg, dds * step / self._leg**2

    def paced(self, factor: float) -> ViaMotion:
        """Return the same motion at ``factor`` times its pace."""
        return replace(self, pace=self.pace * factor)

    def inputs(self) -> dict[str, Any]:
        """Return the points, times and pace, JSON-able."""
        return {
            "kind": "via",
            "points": [[float(position) + 0.0 for position in point] for point in self.points],
            "leg_s": float(self.leg_s),
            "rest_s": float(self.rest_s) + 0.0,
            "pace": float(self.pace),
        }

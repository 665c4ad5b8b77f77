"""Fourier series that begin at rest, as points of a free space."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
import scipy.linalg

from rigbench.arm.arm import Floats
from rigbench.identify.bounds import Bounds

__all__ = ["Series", "SeriesSpace"]

SAMPLES, SLACK = 400, 0.997
"""Samples of a period on which a random series is fitted into its limits, and the share that it takes of
them: five harmonics are short of their peak there by 3e-3 at most."""

Series = tuple[Floats, Floats, Floats]
"""Centre (n,), sine and cosine (n, H), in rad, or m for a prismatic joint."""


@dataclass(frozen=True, eq=False)
class SeriesSpace:
    """Points (n, 2 H - 1) and the series that they stand for, with H ``harmonics`` of ``period_s``.

    For each joint H - 1 weights of sines and H - 1 of cosines, then the centre, all in its half ranges.
    """

    bounds: Bounds
    harmonics: int
    period_s: float

    def __post_init__(self) -> None:
        if self.harmonics < 2:
            raise ValueError("a motion that begins at rest takes two harmonics or more")

    def random(self, rng: np.random.Generator) -> Floats:
        """Return a random point that takes all of its position or speed range.

        Weights are normal with amplitudes that fall as 1 / l; the centre is anywhere in the room left over.
        """
        bounds, half = self.bounds, self._half
        point = rng.normal(size=(len(half), 2 * self.harmonics - 1))
        where = rng.uniform(-1, 1, len(half))
        point[:, -1] = 0.0
        q, v, _ = self.states(self.series(point), SAMPLES)
        middle = (bounds.lower + bounds.upper) / 2
        least, most = (q - middle).min(axis=0), (q - middle).max(axis=0)
        size = SLACK * np.minimum(2 * half / (most - least), bounds.speed / np.abs(v).max(axis=0))
        left = half - size * (most - least) / 2
        point *= size[:, None]
        point[:, -1] = (SLACK * where * left - size * (least + most) / 2) / half
        return point

    def series(self, point: Floats) -> Series:
        """Return the series of a point."""
        free = self.harmonics - 1
        sines, cosines = self._starting_at_rest
        half, middle = self._half, (self.bounds.lower + self.bounds.upper) / 2
        sine = half[:, None] * (point[:, :free] @ sines)
        cosine = half[:, None] * (point[:, free : 2 * free] @ cosines)
        return middle + half * point[:, -1], sine, cosine

    def states(self, series: Series, count: int) -> tuple[Floats, Floats, Floats]:
        """Return q, v, a, each (count, n), at equal steps over one period."""
        centre, sine, cosine = series
        rate = 2 * np.pi / self.period_s * np.arange(1, self.harmonics + 1)
        angle = np.arange(count)[:, None] * (rate * self.period_s / count)
        wave, quarter = np.sin(angle), np.cos(angle)
        q = centre + wave @ sine.T + quarter @ cosine.T
        v = (quarter * rate) @ sine.T - (wave * rate) @ cosine.T
        return q, v, -((wave * rate**2) @ sine.T + (quarter * rate**2) @ cosine.T)

    @property
    def _half(self) -> Floats:
        """Half of each joint's range, (n,)."""
        return (self.bounds.upper - self.bounds.lower) / 2

    @cached_property
    def _starting_at_rest(self) -> tuple[Floats, Floats]:
        """H - 1 rows of sines with sum l s_l = 0, and of cosines with sum l^2 c_l = 0."""
        order = np.arange(1.0, self.harmonics + 1)
        sines = scipy.linalg.null_space(np.ones((1, self.harmonics))).T / order
        return sines, scipy.linalg.null_space(order[None, :]).T / order

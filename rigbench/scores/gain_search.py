"""Looking for the best gains with few trials: points that fill the box, then a pattern search from the best.

A trial's merit is a pair, less is better: by how much it misses the limits, and its score. So a point within
the limits beats all others, and where none is, the search goes towards the limits.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from rigbench.arm.arm import Floats

__all__ = ["LEAST_TRIALS", "Merit", "Point", "find_gains"]

Point = tuple[float, ...]

Merit = tuple[float, float]
"""By how much the limits are missed (0: not at all), and the score; either may be inf."""

Ask = Callable[[Sequence[Point]], Sequence[Merit]]

LEAST_TRIALS = 8
"""Trials without which a search is none."""

FILLED = 0.3
"""Share of the trials that fill the box."""

FIRST_STEP, LAST_STEP = 0.25, 0.005
"""The pattern's size, in widths of the box."""

DIGITS = 3
"""Significant digits of what is tried, so that a gain can be written down."""


def find_gains(
    ask: Ask, bounds: Sequence[tuple[float, float]], trials: int, seed: int, declared: Point
) -> tuple[Point, Merit]:
    """Return the best of at most ``trials`` points within ``bounds`` (low, high), all above 0, and its merit.

    The ``declared`` point is tried first, whether or not it is within. The box is measured in logarithms, and
    points other than the declared one are rounded to three digits. A quasi-random start (Sobol', scrambled
    by ``seed``) is followed by a pattern search (Hooke and Jeeves 1961; polls along a new orthonormal basis
    each time, as mesh-adaptive search has it: Audet and Dennis 2006; both from memory): 2 N polls from the
    best point, N from that nearest to the limits of those with a better score, and the step is halved where
    none of them is better. The same arguments and answers give the same points again. ValueError
    below LEAST_TRIALS.
    """
    if trials < LEAST_TRIALS:
        raise ValueError(f"a search takes at least {LEAST_TRIALS} trials, not {trials}")
    tried = _Tried(ask, bounds, trials)
    tried.take([declared])
    tried.at(_filling(len(bounds), round(FILLED * trials), seed))
    rng, step = np.random.default_rng(seed), FIRST_STEP
    while tried.left and step >= LAST_STEP:
        before = tried.merits[tried.best]
        basis = np.linalg.qr(rng.standard_normal((len(bounds), len(bounds))))[0]
        for centre, polls in zip(tried.centres(), (np.vstack([basis, -basis]), basis), strict=False):
            tried.at(np.clip(tried.place(centre) + step * polls, 0.0, 1.0))
        if tried.merits[tried.best] >= before:
            step /= 2.0
    return tried.best, tried.merits[tried.best]


def _filling(dimension: int, count: int, seed: int) -> Floats:
    from scipy.stats import qmc

    size = 1 << max(count - 1, 0).bit_length()  # a whole power of 2 keeps the sequence's balance
    points: Floats = qmc.Sobol(dimension, scramble=True, seed=seed).random(size)[:count]
    return points


class _Tried:
    """What was tried, each point once, and no more than ``most``."""

    def __init__(self, ask: Ask, bounds: Sequence[tuple[float, float]], most: int) -> None:
        self._ask, self._most = ask, most
        self._low, self._high = np.log(np.array(bounds)).T
        self._bounds = bounds
        self.merits: dict[Point, Merit] = {}

    @property
    def left(self) -> int:
        return self._most - len(self.merits)

    @property
    def best(self) -> Point:
        """The point with the least merit, the first of equals."""
        return min(self.merits, key=self.merits.__getitem__)

    def centres(self) -> list[Point]:
        """Return where to poll: the best point, and that nearest to the limits with a better score."""
        missed, score = self.merits[self.best]
        beyond = [
            point
            for point, merit in self.merits.items()
            if missed == 0.0 < merit[0] < np.inf and merit[1] < score
        ]
        return [self.best, *sorted(beyond, key=self.merits.__getitem__)[:1]]

    def place(self, point: Point) -> Floats:
        """Return where a point lies in the unit box."""
        width = np.where(self._high > self._low, self._high - self._low, 1.0)
        inside: Floats = np.clip((np.log(np.array(point)) - self._low) / width, 0.0, 1.0)
        return inside

    def at(self, places: Floats) -> None:
        """Try the points at places of the unit box."""
        values = np.exp(self._low + places * (self._high - self._low)).tolist()
        self.take([self._rounded(value) for value in values])

    def _rounded(self, values: Sequence[float]) -> Point:
        return tuple(
            min(max(float(f"{value:.{DIGITS}g}"), low), high)
            for value, (low, high) in zip(values, self._bounds, strict=True)
        )

    def take(self, points: Sequence[Point]) -> None:
        """Try points, as long as there are trials left."""
        new = [point for point in dict.fromkeys(points) if point not in self.merits][: self.left]
        if new:
            self.merits.update(zip(new, self._ask(new), strict=True))

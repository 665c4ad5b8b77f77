"""Looking for the worst point of a box: differential evolution, then turning the signs of the worst found.

For a law that holds, the error is nearly linear in the departures, so that its peak over time and motions is
nearly convex, and the largest value of a convex function lies in a corner of the box. So the search starts
from random corners, and ends by turning the departures of the worst point round one by one.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from rigbench.arm.arm import Floats

__all__ = ["LEAST_TRIALS", "find_worst"]

Ask = Callable[["Floats"], "Floats"]
"""Gives the badness (P,) of points (P, N): not below 0, inf for the worst there is."""

LEAST_TRIALS = 10
"""Trials without which a search is none."""

POPULATION = 15
EVOLVED = 0.25
"""Share of the trials that go to differential evolution; the others climb."""

DIGITS = 4
"""Points are rounded, so that they can be written down."""


class _SpentError(Exception):
    """No more trials, or nothing worse to be found."""


class _Trials:
    """What was tried, up to ``most`` points, each once."""

    def __init__(self, ask: Ask, most: int) -> None:
        self._ask, self._most = ask, most
        self.found: dict[tuple[float, ...], float] = {}

    @property
    def left(self) -> int:
        return self._most - len(self.found)

    def values(self, points: Floats) -> Floats:
        """Return the badness of points; _SpentError, with the last trials used, if there are too few left."""
        rounded = [tuple(point) for point in (np.round(points, DIGITS) + 0.0).tolist()]
        new = list(dict.fromkeys(point for point in rounded if point not in self.found))
        spent = len(new) > self.left
        new = new[: self.left]
        if new:
            self.found.update(zip(new, self._ask(np.array(new)).tolist(), strict=True))
        if spent or math.inf in self.found.values():
            raise _SpentError
        return np.array([self.found[point] for point in rounded])

    def corners(self) -> list[Floats]:
        """Return the corners nearest to the points tried, those of the worst first, each once."""
        worst_first = sorted(self.found, key=lambda point: -self.found[point])
        corners = dict.fromkeys(tuple(math.copysign(1.0, u) for u in point) for point in worst_first)
        return [np.array(corner) for corner in corners]


def find_worst(
    ask: Ask, dimension: int, trials: int, seed: int, starts: Sequence[Sequence[float]] = ()
) -> tuple[tuple[float, ...], float]:
    """Return the worst point found in [-1, 1]^N, rounded to 1e-4, and its badness.

    ``ask`` is given whole generations at once, and ``trials`` points at most. ``starts`` are looked at
    first. It ends early where a point is infinitely bad, and when every corner next to a point of the
    evolution was climbed from. The same arguments and answers give the same points again. ValueError below
    LEAST_TRIALS.

    Differential evolution: Storn and Price 1997, as scipy has it (best1bin), a generation a batch.
    """
    if trials < LEAST_TRIALS:
        raise ValueError(f"a search takes at least {LEAST_TRIALS} trials, not {trials}")
    tried = _Trials(ask, trials)
    rng = np.random.default_rng(seed)
    try:
        _evolve(tried, dimension, rng, starts, max(round(EVOLVED * trials), LEAST_TRIALS))
        climbed: set[tuple[float, ...]] = set()
        for corner in tried.corners():
            _climb(tried, corner, climbed)
    except _SpentError:
        pass
    worst = max(tried.found, key=tried.found.__getitem__)
    return worst, tried.found[worst]


def _evolve(
    tried: _Trials, dimension: int, rng: np.random.Generator, starts: Sequence[Sequence[float]], trials: int
) -> None:
    from scipy.optimize import differential_evolution

    size = min(POPULATION, trials)
    corners = rng.choice([-1.0, 1.0], (size, dimension))
    given = np.array(starts, dtype=float).reshape(-1, dimension)[: size - 2]
    corners[: len(given)] = given
    tried.values(corners)  # some of which may coincide

    def downwards(columns: Floats) -> Floats:
        found = tried.values(columns.T)
        return -found / (1.0 + found)  # bounded, in the same order

    differential_evolution(
        downwards,
        [(-1.0, 1.0)] * dimension,
        init=corners,
        maxiter=max(trials // size - 1, 0),
        vectorized=True,
        updating="deferred",
        polish=False,
        tol=0.0,
        seed=rng,
    )


def _climb(tried: _Trials, corner: Floats, climbed: set[tuple[float, ...]]) -> None:
    """Turn departures round, one by one and the worst of these together, until that makes nothing worse.

    It ends at a corner that was ``climbed`` over before.
    """
    (value,) = tried.values(corner[None])
    while tuple(corner) not in climbed:
        climbed.add(tuple(corner))
        turned = np.repeat(corner[None], len(corner), axis=0)
        np.fill_diagonal(turned, -corner)
        found = tried.values(turned)
        order = np.argsort(-found, kind="stable")
        worse = int(np.sum(found > value))
        if not worse:
            return
        together = np.repeat(corner[None], 4, axis=0)
        for one, share in zip(together, (0.0, 0.25, 0.5, 1.0), strict=True):
            one[order[: max(1, math.ceil(share * worse))]] *= -1.0
        found = tried.values(together)
        corner, value = together[int(np.argmax(found))], float(np.max(found))

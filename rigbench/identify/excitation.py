"""Excitation: the motion along which torques tell most of the parameters, within all limits."""

from __future__ import annotations

import contextlib
from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property
from typing import Literal

import numpy as np
from scipy.optimize import minimize
from scipy.special import logsumexp

from rigbench.arm.arm import Arm, Floats
from rigbench.errors import InputFaults
from rigbench.identify.base import Base, base_of
from rigbench.identify.bounds import Bounds
from rigbench.identify.fourier import FourierMotion
from rigbench.identify.regressor import Terms, parameter_values, regressor
from rigbench.identify.series import Series, SeriesSpace

__all__ = ["Criterion", "Excitation", "Search", "excite"]

Criterion = Literal["condition", "determinant"]

COARSE, GRID, FINE = 10, 96, 1000
"""Samples of a period at a first look, in the search, and where a motion is checked at last."""

HALVINGS = 7
"""Bisections for the largest share of a motion's amplitudes that keeps the limits: to 1 percent."""

SMOOTH = 6.0
"""Power of the sums that stand for the largest and smallest singular value in the search: smooth, and equal
to them as it grows."""

CREEP = 0.1
"""Speed over which the sign of a speed changes in the search [rad/s or m/s]."""

MARGIN = 0.01
"""Share by which the search stays off the limits, so that little is shrunk at last."""

TRIES = 200
"""Random motions tried before limits count as impossible to keep."""

STARTS, ROUNDS = 20, 60
"""Random motions of which the search starts from the best, and its steps at most (our choice)."""

PENALTY = 300.0
"""Cost of passing a limit by all of it, beside a merit that is a logarithm."""

NONE_KEEPS = "no motion was found that keeps the limits of torque and tool, however small"


@dataclass(frozen=True, eq=False)
class Search:
    """The motions of one arm within bounds, and how well each shows the parameters."""

    arm: Arm
    gravity: tuple[float, float, float]
    terms: Terms
    bounds: Bounds
    space: SeriesSpace

    @cached_property
    def base(self) -> Base:
        """The arm's base parameters."""
        return base_of(self.arm, self.gravity, self.terms)

    def random_point(self, rng: np.random.Generator) -> Floats:
        """Return a random point whose motion, shrunk, keeps the limits; InputFaults if none of 200 does."""
        for _ in range(TRIES):
            point = self.space.random(rng)
            if self._kept(self.space.series(point)) is not None:
                return point
        raise InputFaults.one(self.arm.name, "", NONE_KEEPS, "a larger tool box, or higher limits of torque")

    def motion(self, point: Floats, periods: int = 1, rest_s: float = 0.5) -> FourierMotion:
        """Return the motion of a point, shrunk until it keeps all limits; InputFaults if it never does."""
        kept = self._kept(self.space.series(point))
        if kept is None:
            raise InputFaults.one(
                self.arm.name, "", NONE_KEEPS, "a larger tool box, or higher limits of torque"
            )
        centre, *waves = (part.tolist() for part in kept)
        sine, cosine = (tuple(map(tuple, wave)) for wave in waves)
        return FourierMotion(tuple(centre), sine, cosine, self.space.period_s, periods, rest_s)

    def random_motion(self, seed: int, periods: int = 1) -> FourierMotion:
        """Return a random motion that keeps the limits; InputFaults if none of 200 does."""
        return self.motion(self.random_point(np.random.default_rng(seed)), periods)

    def condition(self, motion: FourierMotion) -> float:
        """Return the condition number of the base regressor along a period of a motion.

        Each joint's rows are over its torque limit, so that a strong joint does not outweigh the others.
        """
        times = np.linspace(0.0, motion.period_s / motion.pace, FINE, endpoint=False)
        y = regressor(self.arm, self.gravity, *motion.reference(times), self.terms)
        size = np.linalg.svd(self._rows(y), compute_uv=False)
        return float(size[0] / size[-1])

    def cost(self, point: Floats, criterion: Criterion) -> float:
        """Return what is to be least: log condition, or minus the mean log of the squared singular values.

        Passing a limit of torque or tool costs besides.
        """
        states = self.space.states(self.space.series(point), GRID)
        y = regressor(self.arm, self.gravity, *states, self.terms, smooth_sign)
        rows = self._rows(y)
        squares = np.maximum(np.linalg.eigvalsh(rows.T @ rows), 1e-300)
        merit = -np.log(squares).mean()
        if criterion == "condition":
            powers = SMOOTH * np.log(squares)
            merit = (logsumexp(powers) + logsumexp(-powers)) / (2 * SMOOTH)
        passed = np.maximum(self._excess(states, y) + MARGIN, 0.0)
        return float(merit + PENALTY * (passed**2).sum(axis=1).mean())

    def _rows(self, y: Floats) -> Floats:
        """Return the base regressor (N n, b), joint by joint over the torque limit, of Y (N, n, p)."""
        scale = np.where(np.isfinite(self.bounds.torque), self.bounds.torque, 1.0)
        return (y[:, :, self.base.kept] / scale[:, None]).reshape(-1, self.base.count)

    def _excess(self, states: tuple[Floats, Floats, Floats], y: Floats) -> Floats:
        """Return by which share each limit of position, speed, torque and tool is passed, (N, limits)."""
        torque = y @ parameter_values(self.arm, self.terms)
        return self.bounds.excess(states[0], states[1], torque, self.arm.chain(self.gravity))

    def _kept(self, series: Series) -> Series | None:
        """Return the series with the largest share of its amplitudes that keeps all limits, or None."""
        if self._keeps(series, COARSE) and self._keeps(series):
            return series
        low, high = 0.5**HALVINGS, 1.0
        if not (self._keeps(scaled(series, low), COARSE) and self._keeps(scaled(series, low))):
            return None
        for _ in range(HALVINGS):
            middle = (low + high) / 2
            low, high = (middle, high) if self._keeps(scaled(series, middle)) else (low, middle)
        return scaled(series, low)

    def _keeps(self, series: Series, samples: int = FINE) -> bool:
        """Tell whether a series keeps all limits at so many samples of its period."""
        states = self.space.states(series, samples)
        y = regressor(self.arm, self.gravity, *states, self.terms)
        return bool(self._excess(states, y).max() <= 0)


def smooth_sign(v: Floats) -> Floats:
    """Return the sign of v without its jump, on which a descent would stall."""
    return np.tanh(v / CREEP)


def scaled(series: Series, share: float) -> Series:
    """Return the series with a share of its amplitudes, about the same centre."""
    centre, sine, cosine = series
    return centre, share * sine, share * cosine


@dataclass(frozen=True, eq=False)
class Excitation:
    """An optimised motion, the condition number along it, and the median of those of the random starts."""

    motion: FourierMotion
    condition: float
    random_condition: float


def excite(
    search: Search,
    *,
    criterion: Criterion = "condition",
    seed: int = 0,
    starts: int = STARTS,
    rounds: int = ROUNDS,
    periods: int = 1,
    tell: Callable[[int, float], None] | None = None,
) -> Excitation:
    """Return the best motion found within the bounds, ``periods`` long.

    From the best of ``starts`` random motions downhill by quasi-Newton steps (L-BFGS-B) on differences of
    :meth:`Search.cost`. A function of its arguments alone. ``tell(round, cost)`` is called after
    each of the ``rounds`` at most. Raises InputFaults if no motion keeps the limits.

    Sources: Swevers and others 1997 for the series, Gautier, Khalil 1992, "Exciting trajectories for the
    identification of base inertial parameters of robots", for the condition number.
    """
    rng = np.random.default_rng(seed)
    points = [search.random_point(rng) for _ in range(starts)]
    conditions = [search.condition(search.motion(point)) for point in points]
    best = points[int(np.argmin([search.cost(point, criterion) for point in points]))]
    done = 0

    def cost(flat: Floats) -> float:
        return search.cost(flat.reshape(best.shape), criterion)

    def after(flat: Floats) -> None:
        nonlocal done
        done += 1
        if tell is not None:
            tell(done, cost(flat))

    found = minimize(cost, best.ravel(), method="L-BFGS-B", options={"maxiter": rounds}, callback=after)
    motions = [search.motion(best, periods)]
    with contextlib.suppress(InputFaults):  # where the last step left the limits for good, the start is left
        motions.insert(0, search.motion(found.x.reshape(best.shape), periods))
    reached = [search.condition(motion) for motion in motions]
    chosen = int(np.argmin(reached)) if criterion == "condition" else 0
    return Excitation(motions[chosen], reached[chosen], float(np.median(conditions)))

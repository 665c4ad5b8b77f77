"""A motion planned elsewhere: a table of positions over time, joined by a smooth spline."""

from __future__ import annotations

import hashlib
import math
from dataclasses import dataclass, fields, replace
from functools import cached_property
from typing import Any

import numpy as np
from scipy.interpolate import CubicSpline

from rigbench.arm.arm import Floats

__all__ = ["LEAST_REST_S", "LEAST_STEP_S", "TableMotion"]

LEAST_REST_S = 0.1
"""A table that ends on equal rows for this long, in its own time, ends on a rest."""

LEAST_STEP_S = 1e-6
"""Shortest time between two rows: less is no plan, and the spline would lose its digits."""


@dataclass(frozen=True)
class TableMotion:
    """A cubic spline through the rows of a table, twice continuously differentiable.

    Its ends are free (not-a-knot), so a plan may start or end in motion; outside [0, duration_s] the
    end rows are held, at rest. A table whose last rows are equal for :data:`LEAST_REST_S` or more ends
    on a rest, which begins at the first of them: there the position is held exactly, and the spline
    reaches it with zero velocity (its acceleration may jump there). ``pace`` above 0 scales all time,
    that rest included: reference(t) is that of the table at pace * t.

    ``times`` [s], two or more, rising by at least :data:`LEAST_STEP_S`, are shifted to start at 0;
    ``rows``, one per time, in rad, or m for a prismatic joint. ValueError if any of this doesn't hold.
    """

    times: tuple[float, ...]
    rows: tuple[tuple[float, ...], ...]
    pace: float = 1.0

    def __post_init__(self) -> None:
        if len(self.times) < 2 or len(self.times) != len(self.rows) or len({len(r) for r in self.rows}) != 1:
            raise ValueError("a table needs two rows or more, all with as many joints, and a time for each")
        if not (np.isfinite(self._times).all() and np.isfinite(self._rows).all()):
            raise ValueError("times and positions are finite")
        if not (np.diff(self._times) >= LEAST_STEP_S).all():
            raise ValueError(f"times rise by {LEAST_STEP_S} s or more from row to row")
        if not 0 < self.pace < math.inf:
            raise ValueError("pace is above 0 and finite")

    def __getstate__(self) -> dict[str, Any]:
        # What is cached stays behind: it is quickly made again, and equal motions pickle alike.
        return {field.name: getattr(self, field.name) for field in fields(self)}

    @cached_property
    def _times(self) -> Floats:
        times = np.array(self.times, float)
        shifted: Floats = times - times[0]
        return shifted

    @cached_property
    def _rows(self) -> Floats:
        return np.array(self.rows, float)

    @cached_property
    def _moving(self) -> int:
        """Index of the row in which the last leg ends: the last one, or the first of a rest."""
        last = len(self.rows) - 1
        moved = np.flatnonzero((self._rows != self._rows[-1]).any(axis=1))
        start = int(moved[-1]) + 1 if moved.size else 0
        return start if self._times[last] - self._times[start] >= LEAST_REST_S * (1 - 1e-9) else last

    @cached_property
    def _splines(self) -> tuple[CubicSpline, CubicSpline, CubicSpline] | None:
        """Position, velocity and acceleration over the table's time; None where it never moves."""
        end = self._moving
        if end == 0:
            return None
        at_end = (1, np.zeros(self._rows.shape[1])) if end < len(self.rows) - 1 else "not-a-knot"
        position = CubicSpline(self._times[: end + 1], self._rows[: end + 1], bc_type=("not-a-knot", at_end))
        return position, position.derivative(1), position.derivative(2)

    @property
    def duration_s(self) -> float:
        """Time from the first row to the last, at the pace [s]."""
        return float(self._times[-1]) / self.pace

    @property
    def rests(self) -> tuple[tuple[float, float], ...]:
        """The rest that the table ends on, (end of the leg, end of the rest) [s]; empty if none."""
        if self._moving == len(self.rows) - 1:
            return ()
        return ((float(self._times[self._moving]) / self.pace, self.duration_s),)

    @property
    def row_times(self) -> Floats:
        """Time of every row, at the pace (N,) [s], from 0."""
        return self._times / self.pace

    def reference(self, t: Floats) -> tuple[Floats, Floats, Floats]:
        """Return q, v, a, each (N, n), at the times t (N,) [s], as every Motion does."""
        t = np.asarray(t, float)
        end = self._times[self._moving]
        at = np.clip(t * self.pace, 0.0, end)
        if self._splines is None:
            q = np.repeat(self._rows[:1], len(t), axis=0)
            return q, np.zeros_like(q), np.zeros_like(q)
        q, v, a = (spline(at) for spline in self._splines)
        arrived = at >= end * (1 - 4 * np.finfo(float).eps)  # not short of it by the rounding of t * pace
        rests = arrived & (self._moving < len(self.rows) - 1)
        held = (t < 0) | (t > self.duration_s) | rests
        v[held] = a[held] = 0.0
        q[arrived] = self._rows[-1]  # a spline meets its last row to rounding only
        return q, v * self.pace, a * self.pace**2

    def paced(self, factor: float) -> TableMotion:
        """Return the same motion at ``factor`` times its pace."""
        return replace(self, pace=self.pace * factor)

    def inputs(self) -> dict[str, Any]:
        """Return a digest of times and rows, and the pace, JSON-able."""
        return {"kind": "table", "digest": self._digest, "pace": float(self.pace)}

    @cached_property
    def _digest(self) -> str:
        table = np.column_stack([self._times, self._rows]) + 0.0
        return hashlib.blake2b(table.tobytes() + b"%d" % table.shape[1], digest_size=20).hexdigest()

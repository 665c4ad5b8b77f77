"""Excitation's motion: a finite Fourier series in every joint, from rest to rest."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from rigbench.arm.arm import Floats

__all__ = ["FourierMotion"]

Rows = tuple[tuple[float, ...], ...]

AT_REST = 1e-9
"""Share of a joint's speed or acceleration that its start may miss rest by: rounding."""


@dataclass(frozen=True)
class FourierMotion:
    """A motion that repeats: q_i = centre_i + sum over l of sine_il sin(l w t) + cosine_il cos(l w t).

    w = 2 pi pace / period_s, l = 1 to the number of columns; after ``periods`` of them the reference rests
    for ``rest_s``, where it began. Source: Swevers, Ganseman, Tuekel, De Schutter, Van Brussel 1997,
    "Optimal robot excitation and identification", who write the same series by its velocity.

    The series begins and ends at rest, as a run does: sum l sine_il = 0 and sum l^2 cosine_il = 0.
    ``centre`` (n) and the amplitudes, n rows, in rad, or m for a prismatic joint; ``period_s`` and
    ``pace`` above 0, ``periods`` 1 or more, ``rest_s`` not below 0. ValueError if any of this doesn't hold.
    """

    centre: tuple[float, ...]
    sine: Rows
    cosine: Rows
    period_s: float
    periods: int = 1
    rest_s: float = 0.0
    pace: float = 1.0

    def __post_init__(self) -> None:
        shapes = {(len(row)) for row in (*self.sine, *self.cosine)}
        if not (len(self.centre) == len(self.sine) == len(self.cosine) > 0) or len(shapes) != 1:
            raise ValueError("a series needs a centre and as many sines as cosines for every joint")
        if not all(np.isfinite(part).all() for part in (self.centre, self.sine, self.cosine)):
            raise ValueError("centres and amplitudes are finite")
        if not (0 < self.period_s < math.inf and 0 < self.pace < math.inf and 0 <= self.rest_s < math.inf):
            raise ValueError("period_s and pace are above 0 and rest_s is not below 0, all finite")
        if self.periods < 1:
            raise ValueError("there is one period or more")
        order = np.arange(1, len(self.sine[0]) + 1)
        for terms in (order * np.array(self.sine), order**2 * np.array(self.cosine)):
            if (np.abs(terms.sum(axis=1)) > AT_REST * np.abs(terms).sum(axis=1)).any():
                raise ValueError("the series does not begin at rest")

    @property
    def _moving(self) -> float:
        """Time of all periods, without the rest [s]."""
        return self.periods * self.period_s / self.pace

    @property
    def duration_s(self) -> float:
        """Time of all periods and the rest [s]."""
        return self._moving + self.rest_s

    @property
    def rests(self) -> tuple[tuple[float, float], ...]:
        """The rest at the end, (end of the periods, end of the rest) [s]; empty if rest_s is 0."""
        return ((self._moving, self.duration_s),) if self.rest_s > 0 else ()

    def reference(self, t: Floats) -> tuple[Floats, Floats, Floats]:
        """Return q, v, a, each (N, n), at the times t (N,) [s], as every Motion does."""
        t = np.asarray(t, float)
        held = (t <= 0) | (t >= self._moving * (1 - 4 * np.finfo(float).eps))
        rate = 2 * math.pi * self.pace / self.period_s * np.arange(1, len(self.sine[0]) + 1)
        angle = np.where(held, 0.0, t)[:, None] * rate
        sine, cosine = np.array(self.sine, float).T, np.array(self.cosine, float).T
        wave, quarter = np.sin(angle), np.cos(angle)
        q = np.array(self.centre, float) + wave @ sine + quarter @ cosine
        v = (quarter * rate) @ sine - (wave * rate) @ cosine
        a = -((wave * rate**2) @ sine + (quarter * rate**2) @ cosine)
        v[held] = a[held] = 0.0
        return q, v, a

    def paced(self, factor: float) -> FourierMotion:
        """Return the same motion at ``factor`` times its pace; the rest stays as long."""
        return replace(self, pace=self.pace * factor)

    def inputs(self) -> dict[str, Any]:
        """Return the series, times and pace, JSON-able."""
        return {
            "kind": "fourier",
            "centre": [float(x) + 0.0 for x in self.centre],
            "sine": [[float(x) + 0.0 for x in row] for row in self.sine],
            "cosine": [[float(x) + 0.0 for x in row] for row in self.cosine],
            "period_s": float(self.period_s),
            "periods": int(self.periods),
            "rest_s": float(self.rest_s) + 0.0,
            "pace": float(self.pace),
        }

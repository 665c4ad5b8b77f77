"""What would lie on top of each other is moved apart, as little as will do."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from scipy.optimize import isotonic_regression

__all__ = ["lanes", "spread"]

LANE, LANES = 1.7, 9.0  # between two lanes, and of all lanes together at most
SAME = 1.0  # lines nearer than this at both ends coincide


def spread(wanted: Sequence[float], heights: Sequence[float], top: float, bottom: float) -> list[float]:
    """Return the middles of boxes of these heights, each near where it is ``wanted``, none over another.

    Of all ways in that order (boxes wanted at the same place keep theirs) it is the one with the least sum
    of squared moves, shifted into ``top`` to ``bottom`` where that has room.
    """
    order = np.argsort(wanted, kind="stable")
    high = np.asarray(heights, dtype=float)[order]
    # With each box's own share of the stack taken off, "none over another" reads "never falling".
    stacked = np.cumsum(high) - high / 2
    moved = isotonic_regression(np.asarray(wanted, dtype=float)[order] - stacked).x + stacked
    least, most = top + stacked, bottom - (high.sum() - stacked)
    placed = np.empty(len(high))
    placed[order] = np.maximum(np.minimum(moved, most), least)
    return [float(at) for at in placed]


def lanes(pieces: Sequence[tuple[float, float]]) -> list[float]:
    """Return how far to shift lines, given by their heights at both ends, so that none covers another."""
    groups: list[list[int]] = []
    for number, piece in enumerate(pieces):
        near = (group for group in groups if np.allclose(pieces[group[0]], piece, rtol=0, atol=SAME))
        found = next(near, None)
        if found is None:
            groups.append([number])
        else:
            found.append(number)
    shifts = [0.0] * len(pieces)
    for group in groups:
        for place, number in enumerate(group):
            lane = min(LANE, LANES / len(group))
            shifts[number] = lane * (place - (len(group) - 1) / 2)
    return shifts

"""The tolerated level: how much mismatch a law bears."""

from __future__ import annotations

from collections.abc import Sequence
from math import inf

import numpy as np
from scipy.optimize import isotonic_regression

from rigbench.arm.arm import Floats
from rigbench.scores.results import Cell, Column, Tolerated

__all__ = ["ladder", "tolerated_level"]


def ladder(columns: Sequence[Column]) -> tuple[Column, ...]:
    """Return the columns in which all sources act together, by level; nominal stands first, at level 0."""
    return tuple(sorted((column for column in columns if column.ladder), key=lambda c: c.level or 0.0))


def tolerated_level(cells: Sequence[Cell], required_share: float) -> Tolerated:
    """Return the tolerated level of a law from its cells on the ladder.

    ``high`` is the smallest level that misses, inf if none does; ``low`` the largest that keeps among
    those below it, 0 if none does: a level that keeps above one that misses proves nothing. Both are 0 if
    level 0 itself misses. ``value`` is where the pass share, made to fall with the level by isotonic
    regression with the draws as weights, crosses the required share, linearly between levels; never
    outside low and high; None where it does not cross.
    """
    cells = sorted(cells, key=lambda cell: cell.level or 0.0)
    levels = [cell.level or 0.0 for cell in cells]
    high = min((a for a, cell in zip(levels, cells, strict=True) if cell.verdict == "misses"), default=inf)
    keeping = (a for a, cell in zip(levels, cells, strict=True) if cell.verdict == "keeps" and a < high)
    low = max(keeping, default=0.0)
    if high == 0.0:
        return Tolerated(0.0, 0.0, 0.0)
    value = _crossing(cells, required_share)
    return Tolerated(None if value is None else min(max(value, low), high), low, high)


def _crossing(cells: Sequence[Cell], required_share: float) -> float | None:
    """Return the level at which the isotonic pass share falls below the required share."""
    known = [cell for cell in cells if cell.pass_share is not None]
    if not known:
        return None
    levels = [cell.level or 0.0 for cell in known]
    # A share is weighed by its draws; an exact run is worth the most that any other cell has.
    most = max(cell.draws for cell in known)
    exact = [cell.pass_low == cell.pass_high for cell in known]
    weights = [most if sure else cell.draws for sure, cell in zip(exact, known, strict=True)]
    fit: Floats = isotonic_regression(
        [cell.pass_share for cell in known], weights=weights, increasing=False
    ).x
    # Pooled means may fall short of a share that they equal by a rounding error.
    below = np.flatnonzero(fit < required_share - 1e-12)
    if not below.size or below[0] == 0:
        return None
    k = int(below[0])
    share = (fit[k - 1] - required_share) / (fit[k - 1] - fit[k])
    return float(levels[k - 1] + share * (levels[k] - levels[k - 1]))

"""Whether a draw keeps the tolerance, from the rows of its runs."""

from __future__ import annotations

from collections.abc import Iterable

from rigbench.scores.results import Tolerance
from rigbench.scores.row import MACHINE_OUTCOMES, Row

__all__ = ["keeps"]


def keeps(rows: Iterable[Row], tolerance: Tolerance) -> bool | None:
    """Return whether a draw whose runs, one a motion, came to ``rows`` keeps the tolerance in all of them.

    Each finished, and each limit of its motion holds ('at most') on the scores that it has. None where the
    host's trouble leaves any of them without a verdict.
    """
    kept = True
    for row in rows:
        if row.outcome not in MACHINE_OUTCOMES:
            return None
        limits = tolerance.limits_for(row.motion)
        kept &= row.outcome == "finished" and all(
            row.scores.get(s, 0.0) <= most for s, most in limits.items()
        )
    return kept

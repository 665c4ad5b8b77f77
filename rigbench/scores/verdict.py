"""Whether a draw keeps the tolerance, from the rows of its runs."""

from __future__ import annotations

from collections.abc import Iterable, Mapping

from rigbench.scores.results import Tolerance
from rigbench.scores.row import MACHINE_OUTCOMES, Row

__all__ = ["keeps", "run_keeps"]


def run_keeps(outcome: str, scores: Mapping[str, float], limits: Mapping[str, float]) -> bool | None:
    """Return whether a run finished within its ``limits`` ('at most'), on the scores that it has.

    None where the host's trouble leaves it without a verdict.
    """
    if outcome not in MACHINE_OUTCOMES:
        return None
    return outcome == "finished" and all(scores.get(name, 0.0) <= most for name, most in limits.items())


def keeps(rows: Iterable[Row], tolerance: Tolerance) -> bool | None:
    """Return whether a draw whose runs, one a motion, came to ``rows`` keeps the tolerance in all of them.

    None where any of them is without a verdict; see :func:`run_keeps`.
    """
    verdicts = [run_keeps(row.outcome, row.scores, tolerance.limits_for(row.motion)) for row in rows]
    return None if None in verdicts else all(verdicts)

"""How much of its limits a run uses up."""

from __future__ import annotations

import math

import pytest

from rigbench.scores.limit_share import LimitShare, limit_share
from rigbench.scores.results import Tolerance
from rigbench.scores.row import Row
from rigbench.scores.verdict import keeps


def row(outcome: str = "finished", **scores: float) -> Row:
    return Row("", "pd", "lift", "all at 1", 1.0, 0, outcome, scores)


@pytest.mark.parametrize(
    ("scores", "limits", "expected"),
    [
        ({"tool_peak_mm": 1.5}, {"tool_peak_mm": 3.0}, LimitShare(0.5, "tool_peak_mm", 1.5)),
        ({"tool_peak_mm": 1.5, "settle_ms": 300.0}, {"tool_peak_mm": 3.0, "settle_ms": 200.0}, LimitShare(1.5, "settle_ms", 300.0)),
        ({"settle_ms": math.inf}, {"settle_ms": 200.0}, LimitShare(math.inf, "settle_ms", math.inf)),
        ({"saturated_percent": 0.0}, {"saturated_percent": 0.0}, LimitShare(0.0, "saturated_percent", 0.0)),
        ({"saturated_percent": 0.1}, {"saturated_percent": 0.0}, LimitShare(math.inf, "saturated_percent", 0.1)),
        ({"tool_peak_mm": 1.5}, {"settle_ms": 200.0}, LimitShare(0.0, "", 0.0)),
    ],
)  # fmt: skip
def test_the_largest_share_counts(scores: dict, limits: dict, expected: LimitShare) -> None:
    """Of several limits the one used up most; above 1 exactly where the run misses the tolerance."""
    found = limit_share(row(**scores), limits)
    assert found == expected
    assert (found.share > 1.0) != keeps([row(**scores)], Tolerance(limits))


def test_what_did_not_finish_is_the_worst_there_is() -> None:
    """A machine's verdict without scores is beyond all limits; a host's trouble is no verdict."""
    assert limit_share(row("diverged"), {"tool_peak_mm": 3.0}) == LimitShare(math.inf, "", math.inf)
    assert limit_share(row("hit-stop"), {"tool_peak_mm": 3.0}) == LimitShare(math.inf, "", math.inf)
    for outcome in ("law-error", "no-plant", "crashed", "timed-out"):
        assert limit_share(row(outcome), {"tool_peak_mm": 3.0}) is None

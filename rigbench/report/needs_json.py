"""What the study ``needs`` shows, as plain values."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Any

from rigbench.scores.needs import Alone, LawNeeds, SourceNeed
from rigbench.scores.needs_design import Group, NeedsDesign
from rigbench.scores.spread_at import spread_at

__all__ = ["needs_json"]


def needs_json(found: Sequence[LawNeeds], design: NeedsDesign) -> dict[str, Any]:
    """Return the score, the level and the laws with their sources, what to identify first standing first.

    Shares have value, low and high, not cut to 0 to 1; so has a tolerated level, with the draws that count.
    ``spread`` is in the source's own unit: ``declared``, and ``kept`` at the tolerated level's low end (null
    where that is 0). What is infinite, or no number, is null.
    """
    return {"score": design.score, "level": design.level, "laws": [_law(needs) for needs in found]}


def _law(needs: LawNeeds) -> dict[str, Any]:
    return {
        "sheet": needs.sheet,
        "law": needs.law,
        "finished": needs.finished,
        "rows": {"planned": needs.planned, "counting": needs.points, "dropped": needs.dropped},
        "runs_missing": needs.missing,
        "runs_unfinished": needs.unfinished,
        "shares_of": needs.scale,
        "tolerated_together": _level(needs.together),
        "sources": [_source(need) for need in needs.sources],
    }


def _source(need: SourceNeed) -> dict[str, Any]:
    group = need.group
    return {
        "name": group.name,
        "source": group.source,
        "part": group.part or None,
        "total": _ends(need.total),
        "first": _ends(need.first),
        "tolerated_alone": _level(need.alone),
        "spread": _spread(group, need.alone.found.tolerated.low),
    }


def _spread(group: Group, low: float) -> dict[str, Any]:
    kept = spread_at(group.spread, low) if low > 0 else None
    return {"unit": group.spread["unit"], "declared": spread_at(group.spread, 1.0), "kept": kept}


def _level(alone: Alone) -> dict[str, Any]:
    tolerated = alone.found.tolerated
    return {
        "value": tolerated.value,
        "low": tolerated.low,
        "high": None if math.isinf(tolerated.high) else tolerated.high,
        "draws": alone.found.draws,
        "dropped": alone.dropped,
        "finished": alone.finished,
    }


def _ends(interval: tuple[float, float, float]) -> dict[str, float | None]:
    ends = (end if math.isfinite(end) else None for end in interval)
    return dict(zip(("value", "low", "high"), ends, strict=True))

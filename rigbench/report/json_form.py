"""The results as one JSON document."""

from __future__ import annotations

import math
from collections.abc import Mapping
from numbers import Integral, Real
from typing import Any

from rigbench.report.cells import Grid
from rigbench.report.limits_words import found_by
from rigbench.scores.comparison import Comparison
from rigbench.scores.results import (
    Cell,
    LawComparison,
    LawStanding,
    LevelSearch,
    Measure,
    MotionCell,
    Results,
)

__all__ = ["plain_values", "results_json"]


def results_json(results: Results, store: str) -> dict[str, Any]:
    """Return the results as plain values that ``json.dumps(..., allow_nan=False)`` takes.

    ``{"store", "runs": {"planned", "done", "failed"}, "cells": [...], "laws": [...], "break_even": [...],
    "comparisons": [...], "stop_early", "advice"}``. A cell holds sheet, law, condition, level, draws,
    incomplete, pass_share, pass_low, pass_high, verdict, planned (how many draws; 0 where the law is not
    possible); then each score by name, ``{"median", "p95", "median_low", "median_high", "p95_low",
    "p95_high", "ratio", "ratio_low", "ratio_high"}`` in the unit that the name carries, the ratio being to
    nominal, draw by draw; and ``"motions"``, each with draws, passed, pass_share and its scores. What is
    infinite, or missing, is None: p95_high where the draws don't reach, the tolerated level's high where no
    level was shown to miss, all shares without a tolerance, all verdicts where a law is not possible.
    A law holds sheet, law, ``"tolerated_level": {"value", "low", "high"}``, found_by: "pass_shares" or
    "own_limits", and of the latter ``"own_limits": {"draws", "most", "finest", "never_miss", "keep_again",
    "left_open"}``. A cell is ``settled`` where its column stopped early, after the draws ``planned``; where
    ``stop_early`` is true, the intervals of shares hold at any number of draws.
    A comparison is of two laws under one condition: ``{"sheet", "condition", "level", "laws", "score",
    "difference": {"value", "low", "high"}, "draws", "tie"}``, the first law's score less the second's.
    """
    with_tolerance, grid = results.tolerance is not None, Grid(results)
    document = {
        "store": store,
        "runs": {"planned": results.planned, "done": results.done, "failed": results.failed},
        "cells": [_cell(cell, with_tolerance) for cell in results.cells],
        "laws": [
            {
                "sheet": standing.sheet,
                "law": standing.law,
                "tolerated_level": None
                if standing.tolerated is None or not grid.possible(standing.sheet, standing.law)
                else {
                    "value": standing.tolerated.value,
                    "low": standing.tolerated.low,
                    "high": standing.tolerated.high,
                },
                "found_by": found_by(standing) if grid.possible(standing.sheet, standing.law) else None,
                "own_limits": _limits(standing, results.level_search),
            }
            for standing in results.standings
        ],
        "break_even": results.break_even,
        "comparisons": [_comparison(one) for one in results.comparisons],
        "stop_early": results.stop_early,
        "advice": results.advice,
    }
    plain: dict[str, Any] = plain_values(document)
    return plain


def _limits(standing: LawStanding, search: LevelSearch | None) -> dict[str, float] | None:
    if standing.found is None or search is None:
        return None
    found = standing.found
    return {
        "draws": found.draws,
        "most": search.most,
        "finest": search.finest,
        "never_miss": found.never_miss,
        "keep_again": found.keep_again,
        "left_open": found.left_open,
    }


def _comparison(one: LawComparison) -> dict[str, Any]:
    gap = one.difference
    return {
        "sheet": one.sheet,
        "condition": one.condition,
        "level": one.level,
        "laws": one.laws,
        "score": one.score,
        "difference": {"value": gap.value, "low": gap.low, "high": gap.high},
        "draws": gap.draws,
        "tie": gap.tie,
    }


def _cell(cell: Cell, with_tolerance: bool) -> dict[str, Any]:
    return {
        "sheet": cell.sheet,
        "law": cell.law,
        "condition": cell.condition,
        "level": cell.level,
        "draws": cell.draws,
        "incomplete": cell.incomplete,
        "pass_share": cell.pass_share,
        "pass_low": cell.pass_low,
        "pass_high": cell.pass_high,
        "verdict": (cell.verdict if cell.planned else "") or None,
        "planned": cell.planned,
        "settled": cell.settled,
        **{name: _measure(one) | _ratio(cell.ratios.get(name)) for name, one in cell.measures.items()},
        "motions": {name: _motion(motion, with_tolerance) for name, motion in cell.motions.items()},
    }


def _motion(motion: MotionCell, with_tolerance: bool) -> dict[str, Any]:
    counts = with_tolerance and motion.draws > 0
    return {
        "draws": motion.draws,
        "passed": motion.passed if with_tolerance else None,
        "pass_share": motion.passed / motion.draws if counts else None,
        **_measures(motion.measures),
    }


def _measures(measures: Mapping[str, Measure]) -> dict[str, dict[str, float]]:
    return {name: _measure(measure) for name, measure in measures.items()}


def _measure(measure: Measure) -> dict[str, float]:
    return {
        "median": measure.median,
        "p95": measure.p95,
        "median_low": measure.median_low,
        "median_high": measure.median_high,
        "p95_low": measure.p95_low,
        "p95_high": measure.p95_high,
    }


def _ratio(ratio: Comparison | None) -> dict[str, float | None]:
    ends = (None, None, None) if ratio is None else (ratio.value, ratio.low, ratio.high)
    return dict(zip(("ratio", "ratio_low", "ratio_high"), ends, strict=True))


def plain_values(value: Any) -> Any:
    """Return the value in JSON's own types, numpy's numbers included; None for what is not finite."""
    if isinstance(value, Mapping):
        return {str(key): plain_values(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [plain_values(item) for item in value]
    if value is None or isinstance(value, str | bool):
        return value
    if isinstance(value, Integral):
        return int(value)
    if isinstance(value, Real):
        return float(value) if math.isfinite(value) else None
    return str(value)

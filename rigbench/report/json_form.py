"""The results as one JSON document."""

from __future__ import annotations

import math
from collections.abc import Mapping
from numbers import Integral, Real
from typing import Any

from rigbench.report.cells import Grid
from rigbench.scores.results import Cell, Measure, MotionCell, Results

__all__ = ["results_json"]


def results_json(results: Results, store: str) -> dict[str, Any]:
    """Return the results as plain values that ``json.dumps(..., allow_nan=False)`` takes.

    ``{"store", "runs": {"planned", "done", "failed"}, "cells": [...], "laws": [...], "break_even": [...],
    "advice"}``. A cell holds sheet, law, condition, level, draws, incomplete, pass_share, pass_low,
    pass_high, verdict, planned (how many draws; 0 where the law is not possible); then each
    score by name, ``{"median", "p95", "median_low", "median_high", "p95_low", "p95_high"}`` in the unit that
    the name carries; and ``"motions"``, each with draws, passed, pass_share and its scores. What is
    infinite, or isn't there, is None: p95_high where the draws don't reach, the tolerated level's high where
    no level was shown to miss, all shares without a tolerance, all verdicts where a law is not possible.
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
            }
            for standing in results.standings
        ],
        "break_even": results.break_even,
        "advice": results.advice,
    }
    plain: dict[str, Any] = _plain(document)
    return plain


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
        **_measures(cell.measures),
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
    return {
        name: {
            "median": measure.median,
            "p95": measure.p95,
            "median_low": measure.median_low,
            "median_high": measure.median_high,
            "p95_low": measure.p95_low,
            "p95_high": measure.p95_high,
        }
        for name, measure in measures.items()
    }


def _plain(value: Any) -> Any:
    """Return the value in JSON's own types, numpy's numbers included; None for what is not finite."""
    if isinstance(value, Mapping):
        return {str(key): _plain(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [_plain(item) for item in value]
    if value is None or isinstance(value, str | bool):
        return value
    if isinstance(value, Integral):
        return int(value)
    if isinstance(value, Real):
        return float(value) if math.isfinite(value) else None
    return str(value)

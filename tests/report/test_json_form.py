"""The JSON document of the results."""

from __future__ import annotations

import json
import math
from collections.abc import Callable
from dataclasses import replace

import numpy as np
import pytest

from rigbench.report.json_form import results_json
from rigbench.scores.comparison import Comparison
from rigbench.scores.own_limits import FoundLevel
from rigbench.scores.results import LawComparison, LevelSearch, Measure, Results, Tolerated

CROSSING = {
    "sheet": "",
    "laws": ["computed torque", "joint pd"],
    "score": "tool_peak_mm",
    "level": {"value": np.float64(0.7), "low": 0.5, "high": math.inf},
    "better_below": "computed torque",
}


def test_the_document_has_its_declared_shape(make_results: Callable[..., Results]) -> None:
    """Key by key, as the commands promise it."""
    gap = Comparison(-0.5, -0.7, -math.inf, 128, False)
    pair = LawComparison("", "together 0.25", 0.25, ("computed torque", "joint pd"), "tool_peak_mm", gap)
    results = replace(make_results(2, 3), break_even=(CROSSING,), comparisons=(pair,))
    ratios = {"tool_peak_mm": Comparison(1.5, 1.2, math.inf, 128, False)}
    cells = (results.cells[0], replace(results.cells[1], ratios=ratios), *results.cells[2:])
    results = replace(results, cells=cells)
    document = results_json(results, "results/trays.sqlite")
    assert list(document) == [
        "store", "runs", "cells", "laws", "break_even", "comparisons", "stop_early", "advice",
    ]  # fmt: skip
    assert document["store"] == "results/trays.sqlite"
    assert document["runs"] == {"planned": results.planned, "done": results.done, "failed": results.failed}
    assert document["advice"] == results.advice
    assert document["break_even"] == [{**CROSSING, "level": {"value": 0.7, "low": 0.5, "high": None}}]
    assert document["comparisons"] == [
        {
            "sheet": "",
            "condition": "together 0.25",
            "level": 0.25,
            "laws": ["computed torque", "joint pd"],
            "score": "tool_peak_mm",
            "difference": {"value": -0.5, "low": -0.7, "high": None},
            "draws": 128,
            "tie": False,
        }
    ]
    assert [(c["sheet"], c["law"], c["condition"]) for c in document["cells"]] == [
        (c.sheet, c.law, c.condition) for c in results.cells
    ]
    cell, source = document["cells"][1], results.cells[1]
    assert list(cell)[:11] == [
        "sheet", "law", "condition", "level", "draws", "incomplete", "pass_share", "pass_low", "pass_high", "verdict",
        "planned",
    ]  # fmt: skip
    assert (cell["draws"], cell["pass_low"], cell["verdict"]) == (128, source.pass_low, source.verdict)
    peak = source.measures["tool_peak_mm"]
    expected = {
        "median": peak.median,
        "p95": peak.p95,
        "median_low": peak.median_low,
        "median_high": peak.median_high,
        "p95_low": peak.p95_low,
        "p95_high": None,
    }
    ratios = {"ratio": 1.5, "ratio_low": 1.2, "ratio_high": None}
    assert cell["tool_peak_mm"] == expected | ratios
    assert cell["settle_ms"]["ratio"] is None
    motion = cell["motions"]["load tray"]
    assert (motion["draws"], motion["passed"], motion["pass_share"]) == (
        128,
        source.passed,
        source.passed / 128,
    )
    assert motion["tool_peak_mm"] == expected
    standing = results.standings[0]
    assert standing.tolerated is not None
    high = None if math.isinf(standing.tolerated.high) else standing.tolerated.high
    assert document["laws"][0] == {
        "sheet": "",
        "law": "computed torque",
        "tolerated_level": {"value": standing.tolerated.value, "low": standing.tolerated.low, "high": high},
        "found_by": "pass_shares",
        "own_limits": None,
    }
    assert document["stop_early"] is cell["settled"] is False


def test_own_limits_and_settled_columns_say_so(make_results: Callable[..., Results]) -> None:
    """How the level was found, of how many draws, and what was odd in them; which cells stopped early."""
    results = make_results(1, 3)
    level = Tolerated(1.5, 1.25, math.inf)
    standing = replace(results.standings[0], tolerated=level, found=FoundLevel(level, 90, 80, 2, 1))
    cells = (results.cells[0], replace(results.cells[1], settled=True, planned=60), results.cells[2])
    search = LevelSearch(90, 4.0, 0.0625)
    results = replace(results, standings=(standing,), cells=cells, level_search=search, stop_early=True)
    document = results_json(results, "")
    assert document["laws"][0] == {
        "sheet": "",
        "law": "computed torque",
        "tolerated_level": {"value": 1.5, "low": 1.25, "high": None},
        "found_by": "own_limits",
        "own_limits": {
            "draws": 90, "most": 4.0, "finest": 0.0625, "never_miss": 80, "keep_again": 2, "left_open": 1,
        },
    }  # fmt: skip
    assert document["stop_early"] is True
    assert [(cell["settled"], cell["planned"]) for cell in document["cells"]][1] == (True, 60)


@pytest.mark.parametrize("tolerance", [True, False])
@pytest.mark.parametrize("draws", [0, 1, 128])
def test_it_is_strict_json(make_results: Callable[..., Results], tolerance: bool, draws: int) -> None:
    """No infinity and no NaN reaches the document, whatever the results hold; numpy's numbers pass."""
    results = make_results(3, 6, draws=draws, incomplete=1, unstable=True, tolerance=tolerance)
    odd = replace(
        results.cells[0],
        draws=np.int64(1),
        measures={"tool_peak_mm": Measure(math.nan, -math.inf, np.float64(math.inf), np.float32(1), 2, 3)},
    )
    results = replace(results, cells=(odd, *results.cells[1:]))
    document = results_json(results, "store")
    assert type(document["cells"][0]["draws"]) is int
    assert json.loads(json.dumps(document, allow_nan=False)) == document
    peak = document["cells"][0]["tool_peak_mm"]
    assert [peak[key] for key in ("median", "median_low", "median_high", "p95")] == [None, None, None, 1.0]


def test_without_a_tolerance_there_is_no_verdict(make_results: Callable[..., Results]) -> None:
    """Shares, verdicts and tolerated levels are null; the scores are there."""
    document = results_json(make_results(2, 3, tolerance=False), "store")
    for cell in document["cells"]:
        assert [cell[key] for key in ("pass_share", "pass_low", "pass_high", "verdict")] == [None] * 4
        assert cell["motions"]["load tray"]["pass_share"] is None
        assert cell["tool_peak_mm"]["median"] > 0
    assert all(law["tolerated_level"] is None for law in document["laws"])


def test_what_is_not_possible_has_nothing_planned(make_results: Callable[..., Results]) -> None:
    """No verdict and no level either; elsewhere the number that is planned."""
    results = make_results(2, 3, sheets=("a", "b"), impossible=[("b", "computed torque")])
    results = replace(results, cells=tuple(replace(c, planned=c.planned and c.draws) for c in results.cells))
    document = results_json(results, "store")
    for cell in document["cells"]:
        there = (cell["sheet"], cell["law"]) != ("b", "computed torque")
        assert cell["planned"] == (cell["draws"] if there else 0)
        assert (cell["verdict"] is None) != there
    assert [law["tolerated_level"] is None for law in document["laws"]] == [False, False, True, False]

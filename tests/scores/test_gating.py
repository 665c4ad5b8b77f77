"""A gate passes what keeps, and nothing else unless it is told to."""

from __future__ import annotations

from dataclasses import replace

import pytest

from rigbench.scores.changes import CellChange, Changes
from rigbench.scores.gating import BASELINE, TOLERANCE, judge
from rigbench.scores.results import Cell, Column, Results, Tolerance

COLUMN = Column("all at 1", 1.0, random=True, ladder=True)


def cell_of(law: str, verdict: str, draws: int = 80, sheet: str = "") -> Cell:
    return Cell(sheet, law, "all at 1", 1.0, draws, 0, 0, None, None, None, verdict, {}, {})


def results_of(*cells: Cell, tolerance: bool = True) -> Results:
    sheets, laws = (
        tuple(dict.fromkeys(names)) for names in zip(*((c.sheet, c.law) for c in cells), strict=True)
    )
    limits = Tolerance({"tool_peak_mm": 3.0}) if tolerance else None
    return Results("t", "a", ("m",), limits, 80, sheets, laws, (COLUMN,), cells, (), 0, 0, 0, "")


@pytest.mark.parametrize(
    ("verdict", "draws", "allow_open", "state", "why"),
    [
        ("keeps", 80, False, "passed", "keeps"),
        ("misses", 80, True, "failed", "misses"),
        ("open", 80, False, "failed", "open"),
        ("open", 80, True, "passed", "open"),
        ("open", 0, True, "failed", "no result"),
    ],
)
def test_verdicts(verdict: str, draws: int, allow_open: bool, state: str, why: str) -> None:
    """An open cell passes only if that is allowed, one without any run never."""
    results = results_of(cell_of("pd", verdict, draws))
    (check,) = judge(results, ["pd"], "all at 1", [""], allow_open)
    assert (check.of, check.state, check.why) == (TOLERANCE, state, why)


def test_a_law_that_is_possible_nowhere_fails() -> None:
    """In one of two sheets it is passed over; a gate that asked nothing does not pass."""
    cells = [cell_of("pd", "keeps", sheet="a"), replace(cell_of("pd", "", 0, "b"), planned=0)]
    states = [check.state for check in judge(results_of(*cells), ["pd"], "all at 1", ["a", "b"])]
    assert states == ["passed", "skipped"]
    (alone,) = judge(results_of(*cells), ["pd"], "all at 1", ["b"])
    assert (alone.state, alone.why) == ("failed", "not possible")


@pytest.mark.parametrize(
    ("kind", "state"),
    [
        ("worse", "failed"),
        ("better", "passed"),
        ("unchanged", "passed"),
        ("new", "skipped"),
        ("no result", "skipped"),
        ("not comparable", "skipped"),
    ],
)
def test_against_a_baseline(kind: str, state: str) -> None:
    """Only what is shown to be worse fails; what can't be asked is skipped and not passed."""
    cell = cell_of("pd", "keeps")
    changes = Changes("tool_peak_mm", {cell.key: CellChange(kind, cell, cell)})
    kept, compared = judge(results_of(cell), ["pd"], "all at 1", [""], baseline=changes)
    assert kept.state == "passed"
    assert (compared.of, compared.state, compared.why) == (BASELINE, state, kind)


def test_without_a_tolerance_only_the_baseline_is_asked() -> None:
    """The other check is skipped, with its reason."""
    cell = cell_of("pd", "")
    changes = Changes("tool_peak_mm", {cell.key: CellChange("worse", cell, cell)})
    checks = judge(results_of(cell, tolerance=False), ["pd"], "all at 1", [""], baseline=changes)
    assert [(check.state, check.why) for check in checks] == [
        ("skipped", "no tolerance"),
        ("failed", "worse"),
    ]

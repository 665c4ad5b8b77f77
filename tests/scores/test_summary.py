"""From rows to results."""

from __future__ import annotations

import pickle
import time
from collections.abc import Callable, Iterable
from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from rigbench.scores.results import Column, Results, Tolerance, Tolerated
from rigbench.scores.row import Row
from rigbench.scores.summary import summarise

COLUMNS = (
    Column("nominal", None, random=False, ladder=True),
    Column("mass alone", 1.0, random=True, ladder=False),
    Column("level 0.5", 0.5, random=True, ladder=True),
    Column("level 1", 1.0, random=True, ladder=True),
)


def rows_of(
    peak: Callable[[str, float, int], float], sheets: Iterable[str], laws: Iterable[str], draws: int
) -> list[Row]:
    """One motion; ``peak`` of law, level and draw."""
    rows = []
    for draw in range(draws):
        for sheet in sheets:
            for law in laws:
                for column in COLUMNS if draw == 0 else COLUMNS[1:]:
                    value = peak(law, column.level or 0.0, draw)
                    given = {"draw": draw if column.random else None, "level": column.level}
                    scores = {
                        "tool_peak_mm": value,
                        "joint_rms_deg": value / 10,
                        "joint_rms_deg.j1": value / 10,
                    }
                    rows.append(
                        Row(sheet, law, "load", column.name, outcome="finished", scores=scores, **given)
                    )
    return rows


def test_laws_are_compared_by_the_main_score_wherever_it_stands() -> None:
    """With a limit on the tool's angle the lower angle is best, though the other law's peak is lower."""
    angle = {"pd": 0.1, "computed": 0.2}
    rows = [
        replace(row, scores={"tool_peak_mm": 0.5 - angle[row.law], "tool_angle_peak_deg": angle[row.law]})
        for row in rows_of(linear, [""], ["pd", "computed"], 80)
    ]
    results = results_of(rows, tolerance=Tolerance({"tool_angle_peak_deg": 1.0}))
    assert {cell.law for cell in results.cells if cell.best} == {"pd"}
    assert {cell.law for cell in results_of(rows).cells if cell.best} == {"computed"}


def results_of(rows: list[Row], **given: Any) -> Results:
    values = {
        "title": "Trays",
        "arm": "tray6",
        "motions": ["load"],
        "tolerance": Tolerance({"tool_peak_mm": 3.0}),
        "draws": 80,
        "sheets": [""],
        "laws": ["pd", "computed"],
        "columns": COLUMNS,
        "planned": len(rows),
        "done": len(rows),
        "failed": 0,
    }
    return summarise(rows, **(values | given))


def linear(law: str, level: float, draw: int) -> float:
    """pd is poor and robust, computed torque good and frail: they are equal at level 0.5."""
    u = (draw % 40 + 1) / 40
    return {"pd": 2.0 + 0.4 * level * u, "computed": 1.0 + 2.4 * level * u}[law]


def test_cells_stand_in_the_order_of_sheets_laws_and_columns() -> None:
    """Every one of them, with or without rows."""
    rows = rows_of(linear, ["slow"], ["pd"], 80)
    results = results_of(rows, sheets=["slow", "fast"])
    places = [(cell.sheet, cell.law, cell.condition) for cell in results.cells]
    expected = [(s, w, c.name) for s in ("slow", "fast") for w in ("pd", "computed") for c in COLUMNS]
    assert places == expected
    assert results.cell("fast", "pd", "level 1").draws == 0
    assert [(s.sheet, s.law) for s in results.standings] == [
        (s, w) for s in ("slow", "fast") for w in ("pd", "computed")
    ]


def test_a_whole_campaign_by_hand() -> None:
    """pd keeps all; computed torque is within 3 mm at level 1 on 33 of 40 directions, and on all at 0.5."""
    results = results_of(rows_of(linear, [""], ["pd", "computed"], 80))
    frail = results.cell("", "computed", "level 1")
    assert (frail.passed, frail.verdict) == (66, "misses")
    assert frail.measures["tool_peak_mm"].median == pytest.approx(1.0 + 2.4 * 20 / 40)
    standing = {s.law: s.tolerated for s in results.standings}
    assert standing["pd"] == Tolerated(None, 1.0, np.inf)
    assert standing["computed"] is not None
    assert (standing["computed"].low, standing["computed"].high) == (0.5, 1.0)
    assert standing["computed"].value == pytest.approx(0.5 + 0.5 * 0.05 / (1 - 66 / 80))
    assert [c.law for c in results.cells if c.best and c.condition == "level 1"] == ["pd"]
    assert [c.law for c in results.cells if c.best and c.condition == "nominal"] == ["computed"]
    assert "Take 'pd'" in results.advice


def test_break_even_by_hand() -> None:
    """The paired median difference is 1 - 2 a u at the median direction u (the mean of 20 and 21 of 40)."""
    (found,) = results_of(rows_of(linear, [""], ["pd", "computed"], 80)).break_even
    assert (found["laws"], found["score"], found["better_below"]) == (
        ["pd", "computed"],
        "tool_peak_mm",
        "computed",
    )
    level = found["level"]
    assert isinstance(level, dict)
    assert level["value"] == pytest.approx(1 / (2 * 20.5 / 40))
    assert level["low"] < level["value"] <= level["high"]


def test_the_order_of_the_rows_does_not_matter() -> None:
    """Results are those of a set of runs; they can be pickled and compared."""
    rows = rows_of(linear, [""], ["pd", "computed"], 80)
    shuffled = [rows[i] for i in np.random.default_rng(0).permutation(len(rows))]
    assert results_of(rows) == results_of(shuffled) == pickle.loads(pickle.dumps(results_of(rows)))


def test_another_law_changes_no_cell_of_the_others() -> None:
    """But for the mark of the best, which is a matter between laws."""
    alone = results_of(rows_of(linear, [""], ["computed"], 80), laws=["computed"])
    both = results_of(rows_of(linear, [""], ["pd", "computed"], 80))
    for cell in alone.cells:
        assert cell.measures == both.cell("", "computed", cell.condition).measures
        assert cell.pass_low == both.cell("", "computed", cell.condition).pass_low


def test_sheets_do_not_touch_each_other() -> None:
    """Draws of one sheet count in it alone; the first ten, all mild, show no change of places."""
    rows = rows_of(linear, ["a"], ["pd", "computed"], 80) + rows_of(linear, ["b"], ["pd", "computed"], 10)
    results = results_of(rows, sheets=["a", "b"])
    assert results.cell("a", "pd", "level 1").draws == 80
    assert results.cell("b", "pd", "level 1").draws == 10
    assert results.cell("b", "pd", "level 1").incomplete == 70
    assert {found["sheet"] for found in results.break_even} == {"a"}


def test_a_campaign_without_rows_has_all_its_cells_and_says_so() -> None:
    """No division by nothing anywhere."""
    results = results_of([], planned=100, done=0)
    assert len(results.cells) == 8
    assert {cell.verdict for cell in results.cells} == {"open"}
    assert {cell.incomplete for cell in results.cells} == {1, 80}
    assert not any(cell.best for cell in results.cells)
    assert "100 of 100 runs are still to do" in results.advice


def test_without_a_tolerance_there_are_scores_but_no_standing() -> None:
    """And the best law is told by the main score alone."""
    results = results_of(rows_of(linear, [""], ["pd", "computed"], 80), tolerance=None)
    assert {cell.verdict for cell in results.cells} == {""}
    assert {standing.tolerated for standing in results.standings} == {None}
    assert [c.law for c in results.cells if c.best] == ["computed", "computed"]


def test_a_law_that_always_fails_has_infinite_measures_of_what_others_have() -> None:
    """The names come from the other laws' rows; a law stopped by its own error has none at all."""
    rows = rows_of(linear, [""], ["pd"], 10)
    for law, outcome in (("computed", "diverged"), ("mine", "law-error")):
        rows += [Row("", law, "load", c.name, c.level, d, outcome) for c in COLUMNS[1:] for d in range(10)]
    results = results_of(rows, laws=["pd", "computed", "mine"], draws=10)
    failed = results.cell("", "computed", "level 1")
    assert set(failed.measures) == {"tool_peak_mm", "joint_rms_deg", "joint_rms_deg.j1"}
    assert {measure.median for measure in failed.measures.values()} == {np.inf}
    assert (failed.verdict, failed.unfinished) == ("misses", 10)
    broken = results.cell("", "mine", "level 1")
    assert (broken.measures, broken.draws, broken.incomplete, broken.verdict) == ({}, 0, 10, "open")


@pytest.mark.evidence
def test_a_hundred_thousand_rows_take_seconds() -> None:
    """Five of them at most, forty scores a row."""
    laws = [f"law {i}" for i in range(8)]
    names = ["tool_peak_mm", *(f"joint_rms_deg.j{i}" for i in range(39))]
    random = np.random.default_rng(0)
    rows = [
        Row(
            "",
            law,
            "load",
            c.name,
            c.level,
            d,
            "finished",
            dict(zip(names, random.random(40).tolist(), strict=True)),
        )
        for d in range(4200)
        for law in laws
        for c in COLUMNS[1:]
    ]
    begin = time.perf_counter()
    results_of(rows, laws=laws, draws=4200)
    assert len(rows) > 100_000
    assert time.perf_counter() - begin < 5.0


def test_laws_and_nominal_are_compared_by_hand() -> None:
    """At level 1 computed torque is 2 u - 1 mm above pd, u the draw's factor; its ratio to nominal is 1 + 2.4 u."""
    results = results_of(rows_of(linear, [""], ["pd", "computed"], 80))
    found = {(one.condition, one.laws): one.difference for one in results.comparisons}
    assert {condition for condition, _ in found} == {"nominal", "level 0.5", "level 1"}
    gap = found["level 1", ("pd", "computed")]
    assert gap.value == pytest.approx(1.0 - 2.0 * 21 / 40)
    assert gap.tie
    assert found["nominal", ("pd", "computed")].value == pytest.approx(1.0)
    assert not found["nominal", ("pd", "computed")].tie
    ratio = results.cell("", "computed", "level 1").ratios["tool_peak_mm"]
    assert ratio.value == pytest.approx(1.0 + 2.4 * 20 / 40)
    assert results.cell("", "computed", "nominal").ratios["tool_peak_mm"].value == 1.0


def test_the_draws_are_kept_of_the_scores_that_are_asked_for() -> None:
    """The main score and those named besides, in that order, draw by draw; other scores are let go."""
    rows = rows_of(linear, [""], ["pd", "computed"], 80)
    assert results_of(rows).compared == ("tool_peak_mm",)
    results = results_of(rows, also=["joint_rms_deg.j1", "tool_peak_mm"])
    assert results.compared == ("tool_peak_mm", "joint_rms_deg.j1")
    here = results.counted["", "pd", "level 1"]
    assert here.worst[:, 0] == pytest.approx([linear("pd", 1.0, draw) for draw in range(80)])
    assert here.worst[:, 1] == pytest.approx(here.worst[:, 0] / 10)

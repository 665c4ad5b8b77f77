"""Several sheets, combinations that can't be, and limits of single motions."""

from __future__ import annotations

from collections.abc import Iterable
from typing import Any

from rigbench.scores.results import Column, Results, Tolerance
from rigbench.scores.row import Row
from rigbench.scores.summary import summarise

NOMINAL = Column("nominal", 0.0, random=False, ladder=True)
LEVEL = Column("all at 1", 1.0, random=True, ladder=True)
SHEETS = ("slow", "fast")
LAWS = ("pd", "computed")
DRAWS = 80
NOT_POSSIBLE = [("slow", "computed", "nominal"), ("slow", "computed", "all at 1")]


def rows(peaks: dict[str, float], sheet: str, law: str, motions: Iterable[str] = ("load",)) -> list[Row]:
    """All runs of a sheet's law, each motion with its one peak."""
    return [
        Row(sheet, law, motion, column.name, column.level, draw, "finished", {"tool_peak_mm": peaks[motion]})
        for motion in motions
        for column in (NOMINAL, LEVEL)
        for draw in (range(DRAWS) if column.random else (None,))
    ]


def results_of(found: list[Row], **given: Any) -> Results:
    values: dict[str, Any] = {
        "title": "Sweep", "arm": "tray6", "motions": ["load"], "tolerance": Tolerance({"tool_peak_mm": 3.0}),
        "draws": DRAWS, "sheets": SHEETS, "laws": LAWS, "columns": (NOMINAL, LEVEL),
        "planned": len(found), "done": len(found), "failed": 0,
    }  # fmt: skip
    return summarise(found, **(values | given))


def swept() -> Results:
    """In the slow sheet the computed law can't be; elsewhere it is the better one."""
    found = rows({"load": 2.0}, "slow", "pd") + rows({"load": 2.0}, "fast", "pd")
    return results_of(found + rows({"load": 1.0}, "fast", "computed"), absent=NOT_POSSIBLE)


def test_a_cell_that_can_not_be_plans_nothing() -> None:
    """No draws, no verdict and no shares; nothing in it is incomplete. The others plan their draws."""
    results = swept()
    for column in ("nominal", "all at 1"):
        cell = results.cell("slow", "computed", column)
        assert (cell.planned, cell.draws, cell.incomplete, cell.passed) == (0, 0, 0, 0)
        assert (cell.verdict, cell.pass_share, cell.measures) == ("", None, {})
        assert not cell.best
    planned = [results.cell(sheet, "pd", c).planned for sheet in SHEETS for c in ("nominal", "all at 1")]
    assert planned == [1, DRAWS, 1, DRAWS]


def test_a_law_that_can_not_be_has_no_tolerated_level() -> None:
    """Its standing has none, where the same law has one in the sheet in which it can be."""
    levels = {(s.sheet, s.law): s.tolerated for s in swept().standings}
    assert levels["slow", "computed"] is None
    assert levels["fast", "computed"] is not None
    assert levels["fast", "computed"].low == 1.0


def test_a_law_that_can_not_be_is_no_rival() -> None:
    """The best of the fast sheet is the better of two; in the slow one there is nobody to be better than."""
    results = swept()
    assert [(c.sheet, c.law) for c in results.cells if c.best] == [("fast", "computed")] * 2


def test_the_others_are_compared_without_it() -> None:
    """Of three laws one can't be in a sheet: the better of the other two is its best there."""
    found = rows({"load": 2.0}, "slow", "pd") + rows({"load": 1.0}, "slow", "fine")
    results = results_of(found, sheets=["slow"], laws=["pd", "computed", "fine"], absent=NOT_POSSIBLE)
    assert [(c.law, c.condition) for c in results.cells if c.best] == [
        ("fine", "nominal"),
        ("fine", "all at 1"),
    ]


def test_the_advice_of_a_sheet_speaks_of_what_can_be_in_it() -> None:
    """Nobody says of the law that can't be that it has no result, nor that its cells are open."""
    advice = swept().advice
    assert "no result" not in advice
    assert "'fast': take 'computed'" in advice
    assert "'slow': 'pd'" in advice


def test_a_condition_that_a_sheet_lacks() -> None:
    """Where no law has a condition in a sheet, the sheet is judged by its others."""
    found = rows({"load": 2.0}, "slow", "pd") + [
        r for r in rows({"load": 2.0}, "fast", "pd") if r.draw is None
    ]
    results = results_of(found, laws=["pd"], absent=[("fast", "pd", "all at 1")])
    assert results.cell("fast", "pd", "all at 1").planned == 0
    assert "to do" not in results.advice
    assert "open" not in results.advice


def test_each_motion_keeps_its_own_limits() -> None:
    """A motion's limit stands in place of the common one, looser or tighter, in that motion alone."""
    peaks = {"load": 2.0, "rim": 4.0}
    found = rows(peaks, "", "pd", ("load", "rim"))
    shared = {"sheets": ("",), "laws": ["pd"], "motions": ["load", "rim"]}
    passes = {}
    for name, own in {"none": {}, "looser": {"tool_peak_mm": 5.0}, "tighter": {"tool_peak_mm": 1.0}}.items():
        tolerance = Tolerance({"tool_peak_mm": 3.0}, motions={"rim": own})
        cell = results_of(found, tolerance=tolerance, **shared).cell("", "pd", "nominal")
        passes[name] = (cell.passed, cell.motions["load"].passed, cell.motions["rim"].passed)
    assert passes == {"none": (0, 1, 0), "looser": (1, 1, 1), "tighter": (0, 1, 0)}


def test_a_limit_of_one_motion_alone() -> None:
    """Limits may be those of a motion alone, and then decide by which score the laws are compared."""
    tolerance = Tolerance({}, motions={"rim": {"path_peak_mm": 1.0}})
    found = [
        Row("", law, motion, "nominal", 0.0, None, "finished", {"tool_peak_mm": 9.0, "path_peak_mm": path})
        for law, path in (("pd", 2.0), ("computed", 0.5))
        for motion in ("load", "rim")
    ]
    results = results_of(
        found, sheets=("",), motions=["load", "rim"], tolerance=tolerance, columns=(NOMINAL,)
    )
    assert tolerance.limited == ("path_peak_mm",)
    assert [results.cell("", law, "nominal").verdict for law in LAWS] == ["misses", "keeps"]
    assert results.cell("", "computed", "nominal").best

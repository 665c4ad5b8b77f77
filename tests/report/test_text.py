"""The matrix in a terminal."""

from __future__ import annotations

import math
import re
from collections.abc import Callable
from dataclasses import replace

import pytest
from rich.cells import cell_len

from rigbench.report.text import matrix_text
from rigbench.scores.results import Results

LONG = "a law whose name_has_no_end_and_hardly_a_blank_in_it_whatever_one_does number"


@pytest.mark.parametrize("width", [40, 80, 132])
@pytest.mark.parametrize("long", [False, True])
@pytest.mark.parametrize(("laws", "columns"), [(1, 1), (2, 2), (4, 9), (12, 20)])
def test_lines_fit_and_everything_is_said(
    make_results: Callable[..., Results], width: int, long: bool, laws: int, columns: int
) -> None:
    """No line is wider than the terminal or ends in blanks; each cell's words stand in it, names broken or not."""
    results = make_results([f"{LONG} {n}" for n in range(laws)] if long else laws, columns, incomplete=2)
    text = matrix_text(results, width)
    assert max(cell_len(line) for line in text.split("\n")) <= width
    assert not re.search(r"[ \t]$", text, re.MULTILINE)
    assert "\x1b" not in text
    for verdict in ("keeps", "misses", "open"):
        cells = sum(cell.verdict == verdict for cell in results.cells)
        assert len(re.findall(rf"\b{verdict}\b", text.split("In each cell", 1)[1])) >= cells
    assert text.count(" incomplete") == sum(cell.incomplete > 0 for cell in results.cells)


def test_at_80_columns_the_matrix_comes_in_blocks(make_results: Callable[..., Results]) -> None:
    """What does not fit beside the laws follows below, with the laws again; three conditions in 80 columns."""
    results = make_results(["computed torque", "joint pd"], 8)
    text = matrix_text(results, 80)
    assert text.count("\njoint pd ") == 3  # eight conditions and the tolerated level
    for column in results.columns:
        assert len(re.findall(rf"{re.escape(column.name)}(?:  |\n|$)", text)) == 1
    assert matrix_text(results, 250).count("\njoint pd ") == 1


def test_a_cell_reads_as_one_says_it(make_results: Callable[..., Results]) -> None:
    """Share, interval and verdict on a line, the main score beneath, and the level in its column."""
    text = matrix_text(make_results(["mine"], 3), 80)
    body = text.split("\n\n", 1)[1].splitlines()
    assert re.search(r"nominal +together 0.25 +together 0.5 +tolerated level", body[0])
    assert body[2].split("  ")[0] == "mine"
    assert "0.79 mm keeps" in body[2]
    assert "100 % (97-100) keeps" in body[2]
    assert body[2].endswith("0.5 or more")
    assert "0.84 mm, best" in body[3]


def test_exact_results_speak_of_no_draws(make_results: Callable[..., Results]) -> None:
    """With nominal alone there is no share, no interval and no tolerated level."""
    text = matrix_text(make_results(2, 1), 80)
    assert "draw" not in text
    assert "tolerated" not in text.lower()
    assert "In each cell: the tool peak of one exact run." in text


def test_edge_cases_are_said(make_results: Callable[..., Results]) -> None:
    """Nothing run yet, nothing finished, no tolerance, several sheets."""
    empty = matrix_text(make_results(2, 3, draws=2, incomplete=2), 80)
    assert "- open" in empty
    assert "no result" in empty
    assert "96 did not finish" in matrix_text(make_results(2, 3, unstable=True), 80)
    free = matrix_text(make_results(2, 3, tolerance=False), 80)
    assert "No tolerance is declared." in free
    assert re.search(r"0\.84 mm \(0\.75-1\.0\)", free)
    assert not re.search("keeps|misses|open", free)
    sheets = matrix_text(make_results(2, 3, sheets=("gear_ratio 50", "gear_ratio 100")), 80)
    assert sheets.index("Sheet: gear_ratio 50") < sheets.index("Sheet: gear_ratio 100")


def test_break_even_levels_stand_beneath(make_results: Callable[..., Results]) -> None:
    """Which of the two laws is better on which side is said in full, and in which sheet."""
    crossing = {
        "sheet": "gear_ratio 50",
        "laws": ["joint pd", "computed torque"],
        "score": "tool_peak_mm",
        "level": {"value": 0.712, "low": 0.5, "high": math.inf},
        "better_below": "computed torque",
    }
    text = matrix_text(replace(make_results(2, 3), break_even=(crossing,)), 200)
    assert text.split("\n\n")[-1] == (
        "Break-even level 0.71 (0.5 to no end), gear_ratio 50: below it computed torque has the lower tool peak, "
        "above it joint pd."
    )


def test_names_cannot_break_the_terminal(make_results: Callable[..., Results]) -> None:
    """Control characters in a name are blanks; wide characters count twice; markup is text."""
    results = make_results(["bad\x1b[31m\nname", "計算トルク制御", "[bold]mine[/bold]"], 3, title="a\tb\r\nc")
    text = matrix_text(results, 80)
    assert text.startswith("a b c\n")
    assert "bad [31m name" in text
    assert "[bold]mine[/bold]" in text
    starts = {
        cell_len(line[: line.index(" mm") - 4])
        for line in text.splitlines()
        if re.search(r"\d mm (k|m)", line)
    }
    assert len(starts) == 1  # the first column stands in line beside each of them


RATES = [f"control_hz {hz}, gear_ratio {ratio}" for hz in (250, 500, 1000) for ratio in (50, 101, 160)]


@pytest.mark.parametrize("width", [40, 80, 132])
@pytest.mark.parametrize("tolerance", [True, False])
@pytest.mark.parametrize(("laws", "columns"), [(1, 1), (2, 3), (12, 20)])
def test_sheets_fit_any_terminal(
    make_results: Callable[..., Results], width: int, tolerance: bool, laws: int, columns: int
) -> None:
    """No line is wider, none ends in blanks, however long the sheets' names are."""
    for sheets in (RATES, RATES[:3], [f"{LONG}, second {number}" for number in range(3)]):
        text = matrix_text(make_results(laws, columns, sheets=sheets, tolerance=tolerance), width)
        assert max(cell_len(line) for line in text.split("\n")) <= width
        assert not re.search(r"[ \t]$|\n\n\n", text, re.MULTILINE)


def test_levels_come_first_sheets_down_and_laws_across(make_results: Callable[..., Results]) -> None:
    """Each law's level with its interval in each sheet, and the words where a law is not possible."""
    results = make_results(["a", "b"], 4, sheets=RATES[:3], impossible=[(RATES[1], "b")])
    part = matrix_text(results, 100).split("In each cell")[0]
    assert "Tolerated level: where the share of the draws" in part
    rows = [line for line in part.splitlines() if line.startswith("control_hz")]
    assert [row.split("  ")[0] for row in rows] == RATES[:3]
    levels = {(s.sheet, s.law): s.tolerated for s in results.standings}
    for sheet, row in zip(results.sheets, rows, strict=True):
        for law in "ab":
            level = levels[sheet, law]
            assert level is not None
            said = f"{level.low:g} or more" if level.value is None else f"({level.low:g} to {level.high:g})"
            assert ("not possible" if (sheet, law) == (RATES[1], "b") else said) in row


def test_rows_stand_in_one_order_in_every_sheet(make_results: Callable[..., Results]) -> None:
    """So that sheets can be compared, whichever law is ahead in one of them."""
    text = matrix_text(make_results(["a", "b", "c"], 4, sheets=RATES[:4]), 200)
    orders = [re.findall(r"^([abc])  ", part, re.MULTILINE) for part in text.split("Sheet: ")[1:]]
    assert len(orders) == 4
    assert all(order == orders[0] for order in orders)


def test_matrices_follow_where_they_are_few_or_narrow(make_results: Callable[..., Results]) -> None:
    """Up to four always; nine if each fits side by side; else it is said where they are."""

    def sheets_told(columns: int, sheets: list[str], width: int) -> int:
        return matrix_text(make_results(2, columns, sheets=sheets), width).count("Sheet: ")

    assert sheets_told(20, RATES[:4], 80) == 4
    assert sheets_told(3, RATES, 110) == 9
    assert sheets_told(3, RATES, 80) == 0
    assert sheets_told(3, [f"leg_s {number}" for number in range(13)], 110) == 0
    crossing = {
        "sheet": RATES[0], "laws": ["a", "b"], "score": "tool_peak_mm",
        "level": {"value": 0.7, "low": 0.5, "high": 1.0}, "better_below": "a",
    }  # fmt: skip
    results = replace(make_results(2, 9, sheets=RATES), break_even=(crossing, crossing))
    last = " ".join(matrix_text(results, 80).split("\n\n")[-1].split())
    assert last == (
        "The matrices of the 9 sheets are in the picture, which 'rigbench matrix STORE' draws; "
        "2 break-even levels are in the output of --json."
    )
    assert "In each cell" not in matrix_text(results, 80)


@pytest.mark.parametrize("tolerance", [True, False])
def test_a_sweep_without_levels_is_one_table(make_results: Callable[..., Results], tolerance: bool) -> None:
    """Of the only condition there is: sheets down, laws across, and no matrices that say it again."""
    text = matrix_text(make_results(["a", "b"], 1, sheets=RATES, tolerance=tolerance), 80)
    assert "The tool peak under 'nominal', of one exact run:" in text
    rows = [line for line in text.splitlines() if line.startswith("control_hz")]
    assert len(rows) == 9
    verdict = r" (keeps|misses)" if tolerance else ""
    assert all(re.search(rf"  [\d.]+ mm{verdict}  +[\d.]+ mm{verdict}$", row) for row in rows)
    assert "Sheet:" not in text
    assert "picture" not in text

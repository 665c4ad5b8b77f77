"""What a gate found, in a sentence each, and as JSON."""

from __future__ import annotations

import math
from typing import Any

from rigbench.report.words import percent, signed
from rigbench.scores.gating import BASELINE, Check
from rigbench.scores.names import score_words
from rigbench.scores.results import Cell, Results

__all__ = ["check_json", "check_words"]


def check_words(check: Check, results: Results) -> str:
    """Say what a check found, in one sentence."""
    said = _change(check, results) if check.of == BASELINE else _tolerance(check, results)
    return f"{said[0].upper()}{said[1:]}."


def where(cell: Cell) -> str:
    """Name a cell: 'pd' under 'all at 1', with its sheet."""
    return f"'{cell.law}' under '{cell.condition}'" + (f", {cell.sheet}" if cell.sheet else "")


def _tolerance(check: Check, results: Results) -> str:
    cell = check.cell
    plain = {
        "no result": f"{where(cell)} was not run: no draw counts",
        "not possible": f"{where(cell)} is not possible: nothing is planned there",
        "no tolerance": f"{where(cell)} has nothing to keep: the experiment declares no tolerance",
    }
    if check.why in plain:
        return plain[check.why]
    verb = {"keeps": "keeps the tolerance", "misses": "misses the tolerance", "open": "is open"}[check.why]
    return f"{where(cell)} {verb}: {_shares(cell, results)}"


def _shares(cell: Cell, results: Results) -> str:
    """Say which share passes, and which must."""
    required = results.tolerance.required_share if results.tolerance else 0.0
    low, high = cell.pass_low, cell.pass_high
    if low is None or high is None or not _random(cell, results):
        return "its one exact run does" if cell.passed else "its one exact run does not"
    ends = f"{percent(low, required)} to {percent(high, required)} %"
    said = f"{cell.passed} of {cell.draws} draws keep it ({ends})"
    missing = f", {cell.incomplete} incomplete" if cell.incomplete else ""
    return f"{said}{missing}, {percent(required)} % must"


def _random(cell: Cell, results: Results) -> bool:
    return any(column.random for column in results.columns if column.name == cell.condition)


def _change(check: Check, results: Results) -> str:
    change, cell = check.change, check.cell
    plain = {
        "new": f"{where(cell)} is not in the baseline, so there is nothing to compare it with",
        "no result": f"{where(cell)} has no result in one of the two stores, so it can't be compared",
        "not comparable": f"{where(cell)} can't be compared with the baseline: nothing is random in one of "
        "the two, or they have no draw in common",
    }
    if check.why in plain or change is None or change.before is None:
        return plain.get(check.why, plain["new"])
    verb = {
        "worse": "got worse than",
        "better": "got better than",
        "unchanged": "is not shown to differ from",
    }
    parts = []
    before = change.before
    if before.pass_share is not None and cell.pass_share is not None and _random(cell, results):
        now, then = (percent(share, exact=True) for share in (cell.pass_share, before.pass_share))
        parts.append(f"{now} % keep the tolerance, {then} % did")
    by = change.difference
    name = results.compared[0]
    words, unit = score_words(name)
    if by is not None and math.isfinite(by.value):
        low, high = signed(by.low), signed(by.high)
        ends = f" ({low} to {high})" if by.low < by.high else ""
        parts.append(f"{words} by {signed(by.value)} {unit}".rstrip() + ends)
    told = f": {', '.join(parts)}" if parts else ""
    return f"{where(cell)} {verb[check.why]} the baseline{told}"


def check_json(check: Check, results: Results) -> dict[str, Any]:
    """Return a check as values for the JSON form."""
    sheet, law, condition = check.key
    return {
        "sheet": sheet,
        "law": law,
        "condition": condition,
        "of": check.of,
        "state": check.state,
        "why": check.why,
        "said": check_words(check, results),
        "draws": check.cell.draws,
        "passed": check.cell.passed,
        "pass_share": check.cell.pass_share,
        "pass_low": check.cell.pass_low,
        "pass_high": check.cell.pass_high,
    }

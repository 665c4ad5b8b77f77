"""Whether named laws are good enough to go on: what 'rigbench gate' asks."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

from rigbench.scores.changes import CellChange, Changes
from rigbench.scores.results import Cell, CellKey, Results

__all__ = ["BASELINE", "TOLERANCE", "Check", "judge"]

TOLERANCE, BASELINE = "tolerance", "baseline"
"""What a check is of: the tolerance is kept; it did not get worse than the baseline."""


@dataclass(frozen=True)
class Check:
    """One question about a cell. ``state`` is 'passed', 'failed', or 'skipped' where it can't be asked.

    ``why``: of the tolerance, the cell's verdict; 'no result' where no draw counts, 'not possible' where the
    law is not in the sheet (which fails only if it is in none), 'no tolerance' where none is declared. Of the
    baseline, the kind of the change.
    """

    of: str
    cell: Cell
    state: str
    why: str
    change: CellChange | None = None

    @property
    def key(self) -> CellKey:
        """Sheet, law and condition."""
        return self.cell.key


def judge(
    results: Results,
    laws: Sequence[str],
    condition: str,
    sheets: Sequence[str],
    allow_open: bool = False,
    baseline: Changes | None = None,
) -> tuple[Check, ...]:
    """Return what each law's cell under a condition shows, in each of the sheets.

    The tolerance is kept if the verdict is 'keeps', or 'open' where that is allowed; a cell of which no draw
    counts fails. Against the baseline a cell fails if it is 'worse', see :func:`changes_since`; it is
    skipped where the baseline doesn't have it, or nothing to compare.
    """
    cells = {cell.key: cell for cell in results.cells}
    return tuple(_checks(results, cells, laws, condition, sheets, allow_open, baseline))


def _checks(
    results: Results,
    cells: Mapping[CellKey, Cell],
    laws: Sequence[str],
    condition: str,
    sheets: Sequence[str],
    allow_open: bool,
    baseline: Changes | None,
) -> Iterator[Check]:
    for law in laws:
        possible = any(cells[sheet, law, condition].planned for sheet in sheets)
        for sheet in sheets:
            cell = cells[sheet, law, condition]
            if not cell.planned:
                yield Check(TOLERANCE, cell, "skipped" if possible else "failed", "not possible")
                continue
            yield _kept(cell, results.tolerance is not None, allow_open)
            if baseline is not None:
                change = baseline.cells[cell.key]
                states = {"worse": "failed", "better": "passed", "unchanged": "passed"}
                yield Check(BASELINE, cell, states.get(change.kind, "skipped"), change.kind, change)


def _kept(cell: Cell, with_tolerance: bool, allow_open: bool) -> Check:
    if not cell.draws:
        return Check(TOLERANCE, cell, "failed", "no result")
    if not with_tolerance:
        return Check(TOLERANCE, cell, "skipped", "no tolerance")
    passed = cell.verdict == "keeps" or (allow_open and cell.verdict == "open")
    return Check(TOLERANCE, cell, "passed" if passed else "failed", cell.verdict)

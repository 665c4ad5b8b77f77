"""The order of the rows: by tolerated level, the same in every sheet, so that sheets can be compared."""

from __future__ import annotations

from rigbench.report.axis import LevelAxis
from rigbench.report.cells import Grid

__all__ = ["laws_in_order"]


def laws_in_order(grid: Grid) -> tuple[str, ...]:
    """Return the laws by tolerated level, best first; ties, or all without a tolerance, as declared.

    Of several sheets the mean over those in which a law is possible counts, on the axis that is drawn:
    the levels that were run stand at equal distances, and beyond them is one step.
    """
    results = grid.results
    if results.tolerance is None:
        return results.laws
    axis = LevelAxis(results)
    merits = {law: _mean_merit(grid, law, axis) for law in results.laws}
    return tuple(sorted(results.laws, key=lambda law: merits[law], reverse=True))


def _mean_merit(grid: Grid, law: str, axis: LevelAxis) -> tuple[float, float]:
    """Return what a law is sorted by: its tolerated level, then the level that it is shown to keep."""
    sheets = [sheet for sheet in grid.results.sheets if grid.possible(sheet, law)]
    if not sheets:
        return -1.0, -1.0
    shown = [tolerated.low if (tolerated := grid.tolerated(sheet, law)) else 0.0 for sheet in sheets]
    levels = [grid.crossing(sheet, law) or 0.0 for sheet in sheets]
    return float(axis.places(levels).mean()), float(axis.places(shown).mean())

"""What each cell of the matrix says."""

from __future__ import annotations

import math
from dataclasses import dataclass

from rigbench.report.words import (
    NOT_POSSIBLE,
    figure,
    interval,
    main_limits,
    main_score,
    percent,
    quantity,
    tolerated_words,
)
from rigbench.scores.names import score_words
from rigbench.scores.results import Cell, Column, Results, Tolerated

__all__ = ["EXACT", "CellWords", "Grid"]

NOTHING = "-"
EXACT = ("one exact run", "one run")
"""What a cell says where nothing is random, in full and in short."""


@dataclass(frozen=True)
class CellWords:
    """A cell in words: the verdict above, one large figure with its unit and interval, small lines beneath.

    ``interval`` is '' where there is none. ``ink`` from 0 to 1 is how dark the cell is: the pass share,
    or without a tolerance how large the main score is among all cells; None where nothing is to be shown.
    A law that is not ``possible`` in its sheet has that one small line and nothing else.
    """

    verdict: str
    best: bool
    figure: str
    unit: str
    interval: str
    lines: tuple[str, ...]
    ink: float | None
    possible: bool = True

    @property
    def head(self) -> str:
        """The line above the figure."""
        return ", ".join(filter(None, (self.verdict, "best" if self.best else "")))


class Grid:
    """The cells of all sheets by name, put into words."""

    def __init__(self, results: Results) -> None:
        self.results = results
        self.score = main_score(results)
        self.limits = main_limits(results)
        self.score_name = score_words(self.score)[0]
        self._cells = {(cell.sheet, cell.law, cell.condition): cell for cell in results.cells}
        self._tolerated = {(one.sheet, one.law): one.tolerated for one in results.standings}
        found = (self._median(cell) for cell in results.cells)
        finite = [value for value in found if value is not None and math.isfinite(value)]
        self.least, self.most = (min(finite), max(finite)) if finite else (0.0, 0.0)

    def cell(self, sheet: str, law: str, column: Column) -> Cell:
        """Return the one cell of that name; KeyError if there is none."""
        return self._cells[sheet, law, column.name]

    def possible(self, sheet: str, law: str) -> bool:
        """Tell whether the law has any planned run in the sheet."""
        return any(self.cell(sheet, law, column).planned for column in self.results.columns)

    def tolerated(self, sheet: str, law: str) -> Tolerated | None:
        """Return the tolerated level of a law in a sheet; None without one, or where it is not possible."""
        return self._tolerated.get((sheet, law)) if self.possible(sheet, law) else None

    def crossing(self, sheet: str, law: str) -> float | None:
        """Return the level at which the pass share crosses the required one: inf beyond all levels run.

        Where it is below from the start it is the level shown to keep, 0. None where nothing is known.
        """
        tolerated, tolerance = self.tolerated(sheet, law), self.results.tolerance
        if tolerated is None or tolerance is None or tolerated.value is not None:
            return tolerated.value if tolerated else None
        steps = sorted((column for column in self.results.columns if column.ladder), key=_level)
        shares = [self.cell(sheet, law, column).pass_share for column in steps]
        known = [share for share in shares if share is not None]
        starts_above = tolerated.low > 0 or (known and known[0] >= tolerance.required_share)
        if math.isinf(tolerated.high) and starts_above:
            return math.inf
        return tolerated.low if known else None

    def level(self, sheet: str, law: str) -> str:
        """Say that level, or that there is none since the law is not possible there."""
        tolerated = self.tolerated(sheet, law)
        return tolerated_words(tolerated) if tolerated else NOT_POSSIBLE

    def words(self, sheet: str, law: str, column: Column, full: bool = True) -> CellWords:
        """Put one cell into words; ``full`` names the main score beside its value."""
        cell = self.cell(sheet, law, column)
        if not cell.planned:
            return CellWords("", False, "", "", "", (NOT_POSSIBLE,), None, possible=False)
        median = self._median(cell)
        if cell.draws == 0 or (median is None and self.results.tolerance is None):
            shown, lines, ink = (NOTHING, "", ""), ["no result"], None
        elif not column.random or self.results.tolerance is None:
            shown, lines = self._score_large(cell, column, full)
            ink = self._scale(median) if self.results.tolerance is None else float(cell.passed > 0)
        else:
            shown, lines = self._share_large(cell, full)
            ink = cell.pass_share
        if column.random and cell.unfinished:
            lines.append(f"{cell.unfinished} did not finish")
        if cell.incomplete:
            lines.append(f"{cell.incomplete} incomplete")
        return CellWords(cell.verdict, cell.best, *shown, tuple(lines), ink)

    def _median(self, cell: Cell) -> float | None:
        measure = cell.measures.get(self.score)
        return None if measure is None or math.isnan(measure.median) else measure.median

    def _share_large(self, cell: Cell, full: bool) -> tuple[tuple[str, str, str], list[str]]:
        """Return the share, its unit and interval; and the main score's median."""
        tolerance = self.results.tolerance
        required = tolerance.required_share if tolerance else None
        share = cell.passed / cell.draws if cell.pass_share is None else cell.pass_share
        ends = [percent(end, required) for end in (cell.pass_low, cell.pass_high) if end is not None]
        median, lines = self._median(cell), []
        if median is not None and math.isfinite(median):
            shown = quantity(median, self.score)
            lines.append(f"{self.score_name} {shown}" if full else shown)
        return (percent(share, required, exact=True), "%", " to ".join(ends)), lines

    def _score_large(self, cell: Cell, column: Column, full: bool) -> tuple[tuple[str, str, str], list[str]]:
        """Return the main score, its unit and interval; and what they are."""
        median = self._median(cell)
        lines = [] if column.random else [EXACT[not full]]
        if median is None:
            return (NOTHING, "", ""), [f"no {self.score_name}", *lines]
        if math.isinf(median):
            return (NOTHING, "", ""), lines if column.random else ["did not finish", *lines]
        ends = ""
        if column.random:
            measure = cell.measures[self.score]
            ends = interval(measure.median_low, measure.median_high)
        shown = figure(median) if column.random else figure(median, *self.limits)
        return (shown, score_words(self.score)[1], ends), [self.score_name, *lines] if full else lines

    def _scale(self, median: float | None) -> float | None:
        """Place a median among all cells' ones: by its logarithm where all are above 0; 1 if infinite."""
        if median is None or math.isinf(median):
            return None if median is None else 1.0
        if self.most <= self.least:
            return 0.0
        if self.least > 0:
            return math.log(median / self.least) / math.log(self.most / self.least)
        return (median - self.least) / (self.most - self.least)


def _level(column: Column) -> float:
    return column.level or 0.0

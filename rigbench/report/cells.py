"""What each cell of the matrix says, and in which order its rows stand."""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass

from rigbench.report.words import figure, interval, main_limit, main_score, percent, quantity, score_words
from rigbench.scores.results import Cell, Column, LawStanding, Results

__all__ = ["CellWords", "Grid", "laws_in_order"]

NOTHING = "-"


@dataclass(frozen=True)
class CellWords:
    """A cell in words: the verdict above, one large figure with its unit and interval, small lines beneath.

    ``interval`` is '' where there is none. ``ink`` from 0 to 1 is how dark the cell is: the pass share,
    or without a tolerance how large the main score is among all cells; None where nothing is to be shown.
    """

    verdict: str
    best: bool
    figure: str
    unit: str
    interval: str
    lines: tuple[str, ...]
    ink: float | None

    @property
    def head(self) -> str:
        """The line above the figure."""
        return ", ".join(filter(None, (self.verdict, "best" if self.best else "")))


class Grid:
    """The cells of all sheets by name, put into words."""

    def __init__(self, results: Results) -> None:
        self.results = results
        self.score = main_score(results)
        self.limit = main_limit(results)
        self.score_name = score_words(self.score)[0]
        self._cells = {(cell.sheet, cell.law, cell.condition): cell for cell in results.cells}
        found = (self._median(cell) for cell in results.cells)
        finite = [value for value in found if value is not None and math.isfinite(value)]
        self.least, self.most = (min(finite), max(finite)) if finite else (0.0, 0.0)

    def cell(self, sheet: str, law: str, column: Column) -> Cell:
        """Return the one cell of that name; KeyError if there is none."""
        return self._cells[sheet, law, column.name]

    def words(self, sheet: str, law: str, column: Column, full: bool = True) -> CellWords:
        """Put one cell into words; ``full`` names the main score beside its value."""
        cell = self.cell(sheet, law, column)
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
        lines = [] if column.random else ["one exact run" if full else "one run"]
        if median is None:
            return (NOTHING, "", ""), [f"no {self.score_name}", *lines]
        if math.isinf(median):
            return (NOTHING, "", ""), lines if column.random else ["did not finish", *lines]
        ends = ""
        if column.random:
            measure = cell.measures[self.score]
            ends = interval(measure.median_low, measure.median_high)
        shown = figure(median, None if column.random else self.limit)
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


def laws_in_order(results: Results, sheet: str) -> tuple[str, ...]:
    """Return a sheet's laws by tolerated level, best first; ties, or all without a tolerance, as declared."""
    standings = {standing.law: standing for standing in results.standings if standing.sheet == sheet}
    shares = _shares_on_the_ladder(results, sheet)

    def key(law: str) -> tuple[float, float]:
        standing = standings.get(law)
        return (0.0, 0.0) if standing is None else _merit(standing, shares.get(law, []), results)

    return tuple(sorted(results.laws, key=key, reverse=True))


def _shares_on_the_ladder(results: Results, sheet: str) -> dict[str, list[float | None]]:
    ladder = {column.name for column in results.columns if column.ladder}
    shares: dict[str, list[float | None]] = {}
    for cell in results.cells:
        if cell.sheet == sheet and cell.condition in ladder:
            shares.setdefault(cell.law, []).append(cell.pass_share)
    return shares


def _merit(standing: LawStanding, shares: Iterable[float | None], results: Results) -> tuple[float, float]:
    """Return what a law is sorted by: its tolerated level, then the level that it is shown to keep.

    Where the share crosses nowhere, it is either above the required one at all levels or below it.
    """
    tolerated, tolerance = standing.tolerated, results.tolerance
    if tolerated is None or tolerance is None:
        return 0.0, 0.0
    if tolerated.value is not None:
        return tolerated.value, tolerated.low
    above = all(share is not None and share >= tolerance.required_share for share in shares)
    crosses_beyond = math.isinf(tolerated.high) and (tolerated.low > 0 or above)
    return (math.inf if crosses_beyond else tolerated.low), tolerated.low

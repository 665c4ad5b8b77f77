"""What each cell of the matrix says."""

from __future__ import annotations

import math
from dataclasses import dataclass

from rigbench.errors import counted
from rigbench.report.view import MEDIAN, RATIO, SHARE, View
from rigbench.report.words import (
    NOT_POSSIBLE,
    figure,
    interval,
    limits_of,
    main_score,
    percent,
    quantity,
    signed,
    tolerated_words,
)
from rigbench.scores.changes import CellChange, Changes
from rigbench.scores.names import score_words
from rigbench.scores.results import Cell, Column, Results, Tolerated

__all__ = ["CHANGED", "EXACT", "SHARES", "CellWords", "Grid"]

NOTHING = "-"
EXACT = ("one exact run", "one run")
"""What a cell says where nothing is random, in full and in short."""

CHANGED = ("better", "worse")
SHARES = View()
TIMES = "times"


@dataclass(frozen=True)
class CellWords:
    """A cell in words: the verdict above, one large figure with its unit and interval, small lines beneath.

    ``interval`` is '' where there is none. ``ink`` from 0 to 1 is how dark the cell is: the pass share,
    or where a score is shown how large it is among all cells; None where nothing is to be shown.
    A law that is not ``possible`` in its sheet has that one small line and nothing else. ``change`` says
    how the cell compares with another store, '' where there is none to compare with.
    """

    verdict: str
    best: bool
    figure: str
    unit: str
    interval: str
    lines: tuple[str, ...]
    ink: float | None
    possible: bool = True
    change: str = ""

    @property
    def head(self) -> str:
        """The line above the figure."""
        return ", ".join(filter(None, (self.verdict, "best" if self.best else "", self.change)))


class Grid:
    """The cells of all sheets by name, put into words."""

    def __init__(self, results: Results, view: View = SHARES, changes: Changes | None = None) -> None:
        self.results, self.view, self.changes = results, view, changes
        self.score = view.score_of(results)
        self.shares = view.shares(results)
        # By which law is best is decided: of other numbers the mark would be misread.
        self.marks_best = view.show in {SHARE, MEDIAN} and self.score == main_score(results) and not changes
        self.limits = () if view.show == RATIO else limits_of(results, self.score)
        self.score_name = score_words(self.score)[0]
        self._cells = {cell.key: cell for cell in results.cells}
        self._tolerated = {(one.sheet, one.law): one.tolerated for one in results.standings}
        found = (self._value(cell) for cell in results.cells)
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
        """Put one cell into words; ``full`` names the score beside its value."""
        cell = self.cell(sheet, law, column)
        if not cell.planned:
            return CellWords("", False, "", "", "", (NOT_POSSIBLE,), None, possible=False)
        value = self._value(cell)
        if cell.draws == 0 or (value is None and not self.shares):
            shown, lines, ink = (NOTHING, "", ""), [self._nothing(cell)], None
        elif not column.random or not self.shares:
            shown, lines = self._score_large(cell, column, full)
            ink = float(cell.passed > 0) if self.shares else self._scale(value)
        else:
            shown, lines = self._share_large(cell, full)
            ink = cell.pass_share
        if column.random and cell.unfinished:
            lines.append(f"{cell.unfinished} did not finish")
        if cell.incomplete:
            lines.append(f"{cell.incomplete} incomplete")
        if cell.settled:
            lines.append(f"settled, {counted(cell.planned, 'draw')}")
        change = self.changes.cells[cell.key] if self.changes else None
        if change is not None:
            lines += self._earlier(change, column, full)
        best = cell.best and self.marks_best
        return CellWords(cell.verdict, best, *shown, tuple(lines), ink, change=change.kind if change else "")

    def _nothing(self, cell: Cell) -> str:
        return "no result" if cell.draws == 0 else f"no {self.score_name}"

    def _earlier(self, change: CellChange, column: Column, full: bool) -> list[str]:
        """Say what the cell showed in the earlier store."""
        before = change.before
        if before is None or not before.draws:
            return [] if before is None else ["was without a result"]
        value = self._value(before)
        if self.shares and column.random and before.pass_share is not None:
            lines = [f"was {self._share(before)} %"]
        else:
            lines = [] if value is None else [f"was {self._figure(value, self.limits)}"]
        by = change.difference
        if by is not None and self.changes and not by.tie and math.isfinite(by.value):
            name, unit = score_words(self.changes.score)
            told = f"by {signed(by.value)} {unit}".rstrip()
            lines.append(f"{name} {told}" if self.shares and full else told)
        return lines

    def _value(self, cell: Cell) -> float | None:
        shown = self.view.of(cell, self.score)
        return None if shown is None else shown.value

    def _share(self, cell: Cell) -> str:
        tolerance = self.results.tolerance
        share = cell.passed / cell.draws if cell.pass_share is None else cell.pass_share
        return percent(share, tolerance.required_share if tolerance else None, exact=True)

    def _figure(self, value: float, limits: tuple[float, ...] = ()) -> str:
        """Return a value of the score, or a ratio, with its unit."""
        if self.view.show != RATIO:
            return quantity(value, self.score, *limits)
        return "no end" if math.isinf(value) else f"{figure(value)} {TIMES}"

    def _share_large(self, cell: Cell, full: bool) -> tuple[tuple[str, str, str], list[str]]:
        """Return the share, its unit and interval; and the score's median."""
        tolerance = self.results.tolerance
        required = tolerance.required_share if tolerance else None
        ends = [percent(end, required) for end in (cell.pass_low, cell.pass_high) if end is not None]
        median, lines = self._value(cell), []
        if median is not None and math.isfinite(median):
            shown = quantity(median, self.score)
            lines.append(f"{self.score_name} {shown}" if full else shown)
        return (self._share(cell), "%", " to ".join(ends)), lines

    def _score_large(self, cell: Cell, column: Column, full: bool) -> tuple[tuple[str, str, str], list[str]]:
        """Return the score, its unit and interval; and what they are."""
        shown = self.view.of(cell, self.score)
        lines = [] if column.random else [EXACT[not full]]
        if shown is None:
            return (NOTHING, "", ""), [f"no {self.score_name}", *lines]
        if math.isinf(shown.value):
            return (NOTHING, "", ""), [*self._endless(cell, column), *lines]
        ends = interval(shown.low, shown.high) if column.random else ""
        said = figure(shown.value) if column.random else figure(shown.value, *self.limits)
        unit = TIMES if self.view.show == RATIO else score_words(self.score)[1]
        return (said, unit, ends), [self.score_name, *lines] if full else lines

    def _endless(self, cell: Cell, column: Column) -> list[str]:
        """Say why there is no number; draws that did not finish are counted in a line of their own."""
        if column.random and cell.unfinished:
            return []
        if self.view.show == RATIO:
            return [f"nominal's {self.score_name} is 0"]
        return [quantity(math.inf, self.score)]

    def _scale(self, median: float | None) -> float | None:
        """Place a value among all cells' ones: by its logarithm where all are above 0; 1 if infinite."""
        if median is None or math.isinf(median):
            return None if median is None else 1.0
        if self.most <= self.least:
            return 0.0
        if self.least > 0:
            return math.log(median / self.least) / math.log(self.most / self.least)
        return (median - self.least) / (self.most - self.least)


def _level(column: Column) -> float:
    return column.level or 0.0

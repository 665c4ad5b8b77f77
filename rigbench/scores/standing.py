"""The laws of one sheet against each other, as far as the results show."""

from __future__ import annotations

from collections.abc import Mapping
from math import inf
from typing import Any

from rigbench.scores.levels import ladder
from rigbench.scores.names import main_score
from rigbench.scores.pairs import CLEAR
from rigbench.scores.results import Cell, Column, Results, Tolerated

__all__ = ["SheetStanding"]


class SheetStanding:
    """One sheet of the results, asked law by law; of laws and columns those that are possible in it."""

    def __init__(self, results: Results, sheet: str) -> None:
        self._cells = {(cell.law, cell.condition): cell for cell in results.cells if cell.sheet == sheet}
        possible = {place for place, cell in self._cells.items() if cell.planned > 0}
        self.laws = tuple(law for law in results.laws if any(law == named for named, _ in possible))
        self.columns = tuple(c for c in results.columns if any(c.name == named for _, named in possible))
        self.tolerance, self.draws, self.stop_early = results.tolerance, results.draws, results.stop_early
        self.main = main_score(() if results.tolerance is None else results.tolerance.limited)
        self.steps = ladder(self.columns)
        self._break_even: list[Mapping[str, Any]] = [b for b in results.break_even if b["sheet"] == sheet]
        self._search = results.level_search
        self._levels = {s.law: s.tolerated for s in results.standings if s.sheet == sheet}

    @property
    def has_levels(self) -> bool:
        """Whether the ladder has more than its foot, so that a tolerated level says something."""
        return self._search is not None or any(column.level for column in self.steps)

    @property
    def highest(self) -> float:
        """The highest level run of all sources together."""
        levels = (column.level or 0.0 for column in self.steps)
        return max([*levels, 0.0 if self._search is None else self._search.most])

    def shown_to_keep(self, law: str) -> float | None:
        """Return the highest level below its first miss that a law is shown to keep; None for none."""
        level = self.level(law)
        kept = [step.level or 0.0 for step in self.steps if self.cell(law, step).verdict == "keeps"]
        kept += [level.low] if level.low > 0.0 else []
        return max((one for one in kept if one < level.high), default=None)

    def cell(self, law: str, column: Column) -> Cell:
        """Return the cell of a law and a column."""
        return self._cells[law, column.name]

    def level(self, law: str) -> Tolerated:
        """Return the tolerated level of a law; nothing shown where there is no tolerance."""
        return self._levels.get(law) or Tolerated(None, 0.0, inf)

    def has_result(self, law: str) -> bool:
        """Whether any draw of the law counts anywhere."""
        return any(self.cell(law, column).draws for column in self.columns)

    def columns_that(self, verdict: str, law: str, beside_ladder: bool = False) -> list[str]:
        """Return the names of the law's columns of that verdict, or of those off the ladder alone."""
        columns = [column for column in self.columns if not (beside_ladder and column.ladder)]
        return [column.name for column in columns if self.cell(law, column).verdict == verdict]

    def better_below(self, rival: str, law: str) -> float | None:
        """Return the break-even level below which ``rival`` has the lower main score, if there is one."""
        for found in self._break_even:
            if set(found["laws"]) == {law, rival} and found["better_below"] == rival:
                return float(found["level"]["value"])
        return None

    def ahead(self, one: str, other: str) -> bool:
        """Whether law ``one`` is shown to be ahead of law ``other``; the first that holds decides:

        1. one law keeps a level of all sources together, and the other misses that level or a lower one;
        2. one law keeps columns that the other misses; if each does, neither is ahead;
        3. more draws pass under one in some column, by intervals that don't meet; if so for each, neither is;
        4. the main score of one is lower at the highest level that neither misses;
        5. the main score of one is lower in some column, and that of the other in none.

        Lower means that the law is the best of the column, or that the intervals of the two medians
        don't meet; in an exact cell that the score is more than 1 % lower.
        """
        by_score = (self._is_lower_at_the_top, self._is_lower)
        for shown in (self._bears_more, self._keeps_more, self._passes_more, *by_score):
            forth, back = shown(one, other), shown(other, one)
            if forth or back:
                return forth and not back
        return False

    def told_apart_by_tolerance(self, one: str, other: str) -> bool:
        """Whether the tolerance alone shows one of the two laws to be ahead."""
        shown = (self._bears_more, self._keeps_more, self._passes_more)
        return any(test(one, other) or test(other, one) for test in shown)

    def _bears_more(self, one: str, other: str) -> bool:
        kept = self.shown_to_keep(one)
        return kept is not None and kept >= self.level(other).high

    def _keeps_more(self, one: str, other: str) -> bool:
        verdicts = [(self.cell(one, c).verdict, self.cell(other, c).verdict) for c in self.columns]
        return ("keeps", "misses") in verdicts

    def _passes_more(self, one: str, other: str) -> bool:
        pairs = (
            (self.cell(one, column).pass_low, self.cell(other, column).pass_high) for column in self.columns
        )
        return any(low is not None and high is not None and low > high for low, high in pairs)

    def _is_lower_at_the_top(self, one: str, other: str) -> bool:
        pairs = [(step, self.cell(one, step), self.cell(other, step)) for step in self.steps]
        level = [s for s, a, b in pairs if a.draws and b.draws and "misses" not in (a.verdict, b.verdict)]
        return bool(level) and self._lower_in(level[-1], one, other)

    def _is_lower(self, one: str, other: str) -> bool:
        return any(self._lower_in(column, one, other) for column in self.columns)

    def _lower_in(self, column: Column, one: str, other: str) -> bool:
        mine = self.cell(one, column).measures.get(self.main)
        theirs = self.cell(other, column).measures.get(self.main)
        if mine is None or theirs is None:
            return False
        if not column.random:
            return mine.median < (1.0 - CLEAR) * theirs.median
        return self.cell(one, column).best or mine.median_high < theirs.median_low

"""From rows to results."""

from __future__ import annotations

from collections.abc import Collection, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace

from rigbench.scores.advice import advise
from rigbench.scores.break_even import break_even_levels
from rigbench.scores.cell import CountedDraws, build_cell
from rigbench.scores.gather import CellKey, Frame, Gathered, gather
from rigbench.scores.law_pairs import compare_laws
from rigbench.scores.levels import ladder, tolerated_level
from rigbench.scores.names import main_score
from rigbench.scores.pairs import best_law
from rigbench.scores.ratios import ratios_to_nominal
from rigbench.scores.results import Cell, Column, LawStanding, Results, Tolerance
from rigbench.scores.row import Row
from rigbench.scores.run_table import RunTable, table_of
from rigbench.scores.searched import Searched, found_level

__all__ = ["summarise"]

MAIN = 0
"""The place of the main score among those that are compared draw by draw."""


def summarise(
    runs: Iterable[Row] | RunTable,
    *,
    title: str,
    arm: str,
    motions: Sequence[str],
    tolerance: Tolerance | None,
    draws: int,
    sheets: Sequence[str],
    laws: Sequence[str],
    columns: Sequence[Column],
    planned: int,
    done: int,
    failed: int,
    absent: Collection[CellKey] = (),
    also: Sequence[str] = (),
    search: Searched | None = None,
    stop_early: bool = False,
    settled: Mapping[tuple[str, str], int] | None = None,
    model: str = "",
) -> Results:
    """Return what the runs of a campaign, finished or not, show: rows, or columns where they are many.

    ``sheets`` is ('',) where nothing is swept. ``draws`` is how many each random cell should have. Runs
    whose sheet, law, motion or condition isn't named are passed over. ``planned``, ``done`` and
    ``failed`` count runs and are handed on. ``absent`` are the cells for which nothing is planned, since
    what they would combine can't be combined. The draws' main scores are kept for comparisons, and those
    that are named by ``also``. A ``search`` for each draw's own limit gives the tolerated levels in place of
    the ladder. Of a campaign that may ``stop_early``, ``settled`` holds after how many draws the column of a
    sheet and condition was settled: no more of them count there. ``model`` names what all laws believe, where
    that is another arm.
    """
    frame = Frame(tuple(sheets), tuple(laws), tuple(columns), tuple(motions))
    limited = () if tolerance is None else tolerance.limited
    main = main_score(limited)
    table = runs if isinstance(runs, RunTable) else table_of(runs)
    gathered = gather(table, frame, expected=(main, *limited, *also))
    compared = tuple(dict.fromkeys([main, *also]))
    maker = _Maker(frame, gathered, tolerance, draws, frozenset(absent), compared, stop_early, settled or {})
    cells, count = maker.cells()
    best = set(_best(frame, count))
    cells = [replace(cell, best=(cell.sheet, cell.law, cell.condition) in best) for cell in cells]
    results = Results(
        title=title,
        arm=arm,
        model=model,
        motions=frame.motions,
        tolerance=tolerance,
        draws=draws,
        sheets=frame.sheets,
        laws=frame.laws,
        columns=frame.columns,
        cells=tuple(cells),
        standings=tuple(_standings(frame, cells, count, tolerance, search)),
        planned=planned,
        done=done,
        failed=failed,
        advice="",
        break_even=tuple(_break_even(frame, count, main)),
        comparisons=tuple(compare_laws(frame, count, main, MAIN)),
        counted=count,
        compared=maker.compared,
        level_search=search,
        stop_early=stop_early,
    )
    return replace(results, advice=advise(results))


@dataclass(frozen=True)
class _Maker:
    """Makes the cells; of their draws it keeps the scores named by ``compared``, and lets the others go."""

    frame: Frame
    gathered: Gathered
    tolerance: Tolerance | None
    draws: int
    nowhere: Collection[CellKey]
    compared: tuple[str, ...]
    stop_early: bool
    settled: Mapping[tuple[str, str], int]

    def cells(self) -> tuple[list[Cell], dict[CellKey, CountedDraws]]:
        """Return all cells, and the draws that count of those that are possible."""
        cells: list[Cell] = []
        count: dict[CellKey, CountedDraws] = {}
        for sheet in self.frame.sheets:
            for law in self.frame.laws:
                cells += self._row(sheet, law, count)
        return cells, count

    def _row(self, sheet: str, law: str, count: dict[CellKey, CountedDraws]) -> Iterator[Cell]:
        """Return the cells of one law in one sheet, in order; nominal's draws are needed for every other."""
        columns = self.frame.columns
        foot = next((column for column in columns if column.ladder and not column.level), None)
        nominal = None if foot is None else self._cell(sheet, law, foot)
        for column in columns:
            cell, here = nominal if nominal and column is foot else self._cell(sheet, law, column)
            if nominal and foot:
                ratios = ratios_to_nominal(
                    self.gathered.names, (cell, here, column.random), (*nominal, foot.random)
                )
                cell = replace(cell, ratios=ratios)
            if cell.planned:
                places = [self.gathered.names.index(name) for name in self.compared]
                count[cell.key] = replace(here, worst=here.worst[:, places])
            yield cell

    def _cell(self, sheet: str, law: str, column: Column) -> tuple[Cell, CountedDraws]:
        key = sheet, law, column.name
        return build_cell(
            key,
            column,
            self.gathered,
            motions=self.frame.motions,
            tolerance=self.tolerance,
            draws=self.draws,
            possible=key not in self.nowhere,
            anytime=self.stop_early,
            settled_after=self.settled.get((sheet, column.name)) if column.random else None,
        )


def _best(frame: Frame, count: Mapping[CellKey, CountedDraws]) -> Iterator[CellKey]:
    """Yield the cell of each column's best law, where there is one."""
    for sheet in frame.sheets:
        for column in frame.columns:
            keys = ((sheet, law, column.name) for law in frame.laws)
            here = {key[1]: count[key] for key in keys if key in count}
            law = best_law(here, MAIN, column.random)
            if law is not None:
                yield sheet, law, column.name


def _standings(
    frame: Frame,
    cells: Iterable[Cell],
    count: Mapping[CellKey, CountedDraws],
    tolerance: Tolerance | None,
    search: Searched | None,
) -> Iterator[LawStanding]:
    """Yield each law's tolerated level; None without a tolerance, and where nothing is planned."""
    steps = {column.name: column for column in ladder(frame.columns)}
    on_ladder: dict[tuple[str, str], list[Cell]] = {}
    for cell in cells:
        shows = cell.condition in steps and cell.planned > 0
        on_ladder.setdefault((cell.sheet, cell.law), []).extend([cell] if shows else [])
    for place, own in on_ladder.items():
        if tolerance is None or not own:
            yield LawStanding(*place, None)
        elif search is None:
            yield LawStanding(*place, tolerated_level(own, tolerance.required_share))
        else:
            rungs = [(steps[cell.condition], count[cell.key]) for cell in own]
            found, limits = found_level(search, place, rungs, tolerance.required_share)
            yield LawStanding(*place, found.tolerated, found, limits)


def _break_even(
    frame: Frame, count: Mapping[CellKey, CountedDraws], main: str
) -> Iterator[Mapping[str, object]]:
    """Yield the break-even levels, in the form in which they are printed."""
    steps = ladder(frame.columns)
    for sheet in frame.sheets:
        ladders = {
            law: [(step, count[sheet, law, step.name]) for step in steps]
            for law in frame.laws
            if all((sheet, law, step.name) in count for step in steps)
        }
        for found in break_even_levels(ladders, MAIN):
            yield {
                "sheet": sheet,
                "laws": list(found.laws),
                "score": main,
                "level": {"value": found.value, "low": found.low, "high": found.high},
                "better_below": found.below,
            }

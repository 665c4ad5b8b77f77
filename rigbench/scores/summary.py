"""From rows to results."""

from __future__ import annotations

from collections.abc import Collection, Iterable, Iterator, Mapping, Sequence
from dataclasses import replace

from rigbench.scores.advice import advise
from rigbench.scores.break_even import break_even_levels
from rigbench.scores.cell import CountedDraws, build_cell
from rigbench.scores.gather import CellKey, Frame, gather
from rigbench.scores.levels import ladder, tolerated_level
from rigbench.scores.names import main_score
from rigbench.scores.pairs import best_law
from rigbench.scores.results import Cell, Column, LawStanding, Results, Tolerance
from rigbench.scores.row import Row
from rigbench.scores.run_table import RunTable, table_of

__all__ = ["summarise"]

MAIN = 0
"""The place of the main score among those by which laws are compared: it is the only one."""


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
) -> Results:
    """Return what the runs of a campaign, finished or not, show: rows, or columns where they are many.

    ``sheets`` is ('',) where nothing is swept. ``draws`` is how many each random cell should have. Runs
    whose sheet, law, motion or condition isn't named are passed over. ``planned``, ``done`` and
    ``failed`` count runs and are handed on. ``absent`` are the cells for which nothing is planned, since
    what they would combine can't be combined.
    """
    frame = Frame(tuple(sheets), tuple(laws), tuple(columns), tuple(motions))
    limited = () if tolerance is None else tolerance.limited
    main = main_score(limited)
    table = runs if isinstance(runs, RunTable) else table_of(runs)
    gathered = gather(table, frame, expected=(main, *limited))
    nowhere = frozenset(absent)
    place = gathered.names.index(main)
    cells, count = [], {}
    for sheet, law, column in frame.places():
        key = sheet, law, column.name
        possible = key not in nowhere
        cell, here = build_cell(
            key, column, gathered, motions=motions, tolerance=tolerance, draws=draws, possible=possible
        )
        cells.append(cell)
        if possible:
            # Laws are compared by one score alone: a copy of it lets the others go.
            count[key] = replace(here, worst=here.worst[:, place : place + 1].copy())
    best = set(_best(frame, count))
    cells = [replace(cell, best=(cell.sheet, cell.law, cell.condition) in best) for cell in cells]
    results = Results(
        title=title,
        arm=arm,
        motions=frame.motions,
        tolerance=tolerance,
        draws=draws,
        sheets=frame.sheets,
        laws=frame.laws,
        columns=frame.columns,
        cells=tuple(cells),
        standings=tuple(_standings(frame, cells, tolerance)),
        planned=planned,
        done=done,
        failed=failed,
        advice="",
        break_even=tuple(_break_even(frame, count, main)),
    )
    return replace(results, advice=advise(results))


def _best(frame: Frame, count: Mapping[CellKey, CountedDraws]) -> Iterator[CellKey]:
    """Yield the cell of each column's best law, where there is one."""
    for sheet in frame.sheets:
        for column in frame.columns:
            keys = ((sheet, law, column.name) for law in frame.laws)
            here = {key[1]: count[key] for key in keys if key in count}
            law = best_law(here, MAIN, column.random)
            if law is not None:
                yield sheet, law, column.name


def _standings(frame: Frame, cells: Iterable[Cell], tolerance: Tolerance | None) -> Iterator[LawStanding]:
    """Yield each law's tolerated level; None without a tolerance, and where nothing is planned."""
    steps = {column.name for column in ladder(frame.columns)}
    on_ladder: dict[tuple[str, str], list[Cell]] = {}
    for cell in cells:
        shows = cell.condition in steps and cell.planned > 0
        on_ladder.setdefault((cell.sheet, cell.law), []).extend([cell] if shows else [])
    for (sheet, law), own in on_ladder.items():
        level = None if tolerance is None or not own else tolerated_level(own, tolerance.required_share)
        yield LawStanding(sheet, law, level)


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

"""From rows to results."""

from __future__ import annotations

from collections.abc import Collection, Iterable, Iterator, Mapping, Sequence
from dataclasses import replace

from rigbench.scores.advice import advise
from rigbench.scores.cell import CountedDraws, build_cell, counted
from rigbench.scores.gather import CellKey, Frame, gather
from rigbench.scores.levels import ladder, tolerated_level
from rigbench.scores.names import main_score
from rigbench.scores.pairs import best_law, break_even_levels
from rigbench.scores.results import Cell, Column, LawStanding, Results, Tolerance
from rigbench.scores.row import Row

__all__ = ["summarise"]


def summarise(
    rows: Iterable[Row],
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
    """Return what the rows of a campaign, finished or not, show.

    ``sheets`` is ('',) where nothing is swept. ``draws`` is how many each random cell should have. Rows
    whose sheet, law, motion or condition isn't named are passed over. ``planned``, ``done`` and
    ``failed`` count runs and are handed on. ``absent`` are the cells for which nothing is planned, since
    what they would combine can't be combined.
    """
    frame = Frame(tuple(sheets), tuple(laws), tuple(columns), tuple(motions))
    limited = () if tolerance is None else tolerance.limited
    main = main_score(limited)
    gathered = gather(rows, frame, expected=(main, *limited))
    nowhere = frozenset(absent)
    count = {
        key: counted(runs, gathered.names, frame.motions, tolerance)
        for key, runs in gathered.cells.items()
        if key not in nowhere
    }
    place = gathered.names.index(main)
    best = set(_best(frame, count, place))
    cells = []
    for sheet, law, column in frame.places():
        key = sheet, law, column.name
        possible = key not in nowhere
        cell = build_cell(
            key, column, gathered, motions=motions, tolerance=tolerance, draws=draws, possible=possible
        )
        cells.append(replace(cell, best=key in best))
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
        break_even=tuple(_break_even(frame, count, main, place)),
    )
    return replace(results, advice=advise(results))


def _best(frame: Frame, count: Mapping[CellKey, CountedDraws], main: int) -> Iterator[CellKey]:
    """Yield the cell of each column's best law, where there is one."""
    for sheet in frame.sheets:
        for column in frame.columns:
            keys = ((sheet, law, column.name) for law in frame.laws)
            here = {key[1]: count[key] for key in keys if key in count}
            law = best_law(here, main, column.random)
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
    frame: Frame, count: Mapping[CellKey, CountedDraws], main: str, place: int
) -> Iterator[Mapping[str, object]]:
    """Yield the break-even levels, in the form in which they are printed."""
    steps = ladder(frame.columns)
    for sheet in frame.sheets:
        ladders = {
            law: [(step, count[sheet, law, step.name]) for step in steps]
            for law in frame.laws
            if all((sheet, law, step.name) in count for step in steps)
        }
        for found in break_even_levels(ladders, place):
            yield {
                "sheet": sheet,
                "laws": list(found.laws),
                "score": main,
                "level": {"value": found.value, "low": found.low, "high": found.high},
                "better_below": found.below,
            }

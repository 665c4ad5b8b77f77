"""Names that the user gives, looked up among those that a store has."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from rigbench.errors import Fault, nearest
from rigbench.scores.levels import ladder
from rigbench.scores.results import Column, Results

__all__ = ["conditions_of", "level_fault", "name_fault"]

SHOWN = 12


def name_fault(file: str, option: str, what: str, name: str, known: Sequence[str]) -> Iterator[Fault]:
    """Yield the fault of a name that is not among those that are ``known``, with the nearest."""
    if name not in known:
        near = nearest(name, known)
        more = ", ..." if len(known) > SHOWN else ""
        expected = "" if near else f"one of {', '.join(repr(each) for each in known[:SHOWN])}{more}"
        if list(known) == [""]:
            expected = f"no {option}: there is one {what}, without a name"
        yield Fault(file, None, option, f"no {what} is called '{name}'", expected, near)


def conditions_of(results: Results, law: str) -> list[Column]:
    """Return the conditions under which something is planned for a law."""
    planned = {cell.condition for cell in results.cells if cell.law == law and cell.planned}
    return [column for column in results.columns if column.name in planned]


def level_fault(file: str, level: float, columns: Sequence[Column]) -> Iterator[Fault]:
    """Yield the fault of a level at which no condition has all sources together."""
    levels = [column.level or 0.0 for column in ladder(columns)]
    if level not in levels:
        expected = f"one of {', '.join(f'{each:g}' for each in levels)}" if levels else ""
        yield Fault(file, None, "--level", f"all sources together were not run at level {level:g}", expected)

"""Words about tolerated levels: how they were found, and what was odd about the draws' own limits."""

from __future__ import annotations

from collections.abc import Iterator

from rigbench.errors import counted
from rigbench.report.words import level
from rigbench.scores.results import LawStanding, Results

__all__ = ["ENDS", "found_by", "limits_words", "tolerated_reading"]

ENDS = "(shown to keep at, shown to miss from)"
MOST = 3
"""So many laws are named; of the others the number is given."""


def tolerated_reading(results: Results) -> str:
    """Say what a tolerated level is, and how it was found."""
    if results.level_search is None:
        said = "where the share of the draws that keep it falls below the required one"
    else:
        said = "up to which the required share of the draws keep, by each draw's own limit"
    return f"Tolerated level: {said} {ENDS}."


def found_by(standing: LawStanding) -> str | None:
    """Return how a law's tolerated level was found, for a machine to read; None without one."""
    if standing.tolerated is None:
        return None
    return "pass_shares" if standing.found is None else "own_limits"


def limits_words(results: Results) -> str:
    """Say how the draws' own limits were found, and in which of them something was odd; '' without any."""
    search = results.level_search
    if search is None:
        return ""
    draws, most, finest = counted(search.draws, "draw"), level(search.most), level(search.finest)
    said = [f"Own limits: of {draws} of each law, up to level {most}, to within {finest}"]
    again = {s: s.found.keep_again for s in results.standings if s.found and s.found.keep_again}
    left = {s: s.found.left_open for s in results.standings if s.found and s.found.left_open}
    if again:
        said.append(f"a limit is the first miss, above which some keep again ({_numbers(again)})")
    if left:
        said.append(f"runs that came to nothing left some less exact ({_numbers(left)})")
    return f"{'; '.join(said)}."


def _numbers(found: dict[LawStanding, int]) -> str:
    """Return '2 of computed torque, 1 of feedforward in rates 500'."""
    named = list(_named(found))
    if len(named) > MOST:
        rest = sum(list(found.values())[MOST:])
        named = [*named[:MOST], f"{rest} more"]
    return ", ".join(named)


def _named(found: dict[LawStanding, int]) -> Iterator[str]:
    for standing, number in found.items():
        yield f"{number} of {standing.law}{f' in {standing.sheet}' if standing.sheet else ''}"

"""find_level: each draw's own limit under each law, by bisection on the level of all sources together."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from itertools import pairwise
from math import ceil, inf, log2
from typing import TYPE_CHECKING, Any

import numpy as np

from rigbench.campaign.plan import Entry
from rigbench.campaign.studies.asking import MakesOnce
from rigbench.campaign.study import Known
from rigbench.scores.results import Tolerance, level_name
from rigbench.scores.row import Row
from rigbench.scores.searched import Searched
from rigbench.scores.verdict import keeps

if TYPE_CHECKING:
    from rigbench.campaign.studied import Studied
    from rigbench.rig.run import Run  # not at run time: it brings the engine and the compiler

__all__ = ["NAME", "FindLevel", "Rung", "Searching", "searched_of"]

NAME = "find_level"

SLACK = 1.0 + 1e-9
"""Halving rounds: a bracket wider than the finest one by a rounding error is not halved again."""


@dataclass(frozen=True)
class Rung:
    """A level of the matrix's own ladder: its column's name, and whether draws differ in it."""

    condition: str
    level: float
    random: bool


@dataclass(frozen=True)
class Searching:
    """A law in a sheet: its run by motion, in which all sources act, and the ladder's rungs, from level 0."""

    sheet: str
    law: str
    runs: Mapping[str, Run]
    rungs: tuple[Rung, ...]


@dataclass(frozen=True)
class FindLevel(MakesOnce):
    """The study: for each draw, law and sheet, the level from which the draw no longer keeps the tolerance.

    The rungs of the matrix's ladder come first, from below, up to the first that misses: these runs are the
    matrix's own. If none misses, the level ``most`` follows. Then the bracket between the last level that
    keeps and the first that misses is halved until it is no wider than most / 2^steps. A draw with a host's
    trouble at a level is left with the bracket that it has. All draws go on together, round by round.

    ``rungs_missing``: whether the matrix may lack runs of its ladder, as where it stops early.
    """

    searching: tuple[Searching, ...]
    tolerance: Tolerance
    draws: int
    most: float
    steps: int
    rungs_missing: bool = False
    name: str = NAME

    @property
    def finest(self) -> float:
        """How wide a bracket is in the end, at most."""
        return self.most * 0.5**self.steps

    @property
    def most_runs(self) -> int:
        """How many runs it takes at most, beside those of the matrix."""
        return sum(self.draws * len(one.runs) * self._most_levels(one) for one in self.searching)

    def _most_levels(self, one: Searching) -> int:
        """Return at how many levels a draw is run at most."""
        ends = sorted({*(rung.level for rung in one.rungs if rung.level < self.most), self.most})
        counts = [_halvings(high - low, self.finest) for low, high in pairwise(ends)]
        if all(rung.level != self.most for rung in one.rungs):
            counts[-1] += 1
        return max(counts) + (sum(rung.random for rung in one.rungs) if self.rungs_missing else 0)

    def examples(self) -> Sequence[tuple[int, Iterable[Entry]]]:
        """See :class:`rigbench.campaign.study.Study`: all draws, level by level of the finest grid."""
        runs = (
            entry
            for part in range(2**self.steps, 0, -1)
            for draw in range(self.draws)
            for one in self.searching
            for entry in self._at(_Path(one, draw), part * self.finest)
        )
        return [(self.most_runs, runs)]

    def declared(self) -> Mapping[str, Any]:
        """See :class:`rigbench.campaign.study.Study`."""
        return {"most": self.most, "steps": self.steps, "draws": self.draws}

    def rounds(self, known: Known) -> Sequence[Sequence[Entry]]:
        """See :class:`rigbench.campaign.study.Study`: a round holds the next level of every draw and law."""
        paths = [_Path(one, draw) for draw in range(self.draws) for one in self.searching]
        found: list[Sequence[Entry]] = []
        while True:
            asked = [
                (path, level, self._at(path, level))
                for path in paths
                if (level := path.next_level(self.most, self.finest)) is not None
            ]
            if not asked:
                return found
            found.append(_once(entries for _, _, entries in asked))
            rows = {id(entry): known(entry) for entry in found[-1]}
            if None in rows.values():
                return found
            for path, level, entries in asked:
                own = [row for entry in entries if (row := rows[id(entry)]) is not None]
                path.take(level, keeps(own, self.tolerance))

    def _at(self, path: _Path, level: float) -> list[Entry]:
        """Return the runs of a draw at a level, one a motion, made once; no draw where nothing is random."""
        one = path.of
        rung = next((rung for rung in one.rungs if rung.level == level), None)
        draw = path.draw if rung is None or rung.random else None
        name = level_name(level) if rung is None else rung.condition
        return self._once(
            (one.sheet, one.law, level, draw),
            lambda: [
                Entry(one.sheet, one.law, motion, name, level, draw, _at_level(run, level, draw))
                for motion, run in one.runs.items()
            ],
        )


def _at_level(run: Run, level: float, draw: int | None) -> Run:
    return replace(run, level=level, draw=draw, sources=run.sources if level > 0.0 else ())


def _once(groups: Iterable[Sequence[Entry]]) -> list[Entry]:
    """Return the entries of all groups, each once: draws share a run in which nothing is random."""
    return list({id(entry): entry for entries in groups for entry in entries}.values())


def _halvings(width: float, finest: float) -> int:
    return max(0, ceil(log2(width / finest / SLACK)))


class _Path:
    """Where the search of a draw under a law has got to."""

    def __init__(self, of: Searching, draw: int) -> None:
        self.of, self.draw = of, draw
        self._low, self._high, self._open = -inf, inf, False

    def next_level(self, most: float, finest: float) -> float | None:
        """Return the level to run next; None at the end."""
        if self._open or self._low >= most:
            return None
        if self._high == inf:
            return min([*(rung.level for rung in self.of.rungs if rung.level > self._low), most])
        if self._low == -inf or self._high - self._low <= finest * SLACK:
            return None
        return (self._low + self._high) / 2.0

    def take(self, level: float, kept: bool | None) -> None:
        """Learn whether the draw keeps at a level; None: a host's trouble left that open."""
        if kept is None:
            self._open = True
        elif kept:
            self._low = level
        else:
            self._high = level


def searched_of(study: Studied, tolerance: Tolerance) -> Searched:
    """Return what a stored study of this kind has shown, level by level."""
    draws, most = study.declared["draws"], study.declared["most"]
    places: dict[tuple[str, str], dict[tuple[int | None, float], list[Row]]] = {}
    for record in study.records:
        row = record.row
        own = places.setdefault((row.sheet, row.law), {})
        own.setdefault((row.draw, row.level or 0.0), []).append(row)
    levels = {}
    for place, runs in places.items():
        motions = {row.motion for rows in runs.values() for row in rows}
        shown = (
            (draw, level, kept)
            for (draw, level), rows in runs.items()
            if {row.motion for row in rows} == motions and (kept := keeps(rows, tolerance)) is not None
        )
        levels[place] = _arrays(shown, draws)
    return Searched(draws, most, most * 0.5 ** study.declared["steps"], levels)


def _arrays(shown: Iterator[tuple[int | None, float, bool]], draws: int) -> tuple[Any, Any]:
    """Return levels and whether they are kept, (n, K) each; what has no draw holds for all."""
    by_draw: list[list[tuple[float, bool]]] = [[] for _ in range(draws)]
    for draw, level, kept in shown:
        for own in by_draw if draw is None else by_draw[draw : draw + 1]:
            own.append((level, kept))
    table = np.full((draws, max(map(len, by_draw), default=0), 2), np.nan)
    for row, own in zip(table, by_draw, strict=True):
        row[: len(own)] = np.array(own).reshape(-1, 2)
    return table[..., 0], table[..., 1] == 1.0

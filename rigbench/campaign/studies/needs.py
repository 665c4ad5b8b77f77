"""Needs: which sources of mismatch must be known, and how well."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from functools import cached_property
from typing import TYPE_CHECKING, Any

from rigbench.arm.draws import draw_values
from rigbench.campaign.plan import Entry
from rigbench.campaign.studies.asking import MakesOnce
from rigbench.campaign.study import Known
from rigbench.scores.limit_search import LADDER, next_probes
from rigbench.scores.needs_design import TOGETHER, A, B, Group, NeedsDesign, Subject, alone, swapped
from rigbench.scores.results import Tolerance
from rigbench.scores.verdict import keeps

if TYPE_CHECKING:
    from rigbench.arm.arm import Floats
    from rigbench.rig.run import Run  # not at run time: it brings the engine and the compiler

__all__ = ["NeedsStudy"]

Probe = tuple[int, int]
"""Draw, and rung of the ladder."""


@dataclass(frozen=True)
class NeedsStudy(MakesOnce):
    """First all runs of a pick-freeze design, then searches on a ladder of levels, all side by side.

    The design's runs stand under the number of their row in place of a draw, at the design's level, in
    directions of one Sobol' sequence scrambled by ``seed``. A search has a group act alone, or all
    together, in the experiment's own draws: where a source acts as a whole these are the machines of the
    matrix, and runs that it has are not done again. ``base`` holds the run of each sheet, law and motion
    without mismatch.
    """

    design: NeedsDesign
    base: Mapping[tuple[str, str, str], Run]
    tolerance: Tolerance
    seed: int
    name: str = "needs"

    @property
    def most_runs(self) -> int:
        """How many runs it takes at most: all of the design, and searches in which every draw is in doubt."""
        return self.design.share_runs + self.design.most_search_runs

    def examples(self) -> Sequence[tuple[int, Iterable[Entry]]]:
        """See :class:`rigbench.campaign.study.Study`: the design; all draws at a rung, at the next ..."""
        searched = (
            entry
            for rung in range(len(LADDER))
            for draw in range(self.design.draws)
            for search in self._searches()
            for entry in self._probe(search, (draw, rung))
        )
        return [(self.design.share_runs, self._points), (self.design.most_search_runs, searched)]

    def declared(self) -> Mapping[str, Any]:
        """Return the design, from which the rows of the runs can be read."""
        return self.design.declared()

    def rounds(self, known: Known) -> Sequence[Sequence[Entry]]:
        """Return the design, then what all searches ask for next, again and again."""
        found: list[Sequence[Entry]] = [self._points]
        searches = list(self._searches())
        while all(known(entry) is not None for entry in found[-1]):
            asked = []
            for search in searches:
                for probe in next_probes(search.known, self.design.draws, self.design.lowest):
                    asked.append((search, probe, self._probe(search, probe)))
            if not asked:
                break
            found.append([entry for _, _, entries in asked for entry in entries])
            for search, (draw, rung), entries in asked:
                rows = [row for entry in entries if (row := known(entry)) is not None]
                if len(rows) == len(entries):
                    search.known.setdefault(draw, {})[rung] = keeps(rows, self.tolerance)
        return found

    def _searches(self) -> Iterator[_Search]:
        for subject in self.design.subjects:
            for group in (None, *subject.groups):
                yield _Search(subject, group, {})

    @cached_property
    def _points(self) -> tuple[Entry, ...]:
        """The runs of the design: row by row, and within a row law by law."""
        pages = [list(self._pages(subject)) for subject in self.design.subjects]
        return tuple(
            entry
            for row in range(self.design.points)
            for subject, own in zip(self.design.subjects, pages, strict=True)
            for condition, directions in own
            for entry in self._entries(subject, condition, self.design.level, row, _along(directions(row)))
        )

    def _pages(self, subject: Subject) -> Iterator[tuple[str, Callable[[int], dict[str, float]]]]:
        """Yield each page's condition, and what gives the directions of its rows."""
        from rigbench.scores.pick_freeze import pick_freeze

        groups = {group.name: group.parameters for group in subject.groups}
        points = pick_freeze(groups, self.design.points, self.seed)
        yield A, _rows(points.parameters, points.a)
        yield B, _rows(points.parameters, points.b)
        for group, page in zip(points.groups, points.mixed, strict=True):
            yield swapped(group), _rows(points.parameters, page)

    def _probe(self, search: _Search, probe: Probe) -> tuple[Entry, ...]:
        """Return the runs of one draw at one rung."""
        (draw, rung), subject, group = probe, search.subject, search.group
        condition = TOGETHER if group is None else alone(group.name)
        change = _as_it_is if group is None else _alone(group)
        level = self.design.level * LADDER[rung]
        return self._once(
            (subject.sheet, subject.law, condition, probe),
            lambda: tuple(self._entries(subject, condition, level, draw, change)),
        )

    def _entries(
        self, subject: Subject, condition: str, level: float, draw: int, change: Callable[[Run], Run]
    ) -> Iterator[Entry]:
        """Yield a run in each motion, of all the subject's sources unless ``change`` says otherwise."""
        sources = tuple(dict.fromkeys(group.source for group in subject.groups))
        for motion in subject.motions:
            base = self.base[subject.sheet, subject.law, motion]
            run = change(replace(base, level=level, sources=sources, draw=draw))
            yield Entry(subject.sheet, subject.law, motion, condition, level, draw, run)


@dataclass(frozen=True)
class _Search:
    """A search of a group alone (None: of all together), and what is known of it."""

    subject: Subject
    group: Group | None
    known: dict[int, dict[int, bool | None]]


def _rows(parameters: Sequence[str], table: Floats) -> Callable[[int], dict[str, float]]:
    """Return what gives a row of a table by its parameters' names."""
    return lambda row: dict(zip(parameters, table[row].tolist(), strict=True))


def _as_it_is(run: Run) -> Run:
    return run


def _along(directions: Mapping[str, float]) -> Callable[[Run], Run]:
    """Return what sets a run's machine: parameters that are in no group stay as the model has them."""

    def change(run: Run) -> Run:
        names = draw_values(run.arm.arm(), run.mismatch, run.sources, run.seed, 0)
        return replace(run, directions=tuple((name, directions.get(name, 0.0)) for name in names))

    return change


def _alone(group: Group) -> Callable[[Run], Run]:
    """Return what lets a group act alone, in the run's own draw."""

    def change(run: Run) -> Run:
        run = replace(run, sources=(group.source,))
        drawn = draw_values(run.arm.arm(), run.mismatch, run.sources, run.seed, run.draw or 0)
        if set(drawn) == set(group.parameters):
            return run
        own = ((name, u if name in group.parameters else 0.0) for name, u in drawn.items())
        return replace(run, directions=tuple(own))

    return change

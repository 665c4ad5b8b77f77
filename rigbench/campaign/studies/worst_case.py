"""worst_case: which machine within the mismatch breaks a law, and from which level on.

What it finds is a machine that was run, so it shows that a law misses; that it finds none shows nothing.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from functools import partial
from itertools import groupby
from typing import TYPE_CHECKING, Any

import numpy as np

from rigbench.campaign.plan import Entry
from rigbench.campaign.studies.asking import Ask, MakesOnce, in_step
from rigbench.campaign.study import Known
from rigbench.scores.limit_share import LimitShare, limit_share
from rigbench.scores.results import Tolerance
from rigbench.scores.worst_search import LEAST_TRIALS, find_worst

if TYPE_CHECKING:
    from rigbench.arm.arm import Floats
    from rigbench.campaign.reading import Record
    from rigbench.campaign.studied import Studied
    from rigbench.rig.run import Run  # not at run time: it brings the engine and the compiler

__all__ = ["NAME", "Subject", "WorstCase", "WorstFound", "least_runs", "worst_found"]

NAME = "worst_case"

HALVINGS = 6
"""How often the levels between the last that holds and the first that fails are halved."""

Direction = tuple[float, ...]
"""The u of every parameter, in their order."""


@dataclass(frozen=True)
class Subject:
    """A law in a sheet: its run by motion, in which all sources act, and the parameters that they have."""

    sheet: str
    law: str
    runs: Mapping[str, Run]
    parameters: tuple[str, ...]


@dataclass(frozen=True)
class WorstCase(MakesOnce):
    """The study: for each law and sheet, at each level, the direction with the largest share of a limit.

    All u of the mismatch in [-1, 1] are searched, see :func:`find_worst`; each level begins with the worst
    directions of those below. Then the levels between the last at which nothing misses and the first at which
    something does are halved, along all directions found. ``runs`` is the budget of each law in each sheet,
    ``levels`` rise. With noise all runs have that of draw 0.
    """

    subjects: tuple[Subject, ...]
    levels: tuple[float, ...]
    runs: int
    tolerance: Tolerance
    seed: int
    name: str = NAME

    @property
    def most_runs(self) -> int:
        """How many runs it takes at most."""
        return len(self.subjects) * self.runs

    def examples(self) -> Sequence[tuple[int, Iterable[Entry]]]:
        """See :class:`rigbench.campaign.study.Study`: machines anywhere in the box."""
        return [(self.most_runs, self._anywhere())]

    def _anywhere(self) -> Iterator[Entry]:
        rng = np.random.default_rng(self.seed)
        while True:
            for subject in self.subjects:
                direction = tuple(rng.uniform(-1.0, 1.0, len(subject.parameters)).round(4).tolist())
                for motion in subject.runs:
                    yield self._entry(subject, motion, self.levels[-1], direction)

    def declared(self) -> Mapping[str, Any]:
        """See :class:`rigbench.campaign.study.Study`."""
        laws = [[subject.sheet, subject.law] for subject in self.subjects]
        return {"levels": list(self.levels), "runs": self.runs, "laws": laws}

    def rounds(self, known: Known) -> Sequence[Sequence[Entry]]:
        """See :class:`rigbench.campaign.study.Study`: the laws go on side by side, a generation a round."""
        return in_step((partial(self._search, subject) for subject in self.subjects), known)

    def _search(self, subject: Subject, ask: Ask) -> None:
        directions: list[Direction] = []
        high, low = None, 0.0
        trials = _trials(self.runs, len(self.levels), len(subject.runs))
        for number, level in enumerate(self.levels):
            at_level = partial(self._shares, subject, ask, level)
            found, share = find_worst(
                at_level, len(subject.parameters), trials, self.seed + number, directions[::-1]
            )
            directions.append(found)
            if high is None:
                low, high = (low, level) if share > 1.0 else (level, None)
        once = np.array(list(dict.fromkeys(directions)))
        for _ in range(HALVINGS if high is not None else 0):
            middle = float(f"{(low + (high or 0.0)) / 2.0:.6g}")
            if self._shares(subject, ask, middle, once).max() > 1.0:
                high = middle
            else:
                low = middle

    def _shares(self, subject: Subject, ask: Ask, level: float, directions: Floats) -> Floats:
        """Return the largest share of a limit in any motion (P,); 0 for a machine without verdict."""
        motions = list(subject.runs)
        entries = [
            self._entry(subject, motion, level, tuple(direction))
            for direction in directions.tolist()
            for motion in motions
        ]
        limits = [self.tolerance.limits_for(motion) for motion in motions] * len(directions)
        found = [limit_share(row, most) for row, most in zip(ask(entries), limits, strict=True)]
        shares = np.array([0.0 if each is None else each.share for each in found])
        worst: Floats = shares.reshape(len(directions), len(motions)).max(axis=1)
        return worst

    def _entry(self, subject: Subject, motion: str, level: float, direction: Direction) -> Entry:

        def make() -> Entry:
            run = subject.runs[motion]
            draw = 0 if run.noisy else None
            directions = tuple(zip(subject.parameters, direction, strict=True))
            run = replace(run, level=level, draw=draw, directions=directions)
            name = f"worst case at {str(level).removesuffix('.0')}"
            return Entry(subject.sheet, subject.law, motion, name, level, draw, run)

        return self._once((subject.sheet, subject.law, motion, level, direction), make)


def _trials(runs: int, levels: int, motions: int) -> int:
    """Return how many directions may be tried at each level, so that the halvings can be paid as well."""
    return runs // (levels * motions) - HALVINGS


def least_runs(levels: int, motions: int) -> int:
    """Return the smallest budget of a law with which there is a search at each level."""
    return (LEAST_TRIALS + HALVINGS) * levels * motions


@dataclass(frozen=True)
class WorstFound:
    """The worst run that was found of a law in a sheet at a level.

    ``searched``: the level is one of those declared, not one of the halvings. ``runs`` were looked at, of
    which ``dropped`` have no verdict; ``record`` and ``used`` are of the worst, None if none has one.
    """

    sheet: str
    law: str
    level: float
    searched: bool
    runs: int
    dropped: int
    record: Record | None
    used: LimitShare | None

    @property
    def misses(self) -> bool:
        """Whether a machine was found that misses the tolerance."""
        return self.used is not None and self.used.share > 1.0


def worst_found(study: Studied, tolerance: Tolerance) -> list[WorstFound]:
    """Return what a stored study of this kind has found so far: law by law as declared, levels rising."""
    order = {(sheet, law): number for number, (sheet, law) in enumerate(study.declared["laws"])}

    def place(record: Record) -> tuple[int, float]:
        return order[record.row.sheet, record.row.law], record.row.level or 0.0

    found = []
    for (_, level), records in groupby(sorted(study.records, key=place), key=place):
        judged = [
            (record, limit_share(record.row, tolerance.limits_for(record.row.motion))) for record in records
        ]
        counted = [(record, used) for record, used in judged if used is not None]
        worst = max(counted, key=lambda pair: pair[1].share, default=(None, None))
        row = judged[0][0].row
        searched = level in study.declared["levels"]
        dropped = len(judged) - len(counted)
        found.append(WorstFound(row.sheet, row.law, level, searched, len(judged), dropped, *worst))
    return found

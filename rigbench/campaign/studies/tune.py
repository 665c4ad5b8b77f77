"""tune: the gains that do best on the nominal machine within stated limits, with as many runs for each law.

It comes before the matrix, whose runs then have the gains that were found. See experiment.tuned.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import asdict, dataclass, field, replace
from functools import partial
from typing import TYPE_CHECKING, Any

import numpy as np

from rigbench.campaign.plan import Entry
from rigbench.campaign.studies.asking import Ask, MakesOnce, in_step, replayed
from rigbench.campaign.study import Known
from rigbench.scores.gain_search import LEAST_TRIALS, Merit, Point, find_gains
from rigbench.scores.row import Row

if TYPE_CHECKING:
    from rigbench.campaign.studied import Studied
    from rigbench.laws.registry import LawChoice
    from rigbench.rig.run import Run  # not at run time: it brings the engine and the compiler

__all__ = ["NAME", "Aim", "Gain", "GainsFound", "Subject", "Tune", "gains_found", "least_runs", "with_gains"]

NAME = "tune"

LATER = " later"


@dataclass(frozen=True)
class Gain:
    """An option of laws, and between which values it is looked for."""

    name: str
    low: float
    high: float


@dataclass(frozen=True)
class Aim:
    """What makes gains good: the least ``score`` (in the worst motion) within limits on the nominal machine.

    ``most`` limits other scores. With a ``delay_margin_ms`` above 0 each run is repeated with that much more
    delay, and must finish with ``delay_factor`` times its score at most, or keep the ``tolerance``, which is
    by motion: an error near 0 may well become a multiple of itself.
    """

    score: str
    most: Mapping[str, float] = field(default_factory=dict)
    delay_margin_ms: float = 0.0
    delay_factor: float = 2.0
    tolerance: Mapping[str, Mapping[str, float]] = field(default_factory=dict)

    @property
    def runs_a_motion(self) -> int:
        """How many runs a trial takes in each motion."""
        return 2 if self.delay_margin_ms > 0 else 1

    def merit(self, rows: Iterable[Row]) -> Merit:
        """Return the merit of gains whose runs, in all motions, came to ``rows``; see gain_search.

        A share of a limit of 1.2 misses it by 0.2; what is missed adds up. A run that did not finish misses
        by inf, a host's trouble likewise.
        """
        by_place = {(row.motion, _is_later(row)): row for row in rows}
        scores = {place: self._score(row) for place, row in by_place.items()}
        missed = 0.0
        for (motion, later), row in by_place.items():
            if row.outcome != "finished":
                missed = math.inf
            elif later:
                missed += self._missed_later(row, scores[motion, False])
            else:
                missed += sum(_beyond(row.scores.get(name, 0.0), most) for name, most in self.most.items())
        return missed, max(value for (_, later), value in scores.items() if not later)

    def _missed_later(self, row: Row, score: float) -> float:
        """Return by how much a finished run with more delay misses; ``score`` is what it came to without."""
        limits = self.tolerance.get(row.motion)
        if limits and all(row.scores.get(name, 0.0) <= most for name, most in limits.items()):
            return 0.0
        return _beyond(self._score(row), self.delay_factor * score)

    def _score(self, row: Row) -> float:
        return row.scores.get(self.score, 0.0) if row.outcome == "finished" else math.inf


def _beyond(value: float, most: float) -> float:
    if value <= most:
        return 0.0
    return value / most - 1.0 if most > 0.0 else math.inf


def _is_later(row: Row) -> bool:
    return row.condition.endswith(LATER)


@dataclass(frozen=True)
class Subject:
    """A law in a sheet: its nominal run by motion, its ``declared`` gains, what is ``given`` in the file."""

    sheet: str
    law: str
    runs: Mapping[str, Run]
    declared: Point
    given: Mapping[str, Any]


@dataclass(frozen=True)
class Tune(MakesOnce):
    """The study: for each law and sheet, a search for the best gains; ``runs`` is the budget of each."""

    subjects: tuple[Subject, ...]
    gains: tuple[Gain, ...]
    aim: Aim
    runs: int
    seed: int
    name: str = NAME

    @property
    def most_runs(self) -> int:
        """How many runs it takes at most."""
        return len(self.subjects) * self.runs

    def examples(self) -> Sequence[tuple[int, Iterable[Entry]]]:
        """See :class:`rigbench.campaign.study.Study`: trials of gains anywhere within their bounds."""
        return [(self.most_runs, self._anywhere())]

    def _anywhere(self) -> Iterator[Entry]:
        rng = np.random.default_rng(self.seed)
        low, high = [gain.low for gain in self.gains], [gain.high for gain in self.gains]
        while True:
            for subject in self.subjects:
                yield from self._trial(subject, tuple(rng.uniform(low, high).tolist()))

    def declared(self) -> Mapping[str, Any]:
        """See :class:`rigbench.campaign.study.Study`."""
        laws = [
            {"sheet": one.sheet, "law": one.law, "declared": list(one.declared), "given": dict(one.given)}
            for one in self.subjects
        ]
        gains = [asdict(gain) for gain in self.gains]
        return {"aim": asdict(self.aim), "gains": gains, "runs": self.runs, "laws": laws}

    def rounds(self, known: Known) -> Sequence[Sequence[Entry]]:
        """See :class:`rigbench.campaign.study.Study`: the laws go on side by side."""
        return in_step((partial(self._search, subject) for subject in self.subjects), known)

    def found(self, known: Known) -> dict[tuple[str, str], dict[str, float]] | None:
        """Return the gains by sheet and law, where any keep the limits; None while runs are to be done."""
        gains = {}
        for subject in self.subjects:
            _, best = replayed(partial(self._search, subject), known)
            if best is None:
                return None
            point, (missed, _) = best
            if missed == 0.0:
                names = (gain.name for gain in self.gains)
                gains[subject.sheet, subject.law] = dict(zip(names, point, strict=True))
        return gains

    def _search(self, subject: Subject, ask: Ask) -> tuple[Point, Merit]:
        each = len(subject.runs) * self.aim.runs_a_motion

        def merits(points: Sequence[Point]) -> list[Merit]:
            rows = ask([entry for point in points for entry in self._trial(subject, point)])
            return [self.aim.merit(rows[start : start + each]) for start in range(0, len(rows), each)]

        bounds = [(gain.low, gain.high) for gain in self.gains]
        return find_gains(merits, bounds, self.runs // each, self.seed, subject.declared)

    def _trial(self, subject: Subject, point: Point) -> list[Entry]:
        """Return the runs of gains in each motion, and those with more delay."""
        margins = [0.0, self.aim.delay_margin_ms][: self.aim.runs_a_motion]
        return [self._entry(subject, motion, point, more) for motion in subject.runs for more in margins]

    def _entry(self, subject: Subject, motion: str, point: Point, more_ms: float) -> Entry:

        def make() -> Entry:
            run = subject.runs[motion]
            gains = dict(zip((gain.name for gain in self.gains), point, strict=True))
            timing = replace(run.timing, delay_ms=run.timing.delay_ms + more_ms)
            run = replace(run, law=with_gains(run.law, gains), timing=timing)
            name = _condition(gains, more_ms)
            return Entry(subject.sheet, subject.law, motion, name, 0.0, run.draw, run)

        return self._once((subject.sheet, subject.law, motion, point, more_ms), make)


def with_gains(law: LawChoice, gains: Mapping[str, float]) -> LawChoice:
    """Return a law with these options in place of its own."""
    return replace(law, options=tuple(sorted((dict(law.options) | dict(gains)).items())))


def _condition(gains: Mapping[str, float], more_ms: float) -> str:
    """Return the condition of a run: 'natural_hz 12.5, damping 0.8', with more delay '..., 1 ms later'."""
    said = ", ".join(f"{name} {value!r}" for name, value in gains.items())
    return f"{said}, {more_ms:g} ms{LATER}" if more_ms else said


def least_runs(aim: Aim, motions: int) -> int:
    """Return the smallest budget of a law with which there is a search."""
    return LEAST_TRIALS * motions * aim.runs_a_motion


@dataclass(frozen=True)
class GainsFound:
    """What was found for a law in a sheet with so many ``runs``: the best gains and their score.

    ``at_ends``: those at an end of the range in which they were looked for. ``within``: they keep the limits;
    if not, the declared ones stay, and these are those nearest to the limits. ``score_declared`` is None,
    and ``within_declared`` false, where the declared ones were not run to the end. ``given`` is what the file
    has of the law.
    """

    sheet: str
    law: str
    gains: Mapping[str, float]
    at_ends: tuple[str, ...]
    score: float
    within: bool
    declared: Mapping[str, float]
    score_declared: float | None
    within_declared: bool
    runs: int
    given: Mapping[str, Any]


def gains_found(study: Studied) -> list[GainsFound]:
    """Return what a stored study of this kind has found so far, by law and sheet as declared."""
    aim = Aim(**study.declared["aim"])
    ranges = {gain["name"]: (gain["low"], gain["high"]) for gain in study.declared["gains"]}
    names = list(ranges)
    trials: dict[tuple[str, str], dict[Point, list[Row]]] = {}
    for record in study.records:
        row = record.row
        point = _point(row.condition, len(names))
        trials.setdefault((row.sheet, row.law), {}).setdefault(point, []).append(row)
    found = []
    for law in study.declared["laws"]:
        own = trials.get((law["sheet"], law["law"]), {})
        most = max(map(len, own.values()), default=0)
        merits = {point: aim.merit(rows) for point, rows in own.items() if len(rows) == most}
        if not merits:
            continue
        best = min(merits, key=merits.__getitem__)
        declared = tuple(law["declared"])
        missed, score = merits.get(declared, (math.inf, math.inf))
        found.append(
            GainsFound(
                law["sheet"],
                law["law"],
                dict(zip(names, best, strict=True)),
                tuple(name for name, value in zip(names, best, strict=True) if value in ranges[name]),
                merits[best][1],
                merits[best][0] == 0.0,
                dict(zip(names, declared, strict=True)),
                score if math.isfinite(score) else None,
                missed == 0.0,
                sum(map(len, own.values())),
                law["given"],
            )
        )
    return found


def _point(condition: str, gains: int) -> Point:
    """Return the gains that a condition names, see _condition."""
    return tuple(float(part.rpartition(" ")[2]) for part in condition.split(", ")[:gains])

"""What the study ``needs`` shows: which sources must be known, and how well."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from rigbench.arm.arm import Floats
from rigbench.scores.limit_search import LADDER, Known, next_probes
from rigbench.scores.needs_design import TOGETHER, A, B, Group, NeedsDesign, Subject, alone, swapped
from rigbench.scores.own_limits import FoundLevel, own_limits, tolerated_of_limits
from rigbench.scores.results import Tolerance
from rigbench.scores.row import MACHINE_OUTCOMES, Row
from rigbench.scores.variance_shares import variance_shares
from rigbench.scores.verdict import keeps

__all__ = ["Alone", "LawNeeds", "SourceNeed", "needs_of", "rung_of"]

Interval = tuple[float, float, float]
"""Value, low and high."""


@dataclass(frozen=True)
class Alone:
    """What level is tolerated: ``found`` over the draws that count; ``dropped`` of the others, the host's."""

    found: FoundLevel
    dropped: int
    finished: bool


@dataclass(frozen=True)
class SourceNeed:
    """A group: its first-order and total share of the score's variance, and the level it may have alone."""

    group: Group
    first: Interval
    total: Interval
    alone: Alone


@dataclass(frozen=True)
class LawNeeds:
    """A law in a sheet: its groups, what to identify first standing first.

    ``points`` of the ``planned`` rows of the design count towards the shares, ``dropped`` came to nothing on
    the host, the rest is yet to be run; ``scale`` says of what the shares are: of the 'score', or of its
    'rank' where any of the ``unfinished`` runs has an infinite one. ``together``: the level tolerated
    where all act.
    """

    sheet: str
    law: str
    sources: tuple[SourceNeed, ...]
    together: Alone
    points: int
    planned: int
    dropped: int
    unfinished: int
    missing: int  # runs of the design that are not stored
    scale: Literal["score", "rank"]

    @property
    def finished(self) -> bool:
        """Whether all runs that it takes are stored."""
        return not self.missing and all(a.finished for a in (self.together, *(s.alone for s in self.sources)))


def rung_of(level: float, middle: float) -> int:
    """Return the number of the rung of LADDER, with ``middle`` as its middle, that ``level`` is."""
    return int(np.argmin(np.abs(np.array(LADDER) * middle - level)))


def needs_of(
    design: NeedsDesign, rows: Iterable[Row], tolerance: Tolerance, seed: int = 0
) -> tuple[LawNeeds, ...]:
    """Return what the stored ``rows`` of the study show, law by law and sheet by sheet.

    Shares: :func:`variance_shares` of the score in the worst motion of each point; a point with a run
    that did not finish is infinite, one with the host's trouble is dropped together with its row. Tolerated
    levels: :func:`tolerated_of_limits` over the draws of each search; a draw that was not asked may
    have any limit. ``seed`` is that of the bootstrap.

    The order is that of the total shares in whole percent, the largest first; among equals the group comes
    first that tolerates least alone.
    """
    sorted_rows: dict[tuple[str, str], dict[str, list[Row]]] = {}
    for row in rows:
        sorted_rows.setdefault((row.sheet, row.law), {}).setdefault(row.condition, []).append(row)
    return tuple(
        _law_needs(design, subject, sorted_rows.get((subject.sheet, subject.law), {}), tolerance, seed)
        for subject in design.subjects
    )


def _law_needs(
    design: NeedsDesign,
    subject: Subject,
    by_condition: Mapping[str, list[Row]],
    tolerance: Tolerance,
    seed: int,
) -> LawNeeds:
    pages = [by_condition.get(name, []) for name in (A, B, *(swapped(g.name) for g in subject.groups))]
    table = np.array([_worst(page, design.score, design.points, len(subject.motions)) for page in pages])
    shares = variance_shares(table[0], table[1], table[2:], seed)
    searches = {
        name: _alone(design, by_condition.get(name, []), len(subject.motions), tolerance)
        for name in (TOGETHER, *(alone(group.name) for group in subject.groups))
    }
    sources = [
        SourceNeed(group, _interval(shares.first[k]), _interval(shares.total[k]), searches[alone(group.name)])
        for k, group in enumerate(subject.groups)
    ]
    stored = [row for page in pages for row in page]
    troubled = {row.draw for row in stored if row.outcome not in MACHINE_OUTCOMES}
    return LawNeeds(
        sheet=subject.sheet,
        law=subject.law,
        sources=tuple(sorted(sources, key=_order)),
        together=searches[TOGETHER],
        points=shares.points,
        planned=design.points,
        dropped=len(troubled),
        unfinished=sum(row.outcome in MACHINE_OUTCOMES and row.outcome != "finished" for row in stored),
        missing=design.points * subject.runs_per_point() - len(stored),
        scale=shares.scale,
    )


def _order(need: SourceNeed) -> tuple[float, float]:
    total = need.total[0]
    return np.inf if np.isnan(total) else -round(100 * total), need.alone.found.tolerated.low


def _interval(ends: Floats) -> Interval:
    value, low, high = ends.tolist()
    return value, low, high


def _worst(rows: Sequence[Row], score: str, points: int, motions: int) -> Floats:
    """Return the score of each point in its worst motion (points,); NaN where a run is missing."""
    worst, seen = np.full(points, -np.inf), np.zeros(points, dtype=int)
    for row in rows:
        if row.draw is None or row.outcome not in MACHINE_OUTCOMES:
            continue
        seen[row.draw] += 1
        value = row.scores.get(score, -np.inf) if row.outcome == "finished" else np.inf
        worst[row.draw] = max(worst[row.draw], value)
    return np.where((seen == motions) & (worst > -np.inf), worst, np.nan)


def _alone(design: NeedsDesign, rows: Sequence[Row], motions: int, tolerance: Tolerance) -> Alone:
    """Return what the rows of one search show."""
    at: dict[tuple[int, float], list[Row]] = {}
    for row in rows:
        if row.draw is not None and row.level is not None:
            at.setdefault((row.draw, row.level), []).append(row)
    levels = np.full((design.draws, len(LADDER)), np.nan)
    kept = np.zeros(levels.shape, dtype=np.bool_)
    known: dict[int, dict[int, bool | None]] = {}
    for (draw, level), own in at.items():
        if len(own) == motions:
            rung = rung_of(level, design.level)
            verdict = known.setdefault(draw, {})[rung] = keeps(own, tolerance)
            levels[draw, rung], kept[draw, rung] = level, bool(verdict)
    counting = _counting(known, design.draws)
    found = tolerated_of_limits(own_limits(levels[counting], kept[counting]), design.required_share)
    finished = not next_probes(known, design.draws, design.lowest)
    return Alone(found, int(np.sum(~counting)), finished)


def _counting(known: Known, draws: int) -> NDArray[np.bool_]:
    """Return which draws met no trouble of the host."""
    return np.array([None not in known.get(draw, {}).values() for draw in range(draws)], dtype=np.bool_)

"""The direction of a worst case: in what its machine departs, and how much each of that makes by itself."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass

from rigbench.campaign.reading import Reader
from rigbench.campaign.studied import Studied
from rigbench.campaign.studies.worst_case import WorstFound
from rigbench.scores.limit_share import limit_share
from rigbench.scores.results import Tolerance

__all__ = ["Departure", "departures"]

Point = tuple[float, ...]


@dataclass(frozen=True)
class Departure:
    """A parameter's u in the worst machine found, and the ``difference`` that it makes by itself.

    In shares of a limit, between two machines that were run and differ in its sign alone: of all such pairs
    the one with the worst machine. inf where one of the two did not finish, None where there is no pair.
    """

    parameter: str
    u: float
    difference: float | None


def departures(
    store: Reader, study: Studied, found: WorstFound, tolerance: Tolerance
) -> tuple[Departure, ...]:
    """Return the departures of the worst machine found, first those that make the most difference."""
    if found.record is None:
        return ()
    worst = dict(store.kept(found.record.key).run.directions or ())
    shares: dict[Point, float] = {}
    for record in study.records:
        row = record.row
        used = limit_share(row, tolerance.limits_for(row.motion))
        if (row.sheet, row.law, row.level) == (found.sheet, found.law, found.level) and used is not None:
            directions = dict(store.kept(record.key).run.directions or ())
            point = tuple(directions[name] for name in worst)
            shares[point] = max(used.share, shares.get(point, 0.0))
    every = [Departure(name, worst[name], _difference(shares, at)) for at, name in enumerate(worst)]
    return tuple(sorted(every, key=lambda one: (-(one.difference or 0.0), -abs(one.u))))


def _difference(shares: Mapping[Point, float], at: int) -> float | None:
    """Return the difference between two points that differ in the sign of one number alone."""
    pairs = [
        (share, shares[turned])
        for point, share in shares.items()
        if point[at] != 0.0 and (turned := (*point[:at], -point[at], *point[at + 1 :])) in shares
    ]
    if not pairs:
        return None
    worse, better = max(pairs)
    return 0.0 if worse == better else math.inf if math.isinf(worse) else worse - better

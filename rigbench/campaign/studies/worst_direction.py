"""The direction of a worst case: in what its machine departs, and what each of that alone does."""

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


@dataclass(frozen=True)
class Departure:
    """A parameter's u in the worst machine found.

    ``turned`` is the share of a limit that is used up where it alone has the opposite sign; None if not run.
    """

    parameter: str
    u: float
    turned: float | None


def departures(
    store: Reader, study: Studied, found: WorstFound, tolerance: Tolerance
) -> tuple[Departure, ...]:
    """Return the departures of the worst machine found, first those that make the most difference.

    That is told by the machines run that differ from it in the sign of one parameter; what was not run so
    comes last, the largest u first.
    """
    if found.record is None:
        return ()
    worst = dict(store.kept(found.record.key).run.directions or ())
    turned: dict[str, float] = {}
    for record in study.records:
        row = record.row
        used = limit_share(row, tolerance.limits_for(row.motion))
        if (row.sheet, row.law, row.level) != (found.sheet, found.law, found.level) or used is None:
            continue
        only = _only_turned(worst, dict(store.kept(record.key).run.directions or ()))
        if only is not None:
            turned[only] = max(used.share, turned.get(only, 0.0))
    order = sorted(worst, key=lambda name: (turned.get(name, math.inf), -abs(worst[name])))
    return tuple(Departure(name, worst[name], turned.get(name)) for name in order)


def _only_turned(worst: Mapping[str, float], other: Mapping[str, float]) -> str | None:
    """Return the one parameter that has the opposite sign; None if that is not all the difference."""
    differing = [name for name, u in worst.items() if other[name] != u]
    if len(differing) == 1 and other[differing[0]] == -worst[differing[0]]:
        return differing[0]
    return None

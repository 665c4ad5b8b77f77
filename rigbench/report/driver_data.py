"""Which source's draws go with a law's score, or with its failures: the strip of draws as numbers."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rigbench.arm.arm import Floats
from rigbench.campaign.acting import Acting
from rigbench.campaign.reading import Reader
from rigbench.scores.drivers import Driver, drivers
from rigbench.scores.results import CellKey, Results

__all__ = ["DriverStrip", "SourceStrip", "driver_strip"]


@dataclass(frozen=True, eq=False)
class SourceStrip:
    """One source: how it goes with the score and with failing, None if all draws or none fail.

    ``u`` (n,) are the values of its strongest parameter, or of their size where ``by_score.by_size``.
    """

    by_score: Driver
    by_failing: Driver | None
    u: Floats


@dataclass(frozen=True, eq=False)
class DriverStrip:
    """A law's n draws under a condition, the lowest score first, and its sources, the strongest first.

    ``worst`` (n,) is the score in the worst motion, inf if a run did not finish; ``passed`` (n,).
    """

    key: CellKey
    score: str
    draws: NDArray[np.int64]
    worst: Floats
    passed: NDArray[np.bool_]
    sources: tuple[SourceStrip, ...]


def driver_strip(store: Reader, results: Results, key: CellKey, score: str) -> DriverStrip:
    """Return the strip of draws of a cell that is possible.

    ``score`` must be among those that the results were made to compare. Draws that don't count, and
    those of which the store has not all values, are left out.
    """
    here, place = results.counted[key], results.compared.index(score)
    sources = _parameters(store, key)
    names = [name for own in sources.values() for name in own]
    stored = store.draw_values()
    values = np.array(
        [[stored.get(draw, {}).get(name, np.nan) for name in names] for draw in here.draws.tolist()]
    ).reshape(len(here.draws), len(names))
    worst = here.worst[:, place]
    known = np.flatnonzero(~np.isnan(worst) & ~np.any(np.isnan(values), axis=1))
    order = known[np.argsort(worst[known], kind="stable")]
    values, worst, passed = values[order], worst[order], here.passed[order]
    by_score = drivers(values, sources, worst)
    mixed = bool(np.any(passed)) and not np.all(passed)
    by_failing = drivers(values, sources, np.where(passed, 0.0, 1.0)) if mixed and results.tolerance else None
    strips = []
    for number, one in enumerate(by_score):
        u = values[:, names.index(one.parameter)] if one.parameter else np.zeros(len(order))
        strips.append(
            SourceStrip(one, by_failing[number] if by_failing else None, np.abs(u) if one.by_size else u)
        )
    strips.sort(key=lambda strip: (-(strip.by_score.strength or 0.0), strip.by_score.chance))
    return DriverStrip(key, score, here.draws[order], worst, passed, tuple(strips))


def _parameters(store: Reader, key: CellKey) -> Mapping[str, Sequence[str]]:
    """Return the drawn parameters of each source that acts in a cell."""
    acting, here = (
        Acting(store.text),
        [place for place in store.places().values() if (place.sheet, place.law, place.condition) == key],
    )
    found: dict[str, list[str]] = {}
    for name in sorted({name for own in store.draw_values().values() for name in own}):
        if any(acting.of(place, name) for place in here):
            found.setdefault(name.partition(".")[0], []).append(name)
    return found

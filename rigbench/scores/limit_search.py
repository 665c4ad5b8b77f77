"""Which levels to run each draw at to find how much a law tolerates, with few runs.

Each draw has a limit of its own on a ladder of levels, and the tolerated level is an order statistic of
these limits (see own_limits.py): the lowest of them decide, all others need only be shown not to be among
these. So the first draws have their limits found by bisection, and every later one is first run at the
level that decides so far: if it keeps there, that one run was enough.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from itertools import pairwise

import numpy as np

from rigbench.scores.intervals import draws_needed, quantile_interval

__all__ = ["LADDER", "Known", "decisive", "most_probes", "next_probes", "search_draws"]

LADDER = (0.2, 0.25, 0.315, 0.4, 0.5, 0.63, 0.8, 1.0, 1.25, 1.6, 2.0, 2.5, 3.15, 4.0, 5.0)
"""The levels, in multiples of the middle one: the preferred numbers R10 of ISO 3 (from memory). Four runs
find a limit among fifteen."""

Known = Mapping[int, Mapping[int, bool | None]]
"""By draw, and by the number of the rung: whether it keeps there, None where the host leaves that open."""


def search_draws(required_share: float) -> int:
    """Return how many draws a search takes: the fewest that can show a level as tolerated (73 for 0.95)."""
    draws = draws_needed(required_share)
    if draws is None:
        raise ValueError("no number of draws shows a share of 1")
    while _ranks(draws, required_share)[0] < 1:
        draws += 1
    return draws


def decisive(draws: int, required_share: float) -> int:
    """Return how many of the lowest limits decide the tolerated level and its interval: 9 of 73 for 0.95.

    The rank, from the lowest limit, of the order statistic that bounds the tolerated level from above; all
    ``draws`` where they are too few for there to be one.
    """
    return int(min(_ranks(draws, required_share)[1], draws))


def next_probes(known: Known, draws: int, lowest: int, rungs: int = len(LADDER)) -> list[tuple[int, int]]:
    """Return the (draw, rung) to run next, none when the ``lowest`` limits of all draws are found.

    Draws come in batches, each as large as all before; what it asks depends on ``known`` alone. A draw with
    a host's trouble at any rung is left alone. Once so many draws keep nowhere, the others aren't asked.
    It takes for granted that a draw that keeps at a level keeps at all lower ones.
    """
    for start, end in pairwise(_bounds(draws, lowest)):
        cut = _cut(known, start, lowest, rungs)
        if cut < 0:
            return []
        asked = ((draw, _next_rung(known.get(draw, {}), cut, rungs)) for draw in range(start, end))
        probes = [(draw, rung) for draw, rung in asked if rung is not None]
        if probes:
            return probes
    return []


def most_probes(draws: int, lowest: int, rungs: int = len(LADDER)) -> int:
    """Return how many runs (in one motion) a search takes at most; half of it is more usual."""
    bisection = rungs.bit_length()  # ceil(log2(rungs + 1)), of as many limits
    below_cut = (rungs - 1).bit_length()
    return lowest * bisection + (draws - lowest) * max(1 + below_cut, bisection)


def _ranks(draws: int, required_share: float) -> tuple[float, float]:
    """Return which of the limits, from the lowest, are the ends of the tolerated level's interval."""
    ranks = np.arange(1.0, draws + 1.0)
    _, high, low = quantile_interval(-ranks, required_share, least=-np.inf)
    return -low, -high


def _bounds(draws: int, lowest: int) -> Iterator[int]:
    """Yield where the batches begin and end."""
    yield 0
    end = lowest
    while end < draws:
        yield end
        end *= 2
    yield draws


def _cut(known: Known, draws: int, lowest: int, rungs: int) -> int:
    """Return the rung up to which the ``lowest``-th lowest limit keeps, of the first so many draws.

    -1 if at none; ``rungs`` as long as there are too few draws.
    """
    found = [known.get(draw, {}) for draw in range(draws)]
    kept = sorted(_bracket(own, rungs)[0] for own in found if None not in own.values())
    return kept[lowest - 1] if len(kept) >= lowest else rungs


def _next_rung(own: Mapping[int, bool | None], cut: int, rungs: int) -> int | None:
    """Return where to run a draw next; None once its limit is found, or is known not to lie below the cut."""
    if None in own.values():
        return None
    if cut < rungs and own.get(cut, True):
        return None if cut in own else cut
    low, high = _bracket(own, rungs)
    return (low + high) // 2 if high - low > 1 else None


def _bracket(own: Mapping[int, bool | None], rungs: int) -> tuple[int, int]:
    """Return the highest rung that keeps below the first that misses, and that one; or -1, ``rungs``."""
    high = min((rung for rung, kept in own.items() if not kept), default=rungs)
    return max((rung for rung, kept in own.items() if kept and rung < high), default=-1), high

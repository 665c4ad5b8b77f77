"""The search for the lowest limits on a ladder of levels: as good as knowing all of them, for far fewer runs."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import NDArray

from rigbench.scores.limit_search import LADDER, decisive, most_probes, next_probes, search_draws
from rigbench.scores.own_limits import own_limits, tolerated_of_limits
from rigbench.scores.results import Tolerated

RUNGS = len(LADDER)
SHARE = 0.95


def search(
    limits: NDArray[np.int64], lowest: int, troubled: frozenset[int] = frozenset()
) -> dict[int, dict[int, bool | None]]:
    """All that is run, where draw k keeps at the rungs below ``limits[k]``."""
    known: dict[int, dict[int, bool | None]] = {}
    for _ in range(1000):
        probes = next_probes(known, len(limits), lowest)
        if not probes:
            return known
        for draw, rung in probes:
            assert rung not in known.get(draw, {}), "asked twice"
            known.setdefault(draw, {})[rung] = None if draw in troubled else bool(rung < limits[draw])
    raise AssertionError("it does not end")


def level_of(known: dict[int, dict[int, bool | None]], draws: int) -> Tolerated:
    """The tolerated level by what was run."""
    levels, kept = np.full((draws, RUNGS), np.nan), np.zeros((draws, RUNGS), dtype=bool)
    for draw, own in known.items():
        for rung, verdict in own.items():
            levels[draw, rung], kept[draw, rung] = LADDER[rung], bool(verdict)
    counting = [None not in known.get(draw, {}).values() for draw in range(draws)]
    return tolerated_of_limits(own_limits(levels[counting], kept[counting]), SHARE).tolerated


def all_of(limits: NDArray[np.int64]) -> dict[int, dict[int, bool | None]]:
    """Every draw at every rung."""
    return {k: {rung: bool(rung < limit) for rung in range(RUNGS)} for k, limit in enumerate(limits)}


@pytest.mark.parametrize("seed", range(200))
def test_it_finds_what_running_everything_would(seed: int) -> None:
    """Level and both ends of the interval, wherever the limits lie, and within its price."""
    random = np.random.default_rng(seed)
    draws = int(random.choice([73, 100, 128]))
    centre, width = random.uniform(-4, 20), random.uniform(0, 6)
    limits = np.clip(np.rint(random.normal(centre, width, draws)), 0, RUNGS).astype(np.int64)
    lowest = decisive(draws, SHARE)
    known = search(limits, lowest)
    assert level_of(known, draws) == level_of(all_of(limits), draws)
    assert sum(map(len, known.values())) <= most_probes(draws, lowest)


def test_the_price_where_it_is_easy() -> None:
    """What keeps everywhere takes a bisection of the first draws and one run of each other; nowhere, the first alone."""
    lowest = decisive(73, SHARE)
    everywhere, nowhere = (search(np.full(73, limit), lowest) for limit in (RUNGS, 0))
    assert sum(map(len, everywhere.values())) == 4 * 9 + 64
    assert sum(map(len, nowhere.values())) == 4 * 9
    assert level_of(everywhere, 73) == Tolerated(None, LADDER[-1], np.inf)
    assert (level_of(nowhere, 73).low, level_of(nowhere, 73).high) == (0.0, LADDER[0])


def test_the_worst_case_is_reached() -> None:
    """Later draws that all lie just below the earlier ones cost a bisection and one run: the bound is no larger than it must be."""
    lowest = 4
    worst = max(
        sum(map(len, search(np.repeat(limits, lowest)[: 2 * lowest], lowest).values()))
        for limits in ([high, low] for high in range(RUNGS + 1) for low in range(high))
    )
    assert worst == most_probes(2 * lowest, lowest)


def test_a_host_s_trouble_costs_its_draw_alone() -> None:
    """It is not asked further, and does not count."""
    limits = np.full(100, RUNGS)
    limits[:20] = 3
    known = search(limits, decisive(100, SHARE), troubled=frozenset({0, 5, 40}))
    assert all(len(known[draw]) == 1 for draw in (0, 5, 40))
    assert level_of(known, 100).high == LADDER[3]


@pytest.mark.parametrize("share", [0.05, 0.5, 0.8, 0.9, 0.95, 0.99])
def test_as_many_draws_as_it_takes_and_no_more(share: float) -> None:
    """If all keep everywhere, the required share is shown; with one draw fewer nothing would be."""
    for draws, shown in ((search_draws(share), LADDER[-1]), (search_draws(share) - 1, 0.0)):
        levels = np.tile(LADDER, (draws, 1))
        found = tolerated_of_limits(own_limits(levels, np.ones(levels.shape, dtype=bool)), share)
        assert found.tolerated.low == shown


def test_a_share_of_one_can_t_be_shown() -> None:
    """By no number of draws."""
    with pytest.raises(ValueError, match="share of 1"):
        search_draws(1.0)

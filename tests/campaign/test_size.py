"""The size of a store to come, against that of the store that came."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from rigbench.campaign.doing import Draws
from rigbench.campaign.plan import Plan
from rigbench.campaign.size import SAMPLE, store_bytes
from rigbench.campaign.store import Store
from rigbench.campaign.work import Host, Outcome

SCORES = {f"score_{number}_mm": 1 / (3 + number) for number in range(40)}
HOST = Host("A CPU", (("numpy", "2"),))


@pytest.mark.parametrize("draws", [5, 2000])
def test_it_is_that_of_the_store_that_came(
    tmp_path: Path, make_plan: Callable[..., Plan], draws: int
) -> None:
    """Small or large, filled run by run or in one go: within 5 %, as SQLite fills its pages unevenly."""
    plan, values = make_plan(draws=draws), Draws()
    path = tmp_path / "s.sqlite"
    with Store.open_for_writing(path, plan) as store:
        store.record_plan(plan)
        every = 1 if draws == 5 else 500
        for begin in range(0, len(plan.entries), every):
            entries = plan.entries[begin : begin + every]
            store.add(
                [Outcome(e.key, "finished", scores=SCORES, wall_s=0.1, host=HOST) for e in entries],
                [value for e in entries for value in values.of(e)],
            )
    outcome = Outcome("", "finished", scores=SCORES, wall_s=0.1, host=HOST)
    told = store_bytes(plan, dict.fromkeys(plan.laws, outcome))
    assert (len(plan.entries) > SAMPLE) == (draws == 2000)
    assert told == pytest.approx(path.stat().st_size, rel=0.05)

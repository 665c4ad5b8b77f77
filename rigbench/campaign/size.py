"""How large a store will be, by filling a small one."""

from __future__ import annotations

import tempfile
from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path

from rigbench.campaign.doing import Draws
from rigbench.campaign.plan import Entry, Plan
from rigbench.campaign.store import Store
from rigbench.campaign.work import Outcome

__all__ = ["store_bytes"]

SAMPLE = 1000
"""Runs of the small store."""


def store_bytes(plan: Plan, outcomes: Mapping[str, Outcome]) -> float:
    """Return the size of a store [bytes] that holds the plan and all its runs.

    Each run gets the outcome of its law in ``outcomes``. Of a plan of more than SAMPLE runs the first half
    and all of the first SAMPLE are stored, and what the second half adds is taken as what every further
    run adds: arms, laws and the texts of runs are stored once. StoreError if the disk refuses.
    """
    runs = len(plan.entries)
    if runs <= SAMPLE:
        return float(_stored(plan, plan.entries, outcomes))
    half, whole = (_stored(plan, plan.entries[:number], outcomes) for number in (SAMPLE // 2, SAMPLE))
    return whole + (whole - half) / (SAMPLE - SAMPLE // 2) * (runs - SAMPLE)


def _stored(plan: Plan, entries: tuple[Entry, ...], outcomes: Mapping[str, Outcome]) -> int:
    """Return the size of a store of these entries alone."""
    part, draws = replace(plan, entries=entries), Draws()
    once = {entry.key: entry for entry in entries}
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "small.sqlite"
        with Store.open_for_writing(path, part) as store:
            store.record_plan(part)
            store.add(
                (replace(outcomes[entry.law], key=key) for key, entry in once.items()),
                (values for entry in once.values() for values in draws.of(entry)),
            )
        return path.stat().st_size

"""How many planned runs there are, and how many of them are done; not those that an early stop leaves out."""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import dataclass

from rigbench.campaign.labels import Labels
from rigbench.campaign.places import Place
from rigbench.scores.row import HOST_OUTCOMES, MACHINE_OUTCOMES

__all__ = ["IN_PLAY", "Counts", "counts_of", "ends_of"]

IN_PLAY = (
    "(SELECT id, draw FROM plan LEFT JOIN"
    " (SELECT CAST(key AS INTEGER) AS at, value AS after FROM json_each(?)) ON at = place"
    " WHERE draw IS NULL OR after IS NULL OR draw < after)"
)
"""The stored plan without the draws of columns that stopped before them; its parameter is :func:`ends_of`."""


@dataclass(frozen=True)
class Counts:
    """How far a campaign is, in planned runs.

    ``done`` have the machine's verdict, ``failed`` the host's trouble; the rest has not been run.
    """

    planned: int
    done: int
    failed: int


def counts_of(outcomes: Mapping[str, int]) -> Counts:
    """Return the counts of runs of which so many came to each outcome, '' for none."""
    return Counts(
        sum(outcomes.values()),
        sum(outcomes.get(outcome, 0) for outcome in MACHINE_OUTCOMES),
        sum(outcomes.get(outcome, 0) for outcome in HOST_OUTCOMES),
    )


def ends_of(labels: Labels, places: Mapping[int, Place]) -> str:
    """Return after how many draws each place was settled that stopped early, as JSON."""
    ends = {(sheet, condition): after for sheet, condition, after in labels.settled}
    found = {number: ends.get((place.sheet, place.condition)) for number, place in places.items()}
    return json.dumps({number: after for number, after in found.items() if after is not None})

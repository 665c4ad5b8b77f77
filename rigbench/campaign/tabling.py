"""Blocks of stored runs put together as one table, from which the results are summed up."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable, Mapping
from itertools import compress
from operator import not_

import numpy as np

from rigbench.campaign.blocks import Block
from rigbench.campaign.places import Place
from rigbench.scores.run_table import FINISHED, STATES, RunTable

__all__ = ["tabled"]


def tabled(
    blocks: Iterable[Block], places: Mapping[int, Place], planned: int, names: tuple[str, ...]
) -> tuple[RunTable, Mapping[str, int]]:
    """Return the runs of ``blocks`` as columns, and how many planned runs came to which outcome.

    The blocks have the scores ``names`` and the column 'anew'. '' stands for no outcome and for runs that are
    put down to be run anew. Both come from one reading of the file.
    """
    place, draw = np.empty((2, planned), dtype=np.int64)
    state, scores = np.empty(planned, dtype=np.int8), np.empty((planned, len(names)))
    found: Counter[str] = Counter()
    end = 0
    for block in blocks:
        here, end = slice(end, end + len(block)), end + len(block)
        place[here], draw[here] = block.place, block.draw
        state[here] = [STATES[outcome] for outcome in block.outcome]
        scores[here] = block.scores
        anew = block.more["anew"]
        found.update(compress(block.outcome, map(not_, anew)) if any(anew) else block.outcome)
    index = np.zeros(max(places, default=0) + 1, dtype=np.int64)
    index[list(places)] = np.arange(len(places))
    state, scores = state[:end], scores[:end]
    scores[state != FINISHED] = np.nan
    shown = tuple((each.sheet, each.law, each.motion, each.condition) for each in places.values())
    table = RunTable(names, shown, index[place[:end]], draw[:end], state, scores)
    return table, found | {"": planned - found.total()}

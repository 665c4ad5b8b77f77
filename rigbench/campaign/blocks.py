"""Reading the stored runs as columns, a block of rows at a time."""

from __future__ import annotations

import sqlite3
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rigbench.arm.arm import Floats
from rigbench.campaign.packing import VALUE, Layout
from rigbench.scores.names import in_display_order
from rigbench.scores.run_table import NO_DRAW

__all__ = ["SIZE", "Block", "block_of", "blocks", "layouts", "stored_scores"]

SIZE = 2048
"""Rows read at once: about a megabyte, which is faster than more."""


@dataclass(frozen=True, eq=False)
class Block:
    """B stored runs, in their order, with S scores; ``more`` holds further columns by name."""

    place: NDArray[np.int64]  # (B,), numbers of the store's places
    draw: NDArray[np.int64]  # (B,), NO_DRAW where nothing is random
    outcome: tuple[str, ...]
    scores: Floats  # (B, S); NaN where absent
    more: dict[str, tuple[Any, ...]]

    def __len__(self) -> int:
        return len(self.outcome)


def layouts(connection: sqlite3.Connection) -> dict[int, Layout]:
    """Return all layouts by their numbers."""
    query = connection.execute("SELECT id, names FROM layouts")
    return {number: Layout.of_text(text) for number, text in query}


def stored_scores(connection: sqlite3.Connection) -> tuple[str, ...]:
    """Return the scores that any stored run of the plan has, in display order."""
    known = layouts(connection)
    query = connection.execute(
        "SELECT layout FROM plan CROSS JOIN runs USING (id) GROUP BY layout ORDER BY min(position)"
    )
    return in_display_order(name for (number,) in query for name in known[number].names)


def blocks(
    connection: sqlite3.Connection, names: Sequence[str], more: Sequence[str] = (), size: int = SIZE
) -> Iterator[Block]:
    """Yield what is stored of the planned runs, in the order of the plan, ``size`` rows at a time.

    ``names`` are the scores that are read; ``more`` the further columns, of the tables keys and runs.
    """
    known = layouts(connection)
    joined = "plan CROSS JOIN runs USING (id)" + (" CROSS JOIN keys USING (id)" if "key" in more else "")
    wanted = "".join(f", {name}" for name in more)
    query = connection.execute(
        f"SELECT place, coalesce(draw, {NO_DRAW}), outcome, layout, scores{wanted} FROM {joined}"
        " ORDER BY position"
    )
    while rows := query.fetchmany(size):
        place, draw, outcome, layout, scores, *others = zip(*rows, strict=True)
        found = dict(zip(more, others, strict=True))
        yield block_of(known, names, place, draw, outcome, layout, scores, found)


def block_of(
    known: dict[int, Layout],
    names: Sequence[str],
    place: Sequence[int],
    draw: Sequence[int],
    outcome: tuple[str, ...],
    layout: Sequence[int],
    scores: Sequence[bytes],
    more: dict[str, tuple[Any, ...]],
) -> Block:
    """Return a block of columns as the store has them; of the scores those of ``names``."""
    return Block(
        np.array(place, dtype=np.int64),
        np.array(draw, dtype=np.int64),
        outcome,
        _unpacked(np.array(layout, dtype=np.int64), scores, known, names),
        more,
    )


def _unpacked(
    layout: NDArray[np.int64], scores: Sequence[bytes], known: dict[int, Layout], names: Sequence[str]
) -> Floats:
    """Return the scores of ``names``, (B, S)."""
    table = np.full((len(layout), len(names)), np.nan)
    for number in np.unique(layout).tolist():
        own = known[number].names
        rows = np.flatnonzero(layout == number)
        pairs = [(k, own.index(name)) for k, name in enumerate(names) if name in own]
        if pairs:
            values = np.frombuffer(b"".join([scores[row] for row in rows.tolist()]), VALUE).reshape(
                len(rows), -1
            )
            here, there = zip(*pairs, strict=True)
            table[np.ix_(rows, here)] = values[:, there]
    return table

"""Where runs stand in the results, whatever their draw: what the store keeps once for all draws."""

from __future__ import annotations

import sqlite3
from collections.abc import Iterator
from dataclasses import dataclass

from rigbench.campaign.plan import Entry

__all__ = ["Place", "Places", "places_of"]


@dataclass(frozen=True)
class Place:
    """A sheet, law, motion and condition; the mismatch ``sources`` that act in its runs, joined by commas.

    ``run`` is the digest of the runs' text, None in a plan that is older than these texts.
    """

    sheet: str
    law: str
    motion: str
    condition: str
    level: float | None
    sources: str
    run: str | None


class Places:
    """The places of a plan, numbered from 0 as they are met."""

    def __init__(self) -> None:
        self._numbers: dict[Place, int] = {}

    def number(self, entry: Entry, run: str) -> int:
        """Return the number of the entry's place."""
        place = Place(
            entry.sheet,
            entry.law,
            entry.motion,
            entry.condition,
            entry.level,
            ",".join(entry.run.sources),
            run,
        )
        return self._numbers.setdefault(place, len(self._numbers))

    def rows(self) -> Iterator[tuple[object, ...]]:
        """Yield the places as rows of the store."""
        for place, number in self._numbers.items():
            yield number, *vars(place).values()


def places_of(connection: sqlite3.Connection) -> dict[int, Place]:
    """Return the places of the stored plan by their numbers."""
    query = connection.execute("SELECT id, sheet, law, motion, condition, level, sources, run FROM places")
    return {number: Place(*values) for number, *values in query}

"""The runs of a store's studies as columns, as blocks.py has those of the plan."""

from __future__ import annotations

import json
import sqlite3
from collections.abc import Iterator, Mapping, Sequence
from pathlib import Path

from rigbench.campaign.blocks import Block, block_of, layouts
from rigbench.campaign.connection import speaking_plainly
from rigbench.campaign.places import Place
from rigbench.campaign.work import Host
from rigbench.scores.run_table import NO_DRAW

__all__ = ["StudyRuns"]

PLACE = "sheet, law, motion, condition, level, sources, NULL"
"""The fields of a place; each run has a text of its own, so it is left out."""


class StudyRuns:
    """All runs of all studies that are stored, those that the matrix has as well included."""

    def __init__(self, path: Path, connection: sqlite3.Connection) -> None:
        self._path, self._connection = path, connection

    def places(self, first: int) -> dict[int, Place]:
        """Return where they stand, by numbers from ``first`` on."""
        with speaking_plainly(self._path):
            query = self._connection.execute(f"SELECT DISTINCT {PLACE} FROM studied")
            return {number: Place(*values) for number, values in enumerate(query, first)}

    def scores(self) -> tuple[str, ...]:
        """Return the scores that any of them has."""
        with speaking_plainly(self._path):
            known = layouts(self._connection)
            query = self._connection.execute("SELECT DISTINCT layout FROM studied JOIN runs USING (id)")
            return tuple(dict.fromkeys(name for (number,) in query for name in known[number].names))

    def hosts(self) -> dict[int, Host]:
        """Return the hosts that did them, by the numbers that the runs have for them."""
        with speaking_plainly(self._path):
            query = self._connection.execute(
                "SELECT id, cpu, versions FROM hosts"
                " WHERE id IN (SELECT host FROM studied JOIN runs USING (id))"
            )
            return {number: Host(cpu, tuple(json.loads(text).items())) for number, cpu, text in query}

    def parameters(self) -> tuple[str, ...]:
        """Return the parameters of the directions in which they depart."""
        with speaking_plainly(self._path):
            query = self._connection.execute(
                "SELECT text FROM (SELECT run FROM studied GROUP BY study, sheet, law, sources)"
                " JOIN parts ON digest = run"
            )
            return tuple(dict.fromkeys(name for (text,) in query for name in _directions(text) or ()))

    def blocks(
        self, places: Mapping[int, Place], names: Sequence[str], more: Sequence[str], size: int
    ) -> Iterator[Block]:
        """Yield them study by study, in each one's order, ``size`` runs at a time; see :func:`blocks`.

        ``places`` are those of :meth:`places`. ``more`` may name 'directions' too: u by parameter, None
        where a run is of a draw or nothing is random. The further column 'study' is always there.
        """
        number_of = {place: number for number, place in places.items()}
        wanted = "".join(f", {'text' if name == 'directions' else name}" for name in more)
        with speaking_plainly(self._path):
            known = layouts(self._connection)
            query = self._connection.execute(
                f"SELECT study, {PLACE}, coalesce(draw, {NO_DRAW}), outcome, layout, scores{wanted}"
                " FROM studied CROSS JOIN runs USING (id) CROSS JOIN keys USING (id)"
                " CROSS JOIN parts ON digest = run"
                " ORDER BY (SELECT rowid FROM studies WHERE name = study), position"
            )
            while rows := query.fetchmany(size):
                study, *place, draw, outcome, layout, scores = (columns := list(zip(*rows, strict=True)))[:12]
                found = dict(zip(more, columns[12:], strict=True))
                if "directions" in found:
                    found["directions"] = tuple(map(_directions, found["directions"]))
                at = [number_of[Place(*each)] for each in zip(*place, strict=True)]
                yield block_of(known, names, at, draw, outcome, layout, scores, found | {"study": study})


def _directions(text: str) -> dict[str, float] | None:
    """Return the directions in the text of a run, see kept.py."""
    found = json.loads(text)["fields"].get("directions")
    return None if found is None else dict(found)

"""The step of the schema that packs what a million runs repeat; see migrations.py. It is never edited.

Before it, each run had its scores as JSON and each planned run all its names and its key. After it, what many
share is kept once (keys, places, layouts) and joined by whole numbers, which rise in the order of the plan.
"""

from __future__ import annotations

import json
import math
import sqlite3
import struct
from collections.abc import Callable

__all__ = ["PACKED"]


def _layout(scores: str, host_scores: str) -> str:
    return json.dumps([list(json.loads(scores)), list(json.loads(host_scores))])


def _values(scores: str, host_scores: str) -> bytes:
    found = [*json.loads(scores).values(), *json.loads(host_scores).values()]
    return struct.pack(f"<{len(found)}d", *(math.inf if value is None else value for value in found))


def _add_functions(connection: sqlite3.Connection) -> None:
    connection.create_function("layout_of", 2, _layout, deterministic=True)
    connection.create_function("values_of", 2, _values, deterministic=True)


def _remove_functions(connection: sqlite3.Connection) -> None:
    connection.create_function("layout_of", 2, None)
    connection.create_function("values_of", 2, None)


PACKED: tuple[str | Callable[[sqlite3.Connection], None], ...] = (
    _add_functions,
    "ALTER TABLE plan RENAME TO old_plan",
    "ALTER TABLE runs RENAME TO old_runs",
    "DROP INDEX plan_key",
    # Every key that is planned or stored, by the number that stands for it elsewhere.
    "CREATE TABLE keys (id INTEGER PRIMARY KEY, key TEXT NOT NULL UNIQUE)",
    "INSERT OR IGNORE INTO keys (key) SELECT key FROM old_plan ORDER BY position",
    "INSERT OR IGNORE INTO keys (key) SELECT key FROM old_runs ORDER BY rowid",
    # What planned runs share, whatever their draw. sources: the mismatch sources that act, joined by
    # commas; run: the digest of the run's text, NULL if the plan is older than the texts.
    """CREATE TABLE places (
        id INTEGER PRIMARY KEY,
        sheet TEXT NOT NULL,
        law TEXT NOT NULL,
        motion TEXT NOT NULL,
        condition TEXT NOT NULL,
        level REAL,
        sources TEXT NOT NULL,
        run TEXT
    )""",
    """INSERT INTO places (sheet, law, motion, condition, level, sources, run)
        SELECT sheet, law, motion, condition, level, sources, run FROM old_plan
        GROUP BY sheet, law, motion, condition, level, sources, run ORDER BY min(position)""",
    "CREATE INDEX temporary_places ON places (sheet, law, motion, condition)",
    # id: of the run's key.
    """CREATE TABLE plan (
        position INTEGER PRIMARY KEY,
        id INTEGER NOT NULL,
        place INTEGER NOT NULL,
        draw INTEGER
    )""",
    """INSERT INTO plan SELECT position, keys.id, places.id, draw
        FROM old_plan AS old CROSS JOIN keys USING (key) CROSS JOIN places
        ON places.sheet = old.sheet AND places.law = old.law AND places.motion = old.motion
        AND places.condition = old.condition AND places.level IS old.level
        AND places.sources = old.sources AND places.run IS old.run""",
    "DROP INDEX temporary_places",
    "CREATE INDEX plan_id ON plan (id)",
    # names: JSON, the scores' and the host's, in the order of the values of the runs that have them.
    "CREATE TABLE layouts (id INTEGER PRIMARY KEY, names TEXT NOT NULL UNIQUE)",
    "INSERT OR IGNORE INTO layouts (names) SELECT layout_of(scores, host_scores) FROM old_runs",
    # id: of the run's key; scores: float64, little-endian; anew: 1 for a run that is to be done anew, whose
    # row stays until it is replaced. Host, wall_s and the layout's second part tell of the host alone.
    """CREATE TABLE runs (
        id INTEGER PRIMARY KEY,
        outcome TEXT NOT NULL,
        anew INTEGER NOT NULL DEFAULT 0,
        layout INTEGER NOT NULL REFERENCES layouts (id),
        scores BLOB NOT NULL,
        residual_rad_s REAL,
        wall_s REAL,
        host INTEGER REFERENCES hosts (id),
        stored TEXT NOT NULL,
        reason TEXT NOT NULL,
        trace TEXT NOT NULL
    )""",
    """INSERT INTO runs SELECT keys.id, outcome, anew, layouts.id, values_of(scores, host_scores),
        residual_rad_s, wall_s, host, stored, reason, trace
        FROM old_runs CROSS JOIN keys USING (key)
        CROSS JOIN layouts ON names = layout_of(scores, host_scores)""",
    "DROP TABLE old_plan",
    "DROP TABLE old_runs",
    _remove_functions,
)

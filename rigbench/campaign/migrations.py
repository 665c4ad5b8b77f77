"""The store's schema, as the ordered steps that lead to it."""

from __future__ import annotations

import sqlite3
from collections.abc import Callable, Sequence

from rigbench.campaign.migration_packing import PACKED
from rigbench.campaign.studied import STUDIED

__all__ = ["APPLICATION_ID", "MIGRATIONS", "migrate", "schema_of"]

APPLICATION_ID = 0x52424E43
"""Stands in the header of every store ('RBNC'), so that it can be told from any other SQLite file."""

_FIRST = (
    f"PRAGMA application_id = {APPLICATION_ID}",
    # The one row about the campaign as the last `run` command had it. labels: JSON, see labels.py.
    """CREATE TABLE campaign (
        one INTEGER PRIMARY KEY CHECK (one = 1),
        title TEXT NOT NULL,
        experiment_path TEXT NOT NULL,
        experiment_text TEXT NOT NULL,
        seed TEXT,
        labels TEXT NOT NULL,
        created TEXT NOT NULL,
        updated TEXT NOT NULL
    )""",
    # Texts of arm, URDF and law files as they were read; planned: 1 if the present plan is made of it.
    """CREATE TABLE files (
        path TEXT NOT NULL,
        digest TEXT NOT NULL,
        text TEXT NOT NULL,
        planned INTEGER NOT NULL,
        PRIMARY KEY (path, digest)
    )""",
    # The factor u in [-1, 1) of each parameter that was random in a draw.
    """CREATE TABLE draw_values (
        seed TEXT NOT NULL,
        draw INTEGER NOT NULL,
        parameter TEXT NOT NULL,
        u REAL NOT NULL,
        PRIMARY KEY (seed, draw, parameter)
    ) WITHOUT ROWID""",
    """CREATE TABLE hosts (
        id INTEGER PRIMARY KEY,
        cpu TEXT NOT NULL,
        versions TEXT NOT NULL,
        UNIQUE (cpu, versions)
    )""",
    # scores: JSON, null for infinite; host_scores, wall_s and host tell of the host alone.
    """CREATE TABLE runs (
        key TEXT PRIMARY KEY,
        outcome TEXT NOT NULL,
        reason TEXT NOT NULL,
        trace TEXT NOT NULL,
        scores TEXT NOT NULL,
        host_scores TEXT NOT NULL,
        residual_rad_s REAL,
        wall_s REAL,
        host INTEGER REFERENCES hosts (id),
        stored TEXT NOT NULL
    )""",
    # sources: the mismatch sources that act, joined by commas.
    """CREATE TABLE plan (
        position INTEGER PRIMARY KEY,
        sheet TEXT NOT NULL,
        law TEXT NOT NULL,
        motion TEXT NOT NULL,
        condition TEXT NOT NULL,
        level REAL,
        draw INTEGER,
        sources TEXT NOT NULL,
        key TEXT NOT NULL
    )""",
    "CREATE INDEX plan_key ON plan (key)",
)

_KEPT_RUNS = (
    # Texts of the planned runs and of their parts, see kept.py.
    "CREATE TABLE parts (digest TEXT PRIMARY KEY, text TEXT NOT NULL)",
    # run: the digest of the run's text; NULL if the plan is older than this step.
    "ALTER TABLE plan ADD COLUMN run TEXT",
)

_OWNER_AND_ANEW = (
    # Where the experiment file was at the last `run`, absolute; NULL if that is older than this step.
    "ALTER TABLE campaign ADD COLUMN origin TEXT",
    # 1 for a run that is to be done anew; its row stays until it is replaced.
    "ALTER TABLE runs ADD COLUMN anew INTEGER NOT NULL DEFAULT 0",
)

Step = Sequence[str | Callable[[sqlite3.Connection], None]]
"""Statements, and what prepares the connection for them."""

MIGRATIONS: tuple[Step, ...] = (_FIRST, _KEPT_RUNS, _OWNER_AND_ANEW, PACKED, STUDIED)
"""Step i leads from schema i to schema i + 1. A step that has been released is never edited."""


def schema_of(connection: sqlite3.Connection) -> int:
    """Return the number of the schema that the file has; 0 for a new file."""
    number: int = connection.execute("PRAGMA user_version").fetchone()[0]
    return number


def migrate(connection: sqlite3.Connection, steps: Sequence[Step] = MIGRATIONS) -> None:
    """Bring the file to the newest schema, each step and its record in one transaction.

    ``connection`` is in autocommit mode. If a step fails, the file stays at the schema before it. A new file
    takes all steps in one transaction: whenever its making is cut short, nobody finds it half made.
    """
    begin = schema_of(connection)
    for end in range(begin + 1, len(steps) + 1) if begin else (len(steps),):
        connection.execute("BEGIN IMMEDIATE")
        try:
            for step in steps[schema_of(connection) : end]:
                for statement in step:
                    if callable(statement):
                        statement(connection)
                    else:
                        connection.execute(statement)
            connection.execute(f"PRAGMA user_version = {end}")
            connection.execute("COMMIT")
        except BaseException:
            if connection.in_transaction:
                connection.execute("ROLLBACK")
            raise

"""The studies in a store: what they declared, and the runs that they took. See study.py."""

from __future__ import annotations

import json
import sqlite3
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from itertools import islice
from typing import TYPE_CHECKING, Any

from rigbench.campaign.kept import Keeper
from rigbench.campaign.plan import Entry
from rigbench.errors import InputFaults

if TYPE_CHECKING:
    from rigbench.campaign.reading import Reader, Record

__all__ = ["STUDIED", "Studied", "asked_study", "forget", "record_study", "stored_studies"]

STUDIED = (
    # declared: JSON; finished: 1 once every run of the study is stored.
    "CREATE TABLE studies (name TEXT PRIMARY KEY, declared TEXT NOT NULL, finished INTEGER NOT NULL)",
    # id: of the run's key; the others as in plan and places.
    """CREATE TABLE studied (
        study TEXT NOT NULL REFERENCES studies (name),
        position INTEGER NOT NULL,
        id INTEGER NOT NULL,
        sheet TEXT NOT NULL,
        law TEXT NOT NULL,
        motion TEXT NOT NULL,
        condition TEXT NOT NULL,
        level REAL,
        draw INTEGER,
        sources TEXT NOT NULL,
        run TEXT NOT NULL,
        PRIMARY KEY (study, position)
    )""",
    "CREATE INDEX studied_id ON studied (id)",
)
"""The step of the schema that brings studies; see migrations.py. It is never edited."""


@dataclass(frozen=True)
class Studied:
    """A study as it is stored: what it declared, its runs in its own order, and whether it is finished."""

    name: str
    declared: Mapping[str, Any]
    records: tuple[Record, ...]
    finished: bool


QUESTIONS = {
    "needs": "ask what must be known",
    "worst_case": "search for worst cases",
    "tune": "look for gains",
}
"""What an experiment does that declares a study, by the study's name."""


def asked_study(store: Reader, name: str, form: str = "") -> Studied:
    """Return a study of a store; InputFaults, with what to do, where it is not declared or has not begun.

    ``form``: how it is declared, if that takes more than its key.
    """
    studied = store.study(name)
    if studied is not None:
        return studied
    labels = store.labels
    if name in labels.studies:
        problem, expected = f"its study '{name}' has not begun", f"'{labels.resume}' done to its end"
        raise InputFaults.one(store.path, "", problem, expected)
    expected = f"'{name}:{form}' in the experiment file, then 'rigbench run' again"
    raise InputFaults.one(store.path, "", f"its experiment does not {QUESTIONS[name]}", expected)


def forget(connection: sqlite3.Connection) -> None:
    """Take out what the studies planned; their runs stay."""
    connection.execute("DELETE FROM studied")
    connection.execute("DELETE FROM studies")


def record_study(
    connection: sqlite3.Connection,
    name: str,
    declared: Mapping[str, Any],
    entries: Iterable[Entry],
    finished: bool,
) -> None:
    """Put down the runs that a study has asked for so far; those that were put down before stay."""
    connection.execute(
        "INSERT INTO studies VALUES (?, ?, ?) ON CONFLICT (name) DO UPDATE SET"
        " declared = excluded.declared, finished = excluded.finished",
        (name, json.dumps(declared), finished),
    )
    query = connection.execute("SELECT count(*) FROM studied WHERE study = ?", (name,))
    before: int = query.fetchone()[0]
    keeper = Keeper()
    for position, entry in enumerate(islice(entries, before, None), before):
        connection.execute("INSERT OR IGNORE INTO keys (key) VALUES (?)", (entry.key,))
        connection.execute(
            "INSERT INTO studied SELECT ?, ?, id, ?, ?, ?, ?, ?, ?, ?, ? FROM keys WHERE key = ?",
            (
                name,
                position,
                entry.sheet,
                entry.law,
                entry.motion,
                entry.condition,
                entry.level,
                entry.draw,
                ",".join(entry.run.sources),
                keeper.keep(entry.run),
                entry.key,
            ),
        )
    connection.executemany("INSERT OR IGNORE INTO parts VALUES (?, ?)", keeper.texts.items())


def stored_studies(connection: sqlite3.Connection) -> dict[str, tuple[Mapping[str, Any], bool]]:
    """Return what each stored study declared, and whether it is finished, by its name."""
    query = connection.execute("SELECT name, declared, finished FROM studies ORDER BY rowid")
    return {name: (json.loads(declared), bool(finished)) for name, declared, finished in query}

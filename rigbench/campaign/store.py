"""The store: one SQLite file that holds a campaign's plan and every run that is done.

A reader never writes, and may read while a writer writes. Each group of outcomes is one transaction, so
after a kill or a power cut the file holds whole rows only. While it is written the file is in
write-ahead-log mode; at rest it is one plain file that can be copied and read from a read-only disk.
"""

from __future__ import annotations

import contextlib
import dataclasses
import hashlib
import json
import sqlite3
from collections.abc import Iterable, Iterator, Mapping
from datetime import UTC, date, datetime
from itertools import chain, count
from pathlib import Path

from rigbench.campaign.connection import connect, owner, speaking_plainly
from rigbench.campaign.counts import IN_PLAY
from rigbench.campaign.kept import Keeper
from rigbench.campaign.labels import Labels
from rigbench.campaign.lock import WriterLock
from rigbench.campaign.migrations import migrate
from rigbench.campaign.owner import Owner
from rigbench.campaign.packing import packed
from rigbench.campaign.places import Places
from rigbench.campaign.plan import Entry, Plan
from rigbench.campaign.reading import Reader
from rigbench.campaign.studied import forget, record_study
from rigbench.campaign.study import Study
from rigbench.campaign.work import Host, Outcome
from rigbench.errors import StoreForeign
from rigbench.scores.row import SETTLED_TROUBLES

__all__ = ["Store"]

TRACE_LENGTH = 20_000
"""Characters kept of a traceback, from its end."""


class Store(Reader):
    """A store that is open for writing, and for reading as well. Use it in a ``with``.

    :meth:`open_for_reading` gives a :class:`Reader` alone.
    """

    def __init__(self, path: Path, connection: sqlite3.Connection, lock: WriterLock) -> None:
        super().__init__(path, connection)
        self._lock: WriterLock | None = lock

    @classmethod
    def open_for_writing(cls, path: str | Path, plan: Plan) -> Store:
        """Open the store of the plan's experiment, made new (and its folder) if there is none.

        StoreForeign if the file is no store or belongs to another experiment (see :class:`Owner`), and
        then it is left as it was; StoreBusy if another process writes to it; StoreError if it is damaged,
        was made by a newer rigbench, or the disk refuses.
        """
        path = Path(path).resolve()
        with contextlib.ExitStack() as undo, speaking_plainly(path):
            path.parent.mkdir(parents=True, exist_ok=True)
            lock = WriterLock(path)
            undo.callback(lock.release)
            connection = connect(path, writing=True)
            undo.callback(connection.close)
            _check_owner(path, connection, Owner.of(plan))
            migrate(connection)
            connection.execute("PRAGMA journal_mode = WAL")
            undo.pop_all()
        return cls(path, connection, lock)

    def close(self) -> None:
        """Close the file and leave it as one plain file, unless somebody is reading it just now."""
        if self._lock is None:
            return
        with contextlib.suppress(sqlite3.Error):
            self._connection.execute("PRAGMA journal_mode = DELETE")
        super().close()
        self._lock.release()
        self._lock = None

    def record_plan(self, plan: Plan) -> None:
        """Replace the stored plan, names and texts by those of ``plan``; runs that are done stay."""
        with self._transaction() as connection:
            connection.execute(
                "INSERT INTO campaign (one, title, experiment_path, experiment_text, seed, labels, created,"
                " updated, origin) VALUES (1, ?, ?, ?, ?, ?, ?, ?, ?) ON CONFLICT (one) DO UPDATE SET"
                " title = excluded.title, experiment_path = excluded.experiment_path,"
                " experiment_text = excluded.experiment_text, seed = excluded.seed,"
                " labels = excluded.labels, updated = excluded.updated, origin = excluded.origin",
                _campaign_values(plan),
            )
            connection.execute("UPDATE files SET planned = 0")
            connection.executemany(
                "INSERT INTO files VALUES (?, ?, ?, 1) ON CONFLICT (path, digest) DO UPDATE SET planned = 1",
                _file_values(plan),
            )
            forget(connection)
            for table in ("plan", "places", "parts"):
                connection.execute(f"DELETE FROM {table}")
            connection.execute("DELETE FROM keys WHERE id NOT IN (SELECT id FROM runs)")
            connection.executemany(
                "INSERT OR IGNORE INTO keys (key) VALUES (?)", ((entry.key,) for entry in plan.entries)
            )
            keeper, places = Keeper(), Places()
            connection.executemany(
                "INSERT INTO plan SELECT ?, id, ?, ? FROM keys WHERE key = ?",
                (
                    (position, places.number(entry, keeper.keep(entry.run)), entry.draw, entry.key)
                    for position, entry in enumerate(plan.entries)
                ),
            )
            connection.executemany("INSERT INTO places VALUES (?, ?, ?, ?, ?, ?, ?, ?)", places.rows())
            connection.executemany("INSERT INTO parts VALUES (?, ?)", keeper.texts.items())

    def record_settled(self, settled: Mapping[tuple[str, str], int]) -> None:
        """Put down after how many draws each column, a sheet and condition, was settled and stopped."""
        labels = self.labels
        new = tuple((*column, after) for column, after in settled.items())
        if new != labels.settled:
            with self._transaction() as connection:
                text = dataclasses.replace(labels, settled=new).to_json()
                connection.execute("UPDATE campaign SET labels = ?", (text,))

    def record_study(self, study: Study, entries: Iterable[Entry], finished: bool) -> None:
        """Put down all runs that a study has asked for so far, and whether all of them are stored."""
        with self._transaction() as connection:
            record_study(connection, study.name, study.declared(), entries, finished)

    def add(
        self, outcomes: Iterable[Outcome], draws: Iterable[tuple[int, int, Mapping[str, float]]] = ()
    ) -> None:
        """Store outcomes, and the values of draws as (seed, draw, {parameter: u}), in one transaction.

        An outcome replaces the one that its run had before; the values of a draw never change.
        """
        with self._transaction() as connection:
            connection.executemany(
                "INSERT OR IGNORE INTO draw_values VALUES (?, ?, ?, ?)",
                ((str(seed), draw, name, u) for seed, draw, values in draws for name, u in values.items()),
            )
            for outcome in outcomes:
                layout, values = packed(outcome.scores, outcome.host_scores)
                connection.execute(
                    "INSERT OR REPLACE INTO runs VALUES (?, ?, 0, ?, ?, ?, ?, ?, ?, ?, ?)",
                    (
                        self._id("keys", key=outcome.key),
                        outcome.outcome,
                        self._id("layouts", names=layout.text),
                        values,
                        outcome.residual,
                        outcome.wall_s,
                        self._host_id(outcome.host),
                        _now(),
                        _plain(outcome.reason),
                        _plain(outcome.trace),
                    ),
                )

    def _host_id(self, host: Host | None) -> int | None:
        if host is None:
            return None
        return self._id("hosts", cpu=host.cpu, versions=json.dumps(dict(host.versions)))

    def _id(self, table: str, **values: str) -> int:
        """Return the number of a row of these values, which is added if there is none."""
        query = f"SELECT id FROM {table} WHERE {' AND '.join(f'{name} = ?' for name in values)}"
        found = self._connection.execute(query, tuple(values.values())).fetchone()
        if found is None:
            marks = ", ".join("?" * len(values))
            add = f"INSERT INTO {table} ({', '.join(values)}) VALUES ({marks})"
            found = (self._connection.execute(add, tuple(values.values())).lastrowid,)
        number: int = found[0]
        return number

    def run_anew(self, law: str) -> int:
        """Put down a law's stored planned runs to be run anew; return how many.

        They count as still to do, in this campaign and the next ones, but each keeps its row until an
        outcome replaces it.
        """
        with self._transaction() as connection:
            return connection.execute(
                "UPDATE runs SET anew = 1 WHERE id IN"
                " (SELECT plan.id FROM plan JOIN places ON places.id = place WHERE law = ?)",
                (law,),
            ).rowcount

    def studies_anew(self, law: str) -> int:
        """Put down a law's stored runs of studies to be run anew, as :meth:`run_anew`; return how many.

        To be called before the plan is recorded, which forgets what the studies asked for.
        """
        with self._transaction() as connection:
            return connection.execute(
                "UPDATE runs SET anew = 1 WHERE id IN (SELECT id FROM studied WHERE law = ?)", (law,)
            ).rowcount

    def settled_troubles(self, draws: int | None = None) -> int:
        """Count the planned runs, of the first ``draws``, that came to nothing and would do so again."""
        marks = ", ".join("?" * len(SETTLED_TROUBLES))
        with speaking_plainly(self.path):
            query = self._connection.execute(
                f"SELECT count(*) FROM {IN_PLAY} JOIN runs USING (id) WHERE NOT anew AND outcome IN ({marks})"
                " AND (draw IS NULL OR draw < coalesce(?, draw + 1))",
                (self._ends(), *SETTLED_TROUBLES, draws),
            )
            number: int = query.fetchone()[0]
        return number

    def held(self) -> int:
        """Count all runs that the file holds, planned or not."""
        with speaking_plainly(self.path):
            number: int = self._connection.execute("SELECT count(*) FROM runs").fetchone()[0]
        return number

    def set_aside(self) -> Path:
        """Close the store, rename its file after today's date, and return where it is now.

        Nothing is deleted and no file is replaced: '-2', '-3' ... follow the date where that is taken.
        StoreError, and the store stays what and where it was, while another program is reading it.
        """
        with speaking_plainly(self.path):
            self._connection.execute("PRAGMA journal_mode = DELETE")  # else the log would stay behind
            super().close()
            target = _free_name(self.path, date.today().isoformat())
            self.path.rename(target)
        if self._lock is not None:
            self._lock.release()
            self._lock = None
        return target


def _free_name(path: Path, mark: str) -> Path:
    """Return the path with a mark in its name, and a number from 2 if there is such a file."""
    names = (f"{path.stem}-{mark}{number}{path.suffix}" for number in chain([""], count(-2, -1)))
    return next(free for name in names if not (free := path.with_name(name)).exists())


def _check_owner(path: Path, connection: sqlite3.Connection, asking: Owner) -> None:
    found = owner(connection)
    if found is not None and not found.is_same(asking):
        raise StoreForeign(
            str(path), f"belongs to {found}, not to {asking}; name another file for this one with --store"
        )


def _campaign_values(plan: Plan) -> tuple[object, ...]:
    seed, now = None if plan.seed is None else str(plan.seed), _now()
    labels = Labels.of(plan).to_json()
    origin = Owner.of(plan).origin
    return plan.title, plan.experiment_path, plan.experiment_text, seed, labels, now, now, origin


def _file_values(plan: Plan) -> Iterator[tuple[str, str, str]]:
    """Yield (path, digest, text) of every file that the plan's runs carry, each once."""
    carried: set[tuple[str, str]] = set()
    for entry in plan.entries:
        for arm in (entry.run.arm, entry.run.model):
            if arm is not None:
                carried |= {(str(arm.path), arm.text), (str(arm.urdf_path), arm.urdf_text)}
        carried |= set(entry.run.law.files)
    for path, text in sorted(carried):
        yield path, hashlib.blake2b(text.encode(), digest_size=20).hexdigest(), text


def _now() -> str:
    return datetime.now(UTC).isoformat(timespec="seconds")


def _plain(text: str) -> str:
    """Return text of a user's exception in a form that any file can hold, and no longer than of use."""
    return text[-TRACE_LENGTH:].encode("utf-8", "backslashreplace").decode()

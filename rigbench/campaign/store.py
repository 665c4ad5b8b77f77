"""The store: one SQLite file that holds a campaign's plan and every run that is done.

A reader never writes, and may read while a writer writes. Each group of outcomes is one transaction, so
after a kill or a power cut the file holds whole rows only. While it is written the file is in
write-ahead-log mode; at rest it is one plain file that can be copied and read from a read-only disk.
"""

from __future__ import annotations

import contextlib
import hashlib
import json
import math
import sqlite3
from collections.abc import Iterable, Iterator, Mapping
from datetime import UTC, datetime
from pathlib import Path

from rigbench.campaign.connection import connect, owner, speaking_plainly
from rigbench.campaign.kept import Keeper
from rigbench.campaign.labels import Labels
from rigbench.campaign.lock import WriterLock
from rigbench.campaign.migrations import migrate
from rigbench.campaign.owner import Owner
from rigbench.campaign.plan import Plan
from rigbench.campaign.reading import Reader
from rigbench.campaign.work import Host, Outcome
from rigbench.errors import StoreForeign

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
            connection.execute("DELETE FROM plan")
            connection.execute("DELETE FROM parts")
            keeper = Keeper()
            rows = _plan_values(plan, keeper)
            connection.executemany("INSERT INTO plan VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?)", rows)
            connection.executemany("INSERT INTO parts VALUES (?, ?)", keeper.texts.items())

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
                connection.execute(
                    "INSERT OR REPLACE INTO runs VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, 0)",
                    _run_values(outcome, self._host_id(outcome.host)),
                )

    def _host_id(self, host: Host | None) -> int | None:
        if host is None:
            return None
        known = (host.cpu, json.dumps(dict(host.versions)))
        self._connection.execute("INSERT OR IGNORE INTO hosts (cpu, versions) VALUES (?, ?)", known)
        query = self._connection.execute("SELECT id FROM hosts WHERE cpu = ? AND versions = ?", known)
        number: int = query.fetchone()[0]
        return number

    def run_anew(self, law: str) -> int:
        """Put down a law's stored planned runs to be run anew; return how many.

        They count as still to do, in this campaign and the next ones, but each keeps its row until an
        outcome replaces it.
        """
        with self._transaction() as connection:
            return connection.execute(
                "UPDATE runs SET anew = 1 WHERE key IN (SELECT key FROM plan WHERE law = ?)", (law,)
            ).rowcount


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


def _plan_values(plan: Plan, keeper: Keeper) -> Iterator[tuple[object, ...]]:
    for position, entry in enumerate(plan.entries):
        names = (entry.sheet, entry.law, entry.motion, entry.condition, entry.level, entry.draw)
        yield position, *names, ",".join(entry.run.sources), entry.key, keeper.keep(entry.run)


def _run_values(outcome: Outcome, host: int | None) -> tuple[object, ...]:
    return (
        outcome.key,
        outcome.outcome,
        _plain(outcome.reason),
        _plain(outcome.trace),
        _json(outcome.scores),
        _json(outcome.host_scores),
        outcome.residual,
        outcome.wall_s,
        host,
        _now(),
    )


def _now() -> str:
    return datetime.now(UTC).isoformat(timespec="seconds")


def _plain(text: str) -> str:
    """Return text of a user's exception in a form that any file can hold, and no longer than of use."""
    return text[-TRACE_LENGTH:].encode("utf-8", "backslashreplace").decode()


def _json(scores: Mapping[str, float]) -> str:
    """Write a run's scores; JSON has no infinity, so null stands for it."""
    return json.dumps({n: None if v == math.inf else v for n, v in scores.items()}, allow_nan=False)

"""Opening a store's file, and saying in plain words why it can't be."""

from __future__ import annotations

import contextlib
import sqlite3
from collections.abc import Iterator
from pathlib import Path

from rigbench.campaign.labels import Labels
from rigbench.campaign.migrations import APPLICATION_ID, MIGRATIONS, schema_of
from rigbench.campaign.owner import Owner
from rigbench.errors import StoreError, StoreForeign

__all__ = ["connect", "owner", "speaking_plainly"]

PATIENCE_S = 10.0
"""How long to wait while another process holds the file for a moment."""

CHECKED_BYTES = 2**28
"""Up to this size every page of a store is checked before it is written to: a fraction of a second."""

SQLITE_HEADER = b"SQLite format 3\0"


@contextlib.contextmanager
def speaking_plainly(path: Path) -> Iterator[None]:
    """Turn an error of the disk or of SQLite into a StoreError that says what to do."""
    try:
        yield
    except sqlite3.Error as error:
        raise StoreError(str(path), _advice(error)) from error
    except OSError as error:
        where = f" ({error.filename})" if error.filename else ""
        raise StoreError(str(path), f"can't be used: {error.strerror or error}{where}") from error


def _advice(error: sqlite3.Error) -> str:
    said = str(error)
    for sign, advice in (
        ("full", "the disk is full; what was stored before is safe. Make room and run again"),
        ("disk I/O", "the disk refuses; what was stored before is safe. Make room and run again"),
        ("readonly", "may not be written to; check its permissions and those of its folder"),
        ("unable to open", "can't be opened; check its permissions and those of its folder"),
        ("malformed", "is damaged; move it away and run again, or restore a copy"),
        ("not a database", "is damaged; move it away and run again, or restore a copy"),
        ("locked", "is held by another program; close that and try again"),
    ):
        if sign in said:
            return f"{advice} ({said})"
    return f"can't be used: {said}"


def connect(path: Path, writing: bool) -> sqlite3.Connection:
    """Open the file in autocommit mode and check that it is a store, or (when writing) new.

    A writer checks its soundness too, as :func:`_check_sound` says. The file is not changed. StoreForeign if
    it is something else, StoreError if it is missing (when reading), damaged, or of another schema than
    this program reads.
    """
    _check_header(path, writing)
    connection = _opened(path, writing)
    try:
        _check_ours(path, connection, writing)
        if writing:
            _check_sound(path, connection)
            connection.execute("PRAGMA foreign_keys = ON")
            connection.execute("PRAGMA synchronous = NORMAL")
    except BaseException:
        connection.close()
        raise
    return connection


def _check_header(path: Path, writing: bool) -> None:
    if path.is_dir():
        raise StoreError(str(path), "is a folder; name a file")
    if not path.exists():
        if writing:
            return
        raise StoreError(str(path), "there is no such store; 'rigbench run' makes one")
    with path.open("rb") as file:
        header = file.read(len(SQLITE_HEADER))
    if header and header != SQLITE_HEADER:
        raise StoreForeign(str(path), "is not a store of rigbench, and is left as it is; name another file")


def _opened(path: Path, writing: bool) -> sqlite3.Connection:
    # At rest a store is a plain file. Where nothing can be written beside it, one that was left in
    # write-ahead-log mode opens as immutable alone, which is right if no log is left over.
    modes = ["mode=rwc"] if writing else ["mode=ro", "immutable=1"]
    while True:
        mode = modes.pop(0)
        connection = sqlite3.connect(
            f"{path.as_uri()}?{mode}", uri=True, timeout=PATIENCE_S, isolation_level=None
        )
        try:
            connection.execute("SELECT count(*) FROM sqlite_master").fetchone()
        except sqlite3.Error as error:
            connection.close()
            refused = "unable to open" in str(error) or "readonly" in str(error)
            if not modes or not refused or path.with_name(path.name + "-wal").exists():
                raise
        else:
            return connection


def _check_ours(path: Path, connection: sqlite3.Connection, writing: bool) -> None:
    application = connection.execute("PRAGMA application_id").fetchone()[0]
    tables = connection.execute("SELECT count(*) FROM sqlite_master").fetchone()[0]
    if application == 0 and tables == 0:  # new, or its making was cut short before the first transaction
        if writing:
            return
        raise StoreError(str(path), "holds no campaign yet; 'rigbench run' puts one in")
    if application != APPLICATION_ID:
        raise StoreForeign(
            str(path), "is a database of another program, and is left as it is; name another file"
        )
    schema = schema_of(connection)
    if schema > len(MIGRATIONS):
        raise StoreError(str(path), "was made by a newer rigbench; update rigbench to use it")
    if schema < len(MIGRATIONS) and not writing:
        raise StoreError(str(path), "was made by an older rigbench; 'rigbench run' brings it up to date")


def _check_sound(path: Path, connection: sqlite3.Connection) -> None:
    """Check every page of a store that was not closed in order, is to be migrated, or is small enough.

    A large one that was closed in order is opened at once: SQLite has told by then whether the file was cut
    short, and checks each page as it is read.
    """
    with path.open("rb") as file:
        header = file.read(100)  # https://sqlite.org/fileformat2.html, 1.3
    in_order = header[18:19] == b"\1"  # else it is in log mode still
    if in_order and path.stat().st_size > CHECKED_BYTES and schema_of(connection) == len(MIGRATIONS):
        return
    said = connection.execute("PRAGMA quick_check(1)").fetchone()[0].splitlines()[-1]
    if said != "ok":
        raise StoreError(str(path), f"is damaged ({said}); move it away and run again, or restore a copy")


def owner(connection: sqlite3.Connection) -> Owner | None:
    """Return the experiment that the store belongs to, whatever its schema; None if it has none yet."""
    if not connection.execute("SELECT count(*) FROM sqlite_master WHERE name = 'campaign'").fetchone()[0]:
        return None
    query = connection.execute("SELECT * FROM campaign")
    names = [column[0] for column in query.description]
    found = query.fetchone()
    if found is None:
        return None
    values = dict(zip(names, found, strict=True))
    return Owner(values["title"], Labels.from_json(values["labels"]).arm, values.get("origin") or "")

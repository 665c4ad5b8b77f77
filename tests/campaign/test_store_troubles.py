"""The store through power cuts, kills, full disks and migrations: whole rows or none."""

from __future__ import annotations

import signal
import sqlite3
import struct
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest

from rigbench.campaign.labels import Labels
from rigbench.campaign.migrations import MIGRATIONS, migrate, schema_of
from rigbench.campaign.owner import Owner
from rigbench.campaign.plan import Plan
from rigbench.campaign.store import Store
from rigbench.campaign.work import Outcome
from rigbench.errors import StoreError

PlanMaker = Callable[..., Plan]


@pytest.fixture
def path(tmp_path: Path) -> Path:
    return tmp_path / "results" / "trays.sqlite"


# --- power cuts and full disks


def test_a_full_disk_is_said_plainly_and_costs_only_what_did_not_fit(
    path: Path, make_plan: PlanMaker
) -> None:
    """SQLite's own 'full' (its limit of pages stands in for the disk's) is a StoreError; whole rows stay."""
    plan = make_plan(draws=100)
    stored: list[str] = []
    with Store.open_for_writing(path, plan) as store:
        store.record_plan(plan)
        pages = store._connection.execute("PRAGMA page_count").fetchone()[0]
        store._connection.execute(f"PRAGMA max_page_count = {pages + 20}")

        def fill() -> Iterator[str]:
            for entry in plan.entries:
                store.add([Outcome(entry.key, "finished", trace="x" * 3000)])
                yield entry.key

        with pytest.raises(StoreError, match="disk is full") as caught:
            stored.extend(fill())
    assert caught.value.exit_code == 5
    assert 0 < len(stored) < len(plan.entries)
    with Store.open_for_writing(path, plan) as store:
        assert len(store.rows()) == len(stored)
        assert len(store.missing(plan)) == len(plan.entries) - len(stored)
        store.add(Outcome(entry.key, "finished") for entry in store.missing(plan))


KILLED_WRITER = """
import sys
from rigbench.campaign.plan import Plan
from rigbench.campaign.store import Store
from rigbench.campaign.work import Outcome

plan = Plan("Trays", "two link", "", "trays.yaml", ("",), (), ("lift",), (), 1, None, (), "")
with Store.open_for_writing(sys.argv[1], plan) as store:
    for group in range(1_000_000):
        store.add(
            Outcome(f"{group}-{i}", "finished", trace="t" * 2000, scores={"group": group, "i": i, "sum": group + i})
            for i in range(5)
        )
        print(group, flush=True)
"""


def test_a_killed_writer_leaves_whole_groups_only(path: Path, make_plan: PlanMaker) -> None:
    """After SIGKILL, three times over: the store opens clean, each group is whole, none that was told is lost."""
    for attempt in range(3):
        path = path.with_name(f"{attempt}.sqlite")
        writer = subprocess.Popen(
            [sys.executable, "-c", KILLED_WRITER, path], stdout=subprocess.PIPE, text=True
        )
        assert writer.stdout is not None
        for _ in range(20):
            told = int(writer.stdout.readline())
        time.sleep(0.01)
        writer.send_signal(signal.SIGKILL)
        told = int((writer.communicate()[0].split() or [told])[-1])
        with Store.open_for_writing(path, make_plan()) as store:
            assert store._connection.execute("PRAGMA integrity_check").fetchone() == ("ok",)
            groups: dict[int, str] = {}
            for key, scores in store._connection.execute("SELECT key, scores FROM runs JOIN keys USING (id)"):
                group, i, total = struct.unpack("<3d", scores)
                assert key == f"{group:.0f}-{i:.0f}"
                assert total == group + i
                groups[int(group)] = groups.get(int(group), "") + f"{i:.0f}"
            assert set(groups.values()) == {"01234"}
            assert set(groups) >= set(range(told + 1))
            assert max(groups) <= told + 1


def test_what_a_killed_writer_left_can_be_read_at_once(path: Path, make_plan: PlanMaker) -> None:
    """A reader sees the rows that are in the log alone, and leaves store and log as they are."""
    plan = make_plan()
    with Store.open_for_writing(path, plan) as store:
        store.record_plan(plan)
        store.add(Outcome(entry.key, "finished") for entry in plan.entries)
    code = KILLED_WRITER.replace("range(1_000_000)", "range(1)") + "\n    import os; os._exit(1)\n"
    code = code.replace("\n    import os", "\n    import os, signal").replace(
        "os._exit(1)", "os.kill(os.getpid(), 9)"
    )
    subprocess.run([sys.executable, "-c", code, path], check=False, stdout=subprocess.DEVNULL)
    log = path.with_name(path.name + "-wal")
    before = path.read_bytes(), log.read_bytes()
    assert log.stat().st_size > 0
    with Store.open_for_reading(path) as reader:
        assert reader._connection.execute("SELECT count(*) FROM runs").fetchone() == (14 + 5,)
        assert len(reader.rows()) == 14
    assert (path.read_bytes(), log.read_bytes()) == before


# --- migrations


def test_a_store_of_an_older_schema_is_brought_up_to_date(path: Path, make_plan: PlanMaker) -> None:
    """Its rows stay, and its owner, whose file it doesn't know, is told by title and arm before it is changed."""
    path.parent.mkdir()
    plan = make_plan()
    connection = sqlite3.connect(path, isolation_level=None)
    migrate(connection, MIGRATIONS[:2])
    connection.execute(
        "INSERT INTO campaign VALUES (1, ?, ?, ?, ?, ?, ?, ?)",
        (plan.title, plan.experiment_path, "", "7", Labels.of(plan).to_json(), "", ""),
    )
    key = plan.entries[0].key
    connection.execute(
        "INSERT INTO runs VALUES (?, 'finished', '', '', '{}', '{}', NULL, NULL, NULL, '')", (key,)
    )
    connection.close()
    before = path.read_bytes()
    with pytest.raises(StoreError, match="belongs to"):
        Store.open_for_writing(path, make_plan(arm="another"))
    assert path.read_bytes() == before
    with Store.open_for_writing(path, plan) as store:
        assert schema_of(store._connection) == len(MIGRATIONS)
        store.record_plan(plan)
        assert [row.outcome for row in store.rows()] == ["finished"]
        assert store.owner == Owner.of(plan)


def test_a_new_file_is_made_whole_or_not_at_all(tmp_path: Path) -> None:
    """Its steps are one transaction: if one of them fails there is nothing, not even the first."""
    connection = sqlite3.connect(tmp_path / "store.sqlite", isolation_level=None)
    with pytest.raises(sqlite3.OperationalError):
        migrate(connection, [["CREATE TABLE a (x)"], ["no such statement"]])
    assert schema_of(connection) == 0
    assert connection.execute("SELECT name FROM sqlite_master").fetchall() == []
    connection.close()


def test_a_migration_that_fails_leaves_the_schema_before_it(tmp_path: Path) -> None:
    """A step and its record are one transaction: both are undone, and the steps before it stay."""
    connection = sqlite3.connect(tmp_path / "store.sqlite", isolation_level=None)
    good, bad = ["CREATE TABLE a (x)"], ["CREATE TABLE b (x)", "no such statement"]
    migrate(connection, [good])
    with pytest.raises(sqlite3.OperationalError):
        migrate(connection, [good, bad])
    assert schema_of(connection) == 1
    assert connection.execute("SELECT name FROM sqlite_master").fetchall() == [("a",)]
    migrate(connection, [good, ["CREATE TABLE b (x)"]])
    assert schema_of(connection) == 2
    connection.close()

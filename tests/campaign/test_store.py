"""The store: what goes in comes out, whole and exact, and what isn't ours is left alone."""

from __future__ import annotations

import math
import os
import shutil
import sqlite3
import tempfile
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import replace
from pathlib import Path

import pytest

from rigbench.campaign.migrations import MIGRATIONS
from rigbench.campaign.owner import Owner
from rigbench.campaign.plan import Plan
from rigbench.campaign.reading import Counts, Reader
from rigbench.campaign.store import Store
from rigbench.campaign.work import Host, Outcome
from rigbench.errors import StoreBusy, StoreError, StoreForeign
from rigbench.scores.row import MACHINE_OUTCOMES, Row

PlanMaker = Callable[..., Plan]


TRAYS = Plan(
    "Trays",
    "two link",
    "",
    "trays.yaml",
    ("",),
    ("pd",),
    ("lift",),
    (),
    1,
    None,
    (),
    "rigbench run trays.yaml",
)
"""An experiment of which nothing is planned."""


@pytest.fixture
def path(tmp_path: Path) -> Path:
    return tmp_path / "results" / "trays #1 100%.sqlite"


def outcome_of(key: str, outcome: str = "finished", **scores: float) -> Outcome:
    return Outcome(key, outcome, scores=scores, host=Host("a CPU", (("numpy", "2"),)))


def filled(path: Path, plan: Plan, outcome: str = "finished") -> None:
    with Store.open_for_writing(path, plan) as store:
        store.record_plan(plan)
        store.add(outcome_of(entry.key, outcome, tool_peak_mm=1.0) for entry in plan.entries)


def contents(path: Path) -> dict[str, bytes]:
    return {p.name: p.read_bytes() for p in path.parent.iterdir()}


# --- what goes in comes out


def test_rows_come_back_exactly_in_the_order_of_the_plan(path: Path, make_plan: PlanMaker) -> None:
    """Every float is the same bits, infinite is infinite, and rows are in plan order whatever order they came in."""
    plan = make_plan(draws=2)
    values = [math.inf, 0.1 + 0.2, 5e-324, 1.7976931348623157e308, 0.0, 1 / 3, 1e16, 2**-52, 123456.789, 1.0]
    scores = {
        e.key: {"settle_ms": v, "joint_peak_deg.j1": v / 7} for e, v in zip(plan.entries, values, strict=True)
    }
    with Store.open_for_writing(path, plan) as store:
        store.record_plan(plan)
        for entry in reversed(plan.entries):
            store.add([replace(outcome_of(entry.key, **scores[entry.key]), host_scores={"law_us": 2.5})])
        rows = store.rows()
    assert rows == [
        Row("", e.law, "lift", e.condition, e.level, e.draw, "finished", scores[e.key] | {"law_us": 2.5})
        for e in plan.entries
    ]


def test_a_reader_knows_the_campaign_without_its_file(path: Path, make_plan: PlanMaker) -> None:
    """Names, order, columns, tolerance, texts and the command that goes on all come from the store alone."""
    plan = make_plan()
    filled(path, plan)
    with Store.open_for_reading(path) as reader:
        labels = reader.labels
        for name in ("title", "arm", "sheets", "laws", "motions", "columns", "draws", "tolerance", "resume"):
            assert getattr(labels, name) == getattr(plan, name)
        assert reader.experiment == ("trays.yaml", "rigbench: 1\n")
        assert reader.files == [("arm.urdf", "<robot/>"), ("arm.yaml", "drives: {}")]


def test_one_run_serves_every_entry_that_has_its_key(path: Path, make_plan: PlanMaker) -> None:
    """Two entries of one key are run once, and are two rows."""
    plan = make_plan(draws=1)
    twin = replace(plan.entries[0], condition="all at 1")
    plan = replace(plan, entries=(*plan.entries, twin))
    with Store.open_for_writing(path, plan) as store:
        store.record_plan(plan)
        assert [e.key for e in store.missing(plan)].count(twin.key) == 1
        store.add([outcome_of(twin.key)])
        assert [row.condition for row in store.rows()] == ["nominal", "all at 1"]
        assert store.counts() == Counts(len(plan.entries), 2, 0)


@pytest.mark.parametrize(
    ("outcome", "again"),
    [("finished", False), ("diverged", False), ("hit-stop", False), ("law-error", False),
     ("no-plant", False), ("disagrees", False), ("timed-out", True), ("crashed", True)],
)  # fmt: skip
def test_what_is_run_again(path: Path, make_plan: PlanMaker, outcome: str, again: bool) -> None:
    """Verdicts and troubles that would come again stay; what timed out or crashed is tried anew, and then replaced."""
    plan = make_plan(draws=1)
    filled(path, plan, outcome)
    with Store.open_for_writing(path, plan) as store:
        assert bool(store.missing(plan)) is again
        assert store.counts().failed == (0 if outcome in MACHINE_OUTCOMES else 6)
        store.add([outcome_of(plan.entries[0].key)])
        assert store.rows()[0].outcome == "finished"
        assert len(store.rows()) == len(plan.entries)


def test_a_new_plan_replaces_the_old_and_keeps_its_runs(path: Path, make_plan: PlanMaker) -> None:
    """A smaller plan shows its own rows only; the old one again, and nothing is missing."""
    large, small = make_plan(draws=4), make_plan(draws=1)
    filled(path, large)
    with Store.open_for_writing(path, small) as store:
        store.record_plan(small)
        assert len(store.rows()) == len(small.entries)
        assert store.labels.draws == 1
        store.record_plan(large)
        assert store.missing(large) == []


def test_a_law_can_be_run_anew(path: Path, make_plan: PlanMaker) -> None:
    """run_anew() makes that law's runs missing, and no other's; their rows stay until they are replaced."""
    plan = make_plan()
    filled(path, plan)
    with Store.open_for_writing(path, plan) as store:
        assert store.run_anew("pd") == 7
        assert {e.law for e in store.missing(plan)} == {"pd"}
        assert store.counts() == Counts(14, 7, 0)
        assert len(store.rows()) == 14
        store.add([outcome_of(store.missing(plan)[0].key, "hit-stop")])
        assert len(store.missing(plan)) == 6
        assert store.counts() == Counts(14, 8, 0)
        assert store.rows()[0].outcome == "hit-stop"


def test_the_values_of_a_draw_never_change(path: Path, make_plan: PlanMaker) -> None:
    """A second value for the same seed, draw and parameter is ignored; another parameter is added."""
    plan = make_plan()
    with Store.open_for_writing(path, plan) as store:
        store.record_plan(plan)
        store.add([], [(7, 0, {"a": 0.1}), (7, 0, {"a": 0.5, "b": -1.0}), (8, 0, {"a": 0.9})])
        assert store.draw_values() == {0: {"a": 0.1, "b": -1.0}}


def test_any_text_of_a_law_can_be_kept(path: Path, make_plan: PlanMaker) -> None:
    """A lone surrogate in an exception's text, and a traceback of megabytes, are no obstacle."""
    plan = make_plan()
    bad = Outcome(plan.entries[0].key, "law-error", "said \udcff", trace="x" * 5_000_000 + "the end")
    with Store.open_for_writing(path, plan) as store:
        store.record_plan(plan)
        store.add([bad])
        record = next(iter(store.records()))
    assert record.row.reason == "said \\udcff"
    assert record.trace.endswith("the end")
    assert len(record.trace) < 100_000


def test_a_seed_of_any_size_can_be_kept(path: Path, make_plan: PlanMaker) -> None:
    """SQLite's integers end at 2^63; seeds don't."""
    plan = make_plan()
    big = tuple(replace(e, run=replace(e.run, seed=2**70)) for e in plan.entries)
    with Store.open_for_writing(path, plan) as store:
        store.record_plan(replace(plan, entries=big))
        store.add([], [(2**70, 0, {"a": 0.25})])
        assert store.draw_values() == {0: {"a": 0.25}}


# --- what isn't ours is left alone


@pytest.mark.parametrize(
    "other",
    [
        {"experiment_path": "elsewhere/trays.yaml", "title": "Cups"},
        {"experiment_path": "elsewhere/trays.yaml", "arm": "six link"},
    ],
    ids=["title", "arm"],
)
def test_the_store_of_another_experiment_is_refused(
    path: Path, make_plan: PlanMaker, other: dict[str, str]
) -> None:
    """Another file, and another title or arm. The refusal names both and the way out, and changes nothing."""
    filled(path, make_plan())
    before = contents(path)
    with pytest.raises(StoreForeign) as caught:
        Store.open_for_writing(path, make_plan(**other))
    said = str(caught.value)
    assert f"'Trays' of arm 'two link' in {Path('trays.yaml').resolve()}" in said
    assert f"'{other.get('title', 'Trays')}' of arm '{other.get('arm', 'two link')}'" in said
    assert str(Path("elsewhere/trays.yaml").resolve()) in said
    assert "--store" in said
    assert contents(path) == before


@pytest.mark.parametrize(
    "other",
    [
        {"experiment_path": "elsewhere/trays.yaml"},
        {"title": "Cups"},
        {"arm": "six link"},
        {"experiment_path": "elsewhere/../trays.yaml", "title": "Cups", "arm": "six link"},
    ],
    ids=["moved", "retitled", "another arm", "same file"],
)
def test_an_experiment_that_was_moved_or_mended_keeps_its_store(
    path: Path, make_plan: PlanMaker, other: dict[str, str]
) -> None:
    """The same file, or the same title and arm: its runs are there, and it is known as what it is now."""
    filled(path, make_plan())
    plan = make_plan(**other)
    with Store.open_for_writing(path, plan) as store:
        store.record_plan(plan)
        assert store.missing(plan) == []
    with Store.open_for_reading(path) as reader:
        assert (reader.labels.title, reader.owner) == (plan.title, Owner.of(plan))


def test_the_hosts_of_the_planned_runs_are_known(path: Path, make_plan: PlanMaker) -> None:
    """Each once; not those of runs that the present plan doesn't have."""
    plan = make_plan(draws=1)
    hosts = [Host(cpu, (("numpy", version),)) for cpu, version in (("A", "1"), ("A", "2"), ("B", "1"))]
    with Store.open_for_writing(path, plan) as store:
        store.record_plan(plan)
        store.add(Outcome(e.key, "finished", host=hosts[i % 2]) for i, e in enumerate(plan.entries))
        store.add([Outcome("another", "finished", host=hosts[2])])
        assert list(store.hosts().values()) == hosts[:2]


def _database(path: Path) -> None:
    with sqlite3.connect(path) as connection:
        connection.execute("CREATE TABLE campaign (title TEXT)")
    connection.close()


def _newer(path: Path) -> None:
    Store.open_for_writing(path, TRAYS).close()
    with sqlite3.connect(path) as connection:
        connection.execute(f"PRAGMA user_version = {len(MIGRATIONS) + 1}")
    connection.close()


def _damaged(path: Path) -> None:
    Store.open_for_writing(path, TRAYS).close()
    text = bytearray(path.read_bytes())
    text[100:3000] = b"\xff" * 2900
    path.write_bytes(text)


@pytest.mark.parametrize(
    ("make", "error", "says"),
    [
        (lambda path: path.write_text("sheet,law\n"), StoreForeign, "not a store of rigbench"),
        (lambda path: path.write_bytes(b"\0" * 8192), StoreForeign, "not a store of rigbench"),
        (_database, StoreForeign, "database of another program"),
        (_newer, StoreError, "newer rigbench; update"),
        (_damaged, StoreError, "is damaged"),
        (lambda path: path.mkdir(), StoreError, "is a folder"),
    ],
    ids=["text", "bytes", "other database", "newer", "damaged", "folder"],
)
def test_other_files_are_refused_and_left_as_they_are(
    path: Path, make: Callable[[Path], None], error: type[StoreError], says: str
) -> None:
    """To write and to read alike; each refusal names the file, and exits with 5."""
    path.parent.mkdir()
    make(path)
    before = contents(path) if path.is_file() else None
    for opening in (lambda: Store.open_for_writing(path, TRAYS), lambda: Reader.open_for_reading(path)):
        with pytest.raises(error, match=says) as caught:
            opening()
        assert type(caught.value) is error
        assert str(path) in str(caught.value)
        assert caught.value.exit_code == 5
    if before is not None:
        assert contents(path) == before


def test_damage_within_is_found_before_more_is_added(path: Path, make_plan: PlanMaker) -> None:
    """Scribble over a page of the runs: a writer is refused at once, a reader when it gets there."""
    filled(path, make_plan(draws=200))
    text = bytearray(path.read_bytes())
    page = text.rfind(b'{"tool_peak_mm": 1.0}') // 4096 * 4096
    text[page : page + 4096] = b"\xff" * 4096
    path.write_bytes(text)
    with pytest.raises(StoreError, match="is damaged"):
        Store.open_for_writing(path, TRAYS)
    with Store.open_for_reading(path) as reader, pytest.raises(StoreError, match="is damaged"):
        reader.rows()


def test_a_store_that_is_not_there_cannot_be_read(path: Path) -> None:
    """Reading makes neither file nor folder."""
    with pytest.raises(StoreError, match="no such store"):
        Store.open_for_reading(path)
    assert not path.parent.exists()


@pytest.mark.parametrize("header", [False, True])
def test_a_store_whose_making_was_cut_short_is_made(path: Path, make_plan: PlanMaker, header: bool) -> None:
    """An empty file, or SQLite's first page alone, is new to a writer and 'no campaign yet' to a reader."""
    path.parent.mkdir()
    path.touch()
    if header:
        connection = sqlite3.connect(path)
        connection.execute("PRAGMA journal_mode = WAL")
        connection.close()
        assert path.stat().st_size > 0
    with pytest.raises(StoreError, match="no campaign yet"):
        Store.open_for_reading(path)
    filled(path, make_plan())


# --- one writer, many readers


def test_a_second_writer_is_refused_until_the_first_has_closed(path: Path, make_plan: PlanMaker) -> None:
    """StoreBusy names the process that writes; nothing but the store itself is left when it closes."""
    with Store.open_for_writing(path, TRAYS):
        with pytest.raises(StoreBusy, match=f"process {os.getpid()}"):
            Store.open_for_writing(path, TRAYS)
        with pytest.raises(StoreBusy):
            Store.open_for_writing(path.parent / ".." / path.parent.name / path.name, TRAYS)
    filled(path, make_plan())
    assert [p.name for p in path.parent.iterdir()] == [path.name]


def test_a_lock_file_left_over_is_no_obstacle(path: Path) -> None:
    """What holds a store is a living process, not a file."""
    path.parent.mkdir()
    path.with_name(path.name + ".lock").write_text("1\n")
    Store.open_for_writing(path, TRAYS).close()


def test_a_reader_sees_whole_groups_while_a_writer_writes(path: Path, make_plan: PlanMaker) -> None:
    """Rows appear for a reader as soon as they are added, and within one moment nothing changes."""
    plan = make_plan()
    with Store.open_for_writing(path, plan) as store:
        store.record_plan(plan)
        with Store.open_for_reading(path) as reader:
            assert reader.counts() == Counts(14, 0, 0)
            store.add([outcome_of(plan.entries[0].key)])
            assert reader.counts() == Counts(14, 1, 0)
            with reader.one_moment():
                assert len(reader.rows()) == 1
                store.add([outcome_of(plan.entries[1].key)])
                assert reader.counts() == Counts(14, 1, 0)
            assert reader.counts() == Counts(14, 2, 0)


def test_a_reader_writes_nothing(path: Path, make_plan: PlanMaker) -> None:
    """The folder is the same byte for byte after reading, and SQLite itself refuses to write through it."""
    filled(path, make_plan())
    before = contents(path)
    with Store.open_for_reading(path) as reader:
        reader.rows()
        reader.counts()
        reader.results()
        with pytest.raises(sqlite3.OperationalError, match="readonly"):
            reader._connection.execute("DELETE FROM runs")
    assert contents(path) == before


@contextmanager
def nobody() -> Iterator[None]:
    """Give up the superuser's rights, if these tests have them: no folder is read-only to them."""
    if os.geteuid() == 0:
        os.seteuid(65534)
        try:
            yield
        finally:
            os.seteuid(0)
    else:
        yield


@pytest.fixture
def read_only() -> Iterator[Path]:
    """A folder in which nobody can write."""
    folder = Path(tempfile.mkdtemp())
    folder.chmod(0o555)
    yield folder
    folder.chmod(0o755)
    shutil.rmtree(folder)


def test_a_read_only_folder_can_be_read_and_not_written(read_only: Path, make_plan: PlanMaker) -> None:
    """Writing is refused in plain words with exit code 5; a store that lies there, even in log mode, is read."""
    read_only.chmod(0o755)
    path, logging = read_only / "old.sqlite", read_only / "logging.sqlite"
    filled(path, make_plan())
    shutil.copy(path, logging)
    connection = sqlite3.connect(logging)
    connection.execute("PRAGMA journal_mode = WAL")
    connection.close()
    read_only.chmod(0o555)
    with nobody():
        for there in (path, read_only / "new.sqlite", read_only / "deeper" / "new.sqlite"):
            with pytest.raises(StoreError, match="ermission denied"):
                Store.open_for_writing(there, TRAYS)
        for there in (path, logging):
            with Store.open_for_reading(there) as reader:
                assert len(reader.rows()) == 14

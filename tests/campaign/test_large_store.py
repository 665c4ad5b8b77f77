"""What a store of a million runs rests on: packed rows, columns read in blocks, a bounded check at the start."""

from __future__ import annotations

import json
import math
import sqlite3
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from rigbench.campaign.labels import Labels
from rigbench.campaign.migrations import MIGRATIONS, migrate, schema_of
from rigbench.campaign.packing import Layout, packed
from rigbench.campaign.plan import Entry, Plan
from rigbench.campaign.store import Store
from rigbench.campaign.work import Host, Outcome
from rigbench.errors import StoreError
from rigbench.scores.row import Row

PlanMaker = Callable[..., Plan]

OUTCOMES = ("finished", "diverged", "law-error", "finished", "crashed", "finished", "hit-stop", "finished")


@pytest.fixture
def path(tmp_path: Path) -> Path:
    return tmp_path / "trays.sqlite"


def outcome_of(number: int, entry: Entry) -> Outcome:
    """An outcome of its own for each run, in which every kind of row is met."""
    outcome = OUTCOMES[number % len(OUTCOMES)]
    scores = {"tool_peak_mm": 1.0 + number / 7, "settle_ms": math.inf if number % 3 else 100.0 + number}
    if number % 2:
        scores["joint_peak_deg.j1"] = 5e-324
    host_scores = {"law_us": number / 3}
    if outcome not in ("finished", "hit-stop"):  # what a run that did not finish has counts for nothing
        scores, host_scores = {}, {}
    host = Host(f"CPU {number % 2}", (("numpy", "2"),))
    return Outcome(
        entry.key,
        outcome,
        f"reason {number}",
        scores,
        f"trace {number}",
        host_scores,
        1e-9 * number,
        0.5,
        host,
    )


def filled(path: Path, plan: Plan) -> None:
    with Store.open_for_writing(path, plan) as store:
        store.record_plan(plan)
        store.add(outcome_of(number, entry) for number, entry in enumerate(plan.entries))


def fill_old(path: Path, plan: Plan) -> None:
    """Fill a store of the schema before scores were packed, as the program of its time did."""
    connection = sqlite3.connect(path, isolation_level=None)
    migrate(connection, MIGRATIONS[:3])
    labels = Labels.of(plan).to_json()
    connection.execute(
        "INSERT INTO campaign VALUES (1, ?, ?, '', '7', ?, '', '', NULL)",
        (plan.title, plan.experiment_path, labels),
    )
    for position, entry in enumerate(plan.entries):
        names = (entry.sheet, entry.law, entry.motion, entry.condition, entry.level, entry.draw)
        row = (position, *names, ",".join(entry.run.sources), entry.key, "digest" if position % 2 else None)
        connection.execute("INSERT INTO plan VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?)", row)
    connection.execute("INSERT INTO hosts VALUES (1, 'CPU 0', '{\"numpy\": \"2\"}')")
    connection.execute("INSERT INTO hosts VALUES (2, 'CPU 1', '{\"numpy\": \"2\"}')")
    done = {entry.key: (number, outcome_of(number, entry)) for number, entry in enumerate(plan.entries)}
    for number, found in reversed(done.values()):  # as they ended, not as they were planned
        texts = [
            json.dumps({name: None if value == math.inf else value for name, value in each.items()})
            for each in (found.scores, found.host_scores)
        ]
        row = (found.key, found.outcome, found.reason, found.trace, *texts, found.residual, found.wall_s)
        connection.execute(
            "INSERT INTO runs VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, '', ?)",
            (*row, 1 + number % 2, int(number == 3)),
        )
    connection.execute(
        "INSERT INTO runs VALUES ('another', 'finished', '', '', '{\"odd\": 1.5}', '{}', 0, 0, NULL, '', 0)"
    )
    connection.close()


# --- packed rows


def test_scores_are_packed_and_unpacked_to_the_bit() -> None:
    """Infinite, tiny and huge values, and none at all; the names of both kinds are told apart."""
    scores, host_scores = {"a": math.inf, "b.j1": 5e-324, "c": -1.7976931348623157e308}, {"law_us": 0.1 + 0.2}
    layout, values = packed(scores, host_scores)
    again = Layout.of_text(layout.text)
    assert again == layout == Layout(("a", "b.j1", "c"), ("law_us",))
    assert again.scores_of(values) == scores | host_scores
    assert len(values) == 4 * 8
    assert packed({}, {}) == (Layout((), ()), b"")


def test_a_store_of_json_rows_is_brought_up_to_date(path: Path, make_plan: PlanMaker) -> None:
    """All that a store of today would hold of the same campaign is there, to the bit, and nothing else."""
    plan = make_plan(draws=4)
    twin = replace(plan.entries[1], condition="nominal", level=None)
    plan = replace(plan, entries=(*plan.entries, twin))
    fill_old(path, plan)
    filled(path.with_name("new.sqlite"), plan)
    with pytest.raises(StoreError, match="older rigbench"):
        Store.open_for_reading(path)
    with (
        Store.open_for_writing(path, plan) as old,
        Store.open_for_writing(path.with_name("new.sqlite"), plan) as new,
    ):
        assert schema_of(old._connection) == len(MIGRATIONS)
        assert new.run_anew("none such") == 0
        new._connection.execute(
            "UPDATE runs SET anew = 1 WHERE id = (SELECT id FROM keys WHERE key = ?)", (plan.entries[3].key,)
        )
        new.add([Outcome("another", "finished", scores={"odd": 1.5}, residual=0.0, wall_s=0.0)])
        assert list(old.records()) == list(new.records())
        assert (old.counts(), old.outcomes()) == (new.counts(), new.outcomes())
        assert old.missing(plan) == new.missing(plan) != []
        assert old.keys("a") == new.keys("a")
        assert old.keys("another") == ([], ["another"])
        assert rows_of(old, "runs") == rows_of(new, "runs") == len(plan.entries)  # of which two are one run
        assert [old.host(entry.key) for entry in plan.entries] == [
            new.host(entry.key) for entry in plan.entries
        ]
        tables = {name for (name,) in old._connection.execute("SELECT name FROM sqlite_master")}
        assert tables == {name for (name,) in new._connection.execute("SELECT name FROM sqlite_master")}
        runs = {place.run for place in old.places().values()}
        assert runs == {None, "digest"}
        old.record_plan(plan)
        assert old.results() == new.results()


def rows_of(store: Store, table: str) -> int:
    """How many rows a table has."""
    number: int = store._connection.execute(f"SELECT count(*) FROM {table}").fetchone()[0]
    return number


def test_what_draws_share_is_kept_once(store: Store) -> None:
    """Of six laws, nominal and two draws: a place for each law and condition, whatever the draw."""
    assert (rows_of(store, "plan"), rows_of(store, "runs"), rows_of(store, "places")) == (18, 18, 12)


def test_a_key_is_kept_no_longer_than_needed(path: Path, make_plan: PlanMaker) -> None:
    """One that is neither planned nor stored goes with its plan; runs of other plans stay. One layout serves all."""
    large, small = make_plan(draws=50), make_plan(draws=2)
    with Store.open_for_writing(path, large) as store:
        store.record_plan(large)
        assert rows_of(store, "keys") == 202
        store.add([Outcome(large.entries[150].key, "finished", scores={"tool_peak_mm": 1.0})])
        store.add([Outcome(large.entries[151].key, "finished", scores={"tool_peak_mm": 2.0})])
        assert rows_of(store, "layouts") == 1
        store.record_plan(small)
        assert rows_of(store, "keys") == 10 + 2
        store.record_plan(large)
        assert [record.row.scores for record in store.records()] == [
            {"tool_peak_mm": 1.0},
            {"tool_peak_mm": 2.0},
        ]


# --- columns


def test_results_of_columns_are_those_of_rows(path: Path, make_plan: PlanMaker) -> None:
    """Read as columns or row by row: the same results, and the same counts as SQL counts, also of runs put anew."""
    from rigbench.scores.summary import summarise

    plan = make_plan(draws=30)
    filled(path, plan)
    with Store.open_for_writing(path, plan) as store:
        store._connection.execute("UPDATE runs SET anew = 1 WHERE id % 5 = 0")
        results, counts = store.results(), store.counts()
        assert 0 < counts.done < counts.done + counts.failed < counts.planned
        assert (results.planned, results.done, results.failed) == (
            counts.planned,
            counts.done,
            counts.failed,
        )
        names = ("title", "arm", "motions", "tolerance", "draws", "sheets", "laws", "columns")
        shown = {name: getattr(store.labels, name) for name in names} | vars(counts)
        assert summarise(store.rows(), **shown) == results


def test_brief_results_differ_by_what_is_left_out_alone(path: Path, make_plan: PlanMaker) -> None:
    """Shares, verdicts, levels and advice are the same; of the scores there are the main one and the limited."""
    plan = make_plan(draws=30)
    filled(path, plan)
    with Store.open_for_reading(path) as store:
        full, brief = store.results(), store.results(brief=True)
    left = {"tool_peak_mm", "settle_ms"}
    assert any(set(cell.measures) > left for cell in full.cells)
    cells = tuple(
        replace(
            cell,
            measures={n: m for n, m in cell.measures.items() if n in left},
            ratios={n: r for n, r in cell.ratios.items() if n in left},
            motions={
                motion: replace(part, measures={n: m for n, m in part.measures.items() if n in left})
                for motion, part in cell.motions.items()
            },
        )
        for cell in full.cells
    )
    assert brief == replace(full, cells=cells)


def test_records_can_be_asked_for_by_what_came_of_them(path: Path, make_plan: PlanMaker) -> None:
    """Of one outcome, of several, of none: the same records as all of them show, in the plan's order."""
    plan = make_plan(draws=9)
    filled(path, plan)
    with Store.open_for_reading(path) as store:
        every = list(store.records())
        for wanted in (["law-error"], ["crashed", "law-error"], ["timed-out"], []):
            assert list(store.records_with(wanted)) == [r for r in every if r.row.outcome in wanted]
        one = [r for r in every if (r.row.law, r.row.condition) == ("pd", "all at 1")]
        assert list(store.records_of("pd", "all at 1")) == one != []


@pytest.mark.parametrize("size", [1, 7, 1000])
def test_blocks_of_any_size_are_the_same_columns(path: Path, make_plan: PlanMaker, size: int) -> None:
    """Rows of several layouts within a block: each score stands in its column, NaN where a run has none."""
    plan = make_plan(draws=6)
    filled(path, plan)
    names = ("settle_ms", "joint_peak_deg.j1", "law_us", "no such score")
    with Store.open_for_reading(path) as store:
        found = list(store.blocks(names, ("key",), size))
        rows: list[Row] = store.rows()
    assert [len(block) for block in found[:-1]] == [size] * (len(found) - 1)
    assert [key for block in found for key in block.more["key"]] == [entry.key for entry in plan.entries]
    expected = [[row.scores.get(name, math.nan) for name in names] for row in rows]
    assert np.array_equal(np.vstack([block.scores for block in found]), expected, equal_nan=True)


# --- what is checked when a store is opened for writing


def _scribble(path: Path) -> None:
    """Overwrite a page of the runs."""
    text = bytearray(path.read_bytes())
    page = text.rfind(b"reason 5") // 4096 * 4096
    text[page : page + 4096] = b"\xff" * 4096
    path.write_bytes(text)


def test_a_large_store_that_was_closed_in_order_is_opened_at_once(
    path: Path, make_plan: PlanMaker, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Damage to a page is then found when the page is read, and not before; a small store is checked whole."""
    plan = make_plan(draws=30)
    filled(path, plan)
    _scribble(path)
    with pytest.raises(StoreError, match="is damaged"):
        Store.open_for_writing(path, plan)
    monkeypatch.setattr("rigbench.campaign.connection.CHECKED_BYTES", 0)
    with Store.open_for_writing(path, plan) as store, pytest.raises(StoreError, match="is damaged"):
        store.rows()


def test_a_large_store_is_checked_whole_before_it_is_brought_up_to_date(
    path: Path, make_plan: PlanMaker, monkeypatch: pytest.MonkeyPatch
) -> None:
    """All of it is about to be copied: damage is told first, and the file stays what it is."""
    plan = make_plan(draws=30)
    fill_old(path, plan)
    _scribble(path)
    before = path.read_bytes()
    monkeypatch.setattr("rigbench.campaign.connection.CHECKED_BYTES", 0)
    with pytest.raises(StoreError, match=r"is damaged \(Page"):
        Store.open_for_writing(path, plan)
    assert path.read_bytes() == before


def test_a_large_store_that_was_cut_short_is_refused_at_once(
    path: Path, make_plan: PlanMaker, monkeypatch: pytest.MonkeyPatch
) -> None:
    """A copy without its last page."""
    plan = make_plan(draws=30)
    filled(path, plan)
    monkeypatch.setattr("rigbench.campaign.connection.CHECKED_BYTES", 0)
    Store.open_for_writing(path, plan).close()
    size = path.stat().st_size
    with path.open("r+b") as file:
        file.truncate(size - 4096)
    with pytest.raises(StoreError, match="is damaged"):
        Store.open_for_writing(path, plan)


def test_a_large_store_that_was_not_closed_in_order_is_checked_whole(
    path: Path, make_plan: PlanMaker, monkeypatch: pytest.MonkeyPatch
) -> None:
    """It is in log mode still, as after a kill or a power cut: damage to a page is found before it is written to."""
    plan = make_plan(draws=30)
    filled(path, plan)
    connection = sqlite3.connect(path)
    connection.execute("PRAGMA journal_mode = WAL")
    connection.close()
    monkeypatch.setattr("rigbench.campaign.connection.CHECKED_BYTES", 0)
    Store.open_for_writing(path, plan).close()
    connection = sqlite3.connect(path)
    connection.execute("PRAGMA journal_mode = WAL")
    connection.close()
    _scribble(path)
    with pytest.raises(StoreError, match="is damaged"):
        Store.open_for_writing(path, plan)

"""Replaying stored runs: from the store alone, bit for bit, or else with what differs and why."""

from __future__ import annotations

import json
import sqlite3
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from rigbench.arm.files import ArmFiles
from rigbench.arm.mismatch import Case, Knowledge, Mismatch, Spread
from rigbench.campaign import kept as kept_module
from rigbench.campaign.find import run_by_key
from rigbench.campaign.kept import Keeper, NotKept, restored
from rigbench.campaign.migrations import MIGRATIONS, migrate
from rigbench.campaign.packing import Layout, packed
from rigbench.campaign.plan import Plan
from rigbench.campaign.reading import Record
from rigbench.campaign.replay import Replay, replay
from rigbench.campaign.store import Store
from rigbench.errors import InputFaults, StoreError
from rigbench.laws.registry import LawChoice
from rigbench.motion.chained import ChainMotion
from rigbench.motion.path import circle, line
from rigbench.motion.table import TableMotion
from rigbench.motion.via import ViaMotion
from rigbench.rig import Run
from rigbench.rig.sampled import Sensing, Timing
from rigbench.rig.scene import SceneChoice, load_file_scene


def record_of(store: Store, law: str, draw: int | None = 1) -> Record:
    return next(r for r in store.records() if (r.row.law, r.row.draw) == (law, draw))


def altered(store: Store, key: str, statement: str, *values: object) -> Replay:
    """Replay a run after something in the store was changed behind its back; THIS stands for the run."""
    this = f"id = (SELECT id FROM keys WHERE key = '{key}')"
    store._connection.execute(statement.replace("THIS", this), values)
    record = store.record(key)
    assert record is not None
    return replay(store, record)


# --- a run as text and back


@pytest.fixture
def variants(
    folder: Path,
    registered_law: Callable[..., LawChoice],
    my_law: Callable[..., LawChoice],
    run_of: Callable[..., Run],
    drawn: Callable[[Run, int | None], Run],
) -> dict[str, Run]:
    """Runs that between them use everything that a run may hold."""
    pd, arm = registered_law("independent-joint"), ArmFiles.read(folder / "tray6" / "arm.yaml")
    via = ViaMotion(((0.0, 0.0), (1 / 3, -0.1)), 0.1 + 0.2, 0.1, pace=1.5)
    table = TableMotion((0.0, 0.1, 0.35), ((0.0, 1e-300), (0.1, 0.2), (0.3, 0.1 * 3)), 0.7)
    near = (0.0, -1.0, 1.5, 0.0, 1.0, 0.0)
    tray = {"arm": arm, "gain_pose": near}
    round_ = circle(arm.arm(), near, centre_m=[0.5, 0, 0.5], radius_m=0.1, normal=[0, 0, 1], turn_s=2)
    straight = line(arm.arm(), near, to_m=[0.5, 0.1, 0.5], tool_rpy_deg=[180, 0, 0])
    spread = Spread(5.0, (("fore", 25.0),), shared=True)
    known = Knowledge((), ("m.fore",), ((0.0,) * 10 + (1.0,) + (0.0,) * 9,), ((1 / 300,),), ())
    case = Case(payload_kg=3, link_cog_mm=(("fore", (1, 2, 3)),), viscous_percent=Spread(60, (("elbow", 1),)))
    return {
        "registered law, via points": run_of(folder, pd, motion=via),
        "my law": run_of(folder, my_law(folder)),
        "lists of gains": run_of(folder, registered_law("computed-torque", kp=(1 / 3, 2), kd=(0.1, 0.2))),
        "table": run_of(folder, pd, motion=table),
        "chain": run_of(folder, pd, motion=ChainMotion((via, table, ChainMotion((table,), 2)), 2, 0.3)),
        "circle": run_of(folder, pd, motion=round_, **tray),
        "line": run_of(folder, pd, motion=straight, **tray),
        "model": run_of(folder, pd, model=ArmFiles.read(folder / "planar2" / "arm.yaml")),
        "drives": run_of(
            folder, pd, arm=run_of(folder, pd).arm.with_drives([("all", "viscous", 0.1), ("elbow", "coulomb", 1)])
        ),
        "draw": drawn(run_of(folder, pd, mismatch=Mismatch(link_mass_percent=spread)), 2**62),
        "identification": drawn(run_of(folder, pd, mismatch=Mismatch(identification=known)), 1),
        "case": run_of(folder, pd, case=case, start_offset=(0.01, 0.0), base_tilt=(0.1, -0.0)),
        "scene": run_of(
            folder, pd, scene=SceneChoice("bakery.py:table", load_file_scene(folder / "bakery.py", "table")[1])
        ),
        "noise": run_of(
            folder, pd, draw=3, sensing=Sensing("link", 1e-3, 50.0), timing=Timing(0.25, 10, 1, True), seed=2**70
        ),
    }  # fmt: skip


def test_a_run_comes_back_from_its_texts_the_same(variants: dict[str, Run]) -> None:
    """Equal in every field and type, with the same key; what several runs share is one text."""
    keeper = Keeper()
    digests = {name: keeper.keep(run) for name, run in variants.items()}
    texts = dict(keeper.texts)
    assert {name: keeper.keep(run) for name, run in variants.items()} == digests
    assert keeper.texts == texts
    assert sum('"is":"ArmFiles"' in text for text in texts.values()) == 3  # planar2, with changes, tray6
    for name, run in variants.items():
        back = restored(texts[digests[name]], texts.__getitem__, run.draw)
        assert back.run == run, name
        assert repr(back.run) == repr(run), name
        assert back.run.key() == run.key(), name
        assert back.changed() == (), name
        t = np.linspace(0, run.motion.duration_s, 7)
        for mine, theirs in zip(back.run.motion.reference(t), run.motion.reference(t), strict=True):
            assert np.array_equal(mine, theirs), name


def test_every_class_that_a_run_may_hold_is_known(variants: dict[str, Run]) -> None:
    """All that the variants hold is on the list, and nothing on it goes untried."""
    keeper = Keeper()
    for run in variants.values():
        keeper.keep(run)
    held = {name for text in keeper.texts.values() for name in _classes(json.loads(text))}
    assert held == set(kept_module._types())


def _classes(value: Any) -> Iterator[str]:
    if isinstance(value, dict):
        if "is" in value:
            yield value["is"]
        for inner in value.values():
            yield from _classes(inner)
    elif isinstance(value, list):
        for inner in value:
            yield from _classes(inner)


def test_lists_dicts_and_bytes_keep_their_types() -> None:
    """What JSON would flatten comes back as it was."""
    value = ([1, (2.5, None)], {"a": (True,), 3: b"\x00\xff"}, float("inf"), -0.0)
    back = kept_module._decoded(json.loads(json.dumps(kept_module._encoded(value))))
    assert back == value
    assert repr(back) == repr(value)


@dataclass(frozen=True)
class OddRun:
    """A stand-in whose motion can be anything."""

    motion: Any
    draw: int | None = None

    def inputs(self) -> dict[str, Any]:
        return {}


@dataclass(frozen=True)
class Wobble:
    """A motion of somebody else's."""

    hz: float


@pytest.mark.parametrize(
    ("odd", "says"),
    [(np.zeros(2), "type ndarray"), (Wobble(2.0), "a Wobble, which this version"), (1, "no Run")],
)
def test_what_can_not_be_kept_fails_the_replay_alone(odd: Any, says: str) -> None:
    """Keeping it is no obstacle to a campaign; who wants the run back is told what was in the way."""
    keeper = Keeper()
    digest = keeper.keep(OddRun(odd))  # type: ignore[arg-type]
    with pytest.raises(NotKept, match=says):
        restored(keeper.texts[digest], keeper.texts.__getitem__, None)


# --- replaying


def test_every_stored_run_replays_bit_for_bit_without_its_files(store: Store, filled: Path) -> None:
    """Arm, law and experiment files are gone; outcomes, reasons, residuals and scores are the stored ones."""
    assert [file.name for file in filled.parent.iterdir()] == ["short.sqlite"]
    outcomes = set()
    for record in store.records():
        if record.row.law == "fragile":
            continue
        again = replay(store, record)
        outcomes.add(again.log.outcome)
        assert again.identical, again.differences
        assert again.reasons == ()
        assert again.log.outcome == record.row.outcome
        assert bool(again.scores) is (record.row.outcome == "finished")
        assert all(stored == replayed for stored, replayed in again.pairs().values())
        assert not any(name.startswith("law_") for name in again.scores)
    assert outcomes == {"finished", "hit-stop", "diverged"}


def test_draws_differ_and_are_told_apart(store: Store) -> None:
    """Both draws share one text in the store; each replays on its own machine."""
    one, other = (replay(store, record_of(store, "pd", draw)) for draw in (0, 1))
    assert one.scores != other.scores
    assert not np.array_equal(one.log.plant.parameters, other.log.plant.parameters)
    count = store._connection.execute("SELECT count(DISTINCT run) FROM places WHERE law = 'pd'").fetchone()[0]
    assert count == 2  # nominal, and all draws


def test_what_differs_is_said_with_both_values(store: Store) -> None:
    """One score of the store is off by a bit: that one, and no reason that the store knows of."""
    record = record_of(store, "pd")
    scores = {n: v for n, v in record.row.scores.items() if not n.startswith("law_")}
    wrong = scores | {"tool_peak_mm": float(np.nextafter(scores["tool_peak_mm"], np.inf))}
    host_scores = {n: v for n, v in record.row.scores.items() if n.startswith("law_")}
    values = packed(wrong, host_scores)[1]
    again = altered(store, record.key, "UPDATE runs SET scores = ? WHERE THIS", values)
    (difference,) = again.differences
    assert not again.identical
    assert difference.name == "tool_peak_mm"
    assert (difference.stored, difference.replayed) == (wrong["tool_peak_mm"], scores["tool_peak_mm"])
    assert again.reasons == (
        "nothing that the store knows of has changed: does the law use chance or the clock?",
    )


def test_a_change_of_outcome_is_a_difference(store: Store) -> None:
    """Stored as diverged, finished in the replay: outcome, reason, and every score there is now."""
    record = record_of(store, "pd")
    again = altered(
        store,
        record.key,
        "UPDATE runs SET outcome = 'diverged', reason = 'x', scores = ?,"
        " layout = (SELECT id FROM layouts WHERE names = ?) WHERE THIS",
        b"",
        Layout((), ()).text,
    )
    names = [difference.name for difference in again.differences]
    assert names[:2] == ["outcome", "reason"]
    assert set(names[2:]) == set(again.scores)
    assert again.pairs()["tool_peak_mm"] == (None, again.scores["tool_peak_mm"])


def test_another_host_is_a_reason(store: Store) -> None:
    """CPU and package versions that differ are named, with what they are here; none if all came out equal."""
    record = record_of(store, "pd")
    host = store.host(record.key)
    assert host is not None
    there = dict(host.versions) | {"numpy": "1.0"}
    same = altered(store, record.key, "UPDATE hosts SET cpu = 'an abacus', versions = ?", json.dumps(there))
    assert same.identical
    assert same.reasons == ()
    again = altered(store, record.key, "UPDATE runs SET residual_rad_s = 1.0 WHERE THIS")
    assert [difference.name for difference in again.differences] == ["residual_rad_s"]
    here = dict(host.versions)["numpy"]
    assert again.reasons == (
        f"it was done on another type of CPU (an abacus; here {host.cpu})",
        f"it was done with numpy 1.0 (here {here})",
    )


@pytest.mark.parametrize(
    ("mark", "says"), [("law", "the source of the law 'independent-joint'"), ("numerics", "arithmetic")]
)
def test_a_changed_source_is_a_reason(store: Store, mark: str, says: str) -> None:
    """A law's sources, or our own numerics, were others when the run was planned: said if anything differs."""
    record = record_of(store, "pd")
    for digest, text in store._connection.execute("SELECT digest, text FROM parts").fetchall():
        found = json.loads(text)
        if "marks" in found:
            found["marks"][mark] = "0" * 16
            store._connection.execute(
                "UPDATE parts SET text = ? WHERE digest = ?", (json.dumps(found), digest)
            )
    assert replay(store, record).identical
    again = altered(store, record.key, "UPDATE runs SET residual_rad_s = 1.0 WHERE THIS")
    (reason,) = again.reasons
    assert says in reason


def test_a_run_that_came_to_nothing_shows_its_own_traceback(store: Store) -> None:
    """There is nothing to replay after a law-error or a crash, whatever the store has of it."""
    record = record_of(store, "fragile")
    with pytest.raises(InputFaults, match=r"(?s)nothing to replay.*law-error.*enough.*mine\.py"):
        replay(store, record)
    with pytest.raises(InputFaults, match=r"nothing to replay.*timed-out"):
        altered(store, record.key, "UPDATE runs SET outcome = 'timed-out', trace = '' WHERE THIS")


def test_a_law_that_raises_now_is_told_as_such(store: Store) -> None:
    """Stored as finished, raising in the replay: a fault with the law's traceback and what may be the reason."""
    record = record_of(store, "fragile")
    with pytest.raises(
        InputFaults,
        match=r"(?s)had not when it was stored: nothing that.*raised ValueError: enough.*mine\.py",
    ):
        altered(store, record.key, "UPDATE runs SET outcome = 'finished' WHERE THIS")


def test_a_law_that_is_not_installed_is_named(store: Store) -> None:
    """With the package it came from, if the store knows one."""
    record = record_of(store, "pd")
    for digest, text in store._connection.execute("SELECT digest, text FROM parts").fetchall():
        store._connection.execute(
            "UPDATE parts SET text = ? WHERE digest = ?",
            (text.replace("independent-joint", "acme-pd"), digest),
        )
    store._connection.execute(
        "UPDATE hosts SET versions = ?", (json.dumps({"python": "3", "numpy": "2", "acme": "7"}),)
    )
    with pytest.raises(
        InputFaults, match=r"'acme-pd' is not registered here; expected the package.*: acme 7$"
    ):
        replay(store, record)


# --- stores of other times


def test_a_store_of_the_first_schema_is_brought_up_to_date(
    tmp_path: Path, make_plan: Callable[..., Plan]
) -> None:
    """Its runs stay; until a plan is recorded anew, a replay says what is missing and what helps."""
    plan, path = make_plan(draws=1), tmp_path / "old.sqlite"
    connection = sqlite3.connect(path, isolation_level=None)
    migrate(connection, MIGRATIONS[:1])
    key = plan.entries[0].key
    connection.execute(
        "INSERT INTO campaign VALUES (1, ?, 'a.yaml', '', NULL, ?, '', '')", (plan.title, _labels(plan))
    )
    connection.execute("INSERT INTO plan VALUES (0, '', 'pd', 'lift', 'nominal', 0, NULL, '', ?)", (key,))
    connection.execute("INSERT INTO runs VALUES (?, 'finished', '', '', '{}', '{}', 0, 0, NULL, '')", (key,))
    connection.close()
    with pytest.raises(StoreError, match="older rigbench"):
        Store.open_for_reading(path)
    with Store.open_for_writing(path, plan) as store:
        record = run_by_key(store, key)
        with pytest.raises(StoreError, match=r"did not keep what a replay needs; 'rigbench run' adds it"):
            replay(store, record)
        store.record_plan(plan)
        assert len(store.rows()) == 1
        with pytest.raises(StoreError, match="FakeArmFiles, which this version"):  # the stand-in's own
            store.kept(key)


def _labels(plan: Plan) -> str:
    from rigbench.campaign.labels import Labels

    return Labels.of(plan).to_json()


def test_a_part_that_is_missing_is_said(store: Store) -> None:
    """A store somebody tampered with is a StoreError, not a KeyError."""
    record = record_of(store, "pd")
    with pytest.raises(StoreError, match="a part of it is missing"):
        altered(store, record.key, "DELETE FROM parts WHERE text LIKE '%ViaMotion%'")

"""Replaying stored runs: from the store alone, bit for bit, or else with what differs and why."""

from __future__ import annotations

import json
import shutil
import sqlite3
from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from rigbench.arm.files import ArmFiles
from rigbench.arm.mismatch import Case, Mismatch, Payload, Spread
from rigbench.campaign import kept as kept_module
from rigbench.campaign.campaign import run_campaign
from rigbench.campaign.find import run_by_key, worst_run
from rigbench.campaign.kept import Keeper, NotKept, restored
from rigbench.campaign.migrations import MIGRATIONS, migrate
from rigbench.campaign.plan import Entry, Plan
from rigbench.campaign.reading import Record
from rigbench.campaign.replay import Replay, replay
from rigbench.campaign.store import Store
from rigbench.campaign.work import Host, Outcome
from rigbench.errors import InputFaults, StoreError
from rigbench.laws.options import options_model
from rigbench.laws.registry import LawChoice, choose, load_file_law, registered
from rigbench.motion.chained import ChainMotion
from rigbench.motion.path import circle, line
from rigbench.motion.table import TableMotion
from rigbench.motion.via import ViaMotion
from rigbench.rig import Rates, Run
from rigbench.rig.sampled import Sensing, Timing
from rigbench.rig.scene import SceneChoice, load_file_scene
from rigbench.scores.results import Column, Tolerance

ARMS = Path(__file__).resolve().parents[2] / "robots_demo"

MY_LAW = """\
import numpy as np
from rigbench.laws import Law, option
from gains_of_mine import FACTOR


class Mine(Law):
    stop_s: float = option(9.0)

    def start(self, setup):
        self.limit = setup.torque_limit

    def torque(self, t, q, v, ref, held):
        if t >= self.stop_s:
            raise ValueError("enough")
        return FACTOR * (ref.q - q) - 5.0 * v


class Push(Mine):
    def torque(self, t, q, v, ref, held):
        return self.limit
"""


MY_SCENE = """\
def table(client, body, arm):
    pass
"""


def registered_law(name: str, **options: Any) -> LawChoice:
    return choose(name, options_model(registered().laws[name].cls)(**options))


def run_of(folder: Path, law: LawChoice, **given: Any) -> Run:
    """Planar2 from the copy in ``folder``, a short motion at a low rate."""
    values: dict[str, Any] = {
        "arm": ArmFiles.read(folder / "planar2" / "arm.yaml"),
        "law": law,
        "motion": ViaMotion(((0.0, 0.0), (0.3, -0.2)), leg_s=0.7, rest_s=0.3),
        "rates": Rates(500.0, 1000.0),
        "gain_pose": (0.0, 0.0),
        "settle_band_mm": 0.5,
        "seed": 3,
        "mismatch": Mismatch(link_mass_percent=20.0, payload=Payload(0.5, 0.0, 1.0, 10.0)),
    }
    return Run(**(values | given))


def files_in(where: Path) -> Path:
    """The demo arms, a law and a scene of the user's, in a folder of their own."""
    shutil.copytree(ARMS, where)
    (where / "mine.py").write_text(MY_LAW)
    (where / "bakery.py").write_text(MY_SCENE)
    (where / "gains_of_mine.py").write_text("FACTOR = 150.0\n")
    return where


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    return files_in(tmp_path / "files")


def my_law(folder: Path, name: str = "Mine", **options: Any) -> LawChoice:
    cls, files = load_file_law(folder / "mine.py", name)
    return choose(f"mine.py:{name}", options_model(cls)(**options), files)


@pytest.fixture(scope="module")
def filled(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A store of six laws, nominal and two draws, all done; the files are removed after that."""
    where = tmp_path_factory.mktemp("filled")
    folder = files_in(where / "files")
    laws = {
        "pd": registered_law("independent-joint", kp=(80.0, 30.0), kd=(9.0, 2.0)),
        "computed": registered_law("computed-torque", natural_hz=3.0),
        "mine": my_law(folder),
        "push": my_law(folder, "Push"),
        "fragile": my_law(folder, stop_s=0.1),
        "wild": my_law(folder, "Push"),
    }
    wild = ArmFiles.read(folder / "planar2" / "arm.yaml").with_drives([("all", "torque_limit", 1e9)])
    entries = [
        Entry("", law, "short", "nominal" if draw is None else "all at 1", float(draw is not None), draw, run)
        for law, choice in laws.items()
        for draw in (None, 0, 1)
        for run in [_drawn(run_of(folder, choice, **({"arm": wild} if law == "wild" else {})), draw)]
    ]
    plan = Plan(
        "Short", "planar2", "", "short.yaml", ("",), tuple(laws), ("short",),
        (Column("nominal", 0.0, False, True), Column("all at 1", 1.0, True, True)),
        2, Tolerance({"tool_peak_mm": 50.0}), tuple(entries), "rigbench run short.yaml",
    )  # fmt: skip
    with Store.open_for_writing(where / "short.sqlite", plan) as opened:
        run_campaign(plan, opened, jobs=0)
    shutil.rmtree(folder)
    return where / "short.sqlite"


SHORT = Plan("Short", "planar2", "", "short.yaml", ("",), (), ("short",), (), 2, None, (), "")


@pytest.fixture
def store(tmp_path: Path, filled: Path) -> Iterator[Store]:
    """A copy of that store, for the test to alter."""
    shutil.copy(filled, tmp_path / "short.sqlite")
    with Store.open_for_writing(tmp_path / "short.sqlite", SHORT) as opened:
        yield opened


def _drawn(run: Run, draw: int | None) -> Run:
    return run if draw is None else replace(run, level=1.0, sources=run.mismatch.sources, draw=draw)


def record_of(store: Store, law: str, draw: int | None = 1) -> Record:
    return next(r for r in store.records() if (r.row.law, r.row.draw) == (law, draw))


def altered(store: Store, key: str, statement: str, *values: object) -> Replay:
    """Replay a run after something in the store was changed behind its back."""
    store._connection.execute(statement, values)
    record = store.record(key)
    assert record is not None
    return replay(store, record)


# --- a run as text and back


def variants(folder: Path) -> dict[str, Run]:
    """Runs that between them use everything that a run may hold."""
    pd, arm = registered_law("independent-joint"), ArmFiles.read(folder / "tray6" / "arm.yaml")
    via = ViaMotion(((0.0, 0.0), (1 / 3, -0.1)), 0.1 + 0.2, 0.1, pace=1.5)
    table = TableMotion((0.0, 0.1, 0.35), ((0.0, 1e-300), (0.1, 0.2), (0.3, 0.1 * 3)), 0.7)
    near = (0.0, -1.0, 1.5, 0.0, 1.0, 0.0)
    tray = {"arm": arm, "gain_pose": near}
    round_ = circle(arm.arm(), near, centre_m=[0.5, 0, 0.5], radius_m=0.1, normal=[0, 0, 1], turn_s=2)
    straight = line(arm.arm(), near, to_m=[0.5, 0.1, 0.5], tool_rpy_deg=[180, 0, 0])
    spread = Spread(5.0, (("fore", 25.0),), shared=True)
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
        "draw": _drawn(run_of(folder, pd, mismatch=Mismatch(link_mass_percent=spread)), 2**62),
        "case": run_of(folder, pd, case=case, start_offset=(0.01, 0.0), base_tilt=(0.1, -0.0)),
        "scene": run_of(
            folder, pd, scene=SceneChoice("bakery.py:table", load_file_scene(folder / "bakery.py", "table")[1])
        ),
        "noise": run_of(
            folder, pd, draw=3, sensing=Sensing("link", 1e-3, 50.0), timing=Timing(0.25, 10, 1, True), seed=2**70
        ),
    }  # fmt: skip


def test_a_run_comes_back_from_its_texts_the_same(folder: Path) -> None:
    """Equal in every field and type, with the same key; what several runs share is one text."""
    runs = variants(folder)
    keeper = Keeper()
    digests = {name: keeper.keep(run) for name, run in runs.items()}
    texts = dict(keeper.texts)
    assert {name: keeper.keep(run) for name, run in runs.items()} == digests
    assert keeper.texts == texts
    assert sum('"is":"ArmFiles"' in text for text in texts.values()) == 3  # planar2, with changes, tray6
    for name, run in runs.items():
        back = restored(texts[digests[name]], texts.__getitem__, run.draw)
        assert back.run == run, name
        assert repr(back.run) == repr(run), name
        assert back.run.key() == run.key(), name
        assert back.changed() == (), name
        t = np.linspace(0, run.motion.duration_s, 7)
        for mine, theirs in zip(back.run.motion.reference(t), run.motion.reference(t), strict=True):
            assert np.array_equal(mine, theirs), name


def test_every_class_that_a_run_may_hold_is_known(folder: Path) -> None:
    """All that the variants hold is on the list, and nothing on it goes untried."""
    keeper = Keeper()
    for run in variants(folder).values():
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
    count = store._connection.execute("SELECT count(DISTINCT run) FROM plan WHERE law = 'pd'").fetchone()[0]
    assert count == 2  # nominal, and all draws


def test_what_differs_is_said_with_both_values(store: Store) -> None:
    """One score of the store is off by a bit: that one, and no reason that the store knows of."""
    record = record_of(store, "pd")
    scores = {n: v for n, v in record.row.scores.items() if not n.startswith("law_")}
    wrong = scores | {"tool_peak_mm": float(np.nextafter(scores["tool_peak_mm"], np.inf))}
    again = altered(
        store, record.key, "UPDATE runs SET scores = ? WHERE key = ?", json.dumps(wrong), record.key
    )
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
        "UPDATE runs SET outcome = 'diverged', reason = 'x', scores = '{}' WHERE key = ?",
        record.key,
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
    again = altered(store, record.key, "UPDATE runs SET residual_rad_s = 1.0 WHERE key = ?", record.key)
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
    again = altered(store, record.key, "UPDATE runs SET residual_rad_s = 1.0 WHERE key = ?", record.key)
    (reason,) = again.reasons
    assert says in reason


def test_a_run_that_came_to_nothing_shows_its_own_traceback(store: Store) -> None:
    """There is nothing to replay after a law-error or a crash, whatever the store has of it."""
    record = record_of(store, "fragile")
    with pytest.raises(InputFaults, match=r"(?s)nothing to replay.*law-error.*enough.*mine\.py"):
        replay(store, record)
    with pytest.raises(InputFaults, match=r"nothing to replay.*timed-out"):
        altered(
            store, record.key, "UPDATE runs SET outcome = 'timed-out', trace = '' WHERE key = ?", record.key
        )


def test_a_law_that_raises_now_is_told_as_such(store: Store) -> None:
    """Stored as finished, raising in the replay: a fault with the law's traceback and what may be the reason."""
    record = record_of(store, "fragile")
    with pytest.raises(
        InputFaults,
        match=r"(?s)had not when it was stored: nothing that.*raised ValueError: enough.*mine\.py",
    ):
        altered(store, record.key, "UPDATE runs SET outcome = 'finished' WHERE key = ?", record.key)


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


# --- finding a run


def test_a_run_is_found_by_the_beginning_of_its_key(store: Store) -> None:
    """Any beginning that no other key shares, in either case of letters."""
    keys = sorted(record.key for record in store.records())
    for key in keys:
        others = [other for other in keys if other != key]
        shortest = next(n for n in range(1, 41) if not any(other.startswith(key[:n]) for other in others))
        for length in (shortest, 40):
            assert run_by_key(store, key[:length].upper()).key == key


def test_a_key_that_names_no_run(tmp_path: Path, make_plan: Callable[..., Plan]) -> None:
    """No digits, no such key, several, not run yet, not planned any more: each is said in its own words."""
    plan = make_plan(draws=3)
    with Store.open_for_writing(tmp_path / "a.sqlite", plan) as store:
        store.record_plan(plan)
        done, waiting = plan.entries[0].key, plan.entries[1].key
        store.add([Outcome(done, "finished"), Outcome("0" * 40, "finished")])
        assert run_by_key(store, done).row.law == plan.entries[0].law
        assert store.keys(done) == ([done], [])
        assert store.keys("0" * 40) == ([], ["0" * 40])
        twins = [entry.key for entry in plan.entries]
        first = max((key[0] for key in twins), key=lambda digit: sum(key.startswith(digit) for key in twins))
        for beginning, says in (
            ("xyz", "no hexadecimal number"),
            ("", "no hexadecimal number"),
            ("a%", "no hexadecimal number"),
            ("f" * 40, "no run's key begins"),
            (first, "is the beginning of [0-9]+ keys"),
            (waiting, "planned, but has not been run yet"),
            ("0" * 12, "no longer plans that run"),
        ):
            with pytest.raises(InputFaults, match=says):
                run_by_key(store, beginning)


@pytest.fixture
def worst_plan(doing: Any, make_plan: Callable[..., Plan]) -> Plan:
    """Two sheets, two motions, three draws of one law."""
    entries = tuple(
        Entry(
            sheet, "pd", motion, "all at 1", 1.0, draw, doing.FakeRun(f"{sheet} {motion} {draw}", draw=draw)
        )
        for draw in range(3)
        for sheet in ("slow", "fast")
        for motion in ("lift", "rim")
    )
    tolerance = Tolerance({"settle_ms": 1.0, "path_peak_mm": 3.0})
    return make_plan(sheets=("slow", "fast"), motions=("lift", "rim"), entries=entries, tolerance=tolerance)


def worst(
    tmp_path: Path, plan: Plan, came_out: Callable[[Entry, int], Outcome | None], *names: str | None
) -> Any:
    with Store.open_for_writing(tmp_path / "worst.sqlite", plan) as store:
        store.record_plan(plan)
        found = (came_out(entry, number) for number, entry in enumerate(plan.entries))
        store.add(outcome for outcome in found if outcome)
        row = worst_run(store, "pd", "all at 1", *names).row
    return row.sheet, row.motion, row.draw


def scored(entry: Entry, value: float) -> Outcome:
    return Outcome(entry.key, "finished", scores={"path_peak_mm": value, "tool_peak_mm": -value})


def test_the_worst_run_has_the_largest_main_score(tmp_path: Path, worst_plan: Plan) -> None:
    """The main score is the first limited one of the tool; a motion and a sheet narrow the choice."""
    assert worst(tmp_path, worst_plan, scored) == ("fast", "rim", 2)
    assert worst(tmp_path, worst_plan, scored, "lift") == ("fast", "lift", 2)
    assert worst(tmp_path, worst_plan, scored, "lift", "slow") == ("slow", "lift", 2)


def test_a_run_that_did_not_finish_is_the_worst(tmp_path: Path, worst_plan: Plan) -> None:
    """Whatever the others score; the first one of several."""

    def came_out(entry: Entry, number: int) -> Outcome:
        return Outcome(entry.key, "diverged") if number in (5, 7) else scored(entry, number)

    assert worst(tmp_path, worst_plan, came_out) == ("slow", "rim", 1)


def test_draws_that_do_not_count_are_passed_over(tmp_path: Path, worst_plan: Plan) -> None:
    """A draw lacks a motion, or came to nothing in one: not looked at, unless one motion alone is asked for."""

    def came_out(entry: Entry, number: int) -> Outcome | None:
        if number == 10:
            return None
        return Outcome(entry.key, "crashed") if number == 8 else scored(entry, number)

    assert worst(tmp_path, worst_plan, came_out) == ("fast", "rim", 1)
    assert worst(tmp_path, worst_plan, came_out, "rim") == ("fast", "rim", 2)


def test_without_a_draw_that_counts_there_is_no_worst(tmp_path: Path, worst_plan: Plan) -> None:
    """Nothing run yet, or all came to nothing: then with the first traceback."""
    with pytest.raises(InputFaults, match=r"verdict in every motion$"):
        worst(tmp_path, worst_plan, lambda entry, number: None)
    with pytest.raises(InputFaults, match=r"(?s)came to nothing \(crashed\): bang\nTraceback: mine"):
        worst(tmp_path, worst_plan, lambda e, n: Outcome(e.key, "crashed", "bang", trace="Traceback: mine"))


def test_names_of_nothing_are_all_told_with_the_nearest(store: Store) -> None:
    """Law, condition, motion and sheet at once."""
    with pytest.raises(InputFaults) as caught:
        worst_run(store, "compted", "nominl", "shrt", "fast")
    assert [(fault.key, fault.near) for fault in caught.value.faults] == [
        ("law", "computed"),
        ("condition", "nominal"),
        ("motion", "short"),
        ("sheet", None),
    ]


def test_the_host_of_a_run_comes_back(tmp_path: Path, make_plan: Callable[..., Plan]) -> None:
    """As it was stored, in the order of its versions; None where none was."""
    plan, host = make_plan(draws=1), Host("a CPU", (("python", "3"), ("numpy", "2")))
    with Store.open_for_writing(tmp_path / "a.sqlite", plan) as store:
        store.record_plan(plan)
        store.add([Outcome("a" * 40, "finished", host=host), Outcome("b" * 40, "finished")])
        assert store.host("a" * 40) == host
        assert store.host("b" * 40) is None

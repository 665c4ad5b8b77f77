"""find_level: each draw's own limit by bisection, through a campaign and its store.

The toy law's error at level L on draw d is its slope times L u(d), u uniform in [0, 1): its own limit is
1 / (slope u), and the level that a share p of the draws keep is 1 / (slope p).
"""

from __future__ import annotations

import hashlib
import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from types import ModuleType
from typing import Any

import numpy as np
import pytest

from rigbench.campaign.campaign import run_campaign
from rigbench.campaign.executor import InProcess
from rigbench.campaign.plan import Entry, Plan, fair_order
from rigbench.campaign.reading import Record
from rigbench.campaign.store import Store
from rigbench.campaign.studied import Studied
from rigbench.campaign.studies.find_level import FindLevel, Rung, Searching, searched_of
from rigbench.campaign.work import Outcome, failed
from rigbench.scores.intervals import wilson
from rigbench.scores.results import Column, Results, Tolerance
from rigbench.scores.row import Row
from rigbench.scores.searched import found_level

LADDER = (0.25, 0.5, 1.0, 2.0)
SLOPES = {"pd": 1.0, "feedforward": 0.5}
TOLERANCE = Tolerance({"tool_peak_mm": 1.0})

Build = Callable[..., Plan]


def u(draw: int | None) -> float:
    return float(np.random.default_rng(1000 + (draw or 0)).random())


@pytest.fixture
def toy(doing: ModuleType) -> type[Any]:
    @dataclass(frozen=True)
    class Toy(doing.FakeRun):  # type: ignore[name-defined,misc]
        """A stand-in with a level, of which ``name`` is law and motion."""

        level: float = 0.0

        def key(self) -> str:
            text = f"{self.name} {self.level} {self.draw if self.level else None}"
            return hashlib.blake2b(text.encode(), digest_size=20).hexdigest()

    return Toy


@pytest.fixture
def build(toy: type[Any], make_plan: Build) -> Build:
    """A plan of the toy laws on the ladder, with the study."""

    def plan_of(
        draws: int, *, ladder: Sequence[float] = LADDER, motions: Sequence[str] = ("lift",), **given: Any
    ) -> Plan:
        columns = [Column("nominal", 0.0, False, True)]
        columns += [Column(f"all at {level:g}", level, True, True) for level in ladder]
        entries, searching = [], []
        for law in SLOPES:
            runs = {m: toy(f"{law} {m}", sources=("coulomb_percent",)) for m in motions}
            for motion, run in runs.items():
                for c in columns:
                    for draw in range(draws) if c.random else (None,):
                        own = replace(run, level=c.level or 0.0, draw=draw)
                        entries.append(Entry("", law, motion, c.name, c.level, draw, own))
            rungs = tuple(Rung(c.name, c.level or 0.0, c.random) for c in columns)
            searching.append(Searching("", law, runs, rungs))
        values: dict[str, Any] = {"tolerance": TOLERANCE, "draws": draws, "most": 4.0, "steps": 6}
        study = FindLevel(tuple(searching), **(values | given))
        return make_plan(
            draws=draws,
            columns=tuple(columns),
            motions=tuple(motions),
            entries=fair_order(entries),
            tolerance=TOLERANCE,
            studies=(study,),
        )

    return plan_of


def error(run: Any) -> float:
    return SLOPES[run.name.split()[0]] * float(run.level) * u(run.draw)


@dataclass
class Work:
    """Does the toy runs, and remembers which."""

    error: Callable[[Any], float] = error
    trouble: Callable[[Any], bool] = lambda run: False

    def __post_init__(self) -> None:
        self.done: list[Any] = []

    def __call__(self, run: Any) -> Outcome:
        self.done.append(run)
        if self.trouble(run):
            return failed(run.key(), "no-plant", "it could not exist")
        return Outcome(run.key(), "finished", scores={"tool_peak_mm": self.error(run)}, wall_s=0.1)


def results_of(plan: Plan, path: Path, work: Work) -> Results:
    with Store.open_for_writing(path, plan) as store:
        run_campaign(plan, store, executor=InProcess(work))
        return store.results()


def limits_of(results: Results, law: str) -> Any:
    return next(s.limits for s in results.standings if s.law == law)


def test_each_draw_s_own_limit_is_bracketed_as_finely_as_asked(tmp_path: Path, build: Build) -> None:
    """Every bracket holds 1 / (slope u), is no wider than 4 / 2^6, and open where the limit lies beyond 4."""
    results = results_of(build(40), tmp_path / "s.sqlite", Work())
    for law, slope in SLOPES.items():
        true, limits = np.array([1.0 / (slope * u(d)) for d in range(40)]), limits_of(results, law)
        assert np.all((limits.low <= true) & (true <= limits.high))
        beyond = true > 4.0
        assert beyond.any()
        assert np.all(limits.low[beyond] == 4.0)
        assert np.all((limits.high - limits.low)[~beyond] <= 4.0 / 64 + 1e-12)
    assert results.level_search is not None
    assert (results.level_search.draws, results.level_search.finest) == (40, 0.0625)
    found = results.standings[0].found
    assert found is not None
    assert (found.draws, found.keep_again, found.left_open) == (40, 0, 0)


def test_no_run_is_done_twice_and_no_more_than_foretold(tmp_path: Path, build: Build) -> None:
    """The rungs of the ladder are the matrix's own runs; a second campaign does none; the study is stored."""
    plan, work = build(30, motions=("lift", "rim")), Work()
    study = plan.studies[0]
    with Store.open_for_writing(tmp_path / "s.sqlite", plan) as store:
        run_campaign(plan, store, executor=InProcess(work))
        keys = [run.key() for run in work.done]
        assert len(set(keys)) == len(keys)
        assert len(plan.entries) < len(keys) <= len(plan.entries) + study.most_runs
        run_campaign(plan, store, executor=InProcess(work))
        assert len(work.done) == len(keys)
        stored = store.study("find_level")
        assert stored is not None
        assert stored.finished
        assert stored.declared == {"most": 4.0, "steps": 6, "draws": 30}
        assert {r.row.condition for r in stored.records} >= {"nominal", "all at 0.25", "all at 3"}
        assert len(store.rows()) == len(plan.entries)  # the matrix holds none of it


@pytest.mark.parametrize(
    ("ladder", "most", "steps", "levels"),
    [
        (LADDER, 4.0, 6, 6),  # most, and 5 halvings of 2 to 4
        ((), 4.0, 6, 7),  # most, and all 6
        ((2.0, 4.0), 4.0, 6, 5),  # most is a rung
        ((1.0,), 1.5, 1, 1),  # the brackets are fine enough as they are
    ],
)
def test_the_runs_that_it_takes_at_most(
    build: Build, ladder: Sequence[float], most: float, steps: int, levels: int
) -> None:
    """By hand; and no draw, wherever its limit lies, takes more, though one takes as many."""
    study = build(1, ladder=ladder, most=most, steps=steps).studies[0]
    assert isinstance(study, FindLevel)
    assert study.most_runs == len(SLOPES) * levels
    taken = []
    for limit in np.linspace(0.01, most + 0.3, 120):
        rounds = study.rounds(lambda entry, limit=limit: row(entry, entry.run.level <= limit))
        own = [entry for entries in rounds for entry in entries if entry.law == "pd"]
        taken.append(sum(entry.level not in (0.0, *ladder) for entry in own))
    assert max(taken) == levels


def row(entry: Entry, kept: bool | None) -> Row:
    outcome = "crashed" if kept is None else "finished"
    place = entry.sheet, entry.law, entry.motion, entry.condition, entry.level, entry.draw
    return Row(*place, outcome, {"tool_peak_mm": 0.0 if kept else 2.0})


def test_the_same_rounds_come_again_and_one_more(build: Build) -> None:
    """As a study must; the first round with a run to do is the last that is told."""
    study = build(3).studies[0]
    known: dict[str, Row] = {}
    before: list[list[str]] = []
    for _ in range(20):
        rounds = study.rounds(lambda entry, known=known: known.get(entry.key))
        keys = [[entry.key for entry in entries] for entries in rounds]
        assert keys[: len(before)] == before
        new = [entry for entries in rounds for entry in entries if entry.key not in known]
        if not new:
            break
        assert new == list(rounds[-1])
        known |= {entry.key: row(entry, error(entry.run) <= 1.0) for entry in new}
        before = keys
    assert not new


def test_a_draw_that_keeps_again_is_counted_and_ends_at_its_first_miss(tmp_path: Path, build: Build) -> None:
    """Draw 3 misses from 0.7 to 1.2 alone: the rungs 0.5 and 1 bracket that, rung 2 keeps again."""

    def gap(run: Any) -> float:
        return 2.0 if run.draw == 3 and 0.7 < run.level < 1.2 else 0.0

    results = results_of(build(10), tmp_path / "s.sqlite", Work(gap))
    for standing in results.standings:
        assert standing.found is not None
        assert (standing.found.keep_again, standing.found.never_miss) == (1, 9)
    low, high = limits_of(results, "pd").low[3], limits_of(results, "pd").high[3]
    assert low <= 0.7 <= high <= low + 0.0625


def test_a_host_s_trouble_leaves_its_draw_open_and_is_counted(tmp_path: Path, build: Build) -> None:
    """Plants of draw 2 can't exist above level 1: its limit may lie anywhere there; no run follows."""

    def trouble(run: Any) -> bool:
        return run.draw == 2 and run.level > 1.0

    plan, work = build(80), Work(lambda run: 0.0, trouble)
    results = results_of(plan, tmp_path / "s.sqlite", work)
    standing = results.standings[0]
    assert standing.found is not None
    assert (standing.found.left_open, standing.found.draws) == (1, 80)
    limits = limits_of(results, "pd")
    assert (limits.low[2], limits.high[2]) == (1.0, math.inf)
    assert {run.level for run in work.done if run.draw == 2} == set(LADDER)


def test_every_motion_must_keep(tmp_path: Path, build: Build) -> None:
    """The limit is that of the worse motion."""

    def worse(run: Any) -> float:
        return error(run) * (2.0 if run.name.endswith("rim") else 1.0)

    results = results_of(build(12, motions=("lift", "rim")), tmp_path / "s.sqlite", Work(worse))
    true, limits = np.array([0.5 / u(d) for d in range(12)]), limits_of(results, "pd")
    assert np.all((limits.low <= true) & (true <= limits.high))


def test_rungs_that_stopped_early_are_run_where_a_draw_needs_them(tmp_path: Path, build: Build) -> None:
    """With columns that are settled before the last draw, each draw has its limit all the same."""
    plan, work = replace(build(60, rungs_missing=True), stop_early=True), Work(lambda run: 3.0 * error(run))
    results = results_of(plan, tmp_path / "s.sqlite", work)
    assert any(cell.settled and cell.draws < 60 for cell in results.cells)
    for law, slope in SLOPES.items():
        true, limits = np.array([1.0 / (3.0 * slope * u(d)) for d in range(60)]), limits_of(results, law)
        assert np.all((limits.low <= true) & (true <= limits.high))
        assert np.all((limits.high - limits.low <= 0.0625) | (limits.low == 4.0))
    keys = [run.key() for run in work.done]
    assert len(set(keys)) == len(keys) <= results.planned + plan.studies[0].most_runs


def test_until_it_is_finished_the_ladder_tells_the_level(tmp_path: Path, build: Build) -> None:
    """A search that is at work has brackets of unlike width: what the matrix shows stands until it ends."""
    plan = build(80)
    ladder = results_of(replace(plan, studies=()), tmp_path / "s.sqlite", Work())
    assert ladder.level_search is None
    assert ladder.standings[0].found is None
    with Store.open_for_writing(tmp_path / "s.sqlite", plan) as store:
        store.record_plan(plan)
        store.record_study(plan.studies[0], plan.entries[:1], finished=False)
        assert store.results().standings == ladder.standings
    assert results_of(plan, tmp_path / "s.sqlite", Work()).standings != ladder.standings


def test_it_is_sharper_than_the_ladder_at_equal_cost(tmp_path: Path, build: Build) -> None:
    """240 draws on the ladder's four levels against 96 that are searched besides, seven runs a draw at most.

    Both hold the true level, 1 / (slope 0.95); the search's interval is the narrower one for each law.
    """
    ladder = results_of(replace(build(240), studies=()), tmp_path / "ladder.sqlite", Work())
    work = Work()
    search = results_of(build(96), tmp_path / "search.sqlite", work)
    assert len(work.done) <= ladder.planned
    for one, other in zip(ladder.standings, search.standings, strict=True):
        true = 1.0 / (0.95 * SLOPES[one.law])
        assert one.tolerated is not None
        assert other.tolerated is not None
        assert one.tolerated.low <= true <= one.tolerated.high
        assert other.tolerated.low <= true <= other.tolerated.high
        assert other.tolerated.high - other.tolerated.low < one.tolerated.high - one.tolerated.low


@pytest.mark.evidence
def test_it_is_sharper_and_covers_in_many_campaigns(build: Build) -> None:
    """1,000 campaigns of 96 draws through the study's own rounds, without a store; truth from 0.3 to 1.9.

    At most 5 % miss the truth; the median width is below a quarter of that of the ladder at equal cost.
    """
    random, covered, widths, ladder_widths = np.random.default_rng(5), 0, [], []
    study = build(96).studies[0]
    assert isinstance(study, FindLevel)
    study = replace(study, searching=study.searching[:1])
    for _ in range(1000):
        truth = random.uniform(0.3, 1.9)
        limit = truth * 0.95 / random.random(240)

        def known(entry: Entry, limit: np.ndarray = limit) -> Row:
            return row(entry, entry.run.level <= limit[entry.draw or 0])

        entries = [entry for entries in study.rounds(known) for entry in entries]
        records = tuple(Record(known(entry), "", "", (), None, None) for entry in entries)
        searched = searched_of(Studied("find_level", study.declared(), records, True), TOLERANCE)
        level = found_level(searched, ("", "pd"), (), 0.95)[0].tolerated
        covered += level.low <= truth <= level.high
        widths.append(level.high - level.low)
        kept = {0.0: 240} | {rung: int(np.sum(rung <= limit)) for rung in LADDER}
        high = min((r for r, k in kept.items() if wilson(k, 240)[1] < 0.95), default=math.inf)
        low = max(r for r, k in kept.items() if wilson(k, 240)[0] >= 0.95 and r < high)
        ladder_widths.append(high - low)
    assert covered >= 950
    assert np.median(widths) < 0.25 * np.median(ladder_widths)

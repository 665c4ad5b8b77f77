"""The standing of a campaign that runs: counted as it goes, the same as the results that are read whole."""

from __future__ import annotations

import random
import re
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from types import ModuleType

import pytest

from rigbench.campaign.campaign import run_campaign
from rigbench.campaign.executor import InProcess
from rigbench.campaign.plan import Plan, fair_order
from rigbench.campaign.progress import Progress
from rigbench.campaign.store import Store
from rigbench.campaign.tally import SoFar, Standing, Tally
from rigbench.campaign.work import Outcome
from rigbench.scores.columns import telling_column
from rigbench.scores.results import Column, Tolerance

PlanMaker = Callable[..., Plan]

OUTCOMES = ("finished",) * 6 + ("diverged", "hit-stop", "law-error", "crashed", "timed-out")


def of_results(store: Store) -> Standing:
    """What the store itself says, read whole."""
    results = store.results()
    cells = [cell for cell in results.cells if cell.condition == "all at 1"]
    laws = tuple(
        SoFar(
            law,
            sum(cell.passed for cell in cells if cell.law == law),
            sum(cell.draws for cell in cells if cell.law == law),
        )
        for law in results.laws
    )
    return Standing("all at 1", laws, len(results.sheets))


def swept(plan: Plan) -> Plan:
    """The plan in two sheets and along two motions, one of which has a limit of its own."""
    entries = [
        replace(e, sheet=sheet, motion=motion, run=replace(e.run, name=f"{e.run.name} {sheet} {motion}"))  # type: ignore[call-arg]
        for e in plan.entries
        for sheet in ("slow", "fast")
        for motion in ("lift", "turn")
    ]
    tolerance = Tolerance({"tool_peak_mm": 3.0, "settle_ms": 250.0}, 0.9, {"turn": {"tool_peak_mm": 5.0}})
    return replace(
        plan,
        sheets=("slow", "fast"),
        motions=("lift", "turn"),
        entries=fair_order(entries),
        tolerance=tolerance,
    )


def test_it_is_what_the_results_say(tmp_path: Path, make_plan: PlanMaker) -> None:
    """Whatever comes, in any order, once or again, from the store or as it runs: the cells of the results."""
    plan, chance = swept(make_plan(draws=4)), random.Random(1)
    keys = [entry.key for entry in plan.entries]
    with Store.open_for_writing(tmp_path / "s.sqlite", plan) as store:
        store.record_plan(plan)
        tally = Tally(plan, store, plan.entries)
        assert tally.standing is None
        for number in range(120):
            outcome = chance.choice(OUTCOMES)
            scores = {"tool_peak_mm": chance.choice([2.0, 3.0, 4.0, 6.0])}
            if chance.random() < 0.5:
                scores["settle_ms"] = chance.choice([100.0, 250.0, float("inf")])
            if outcome != "finished":
                scores = {}
            told = Outcome(chance.choice(keys), outcome, scores=scores)
            store.add([told])
            tally.count(told)
            if number % 20 == 19:
                assert tally.standing == of_results(store)
                assert Tally(plan, store, ()).standing == tally.standing
        assert tally.standing is not None
        assert any(0 < law.passed < law.draws for law in tally.standing.laws)


def test_a_campaign_carries_it(tmp_path: Path, doing: ModuleType, make_plan: PlanMaker) -> None:
    """Each progress has the standing of then, a resumed campaign's first one that of the store."""
    plan = make_plan()
    seen: list[Progress] = []
    with Store.open_for_writing(tmp_path / "s.sqlite", plan) as store:
        run_campaign(plan, store, on_progress=seen.append, executor=InProcess(doing.work))
        assert seen[0].standing is None
        assert seen[-1].standing == of_results(store)
        again: list[Progress] = []
        run_campaign(plan, store, on_progress=again.append, executor=InProcess(doing.work))
        assert [progress.standing for progress in again] == [seen[-1].standing]


def test_without_a_tolerance_there_is_none(tmp_path: Path, doing: ModuleType, make_plan: PlanMaker) -> None:
    """Nothing is kept or missed, so nothing is said."""
    plan = make_plan(tolerance=None)
    seen: list[Progress] = []
    with Store.open_for_writing(tmp_path / "s.sqlite", plan) as store:
        run_campaign(plan, store, on_progress=seen.append, executor=InProcess(doing.work))
    assert {progress.standing for progress in seen} == {None}


NOMINAL = Column("nominal", None, False, True)
CASE = Column("full tray", None, False, False)
ALONE = Column("payload alone", 1.0, True, False)
HALF, FULL, TWICE = (Column(f"all at {level}", level, True, True) for level in (0.5, 1.0, 2.0))


@pytest.mark.parametrize(
    ("columns", "telling"),
    [
        ((NOMINAL, ALONE, HALF, FULL, TWICE), FULL),
        ((NOMINAL, ALONE, HALF, TWICE), HALF),
        ((NOMINAL, CASE, ALONE), ALONE),
        ((NOMINAL, CASE), NOMINAL),
        ((), None),
    ],
)
def test_the_condition_that_tells_most(columns: tuple[Column, ...], telling: Column | None) -> None:
    """All sources together, nearest to level 1; else a random one; else nominal."""
    assert telling_column(columns) == telling


def test_nothing_is_read_again_as_it_runs(tmp_path: Path, doing: ModuleType, make_plan: PlanMaker) -> None:
    """Between the first progress and the last no row of plan or runs is selected, whatever is shown."""
    plan, asked = make_plan(draws=20), list[str]()
    with Store.open_for_writing(tmp_path / "s.sqlite", plan) as store:

        def follow(progress: Progress) -> None:
            counting = progress.done < len(plan.entries)
            store._connection.set_trace_callback(asked.append if counting else None)

        run_campaign(plan, store, on_progress=follow, executor=InProcess(doing.work))
    assert len([statement for statement in asked if statement.startswith("INSERT OR REPLACE")]) == 82
    assert not [statement for statement in asked if re.search(r"SELECT .* FROM (plan|runs)\b", statement)]

"""A part of a campaign: what ends when the time is up, and what the first draws are."""

from __future__ import annotations

import itertools
import os
import random
import signal
import time
from collections import Counter
from collections.abc import Callable, Iterable
from dataclasses import replace
from pathlib import Path
from types import ModuleType, SimpleNamespace

import pytest

from rigbench.campaign import stopping
from rigbench.campaign.campaign import run_campaign
from rigbench.campaign.executor import Executor, InProcess, Processes
from rigbench.campaign.part import Part
from rigbench.campaign.plan import Entry, Plan, fair_order
from rigbench.campaign.progress import Progress
from rigbench.campaign.reading import Counts
from rigbench.campaign.store import Store
from rigbench.errors import Stopped
from rigbench.scores.row import Row

PlanMaker = Callable[..., Plan]


def several_motions(plan: Plan) -> Plan:
    """The plan with each of its runs along two motions."""
    entries = [
        replace(entry, motion=motion, run=replace(entry.run, name=f"{entry.run.name} {motion}"))  # type: ignore[call-arg]
        for entry in plan.entries
        for motion in ("lift", "turn")
    ]
    return replace(plan, motions=("lift", "turn"), entries=fair_order(entries))


def draws_by_cell(plan: Plan, rows: Iterable[Row]) -> dict[tuple[str, str], int]:
    """Count the draws of each random cell that have every motion."""
    found = Counter((row.law, row.condition, row.draw) for row in rows)
    whole = Counter((law, condition) for (law, condition, _), n in found.items() if n == len(plan.motions))
    random_columns = [column.name for column in plan.columns if column.random]
    return {(law, name): whole[law, name] for law in plan.laws for name in random_columns}


def test_in_time_that_is_limited_every_stop_is_fair(
    tmp_path: Path, doing: ModuleType, make_plan: PlanMaker, monkeypatch: pytest.MonkeyPatch
) -> None:
    """After any number of runs: these are the first of the plan, and no two cells differ by more than a draw."""
    plan = several_motions(make_plan(draws=3))
    for number in range(len(plan.entries)):
        ticks = itertools.count()
        clock = SimpleNamespace(monotonic=lambda ticks=ticks: float(next(ticks)))
        monkeypatch.setattr(stopping, "time", clock)
        with Store.open_for_writing(tmp_path / f"{number}.sqlite", plan) as store:
            with pytest.raises(Stopped, match=f"as its time is up, with {number} of 28") as caught:
                run_campaign(plan, store, part=Part(ends=float(number)), executor=InProcess(doing.work))
            rows = store.rows()
        assert (caught.value.exit_code, caught.value.resume) == (3, "rigbench run trays.yaml")
        assert [(r.law, r.condition, r.motion, r.draw) for r in rows] == [
            (e.law, e.condition, e.motion, e.draw) for e in plan.entries[:number]
        ]
        cells = draws_by_cell(plan, rows).values()
        assert max(cells) - min(cells) <= 1


@pytest.mark.parametrize("act", ["finish", "die once"])
def test_runs_in_hand_do_not_make_it_unfair(
    tmp_path: Path, doing: ModuleType, make_plan: PlanMaker, monkeypatch: pytest.MonkeyPatch, act: str
) -> None:
    """Two workers, runs of random length, workers that die: what was begun is stored, without a gap."""
    plan, chance = several_motions(make_plan(draws=60)), random.Random(4)
    entries = tuple(
        replace(e, run=replace(e.run, seconds=chance.uniform(0, 0.04), folder=str(tmp_path), act=how))  # type: ignore[call-arg]
        for e in plan.entries
        for how in [act if chance.random() < 0.05 else "finish"]
    )
    plan = replace(plan, entries=entries)
    seen: list[Progress] = []
    clock = SimpleNamespace(monotonic=lambda: float(len(seen)))  # it ticks with every run that ends
    monkeypatch.setattr(stopping, "time", clock)
    with Store.open_for_writing(tmp_path / "s.sqlite", plan) as store:
        with pytest.raises(Stopped, match="as its time is up"):
            run_campaign(
                plan,
                store,
                on_progress=seen.append,
                part=Part(ends=101.0),
                executor=Processes(2, doing.work),
            )
        rows = store.rows()
    assert 100 <= len(rows) <= 100 + 2 * 2
    begun = [(e.law, e.condition, e.motion, e.draw) for e in plan.entries[: len(rows)]]
    assert [(row.law, row.condition, row.motion, row.draw) for row in rows] == begun
    cells = draws_by_cell(plan, rows).values()
    assert max(cells) - min(cells) <= 1


def test_time_that_is_up_when_all_is_done_stops_nothing(
    tmp_path: Path, doing: ModuleType, make_plan: PlanMaker
) -> None:
    """Time up before the first run stops at none; where nothing is missing it is no stop."""
    plan, past = make_plan(), Part(ends=time.monotonic() - 1)
    with Store.open_for_writing(tmp_path / "s.sqlite", plan) as store:
        with pytest.raises(Stopped, match="0 of 14"):
            run_campaign(plan, store, part=past, executor=InProcess(doing.work))
        run_campaign(plan, store, executor=InProcess(doing.work))
        assert run_campaign(plan, store, part=past, executor=InProcess(doing.work)) == Counts(14, 14, 0)


def test_the_progress_says_when_the_time_is_up(
    tmp_path: Path, doing: ModuleType, make_plan: PlanMaker
) -> None:
    """It counts down to 0, and is None without a limit."""
    plan = make_plan()
    seen: list[Progress] = []
    with Store.open_for_writing(tmp_path / "s.sqlite", plan) as store:
        part = Part(ends=time.monotonic() + 100)
        run_campaign(plan, store, on_progress=seen.append, part=part, executor=InProcess(doing.work))
    ends = [p.ends_in or 0.0 for p in seen]
    assert 60 < ends[-1] < ends[0] <= 100


@pytest.mark.parametrize("jobs", [0, 2])
def test_the_first_draws_of_every_cell(
    tmp_path: Path, doing: ModuleType, make_plan: PlanMaker, jobs: int
) -> None:
    """A prefix of the plan's draws and what is not random; the plan stays whole; the next part adds to it."""
    plan = make_plan(draws=5)
    executor: Executor = Processes(jobs, doing.work) if jobs else InProcess(doing.work)
    with Store.open_for_writing(tmp_path / "s.sqlite", plan) as store:
        for draws, runs in ((2, 10), (1, 10), (3, 14)):
            seen: list[Progress] = []
            counts = run_campaign(
                plan, store, on_progress=seen.append, part=Part(draws=draws), executor=executor
            )
            assert counts == Counts(22, runs, 0)
            assert set(draws_by_cell(plan, store.rows()).values()) == {max(draws, 2)}
            assert {row.draw for row in store.rows()} == {None, *range(max(draws, 2))}
            wanted = 2 + 4 * draws
            assert (seen[-1].planned, seen[-1].done, seen[-1].failed) == (wanted, wanted, 0)


def test_failures_of_the_first_draws_alone_are_counted(
    tmp_path: Path, doing: ModuleType, make_plan: PlanMaker
) -> None:
    """Of five draws that all failed, the progress of the first two knows those of two: 2 + 4 x 2."""
    plan = make_plan(draws=5)
    failing = tuple(replace(e, run=replace(e.run, act="law-error")) for e in plan.entries)  # type: ignore[call-arg]
    with Store.open_for_writing(tmp_path / "s.sqlite", plan) as store:
        run_campaign(replace(plan, entries=failing), store, executor=InProcess(doing.work))
        seen: list[Progress] = []
        part = Part(draws=2)
        run_campaign(plan, store, on_progress=seen.append, part=part, executor=InProcess(doing.work))
        assert [(p.planned, p.done, p.failed) for p in seen] == [(10, 0, 10)]
        run_campaign(
            plan, store, on_progress=seen.append, part=part, again=["pd"], executor=InProcess(doing.work)
        )
        assert (seen[-1].planned, seen[-1].done, seen[-1].failed) == (10, 5, 5)


def test_a_part_that_is_stopped_goes_on_as_that_part(
    tmp_path: Path, doing: ModuleType, make_plan: PlanMaker
) -> None:
    """The way to go on has the draws and not the time; who asked is told once, however often it was asked."""
    plan, told = make_plan(draws=5), list[int]()

    def ask(progress: Progress) -> None:
        if progress.done == 3:
            os.kill(os.getpid(), signal.SIGINT)

    part = Part(draws=4, ends=time.monotonic() + 100)
    with (
        Store.open_for_writing(tmp_path / "s.sqlite", plan) as store,
        pytest.raises(Stopped, match="stopped as asked, with 3 of 22") as caught,
    ):
        run_campaign(
            plan,
            store,
            on_progress=ask,
            part=part,
            executor=InProcess(doing.work),
            on_stop=lambda: told.append(1),
        )
    assert caught.value.resume == "rigbench run trays.yaml --draws 4"
    assert told == [1]


def test_entries_that_share_a_run_belong_to_the_first_draws_of_each(
    tmp_path: Path, doing: ModuleType, make_plan: PlanMaker
) -> None:
    """Draws that are all the same run (drawn in another sheet alone) are done by the first of them."""
    plan = make_plan(draws=3)
    same = {e.law: e.run for e in plan.entries if e.draw == 0 and e.condition == "all at 1"}
    entries: list[Entry] = [
        replace(e, run=same[e.law]) if e.condition == "all at 1" else e for e in plan.entries
    ]
    plan = replace(plan, entries=tuple(entries))
    seen: list[Progress] = []
    with Store.open_for_writing(tmp_path / "s.sqlite", plan) as store:
        part = Part(draws=2)
        run_campaign(plan, store, on_progress=seen.append, part=part, executor=InProcess(doing.work))
        assert (seen[-1].planned, seen[-1].done, len(seen)) == (10, 10, 9)
        assert store.counts() == Counts(14, 12, 0)

"""The campaign: it stores as it goes, stops when asked, and goes on where it stopped."""

from __future__ import annotations

import contextlib
import os
import signal
import subprocess
import sys
import threading
import time
from collections import Counter
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from types import ModuleType
from typing import Any

import pytest

from rigbench.campaign.campaign import run_campaign
from rigbench.campaign.executor import InProcess, Processes
from rigbench.campaign.plan import Plan
from rigbench.campaign.progress import Progress
from rigbench.campaign.reading import Counts
from rigbench.campaign.store import Store
from rigbench.campaign.work import Outcome
from rigbench.errors import Stopped, StoreError

PlanMaker = Callable[..., Plan]


def acting(plan: Plan, act: str, every: int = 1, **more: object) -> Plan:
    """Return the plan with every so manieth run doing something else."""
    entries = [
        replace(e, run=replace(e.run, act=act, **more)) if i % every == 0 else e
        for i, e in enumerate(plan.entries)
    ]
    return replace(plan, entries=tuple(entries))


@pytest.mark.parametrize("jobs", [0, 2])
def test_a_campaign_runs_what_is_missing_and_nothing_else(
    tmp_path: Path, doing: ModuleType, make_plan: PlanMaker, jobs: int
) -> None:
    """All rows are there afterwards; a second campaign has nothing to do, a larger one only what is new."""
    executor = Processes(jobs, doing.work) if jobs else InProcess(doing.work)
    with Store.open_for_writing(tmp_path / "s.sqlite", make_plan()) as store:
        for draws, new in ((2, 10), (2, 0), (4, 8)):
            plan = make_plan(draws=draws)
            seen: list[Progress] = []
            assert run_campaign(plan, store, on_progress=seen.append, executor=executor) == Counts(
                len(plan.entries), len(plan.entries), 0
            )
            assert [row.draw for row in store.rows()] == [e.draw for e in plan.entries]
            assert len(seen) == new + 1


def test_progress_counts_every_planned_run_once(
    tmp_path: Path, doing: ModuleType, make_plan: PlanMaker
) -> None:
    """done + failed rises to planned, a shared run counts for each of its entries; the rest has an estimate."""
    plan = acting(make_plan(), "law-error", every=7)
    twin = replace(plan.entries[-1], condition="nominal")
    plan = replace(plan, entries=(*plan.entries, twin))
    seen: list[Progress] = []
    with Store.open_for_writing(tmp_path / "s.sqlite", make_plan()) as store:
        counts = run_campaign(plan, store, on_progress=seen.append, executor=InProcess(doing.work))
        assert counts == Counts(15, 13, 2)
        again = list[Progress]()
        run_campaign(plan, store, on_progress=again.append, executor=InProcess(doing.work))
    assert seen[0] == Progress(15, 0, 0)
    assert [p.done + p.failed for p in seen] == [*range(14), 15]
    assert all(p.rate and p.seconds_left is not None and p.seconds_left >= 0 for p in seen[2:])
    assert [p.rate for p in seen[:2]] == [None, None]
    assert (seen[-1].seconds_left, seen[-1].failed) == (0, 2)
    assert [replace(p, standing=None) for p in again] == [Progress(15, 13, 2)]


def test_what_crashed_is_tried_again_by_the_next_campaign(
    tmp_path: Path, doing: ModuleType, make_plan: PlanMaker
) -> None:
    """A crash is kept as a row until the run comes to an end; a law's error is not tried again unless asked."""
    plan = make_plan()
    with Store.open_for_writing(tmp_path / "s.sqlite", make_plan()) as store:
        crashed = run_campaign(acting(plan, "raise", 2), store, executor=InProcess(doing.work))
        assert crashed == Counts(14, 7, 7)
        assert run_campaign(acting(plan, "law-error"), store, executor=InProcess(doing.work)) == Counts(
            14, 7, 7
        )
        assert run_campaign(plan, store, executor=InProcess(doing.work)) == Counts(14, 7, 7)
        counts = run_campaign(plan, store, again=["pd", "feedforward"], executor=InProcess(doing.work))
        assert counts == Counts(14, 14, 0)


def test_runs_to_be_done_anew_are_safe_and_remembered(
    tmp_path: Path, doing: ModuleType, make_plan: PlanMaker
) -> None:
    """Stopped half way, every row is still there; the next campaign, asked for nothing, does the other half."""
    plan = make_plan()
    with Store.open_for_writing(tmp_path / "s.sqlite", plan) as store:
        run_campaign(acting(plan, "law-error"), store, executor=InProcess(doing.work))

        def ask(progress: Progress) -> None:
            if progress.done == 3:
                os.kill(os.getpid(), signal.SIGINT)

        with pytest.raises(Stopped, match="10 of 14"):
            run_campaign(plan, store, on_progress=ask, again=["pd"], executor=InProcess(doing.work))
        assert Counter(row.outcome for row in store.rows()) == {"finished": 3, "law-error": 11}
        assert store.counts() == Counts(14, 3, 7)
        seen: list[Progress] = []
        counts = run_campaign(plan, store, on_progress=seen.append, executor=InProcess(doing.work))
        assert (len(seen) - 1, counts) == (4, Counts(14, 7, 7))


def test_the_values_of_the_draws_are_stored_with_the_rows(
    tmp_path: Path, doing: ModuleType, make_plan: PlanMaker
) -> None:
    """Every parameter that was random has its u, the same as the plant was built with."""
    from rigbench.arm.mismatch import uniform

    with Store.open_for_writing(tmp_path / "s.sqlite", make_plan()) as store:
        run_campaign(make_plan(draws=2), store, executor=InProcess(doing.work))
        values = store.draw_values()
    names = [f"{source}_percent.{joint}" for source in ("coulomb", "viscous") for joint in ("j1", "j2")]
    assert values == {draw: {name: uniform(7, name, draw) for name in names} for draw in (0, 1)}


# --- stopping


@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM])
@pytest.mark.parametrize("jobs", [0, 2])
def test_asked_once_it_finishes_what_is_in_hand_and_can_be_resumed(
    tmp_path: Path, doing: ModuleType, make_plan: PlanMaker, jobs: int, number: signal.Signals
) -> None:
    """Stopped says how far it is and how to go on; going on does the rest and no run twice."""
    plan = acting(make_plan(draws=10), "finish", seconds=0.01, folder=str(tmp_path))
    executor = Processes(jobs, doing.work) if jobs else InProcess(doing.work)
    before = signal.getsignal(number)
    with Store.open_for_writing(tmp_path / "s.sqlite", make_plan()) as store:

        def ask(progress: Progress) -> None:
            if progress.done == 5:
                os.kill(os.getpid(), number)

        with pytest.raises(Stopped, match=r"of 42 runs stored.*'rigbench run trays.yaml'") as caught:
            run_campaign(plan, store, on_progress=ask, executor=executor)
        begun = {p.name for p in tmp_path.glob("began-*")}
        assert caught.value.exit_code == 3
        assert len(store.rows()) == caught.value.done == len(begun)
        assert 5 <= caught.value.done <= 5 + 2 * max(1, jobs)
        assert signal.getsignal(number) is before
        seen: list[Progress] = []
        run_campaign(plan, store, on_progress=seen.append, executor=executor)
        assert len(seen) - 1 + caught.value.done == len(store.rows()) == 42


@pytest.mark.parametrize("jobs", [0, 2])
def test_asked_twice_it_drops_what_is_in_hand(
    tmp_path: Path, doing: ModuleType, make_plan: PlanMaker, jobs: int
) -> None:
    """Runs that hang don't hold it up; what had been done is stored."""
    plan = make_plan(draws=10)
    hanging = [replace(e, run=replace(e.run, act="hang")) for e in plan.entries[5:]]
    plan = replace(plan, entries=(*plan.entries[:5], *hanging))
    executor = Processes(jobs, doing.work) if jobs else InProcess(doing.work)
    began = time.monotonic()

    def ask(progress: Progress) -> None:
        if progress.done == 5:
            for delay in (0.3, 0.6):
                threading.Timer(delay, os.kill, (os.getpid(), signal.SIGINT)).start()

    with Store.open_for_writing(tmp_path / "s.sqlite", make_plan()) as store:
        with pytest.raises(Stopped):
            run_campaign(plan, store, on_progress=ask, executor=executor)
        assert store.counts() == Counts(42, 5, 0)
    assert time.monotonic() - began < 60


def test_a_law_that_swallows_the_interrupt_does_not_keep_its_run(
    tmp_path: Path, doing: ModuleType, make_plan: PlanMaker, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Whatever outcome comes of a run that was to be dropped at once, it is not stored."""

    def swallow(run: Any) -> Outcome:
        with contextlib.suppress(KeyboardInterrupt):
            for _ in range(2):
                os.kill(os.getpid(), signal.SIGINT)
            time.sleep(30)
        return Outcome(run.key(), "law-error", "KeyboardInterrupt")

    monkeypatch.setitem(doing.ACTS, "swallow", swallow)
    plan = acting(make_plan(), "swallow")
    with Store.open_for_writing(tmp_path / "s.sqlite", plan) as store:
        with pytest.raises(Stopped, match="0 of 14"):
            run_campaign(plan, store, executor=InProcess(doing.work))
        assert store.rows() == []


def test_asked_at_the_very_end_it_is_simply_done(
    tmp_path: Path, doing: ModuleType, make_plan: PlanMaker
) -> None:
    """A signal when nothing is left to do is no stop."""

    def ask(progress: Progress) -> None:
        if progress.done == 14:
            os.kill(os.getpid(), signal.SIGINT)

    with Store.open_for_writing(tmp_path / "s.sqlite", make_plan()) as store:
        assert run_campaign(make_plan(), store, on_progress=ask, executor=InProcess(doing.work)).done == 14


SCRIPT = """
import sys
from pathlib import Path

sys.path.insert(0, sys.argv[1])
import doing
from rigbench.campaign.campaign import run_campaign
from rigbench.campaign.executor import Processes
from rigbench.campaign.plan import Entry, Plan
from rigbench.campaign.store import Store
from rigbench.errors import RigbenchError

def main():
    runs = [doing.FakeRun(f"run {i}", seconds=0.05) for i in range(400)]
    entries = tuple(Entry("", "pd", "lift", "nominal", 0.0, None, run) for run in runs)
    plan = Plan("Trays", "arm", "", "t.yaml", ("",), ("pd",), ("lift",), (), 1, None, entries, "go on")
    try:
        with Store.open_for_writing(Path(sys.argv[2]), plan) as store:
            run_campaign(plan, store, on_progress=lambda p: print(p.done, flush=True), executor=Processes(2, doing.work))
    except RigbenchError as error:
        print(error, file=sys.stderr)
        sys.exit(error.exit_code)

if __name__ == "__main__":
    main()
"""


def start(tmp_path: Path, doing: ModuleType, surroundings: dict[str, str]) -> subprocess.Popen[str]:
    script = tmp_path / "script.py"
    script.write_text(SCRIPT)
    return subprocess.Popen(
        [sys.executable, script, Path(doing.__file__).parent, tmp_path / "s.sqlite"],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        env=surroundings,
        start_new_session=True,
    )


def test_ctrl_c_in_a_terminal_is_quiet(
    tmp_path: Path, doing: ModuleType, surroundings: dict[str, str]
) -> None:
    """SIGINT to the whole group, as a terminal sends it: exit 3, one sentence, no traceback of any process."""
    main = start(tmp_path, doing, surroundings)
    assert main.stdout is not None
    while main.stdout.readline().strip() != "5":
        assert main.poll() is None
    os.killpg(main.pid, signal.SIGINT)
    said, complained = main.communicate(timeout=60)
    assert main.returncode == 3
    assert "nothing is lost: 'go on' goes on from here" in complained
    assert "Traceback" not in complained
    with Store.open_for_reading(tmp_path / "s.sqlite") as reader:
        assert len(reader.rows()) == int(said.split()[-1])
    assert sorted(p.name for p in tmp_path.iterdir()) == ["s.sqlite", "script.py"]
    assert list(Path(surroundings["TMPDIR"]).iterdir()) == []


def test_a_killed_campaign_goes_on_where_it_was(
    tmp_path: Path, doing: ModuleType, surroundings: dict[str, str], make_plan: PlanMaker
) -> None:
    """After SIGKILL every run that was told done is stored whole, and the store can be written to again."""
    main = start(tmp_path, doing, surroundings)
    assert main.stdout is not None
    while main.stdout.readline().strip() != "20":
        assert main.poll() is None
    main.kill()
    told = int((main.communicate(timeout=60)[0].split() or ["20"])[-1])
    with Store.open_for_writing(tmp_path / "s.sqlite", make_plan(arm="arm")) as store:
        rows = store.rows()
        assert told <= len(rows) <= told + 1
        assert all(row.scores["tool_peak_mm"] == len(f"run {i}") / 3 for i, row in enumerate(rows) if i < 10)


def test_a_full_disk_ends_the_campaign_and_keeps_what_is_stored(
    tmp_path: Path, doing: ModuleType, make_plan: PlanMaker
) -> None:
    """StoreError in plain words; afterwards nothing runs on, and with room the campaign goes on."""
    plan = make_plan(draws=200)
    with Store.open_for_writing(tmp_path / "s.sqlite", make_plan()) as store:
        store.record_plan(plan)
        pages = store._connection.execute("PRAGMA page_count").fetchone()[0]
        store._connection.execute(f"PRAGMA max_page_count = {pages + 8}")
        with pytest.raises(StoreError, match="disk is full"):
            run_campaign(plan, store, executor=Processes(2, doing.work))
        rows = len(store.rows())
        assert 0 < rows < len(plan.entries)
        store._connection.execute("PRAGMA max_page_count = 1000000")
        assert run_campaign(plan, store, executor=InProcess(doing.work)).done == len(plan.entries)

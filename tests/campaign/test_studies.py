"""Studies: runs that depend on what came out of others, done after the plan, stored, and gone on with."""

from __future__ import annotations

import os
import signal
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from functools import partial
from pathlib import Path
from types import ModuleType
from typing import Any

import pytest

from rigbench.campaign.campaign import run_campaign, run_first
from rigbench.campaign.executor import InProcess, Processes
from rigbench.campaign.part import Part
from rigbench.campaign.plan import Entry, Plan
from rigbench.campaign.progress import Progress
from rigbench.campaign.store import Store
from rigbench.campaign.study import Known
from rigbench.errors import Stopped

PlanMaker = Callable[..., Plan]


@dataclass(frozen=True)
class Growing:
    """A study whose next run's name is as long as the last one's score says: three rounds of two runs."""

    make_run: Callable[..., Any]
    act: str = "finish"
    name: str = "growing"
    most_runs: int = 6

    def examples(self) -> Sequence[tuple[int, Iterable[Entry]]]:
        return [(self.most_runs, [self.entry("a"), self.entry("b")])]

    def declared(self) -> Mapping[str, Any]:
        return {"rounds": 3}

    def rounds(self, known: Known) -> Sequence[Sequence[Entry]]:
        found: list[list[Entry]] = []
        length = 1
        for _ in range(3):
            found.append([self.entry(letter * length) for letter in "ab"])
            rows = [known(entry) for entry in found[-1]]
            if None in rows:
                break
            length = 1 + sum(round(3 * row.scores.get("tool_peak_mm", 0)) for row in rows if row)
        return found

    def entry(self, name: str) -> Entry:
        return Entry("", "pd", "lift", "growing", None, None, self.make_run(name, act=self.act))


def names(plan: Plan) -> list[str]:
    """What the study asks for, as the scores of its stand-in runs have it."""
    return ["a", "b", "aaa", "bbb", "a" * 7, "b" * 7]


@pytest.fixture
def plan(make_plan: PlanMaker, doing: ModuleType) -> Plan:
    return replace(make_plan(draws=1), studies=(Growing(doing.FakeRun),))


@pytest.mark.parametrize("jobs", [0, 2])
def test_rounds_follow_one_another_and_are_stored(
    tmp_path: Path, doing: ModuleType, plan: Plan, jobs: int
) -> None:
    """Each round sees what came of the one before; the matrix holds nothing of it; a second time all is known."""
    executor = Processes(jobs, doing.work) if jobs else InProcess(doing.work)
    with Store.open_for_writing(tmp_path / "s.sqlite", plan) as store:
        for new in (6, 0):
            seen: list[Progress] = []
            counts = run_campaign(plan, store, on_progress=seen.append, executor=executor)
            assert counts.planned == counts.done == len(plan.entries)
            assert len(store.rows()) == len(plan.entries)
            assert store.unfinished() == ()
            study = store.study("growing")
            assert study is not None
            assert study.finished
            assert study.declared == {"rounds": 3}
            assert [record.key for record in study.records] == [
                doing.FakeRun(name).key() for name in names(plan)
            ]
            assert [record.row.scores["tool_peak_mm"] for record in study.records] == [
                len(name) / 3 for name in names(plan)
            ]
            told = [progress for progress in seen if progress.study == "growing"]
            assert (told[-1].planned, told[-1].done, told[-1].failed) == (6, 6, 0)
            assert len(told) == new + (4 if new else 1)  # before each round, and after each run
        assert store.study("another") is None


def test_a_study_that_was_stopped_goes_on(tmp_path: Path, doing: ModuleType, plan: Plan) -> None:
    """After a signal in its second round the runs done stay, and the next campaign does the rest alone."""
    executor, asked = InProcess(doing.work), []

    def stop_within(progress: Progress) -> None:
        if progress.study and progress.done == 3 and not asked:
            asked.append(progress)
            os.kill(os.getpid(), signal.SIGINT)

    with Store.open_for_writing(tmp_path / "s.sqlite", plan) as store:
        with pytest.raises(Stopped) as stopped:
            run_campaign(plan, store, on_progress=stop_within, executor=executor)
        assert (stopped.value.done, stopped.value.planned) == (len(plan.entries) + 3, len(plan.entries) + 4)
        study = store.study("growing")
        assert study is not None
        assert not study.finished
        assert len(study.records) == 3
        seen: list[Progress] = []
        run_campaign(plan, store, on_progress=seen.append, executor=executor)
        done = [progress.done for progress in seen if progress.study]
        assert done == [3, 4, 4, 5, 6, 6]
        study = store.study("growing")
        assert study is not None
        assert study.finished


def test_a_run_that_comes_to_nothing_is_known_to_its_study(
    tmp_path: Path, doing: ModuleType, make_plan: PlanMaker
) -> None:
    """A crash is a row to the study, or it would never end; the next campaign tries it again."""
    plan = replace(make_plan(draws=1), studies=(Growing(doing.FakeRun, act="fail"),))
    with Store.open_for_writing(tmp_path / "s.sqlite", plan) as store:
        for _ in range(2):
            seen: list[Progress] = []
            run_campaign(plan, store, on_progress=seen.append, executor=InProcess(doing.work))
            told = [progress for progress in seen if progress.study]
            assert (told[-1].planned, told[-1].done, told[-1].failed) == (6, 0, 6)
            assert len(told) == 4


@pytest.mark.parametrize("given", [False, True])
def test_workers_stand_by_between_rounds(
    tmp_path: Path, doing: ModuleType, make_plan: PlanMaker, monkeypatch: pytest.MonkeyPatch, given: bool
) -> None:
    """Two workers do the matrix and all rounds of the study: starting new ones would cost as much as runs."""
    folder = tmp_path / "began"
    folder.mkdir()
    monkeypatch.setattr(
        "rigbench.campaign.doing.executor_for", lambda jobs, runs, _: Processes(min(runs, 2), doing.work)
    )
    plan = make_plan(draws=1)
    entries = [replace(e, run=replace(e.run, folder=str(folder))) for e in plan.entries]
    study = Growing(partial(doing.FakeRun, folder=str(folder)))
    plan = replace(plan, entries=tuple(entries), studies=(study,))
    with Store.open_for_writing(tmp_path / "s.sqlite", plan) as store:
        run_campaign(plan, store, executor=Processes(2, doing.work) if given else None)
    pids = [path.read_text() for path in folder.iterdir()]
    assert len(pids) == len(plan.entries) + 6
    assert len(set(pids)) <= 2


def test_a_study_waits_for_the_whole_campaign(tmp_path: Path, doing: ModuleType, plan: Plan) -> None:
    """Where the first draws alone are asked for, nothing of a study is run, and what it has found stays."""
    executor = InProcess(doing.work)
    with Store.open_for_writing(tmp_path / "s.sqlite", plan) as store:
        run_campaign(plan, store, part=Part(draws=1), executor=executor)
        assert store.study("growing") is None
        assert store.unfinished() == ("growing",)
        run_campaign(plan, store, executor=executor)
        whole = store.study("growing")
        run_campaign(plan, store, part=Part(draws=1), executor=executor)
        assert store.study("growing") == whole
        assert store.unfinished() == ()


def test_a_stop_before_a_study_has_begun_is_told(tmp_path: Path, doing: ModuleType, plan: Plan) -> None:
    """A signal within the last run of the matrix: it is all done, its study is not, and so the campaign."""

    def stop_at_last(progress: Progress) -> None:
        if not progress.study and progress.done == len(plan.entries):
            os.kill(os.getpid(), signal.SIGINT)

    with Store.open_for_writing(tmp_path / "s.sqlite", plan) as store:
        with pytest.raises(Stopped, match=r"as asked, with 6 of 6 runs stored \(growing not finished\);"):
            run_campaign(plan, store, on_progress=stop_at_last, executor=InProcess(doing.work))
        assert store.unfinished() == ("growing",)


@pytest.mark.parametrize("in_study", [False, True])
def test_a_second_signal_between_two_runs_is_a_stop_like_any(
    tmp_path: Path, doing: ModuleType, plan: Plan, in_study: bool
) -> None:
    """It ends in Stopped, which says how to go on, where no run is being done as well."""

    def stop_twice(progress: Progress) -> None:
        if bool(progress.study) is in_study and progress.done == 3:
            os.kill(os.getpid(), signal.SIGINT)
            os.kill(os.getpid(), signal.SIGTERM)

    with (
        Store.open_for_writing(tmp_path / "s.sqlite", plan) as store,
        pytest.raises(Stopped, match=r"\(growing not finished\); nothing is lost: 'rigbench run"),
    ):
        run_campaign(plan, store, on_progress=stop_twice, executor=InProcess(doing.work))


@pytest.mark.parametrize("at", [3, 6])
def test_a_stop_within_what_comes_first_is_a_stop(
    tmp_path: Path, doing: ModuleType, make_plan: PlanMaker, at: int
) -> None:
    """In its midst, or in its very last run: the matrix that was to follow it must not be begun."""
    plan, asked = replace(make_plan(draws=1), first=Growing(doing.FakeRun)), []

    def stop_within(progress: Progress) -> None:
        if progress.done == at and not asked:
            asked.append(progress)
            os.kill(os.getpid(), signal.SIGINT)

    with Store.open_for_writing(tmp_path / "s.sqlite", plan) as store:
        with pytest.raises(Stopped) as stopped:
            run_first(plan, store, on_progress=stop_within, executor=InProcess(doing.work))
        assert stopped.value.done == at
        assert stopped.value.unfinished == (() if at == 6 else ("growing",))
        run_first(plan, store, executor=InProcess(doing.work))
        assert store.unfinished() == ()


def test_a_law_s_runs_of_a_study_are_done_anew(tmp_path: Path, doing: ModuleType, plan: Plan) -> None:
    """As those of the matrix; the study is finished again when they are done, and no other law's are."""
    with Store.open_for_writing(tmp_path / "s.sqlite", plan) as store:
        run_campaign(plan, store, executor=InProcess(doing.work))
        before = store.study("growing")
        for law, new in (("nobody", 0), ("pd", 6)):
            assert store.studies_anew(law) == new
            seen: list[Progress] = []
            run_campaign(plan, store, on_progress=seen.append, executor=InProcess(doing.work))
            told = [progress for progress in seen if progress.study]
            assert len(told) == new + (4 if new else 1)
            assert store.study("growing") == before


def test_troubles_of_studies_are_found_too(tmp_path: Path, doing: ModuleType, make_plan: PlanMaker) -> None:
    """Each once, after those of the matrix, however many studies asked for the run."""
    failing = Growing(doing.FakeRun, act="law-error")
    plan = replace(make_plan(draws=1), studies=(failing, replace(failing, name="once more")))
    with Store.open_for_writing(tmp_path / "s.sqlite", plan) as store:
        run_campaign(plan, store, executor=InProcess(doing.work))
        found = [record.key for record in store.records_with(["law-error"])]
        assert found == [doing.FakeRun(name).key() for name in ("a", "b")]


def test_a_study_s_run_is_found_by_its_key(tmp_path: Path, doing: ModuleType, plan: Plan) -> None:
    """As the matrix's runs are: by the beginning of its key, with all that is stored of it."""
    key = doing.FakeRun("bbb").key()
    with Store.open_for_writing(tmp_path / "s.sqlite", plan) as store:
        run_campaign(plan, store, executor=InProcess(doing.work))
        assert store.keys(key[:12]) == ([key], [])
        record = store.record(key)
        assert record is not None
        assert record.row.condition == "growing"
        assert record.row.scores == {"tool_peak_mm": 1.0}

"""The executors: every run ends as exactly one outcome, whatever happens to it or around it."""

from __future__ import annotations

import itertools
import os
import re
import resource
import signal
import subprocess
import sys
import threading
import time
from collections.abc import Callable, Iterator
from contextlib import closing
from pathlib import Path
from types import ModuleType
from typing import Any

import pytest

import rigbench
from rigbench.campaign.executor import Executor, InProcess, Processes, executor_for, time_limit_s
from rigbench.campaign.plan import Entry
from rigbench.campaign.work import Outcome
from rigbench.campaign.workers import usable_cores
from rigbench.errors import RigbenchError

EntryMaker = Callable[..., list[Entry]]


def by_name(executor: Executor, entries: list[Entry]) -> dict[str, Outcome]:
    """Run all, assert that each entry has one outcome under its own key, and return them by name."""
    outcomes = list(executor.run_all(entries))
    assert sorted(o.key for o in outcomes) == sorted(e.key for e in entries)
    found = {o.key: o for o in outcomes}
    return {entry.run.name: found[entry.key] for entry in entries}


TROUBLE = {
    "raise": ("crashed", "ValueError: no such luck", "in fail"),
    "exit": ("crashed", "SystemExit: 3", "in leave"),
    "segfault": ("crashed", "died twice on it: SIGSEGV", "Segmentation fault"),
    "killed": ("crashed", "SIGKILL, likely for want of memory", ""),
    "hang": ("timed-out", "limit of 2 s", ""),
    "hang in c": ("timed-out", "limit of 2 s", ""),
    "unpicklable": ("crashed", "RuntimeError: I stay here", "__reduce__"),
    "unreadable": ("crashed", "can't be read: ValueError", ""),
    "nonsense": ("crashed", "no outcome but 42", ""),
    "other key": ("crashed", "source files have changed", ""),
    "law-error": ("law-error", "ValueError: mine", "Traceback: mine"),
}


def test_trouble_costs_its_own_run_alone(doing: ModuleType, make_entries: EntryMaker) -> None:
    """Among runs that crash, hang, raise or return nonsense, each ends as its row says, all others finish."""
    acts: dict[str, Any] = {}
    for number, act in enumerate(TROUBLE):
        acts[act] = (act, {})
        acts |= {f"good {number} {i}": ("finish", {}) for i in range(3)}
    outcomes = by_name(Processes(3, doing.work, lambda run: 2.0), make_entries(**acts))
    for act, (outcome, reason, trace) in TROUBLE.items():
        assert outcomes[act].outcome == outcome, act
        assert reason in outcomes[act].reason, act
        assert trace in outcomes[act].trace, act
    assert all(outcomes[name].outcome == "finished" for name in acts if name.startswith("good"))


def test_trouble_in_this_process(doing: ModuleType, make_entries: EntryMaker) -> None:
    """Without workers an exception, nonsense and another key are the same rows as with them."""
    acts = ("raise", "nonsense", "other key", "law-error")
    entries = make_entries(good=("finish", {}), **{act: (act, {}) for act in acts})
    outcomes = by_name(InProcess(doing.work), entries)
    assert outcomes["good"].outcome == "finished"
    for act in acts:
        assert (outcomes[act].outcome, TROUBLE[act][1] in outcomes[act].reason) == (TROUBLE[act][0], True)


def test_a_run_whose_worker_died_is_done_once_more(
    doing: ModuleType, make_entries: EntryMaker, tmp_path: Path
) -> None:
    """A worker killed from outside (for want of memory, say) costs nothing."""
    entries = make_entries(unlucky=("die once", {"folder": str(tmp_path)}), good=("finish", {}))
    assert {o.outcome for o in by_name(Processes(2, doing.work), entries).values()} == {"finished"}


def test_a_worker_killed_while_idle_costs_nothing(
    doing: ModuleType, make_entries: EntryMaker, tmp_path: Path
) -> None:
    """It is replaced before the next run is given to it."""
    entries = make_entries(**{name: ("finish", {"folder": str(tmp_path)}) for name in "abc"})

    def source() -> Iterator[Entry]:
        yield entries[0]
        while not (tmp_path / "began-a").exists():
            time.sleep(0.05)
        time.sleep(0.2)
        os.kill(int((tmp_path / "began-a").read_text()), signal.SIGKILL)
        time.sleep(0.5)
        yield from entries[1:]

    outcomes = list(Processes(1, doing.work).run_all(source()))
    assert sorted((o.key, o.outcome) for o in outcomes) == sorted((e.key, "finished") for e in entries)


def test_a_server_that_is_killed_costs_nothing(
    doing: ModuleType, make_entries: EntryMaker, tmp_path: Path
) -> None:
    """All workers die with it at once; what they had in hand is done by new ones."""
    more = {"folder": str(tmp_path), "seconds": 0.05}
    acts = {f"good {i}": ("finish", more) for i in range(20)}
    entries = make_entries(unlucky=("kill the server once", more), **acts)
    outcomes = by_name(Processes(3, doing.work), entries)
    assert (tmp_path / "once-unlucky").exists()
    assert {o.outcome for o in outcomes.values()} == {"finished"}


def test_no_crew_at_all_is_an_error_and_not_a_hang(
    doing: ModuleType, make_entries: EntryMaker, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Workers that can't be set up, or a server that can't, end in an error that names the way out."""
    monkeypatch.setattr("rigbench.campaign.workers.serve", doing.leave)
    with pytest.raises(RigbenchError, match="--jobs 0"):
        list(Processes(2, doing.work).run_all(make_entries(good=("finish", {}))))

    def refuse() -> None:
        raise OSError("AF_UNIX path too long")

    monkeypatch.setattr("multiprocessing.forkserver.ensure_running", refuse)
    with pytest.raises(RigbenchError, match=r"AF_UNIX path too long.*--jobs 0"):
        list(Processes(2, doing.work).run_all(make_entries(good=("finish", {}))))


@pytest.mark.parametrize("jobs", [0, 2])
def test_only_what_can_be_done_is_drawn_from_the_plan(
    doing: ModuleType, make_entries: EntryMaker, jobs: int
) -> None:
    """Work in hand is bounded; when the entries end early, what is in hand is still finished."""
    drawn: list[str] = []
    entries = make_entries(**{f"run {i}": ("finish", {"seconds": 0.01}) for i in range(100)})

    def source() -> Iterator[Entry]:
        for entry in entries[:50]:
            drawn.append(entry.key)
            yield entry

    executor = Processes(jobs, doing.work) if jobs else InProcess(doing.work)
    done = []
    for outcome in executor.run_all(source()):
        done.append(outcome.key)
        assert len(drawn) - len(done) <= max(1, 2 * jobs)
    assert sorted(done) == sorted(drawn)
    assert len(done) == 50


def test_closing_drops_what_is_in_hand(doing: ModuleType, make_entries: EntryMaker) -> None:
    """Workers that hang, even within C code, are ended within seconds."""
    entries = make_entries(good=("finish", {}), a=("hang", {}), b=("hang in c", {}), c=("hang", {}))
    with closing(Processes(3, doing.work).run_all(entries)) as outcomes:
        next(outcomes)
        time.sleep(0.5)
        began = time.monotonic()
    assert time.monotonic() - began < 3


def test_what_a_worker_finds_itself_in(
    doing: ModuleType, make_entries: EntryMaker, monkeypatch: pytest.MonkeyPatch, tmp_path: Path
) -> None:
    """One thread for native libraries, limits, no Ctrl-C, no SIGTERM, no way to our standard output, the rig loaded.

    Of all that there is no trace here. The products are large enough for a pool of threads to be used: with
    OMP_NUM_THREADS at 5 numpy's library starts four, on a machine of two cores or more.
    """
    monkeypatch.setenv("OMP_NUM_THREADS", "5")
    entries = make_entries(one=("look around", {"folder": str(tmp_path)}))
    [outcome] = Processes(1, doing.work).run_all(entries)
    assert outcome.scores == {
        "looks": 1.0, "threads_allowed": 1.0, "threads_of_numba": 1.0, "threads": 1.0, "threads_after_large_products": 1.0,
        "leads_its_group": 1.0, "memory_is_limited": 1.0, "images_of_memory_kept": 0.0,
        "ignores_ctrl_c": 1.0, "stdout_is_stderr": 1.0, "kernels_are_loaded": 1.0,
    }  # fmt: skip
    assert resource.getrlimit(resource.RLIMIT_DATA)[0] == resource.RLIM_INFINITY
    assert os.environ["OMP_NUM_THREADS"] == "5"
    assert "PYTHONSAFEPATH" not in os.environ
    assert signal.SIGINT not in signal.pthread_sigmask(signal.SIG_BLOCK, ())


def test_the_time_of_day_may_change(
    doing: ModuleType, make_entries: EntryMaker, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Neither a limit nor a wait is measured by it: a year on or back at every look, and nothing is given up.

    What hangs is, in its time.
    """
    real, jumps = time.time, itertools.cycle([0.0, 3e7, -3e7])
    monkeypatch.setattr("time.time", lambda: real() + next(jumps))
    acts = {f"good {i}": ("finish", {"seconds": 0.05}) for i in range(10)}
    began = time.monotonic()
    outcomes = by_name(Processes(2, doing.work, lambda run: 3.0), make_entries(bad=("hang", {}), **acts))
    assert outcomes.pop("bad").outcome == "timed-out"
    assert {outcome.outcome for outcome in outcomes.values()} == {"finished"}
    assert 3.0 < time.monotonic() - began < 30.0


STAMPS = {
    "campaign/store.py": "when a run was stored, and a store put aside",
    "arm/kernel.py": "how old a cache of kernels is",
    "calls.py": "the date on a picture or a page",
}
"""Who may ask for the time of day, and for what; beside them cli/ and report/, which show it."""


def test_the_time_of_day_is_for_stamps_alone() -> None:
    """Nothing that a run or a campaign does depends on it: no module asks but those that write it down."""
    clocks = r"time\.(time|time_ns|ctime|localtime|gmtime|strftime)\(|(datetime|date)\.(now|today|utcnow)\("
    package = Path(rigbench.__file__).parent
    modules = {str(path.relative_to(package)): path.read_text("utf-8") for path in package.rglob("*.py")}
    asking = {name for name, text in modules.items() if re.search(clocks, text)}
    assert {name for name in asking if not name.startswith(("cli/", "report/"))} == set(STAMPS)


def test_it_works_outside_the_main_thread(doing: ModuleType, make_entries: EntryMaker) -> None:
    """A caller with threads of its own can run campaigns."""
    found: dict[str, Outcome] = {}
    entries = make_entries(**{f"run {i}": ("finish", {}) for i in range(5)})
    thread = threading.Thread(target=lambda: found.update(by_name(Processes(2, doing.work), entries)))
    thread.start()
    thread.join()
    assert len(found) == 5


SCRIPT = """
import sys
from pathlib import Path

sys.path.insert(0, sys.argv[1])
import doing
from rigbench.campaign.executor import Processes
from rigbench.campaign.plan import Entry

def main():
    acts = ["hang", "hang in c", "finish"]
    runs = [doing.FakeRun(act, act, folder=sys.argv[2]) for act in acts]
    for outcome in Processes(2, doing.work).run_all(Entry("", "", "", "", 0.0, None, run) for run in runs):
        print(outcome.outcome, flush=True)

if __name__ == "__main__":
    main()
"""


def descendants(parent: int) -> set[int]:
    """Return the living processes under ``parent``, however deep."""
    found, before = {parent}, set[int]()
    while found != before:
        before = set(found)
        found |= {pid for pid, (state, above) in processes().items() if above in found and state != "Z"}
    return found - {parent}


def processes() -> dict[int, tuple[str, int]]:
    found = {}
    for folder in Path("/proc").glob("[0-9]*"):
        try:
            state, parent = (folder / "stat").read_text().rpartition(")")[2].split()[:2]
        except OSError:
            continue
        found[int(folder.name)] = (state, int(parent))
    return found


@pytest.mark.skipif(sys.platform != "linux", reason="only Linux ends a process with its parent")
def test_nothing_is_left_of_a_killed_campaign(
    doing: ModuleType, tmp_path: Path, surroundings: dict[str, str]
) -> None:
    """After SIGKILL of its process, hung workers and their server are gone within seconds.

    It is started as any program is, in a folder whose modules would break it if it looked there.
    """
    script = tmp_path / "script.py"
    script.write_text(SCRIPT)
    folder = tmp_path / "current"
    folder.mkdir()
    for name in ("selectors", "struct", "rigbench"):
        (folder / f"{name}.py").write_text("raise SystemExit('the wrong module')")
    main = subprocess.Popen(
        [sys.executable, script, Path(doing.__file__).parent, tmp_path],
        cwd=folder,
        env=surroundings,
        stdout=subprocess.DEVNULL,
        stderr=subprocess.DEVNULL,
    )
    deadline = time.monotonic() + 120  # kernels may have to be compiled first
    while not {"began-hang", "began-hang in c"} <= {p.name for p in tmp_path.iterdir()}:
        assert time.monotonic() < deadline
        assert main.poll() is None
        time.sleep(0.05)
    children = descendants(main.pid)
    assert len(children) >= 3  # two workers, their server
    main.kill()
    main.wait()
    deadline = time.monotonic() + 5
    while left := {pid for pid in children if processes().get(pid, ("Z", 0))[0] != "Z"}:
        assert time.monotonic() < deadline, left
        time.sleep(0.05)


def test_the_number_of_workers() -> None:
    """None is every core this process may use, 0 is none; never more than there are runs."""
    assert isinstance(executor_for(0, 10), InProcess)
    assert executor_for(None, 10_000) == Processes(usable_cores())
    assert executor_for(4, 3) == Processes(3)
    assert executor_for(4, 10_000) == Processes(4)
    assert usable_cores() == len(os.sched_getaffinity(0))


def test_the_time_limit_grows_with_motion_and_rate(doing: ModuleType) -> None:
    """60 s and 50 ms a tick: 4 s at 1 kHz have 260 s, 4 s at 100 Hz have 80 s."""
    assert time_limit_s(doing.FakeRun("one")) == pytest.approx(260.0)
    assert time_limit_s(doing.FakeRun("one", rates=doing.FakeRates(100.0))) == pytest.approx(80.0)
    stated = executor_for(4, 3, 7.0)
    assert isinstance(stated, Processes)
    assert stated.limit_s(doing.FakeRun("one")) == 7.0


def test_a_limit_of_months_is_one(doing: ModuleType, make_entries: EntryMaker) -> None:
    """More milliseconds than 31 bits hold, or no end at all: the run is done, and nothing else happens."""
    for limit_s in (1e10, float("inf")):
        (outcome,) = Processes(1, doing.work, lambda run, limit_s=limit_s: limit_s).run_all(
            make_entries(good=("finish", {}))
        )
        assert outcome.outcome == "finished"

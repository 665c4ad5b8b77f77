"""A campaign on a cluster: the same rows as on one machine, whatever becomes of workers and scheduler.

Scheduler and workers are dask's own commands, started on loopback and ended with each test; should the
tests be killed, the scheduler ends when it has been idle for a minute, and the workers with it.
"""

from __future__ import annotations

import contextlib
import json
import os
import signal
import socket
import sqlite3
import subprocess
import sys
import threading
import time
from collections.abc import Callable, Iterable, Iterator
from contextlib import closing
from dataclasses import replace
from pathlib import Path
from types import ModuleType, SimpleNamespace
from typing import Any

import pytest

from rigbench.campaign import cluster, cluster_link, cluster_shift
from rigbench.campaign.alike import Plugins, differences, host_for, plugins_of
from rigbench.campaign.cluster import Cluster, cluster_executor
from rigbench.campaign.executor import InProcess
from rigbench.campaign.plan import Entry
from rigbench.campaign.work import Host, Outcome
from rigbench.errors import ClusterLost, InputFaults

EntryMaker = Callable[..., list[Entry]]
HERE = Path(__file__).parent
START_S = 120.0
PATIENCE_S = 15.0


class Machines:
    """A scheduler and what workers a test starts."""

    def __init__(self, folder: Path) -> None:
        self._folder = folder
        self._started: list[subprocess.Popen[bytes]] = []
        note = folder / "scheduler.json"
        given = ("--port", "0", "--scheduler-file", str(note), "--idle-timeout", "60 s")
        self.scheduler = self._start("scheduler", "--host", "127.0.0.1", *given)
        wait_until(note.exists)
        self.address: str = json.loads(note.read_text())["address"]

    def worker(self, threads: int = 1) -> subprocess.Popen[bytes]:
        """Start a worker with its nanny; it may take seconds until it joins."""
        given = ("--nthreads", str(threads), "--local-directory", str(self._folder), "--death-timeout", "10")
        return self._start("worker", self.address, "--host", "127.0.0.1", *given)

    @property
    def joined(self) -> int:
        """How many workers have joined so far, whatever became of them."""
        return (self._folder / "log").read_bytes().count(b"Register worker addr")

    @property
    def connections(self) -> int:
        """How many campaigns have connected so far."""
        return (self._folder / "log").read_bytes().count(b"Receive client connection: Client-rigbench")

    def _start(self, *command: str) -> subprocess.Popen[bytes]:
        program = [sys.executable, "-W", "ignore", "-m", "dask", *command, "--no-dashboard"]
        with (self._folder / "log").open("ab") as log:
            started = subprocess.Popen(
                program,
                stdin=subprocess.DEVNULL, stdout=log, stderr=log, start_new_session=True,
                env=os.environ | {"PYTHONPATH": str(HERE)},
            )  # fmt: skip
        self._started.append(started)
        return started

    def end(self) -> None:
        for started in reversed(self._started):
            kill(started)


def kill(started: subprocess.Popen[bytes]) -> None:
    """Kill a program and the processes of its session; those that are not die with their parents."""
    with contextlib.suppress(ProcessLookupError):
        os.killpg(started.pid, signal.SIGKILL)
    started.wait(START_S)


def wait_until(true: Callable[[], bool]) -> None:
    ends = time.monotonic() + START_S
    while not true():
        assert time.monotonic() < ends, "it takes too long"
        time.sleep(0.05)


@pytest.fixture
def machines(tmp_path: Path) -> Iterator[Machines]:
    folder = tmp_path / "dask"
    folder.mkdir()
    started = Machines(folder)
    try:
        yield started
    finally:
        started.end()


@pytest.fixture
def far(doing: ModuleType) -> ModuleType:
    """The module doing_far.py."""
    import doing_far

    return doing_far


def by_name(outcomes: list[Outcome], entries: list[Entry]) -> dict[str, Outcome]:
    """Assert that each entry has one outcome under its own key, and return them by name."""
    assert sorted(o.key for o in outcomes) == sorted(e.key for e in entries)
    found = {o.key: o for o in outcomes}
    return {entry.run.name: found[entry.key] for entry in entries}


def test_the_same_rows_with_a_worker_killed_half_way(
    machines: Machines,
    folder: Path,
    run_of: Callable[..., Any],
    registered_law: Callable[..., Any],
    my_law: Callable[..., Any],
    drawn: Callable[..., Any],
) -> None:
    """One worker, a second that joins, the first killed: scores and residuals are the bits of this process."""
    laws = {
        "pd": registered_law("independent-joint", kp=(80.0, 30.0), kd=(9.0, 2.0)),
        "computed": registered_law("computed-torque", natural_hz=3.0),
        "mine": my_law(folder),
    }
    entries = [
        Entry("", law, "short", "all at 1", 1.0, draw, drawn(run_of(folder, choice), draw))
        for draw in range(40)
        for law, choice in laws.items()
    ]
    first, notes = machines.worker(), list[str]()
    executor = cluster_executor(machines.address, entries, notes.append, limit_s=120.0)
    assert executor.limit_s(entries[0].run) == 120.0
    executor = replace(executor, patience_s=PATIENCE_S)
    outcomes = []
    with closing(executor.run_all(iter(entries))) as coming:
        for outcome in coming:
            outcomes.append(outcome)
            if len(outcomes) == 1:
                machines.worker()
                wait_until(lambda: machines.joined == 2)
            if len(outcomes) == len(entries) // 2:
                kill(first)
    there = {o.key: (o.outcome, dict(o.scores), o.residual) for o in outcomes}
    here = {o.key: (o.outcome, dict(o.scores), o.residual) for o in InProcess().run_all(entries)}
    assert len(outcomes) == len(entries)
    assert there == here
    assert {outcome for outcome, _, _ in here.values()} == {"finished"}
    assert [note for note in notes if "is lost" in note]


TROUBLE = {
    "raise": ("crashed", "ValueError: no such luck", "in fail"),
    "segfault": ("crashed", "died twice on it: SIGSEGV", "Segmentation fault"),
    "hang in c": ("timed-out", "limit of 1 s", ""),
    "unpicklable": ("crashed", "RuntimeError: I stay here", "__reduce__"),
    "nonsense": ("crashed", "no outcome but 42", ""),
    "other key": ("crashed", "source files have changed", ""),
    "law-error": ("law-error", "ValueError: mine", "Traceback: mine"),
    "kill the dask worker": ("crashed", "worker that did it was lost, twice", ""),
}


def test_trouble_costs_its_own_run_alone(
    machines: Machines, far: ModuleType, make_entries: EntryMaker
) -> None:
    """Each ends as its row says and all others finish, in one worker that its nanny must start anew."""
    acts: dict[str, Any] = {}
    for number, act in enumerate(TROUBLE):
        acts[act] = (act, {})
        acts |= {f"good {number} {i}": ("finish", {}) for i in range(10)}
    entries, notes = make_entries(**acts), list[str]()
    machines.worker(2)
    executor = Cluster(
        machines.address, work=far.work, patience_s=PATIENCE_S, limit_s=lambda run: 1.0, tell=notes.append
    )
    outcomes = by_name(list(executor.run_all(entries)), entries)
    for act, (outcome, reason, trace) in TROUBLE.items():
        assert outcomes[act].outcome == outcome, act
        assert reason in outcomes[act].reason, act
        assert trace in outcomes[act].trace, act
    assert all(outcomes[name].outcome == "finished" for name in acts if name.startswith("good"))
    assert sum("is lost" in note for note in notes) == 2


def test_crews_stand_by_from_list_to_list(
    machines: Machines, far: ModuleType, make_entries: EntryMaker, tmp_path: Path
) -> None:
    """Three lists are done over one connection, by two processes in all, and so is one after a list given up."""
    machines.worker(2)
    executor = Cluster(machines.address, work=far.work, patience_s=PATIENCE_S)

    def lists(*names: str) -> list[list[Entry]]:
        act = "finish", {"folder": str(tmp_path)}
        return [make_entries(**{f"{name} {i}": act for i in range(12)}) for name in names]

    def began() -> list[str]:
        return [path.read_text() for path in tmp_path.glob("began-*")]

    with executor.standing() as standing:
        for entries in lists("first", "second", "third"):
            outcomes = by_name(list(standing.run_all(entries)), entries)
            assert {outcome.outcome for outcome in outcomes.values()} == {"finished"}
        assert len(began()) == 3 * 12
        assert len(set(began())) <= 2
        slow = make_entries(**{f"slow {i}": ("finish", {"seconds": 0.2}) for i in range(40)})
        with closing(standing.run_all(slow)) as outcomes:
            next(outcomes)
        (entries,) = lists("fourth")
        by_name(list(standing.run_all(entries)), entries)
        assert len(began()) == 4 * 12
        assert len(set(began())) <= 2
    assert machines.connections == 1


def test_work_in_hand_is_bounded_and_closing_drops_it(
    machines: Machines, far: ModuleType, make_entries: EntryMaker, tmp_path: Path
) -> None:
    """No more than two chunks a thread are drawn; what hangs is ended at once, with its processes."""
    drawn, done = [], []
    acts = {f"good {i}": ("finish", {}) for i in range(4)}
    entries = make_entries(
        **acts, **{f"hang {i}": ("hang in c", {"folder": str(tmp_path)}) for i in range(9)}
    )

    def source() -> Iterator[Entry]:
        for entry in entries:
            drawn.append(entry)
            yield entry

    machines.worker(2)
    executor = Cluster(machines.address, work=far.work, patience_s=PATIENCE_S)
    with closing(executor.run_all(source())) as outcomes:
        for _ in range(3):
            done.append(next(outcomes).outcome)
            assert len(drawn) - len(done) < 2 * 2
        wait_until(lambda: len(list(tmp_path.glob("began-hang*"))) == 2)
        began = time.monotonic()
    assert time.monotonic() - began < 3
    assert done == ["finished"] * 3
    for mark in tmp_path.glob("began-hang*"):
        process = Path("/proc", mark.read_text())
        wait_until(lambda: not process.exists())  # noqa: B023 - it is called before the next mark


def test_a_scheduler_that_goes_away_loses_nothing(
    machines: Machines, far: ModuleType, make_entries: EntryMaker
) -> None:
    """What came back before has been yielded; then ClusterLost says so, exit code 3, within seconds."""
    entries = make_entries(**{f"run {i}": ("finish", {"seconds": 0.02}) for i in range(500)})
    machines.worker()
    outcomes, killed = [], []

    def take(coming: Iterable[Outcome]) -> None:
        for outcome in coming:
            outcomes.append(outcome.outcome)
            if len(outcomes) == 10:
                kill(machines.scheduler)
                killed.append(time.monotonic())

    with pytest.raises(ClusterLost, match="scheduler went away") as lost:
        take(Cluster(machines.address, work=far.work, patience_s=PATIENCE_S).run_all(entries))
    assert time.monotonic() - killed[0] < 10
    assert lost.value.exit_code == 3
    assert len(outcomes) >= 10
    assert set(outcomes) == {"finished"}


def test_the_command_stops_resumable_and_goes_on_without_the_cluster(
    machines: Machines, folder: Path, tmp_path: Path
) -> None:
    """`run --cluster` ends with exit code 3 as its scheduler is killed; what it stored is not done again."""
    sheet = tmp_path / "two.yaml"
    sheet.write_text(EXPERIMENT)
    command = [sys.executable, "-m", "rigbench", "run", str(sheet), "--store", str(tmp_path / "two.sqlite")]
    machines.worker()
    far = subprocess.Popen(
        [*command, "--cluster", machines.address],
        stderr=subprocess.PIPE,
        stdout=subprocess.DEVNULL,
        text=True,
    )
    try:
        wait_until(lambda: stored(tmp_path / "two.sqlite") >= 5)
        kill(machines.scheduler)
        said = far.communicate(timeout=START_S)[1]
    finally:
        far.kill()
        far.wait()
    assert far.returncode == 3, said
    assert f"stopped as the cluster at {machines.address} can do no more: the scheduler went away" in said
    assert "Traceback" not in said
    done = stored(tmp_path / "two.sqlite")
    assert 5 <= done < 400
    near = subprocess.run(
        [*command, "--jobs", "0", "--draws", "30"], check=False, capture_output=True, text=True, timeout=60
    )
    assert near.returncode == 0, near.stderr
    assert stored(tmp_path / "two.sqlite") == max(done, 2 + 2 * 30)


EXPERIMENT = """\
rigbench: 1
arm: files/planar2/arm.yaml
seed: 1
rates: {control_hz: 500, physics_hz: 1000}
motions:
  swing: {via_deg: [[0, 0], [20, -10]], leg_s: 0.7}
laws:
  pd: {law: independent-joint, natural_hz: 3}
  computed: {law: computed-torque, natural_hz: 3}
mismatch: {link_mass_percent: 10}
conditions: {together: [1]}
draws: 2000
tolerance: {tool_peak_mm: 15.0}
"""


def stored(path: Path) -> int:
    """Count the runs of a store that another process may be filling."""
    if not path.exists():
        return 0
    with (
        contextlib.suppress(sqlite3.Error),
        closing(sqlite3.connect(f"file:{path}?mode=ro", uri=True)) as store,
    ):
        return int(store.execute("SELECT count(*) FROM runs").fetchone()[0])
    return 0


def test_other_versions_are_refused_before_the_first_run(
    machines: Machines, monkeypatch: pytest.MonkeyPatch, far: ModuleType, make_entries: EntryMaker
) -> None:
    """Each difference names worker, package and both versions; one who joins later gets no runs."""
    machines.worker()
    here = host_for(Plugins())
    changed = {"numpy": "1.0.0", "NUMERICS": "0"}
    other = Host(here.cpu, tuple((name, changed.get(name, found)) for name, found in here.versions))
    monkeypatch.setattr(cluster, "host_for", lambda plugins: other)
    with pytest.raises(InputFaults) as refused:
        cluster_executor(machines.address, [])
    numpy = dict(here.versions)["numpy"]
    lines = str(refused.value).splitlines()
    assert len(lines) == 2
    assert lines[0].startswith("worker tcp://127.0.0.1:")
    assert lines[0].endswith(f": numpy: {numpy}; expected 1.0.0, as here")
    assert "NUMERICS" in lines[1]

    monkeypatch.setattr(cluster_shift, "host_for", lambda plugins: other)
    notes = list[str]()
    executor = Cluster(machines.address, work=far.work, patience_s=0.5, tell=notes.append)
    with pytest.raises(ClusterLost, match="no worker that can be used"):
        list(executor.run_all(make_entries(good=("finish", {}))))
    assert f"gets no runs: numpy {numpy}, not 1.0.0, as here" in notes[0]


def test_differences_are_told_once_for_equal_workers() -> None:
    """A cluster of equal machines is one line a package; another type of CPU is none."""
    here = Host("fast", (("python", "3.11.9"), ("numpy", "2.4.6")))
    old = Host("slow", (("python", "3.11.9"), ("numpy", "2.3.0")))
    bare = Host("fast", (("python", "3.11.9"), ("extra", "1")))
    told = [
        str(fault)
        for fault in differences(here, {"a": old, "b": old, "c": bare, "d": Host("slow", here.versions)})
    ]
    assert told == [
        "worker a and 1 more: numpy: 2.3.0; expected 2.4.6, as here",
        "worker c: numpy: not installed; expected 2.4.6, as here",
        "worker c: extra: 1; expected not installed, as here",
    ]


def test_which_plugins_decide() -> None:
    """Registered laws and scenes are asked about; those in files travel with the runs."""

    def entry(law: tuple[str, Any], scene: tuple[str, Any] | None) -> Any:
        choice = None if scene is None else SimpleNamespace(plugin=scene[0], files=scene[1])
        run = SimpleNamespace(law=SimpleNamespace(plugin=law[0], files=law[1]), scene=choice)
        return SimpleNamespace(run=run)

    file = (("mine.py", ""),)
    runs = [
        entry(("b", ()), ("tray", ())),
        entry(("a", ()), None),
        entry(("mine.py:M", file), ("s.py:s", file)),
    ]
    assert plugins_of(runs) == Plugins(("a", "b"), ("tray",))
    assert "rigbench's sources" in dict(host_for(Plugins(("computed-torque",))).versions)


@pytest.mark.parametrize(
    "address", ["", "localhost", "localhost:8786", "http://a:1", "tcp://:8786", "tcp://a", "tcp://a:x", "tcp://a:99999", "tcp://a:1/b"]
)  # fmt: skip
def test_bad_addresses(address: str) -> None:
    """What is no address is told before anything is tried."""
    with pytest.raises(InputFaults, match="no address of a scheduler; expected tcp://HOST:PORT"):
        cluster_executor(address, [])


def test_no_scheduler(monkeypatch: pytest.MonkeyPatch) -> None:
    """A port that nobody listens on, one that stays silent and one of another program, within seconds."""
    monkeypatch.setattr(cluster_link, "CONNECT_S", 1.0)

    def greet(server: socket.socket) -> None:
        with server.accept()[0] as line:
            line.sendall(b"220 bakery ready\r\n")

    with socket.create_server(("127.0.0.1", 0)) as silent, socket.create_server(("127.0.0.1", 0)) as other:
        threading.Thread(target=greet, args=(other,), daemon=True).start()
        for port in (silent.getsockname()[1], other.getsockname()[1], 1):
            began = time.monotonic()
            with pytest.raises(InputFaults, match=f"no scheduler answers at tcp://127.0.0.1:{port} within"):
                cluster_executor(f"tcp://127.0.0.1:{port}", [])
            assert time.monotonic() - began < 5


def test_no_workers(machines: Machines, monkeypatch: pytest.MonkeyPatch) -> None:
    """A scheduler without workers is told of after a while, with what to do."""
    monkeypatch.setattr(cluster, "WORKERS_S", 1.0)
    with pytest.raises(InputFaults, match=r"no worker has joined .* within 1 s; .*dask worker tcp://"):
        cluster_executor(machines.address, [])


def test_without_dask(monkeypatch: pytest.MonkeyPatch) -> None:
    """A missing package is one fault that says what to install."""
    monkeypatch.setitem(sys.modules, "distributed", None)
    with pytest.raises(InputFaults, match=r"not installed; expected pip install 'rigbench\[cluster\]'"):
        cluster_executor("tcp://127.0.0.1:1", [])

"""A campaign specified by its failures: what goes wrong, which rows there are then, what is said, which exit code.

Each failure befalls the real command, in a process of its own. Afterwards no process of it is left; and once
the cause is gone, the same command goes on and ends with the rows of an undisturbed campaign, bit by bit.
"""

from __future__ import annotations

import os
import re
import resource
import signal
import subprocess
import sys
import time
from collections import Counter
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pytest
from typer.testing import CliRunner

from rigbench.campaign.store import Store
from rigbench.cli import app
from rigbench.errors import StoreError
from rigbench.scores.names import SCORES

pytestmark = pytest.mark.skipif(sys.platform != "linux", reason="limits and process groups as Linux has them")

ROOT = Path(__file__).resolve().parents[2]
DRAWS = 1
RUNS = 1 + DRAWS
"""Of each law in the campaign of broken laws."""

MORE_DRAWS = 8
"""In the campaigns that something befalls, which must not be over too soon."""

ALL, SOME = "all", "some"


@dataclass(frozen=True)
class InALaw:
    """What becomes of each run of a law that does it: ``outcome``, and parts of its reason and traceback."""

    outcome: str
    reason: str = ""
    trace: str = ""


IN_A_LAW = {
    "raises": InALaw("law-error", "ValueError: enough", "in raises"),
    "raises what can't be sent": InALaw("law-error", "Stubborn: a lock", "in raises_what_cant_be_sent"),
    "raises what can't be told": InALaw("crashed", "RuntimeError: no words", "in raises_what_cant_be_told"),
    "holds what can't be sent": InALaw("finished"),
    "reads no memory": InALaw("crashed", "died twice on it: SIGSEGV", "in reads_no_memory"),
    "crashes the engine": InALaw("crashed", "died twice on it: SIGSEGV", "in crashes_the_engine"),
    "aborts": InALaw("crashed", "died twice on it: SIGABRT", "in aborts"),
    "leaves": InALaw("crashed", "died twice on it: exit code 3"),
    "leaves in silence": InALaw("crashed", "died twice on it: exit code 0"),
    "is killed": InALaw("crashed", "died twice on it: SIGKILL, likely for want of memory"),
    "eats memory": InALaw("crashed", "ran out of memory twice: a worker may take", "in eats_memory"),
    "hoards memory": InALaw("crashed", "ran out of memory twice: a worker may take", "in hoards_memory"),
    "hangs": InALaw("timed-out", "longer than its limit of 2 s", "in hangs"),
    "hangs in C": InALaw("timed-out", "longer than its limit of 2 s", "in hangs_in_c"),
    "hangs with a child": InALaw("timed-out", "longer than its limit of 2 s", "in hangs_with_a_child"),
    "turns the clock": InALaw("finished"),
}


def _when_running(main: subprocess.Popen[bytes], store: Path) -> None:
    """Wait until some runs are stored and others are in hand."""
    deadline = time.monotonic() + 60
    while not _stored(store):
        assert main.poll() is None
        assert time.monotonic() < deadline
        time.sleep(0.02)


def _signals(*numbers: int, group: bool = False, pause_s: float = 0.0) -> Callable[..., None]:
    def send(main: subprocess.Popen[bytes], store: Path) -> None:
        _when_running(main, store)
        for number in numbers:
            (os.killpg if group else os.kill)(main.pid, number)
            time.sleep(pause_s)

    return send


def _kill_a_worker(main: subprocess.Popen[bytes], store: Path) -> None:
    _when_running(main, store)
    [server] = [pid for pid in _children(main.pid) if _children(pid)]
    os.kill(_children(server)[0], signal.SIGKILL)


def _kill_the_server(main: subprocess.Popen[bytes], store: Path) -> None:
    _when_running(main, store)
    [server] = [pid for pid in _children(main.pid) if _children(pid)]
    os.kill(server, signal.SIGKILL)


@dataclass(frozen=True)
class FromOutside:
    """What befalls the command: its exit ``code``, the ``rows`` then stored, what is ``said`` (a pattern).

    ``acts`` does it to its process. ``room``: no file of it may grow beyond so many sizes of the whole store,
    which a campaign's log of transactions does. ``before``: done in the process before the command.
    """

    code: int
    rows: str
    said: str
    acts: Callable[[subprocess.Popen[bytes], Path], None] = lambda main, store: None
    room: float | None = None
    before: str = ""


TURNED_CLOCK = """
import itertools, time
real, jumps = time.time, itertools.cycle([0.0, 3e7, -3e7])
time.time = lambda: real() + next(jumps)
"""

SLOW = {"SLOW": "0.002"}
STOPPED = r"stopped .* of 18 runs stored.*goes on from here"

FROM_OUTSIDE = {
    "a worker is killed": FromOutside(0, ALL, "store: ", _kill_a_worker),
    "the workers' server is killed": FromOutside(0, ALL, "store: ", _kill_the_server),
    "Ctrl-C in the terminal": FromOutside(3, SOME, STOPPED, _signals(signal.SIGINT, group=True)),
    "Ctrl-C twice": FromOutside(3, SOME, STOPPED, _signals(signal.SIGINT, signal.SIGINT, group=True, pause_s=0.05)),
    "SIGTERM": FromOutside(3, SOME, STOPPED, _signals(signal.SIGTERM)),
    "SIGTERM to all, by a batch system": FromOutside(3, SOME, STOPPED, _signals(signal.SIGTERM, group=True)),
    "SIGKILL": FromOutside(-signal.SIGKILL, SOME, "", _signals(signal.SIGKILL)),
    "the disk is full": FromOutside(5, SOME, "the disk refuses", room=1.6),
    "the clock is turned": FromOutside(0, ALL, "store: ", before=TURNED_CLOCK),
}  # fmt: skip

LAW = '''\
"""A law that is sound, unless the environment tells it to be what its option says."""

import ctypes
import os
import signal
import subprocess
import threading
import time

from rigbench.laws import Law, option

HOARD = []


class Stubborn(Exception):
    def __init__(self):
        super().__init__("a lock")
        self.lock = threading.Lock()


class Wordless(Exception):
    def __str__(self):
        raise RuntimeError("no words")


def raises():
    raise ValueError("enough")


def raises_what_cant_be_sent():
    raise Stubborn


def raises_what_cant_be_told():
    raise Wordless


def holds_what_cant_be_sent():
    HOARD.append((lambda: None, threading.Lock(), (i for i in range(3))))


def reads_no_memory():
    ctypes.string_at(0)


def crashes_the_engine():
    import pybullet

    ctypes.CDLL(pybullet.__file__).b3GetStatusType(ctypes.c_void_p(1))


def aborts():
    os.abort()


def leaves():
    os._exit(3)


def leaves_in_silence():
    os._exit(0)


def is_killed():
    os.kill(os.getpid(), signal.SIGKILL)


def eats_memory():
    eaten = []
    while True:
        eaten.append(b"x" * (1 << 22))


def hoards_memory():
    while True:
        HOARD.append(b"x" * (1 << 12))


def hangs():
    while True:
        pass


def hangs_in_c():
    ctypes.PyDLL(None).pause()  # keeps the interpreter's lock, as an endless kernel would


def hangs_with_a_child():
    subprocess.Popen(["sleep", "600"])
    time.sleep(600)


def turns_the_clock():
    time.time = lambda: 0.0


class Broken(Law):
    misdeed: str = option("", "", "what it does")

    def start(self, setup):
        self.do = globals()[self.misdeed] if self.misdeed and "BROKEN" in os.environ else None
        self.slow_s = float(os.environ.get("SLOW", 0))

    def torque(self, t, q, v, ref, held):
        time.sleep(self.slow_s)
        if self.do is not None and t > 0.05:
            self.do()
        return 80.0 * (ref.q - q) - 9.0 * v
'''

EXPERIMENT = """\
rigbench: 1
title: A trial
arm: {arm}
rates: {{control_hz: 500, physics_hz: 500}}
motions:
  swing: {{via_deg: [[0, 0], [20, -15]], leg_s: 0.2, rest_s: 0.1}}
laws:
  joint pd: {{law: independent-joint, natural_hz: 3}}
{laws}
mismatch: {{link_mass_percent: 10}}
conditions: {{together: [1]}}
draws: {draws}
tolerance: {{tool_peak_mm: 15}}
"""

BROKEN_LAWS = {law: re.sub(r"\W", "_", law.lower().replace("'", "")) for law in IN_A_LAW}
"""The laws' names, and the functions in the law's file that do what the names say."""

LITTLE_MEMORY = """
import rigbench.campaign.memory as memory
memory.SHARED *= 200 * 2**20 / memory.free_bytes()
"""
"""100 MiB for each of two workers in place of gigabytes."""


# --- the tests


@pytest.fixture(scope="module")
def broken(tmp_path_factory: pytest.TempPathFactory, reference: Campaign) -> Campaign:
    """One campaign of a sound law and all the broken ones, after its end.

    The reference comes first, for compiling takes longer than the limit of time here.
    """
    assert reference.code == 0
    campaign = Campaign(tmp_path_factory.mktemp("broken"), BROKEN_LAWS, DRAWS)
    campaign.end(campaign.start(LITTLE_MEMORY, {"BROKEN": "1"}, ["--limit", "2s"]))
    return campaign


@pytest.mark.parametrize("law", IN_A_LAW)
def test_what_a_law_does_costs_its_own_runs_alone(broken: Campaign, law: str) -> None:
    """Each of its runs is one row with its outcome and reason, and the user is told both; exit code 0."""
    expected = IN_A_LAW[law]
    rows = [record for record in broken.records() if record.row.law == law]
    assert len(rows) == RUNS
    for record in rows:
        assert (record.row.outcome, expected.reason in record.row.reason) == (expected.outcome, True), record
        assert expected.trace in record.trace
    assert (
        expected.outcome == "finished"
        or f"{RUNS} runs of '{law}' came to nothing ({expected.outcome})" in broken.said
    )
    assert broken.code == 0


def test_beside_broken_laws_all_others_finish_and_later_so_do_they(broken: Campaign, tmp_path: Path) -> None:
    """The sound law's rows are those of a campaign alone; with the cause gone the others' are too; none is left."""
    assert broken.left() == set()
    undisturbed = Campaign(tmp_path, BROKEN_LAWS, DRAWS)
    undisturbed.end(undisturbed.start())
    reference = undisturbed.rows()
    assert Counter(outcome for outcome, *_ in reference.values()) == {"finished": RUNS * (1 + len(IN_A_LAW))}
    harmless = {"joint pd", *(law for law, expected in IN_A_LAW.items() if expected.outcome == "finished")}
    rows = broken.rows()
    assert {n: r for n, r in rows.items() if n[0] in harmless} == {
        n: r for n, r in reference.items() if n[0] in harmless
    }
    settled = [law for law, expected in IN_A_LAW.items() if expected.outcome == "law-error"]
    broken.end(broken.start(more=[word for law in settled for word in ("--again", law)]))
    assert broken.code == 0
    assert broken.rows() == reference


@pytest.fixture(scope="module")
def reference(tmp_path_factory: pytest.TempPathFactory) -> Campaign:
    """An undisturbed campaign of two sound laws."""
    campaign = Campaign(tmp_path_factory.mktemp("reference"), {"mine": ""}, MORE_DRAWS)
    campaign.end(campaign.start())
    assert campaign.code == 0
    return campaign


@pytest.mark.parametrize("failure", FROM_OUTSIDE)
def test_what_befalls_the_command(
    tmp_path: Path, reference: Campaign, monkeypatch: pytest.MonkeyPatch, failure: str
) -> None:
    """The rows, the sentence and the exit code of the table; nothing left; then it goes on to the same rows.

    It goes on without workers, in this process: there is no other way to do a run, only another place.
    """
    expected = FROM_OUTSIDE[failure]
    campaign = Campaign(tmp_path, {"mine": ""}, MORE_DRAWS)
    room = expected.room and int(expected.room * reference.store.stat().st_size)
    main = campaign.start(expected.before, SLOW, room=room)
    expected.acts(main, campaign.store)
    campaign.end(main)
    assert campaign.code == expected.code, campaign.said
    assert re.search(expected.said, " ".join(campaign.said.split())), campaign.said
    assert "Traceback" not in campaign.said
    assert campaign.left() == set()
    rows, whole = campaign.rows(), reference.rows()
    assert rows == whole if expected.rows == ALL else set(rows.items()) < set(whole.items())
    assert rows
    monkeypatch.chdir(campaign.folder)
    went_on = CliRunner().invoke(app, ["run", "trial.yaml", "--jobs", "0"])
    assert went_on.exit_code == 0, went_on.output
    assert campaign.rows() == whole
    assert campaign.is_sound()


# --- a campaign from outside


class Campaign:
    """A small experiment in a folder, and the command that runs it; ``code`` and ``said`` of the last time."""

    def __init__(self, folder: Path, laws: dict[str, str], draws: int) -> None:
        self.folder, self.store = folder, folder / "results" / "trial.sqlite"
        self.code, self.said, self._main = 0, "", 0
        lines = [
            f'  "{law}": {{law: broken.py:Broken, misdeed: "{misdeed}"}}' for law, misdeed in laws.items()
        ]
        arm = ROOT / "robots_demo" / "planar2" / "arm.yaml"
        (folder / "broken.py").write_text(LAW)
        (folder / "trial.yaml").write_text(EXPERIMENT.format(arm=arm, laws="\n".join(lines), draws=draws))

    def start(
        self,
        before: str = "",
        surroundings: dict[str, str] | None = None,
        more: list[str] | None = None,
        room: int | None = None,
    ) -> subprocess.Popen[bytes]:
        """Start the command, in a session of its own; no file may grow beyond ``room`` bytes."""
        room = resource.RLIM_INFINITY if room is None else room
        limit = f"import resource; resource.setrlimit(resource.RLIMIT_FSIZE, ({room}, {room}))"
        code = f"{limit}\n{before}\nfrom rigbench.cli import main\nmain()"
        with (self.folder / "said").open("wb") as said:
            main = subprocess.Popen(
                [sys.executable, "-c", code, "run", "trial.yaml", "--jobs", "2", *(more or [])],
                cwd=self.folder,
                env=os.environ | {"COLUMNS": "120"} | (surroundings or {}),
                stdin=subprocess.DEVNULL,
                stdout=said,
                stderr=said,
                start_new_session=True,
            )
        self._main = main.pid
        return main

    def end(self, main: subprocess.Popen[bytes]) -> None:
        """Wait for its end, which must come."""
        try:
            self.code = main.wait(timeout=120)
        finally:
            main.kill()
        self.said = (self.folder / "said").read_text("utf-8", "replace")

    def records(self) -> list[Any]:
        with Store.open_for_reading(self.store) as reader:
            return list(reader.records())

    def rows(self) -> dict[tuple[Any, ...], tuple[Any, ...]]:
        """What must be the same each time: outcome, reason, scores and residual of each run by name."""
        rows = {}
        for record in self.records():
            row, residual = record.row, record.residual
            scores = {
                name: value for name, value in row.scores.items() if not SCORES[name.partition(".")[0]].host
            }
            rows[row.law, row.condition, row.draw] = (
                row.outcome,
                row.reason,
                tuple(sorted(scores.items())),
                residual,
            )
        return rows

    def left(self) -> set[int]:
        """Return the processes of its session that live on, five seconds after its end at the latest."""
        deadline = time.monotonic() + 5
        while (left := _session(self._main)) and time.monotonic() < deadline:
            time.sleep(0.05)
        return left

    def is_sound(self) -> bool:
        """Whether the store passes SQLite's own check, of every page and index."""
        with Store.open_for_reading(self.store) as reader:
            said: tuple[str] = reader._connection.execute("PRAGMA integrity_check").fetchone()
            return said == ("ok",)


def _stored(store: Path) -> int:
    try:
        with Store.open_for_reading(store) as reader:
            return len(reader.rows())
    except StoreError:
        return 0


def _processes() -> dict[int, list[str]]:
    """Return state, parent, group and session of every living process."""
    found = {}
    for folder in Path("/proc").glob("[0-9]*"):
        try:
            found[int(folder.name)] = (folder / "stat").read_text().rpartition(")")[2].split()[:4]
        except OSError:
            continue
    return {pid: stat for pid, stat in found.items() if stat[0] != "Z"}


def _session(leader: int) -> set[int]:
    return {pid for pid, stat in _processes().items() if int(stat[3]) == leader}


def _children(parent: int) -> list[int]:
    return [pid for pid, stat in _processes().items() if int(stat[1]) == parent]

"""Stand-ins for a run and for the work on it, in a module that worker processes can import."""

from __future__ import annotations

import ctypes
import hashlib
import os
import resource
import signal
import sys
import time
from dataclasses import dataclass, field
from pathlib import Path
from types import SimpleNamespace
from typing import Any

from rigbench.arm.mismatch import Mismatch
from rigbench.campaign.work import Outcome

MISMATCH = Mismatch(coulomb_percent=30.0, viscous_percent=20.0)


@dataclass(frozen=True)
class FakeArmFiles:
    path: str = "arm.yaml"
    text: str = "drives: {}"
    urdf_path: str = "arm.urdf"
    urdf_text: str = "<robot/>"

    def arm(self) -> Any:
        return SimpleNamespace(joints=("j1", "j2"), links=("upper", "lower"))


@dataclass(frozen=True)
class FakeLaw:
    plugin: str = "fake"
    files: tuple[tuple[str, str], ...] = ()


@dataclass(frozen=True)
class FakeMotion:
    duration_s: float = 4.0


@dataclass(frozen=True)
class FakeRates:
    control_hz: float = 1000.0


@dataclass(frozen=True)
class FakeRun:
    """What the campaign knows of a run; ``act`` is what happens when it is done."""

    name: str
    act: str = "finish"
    seconds: float = 0.0
    folder: str = ""
    arm: FakeArmFiles = FakeArmFiles()
    model: FakeArmFiles | None = None
    law: FakeLaw = FakeLaw()
    seed: int = 7
    draw: int | None = None
    sources: tuple[str, ...] = ()
    mismatch: Mismatch = field(default=MISMATCH)
    motion: FakeMotion = FakeMotion()
    rates: FakeRates = FakeRates()
    directions: None = None

    def inputs(self) -> dict[str, Any]:
        return {"name": self.name}

    def key(self) -> str:
        return hashlib.blake2b(self.name.encode(), digest_size=20).hexdigest()


class Unpicklable:
    def __reduce__(self) -> Any:
        raise RuntimeError("I stay here")


class Unreadable:
    """Can be pickled but not unpickled, as an exception with a constructor of its own often can't."""

    def __reduce__(self) -> Any:
        return int, ("not a number",)


def work(run: FakeRun) -> Any:
    time.sleep(run.seconds)
    if run.folder:
        (Path(run.folder) / f"began-{run.name}").write_text(str(os.getpid()))
    return ACTS[run.act](run)


def finish(run: FakeRun) -> Outcome:
    return Outcome(run.key(), "finished", scores={"tool_peak_mm": len(run.name) / 3}, wall_s=0.1)


def fail(run: FakeRun) -> Outcome:
    raise ValueError("no such luck")


def leave(run: FakeRun) -> Outcome:
    sys.exit(3)


def segfault(run: FakeRun) -> Outcome:
    os.kill(os.getpid(), signal.SIGSEGV)
    raise AssertionError


def killed(run: FakeRun) -> Outcome:
    os.kill(os.getpid(), signal.SIGKILL)
    raise AssertionError


def hang(run: FakeRun) -> Outcome:
    while True:
        time.sleep(1)


def hang_in_c(run: FakeRun) -> Outcome:
    ctypes.PyDLL(None).pause()  # never returns and keeps the interpreter's lock, as an endless kernel would
    raise AssertionError


def once(run: FakeRun, number: int, victim: int) -> Outcome:
    """Send the signal the first time that this run is done; finish the second time."""
    mark = Path(run.folder) / f"once-{run.name}"
    if not mark.exists():
        mark.touch()
        os.kill(victim, number)
        time.sleep(30)
    return finish(run)


def threads() -> float:
    """Return how many threads this process has."""
    [line] = [
        line for line in Path("/proc/self/status").read_text().splitlines() if line.startswith("Threads:")
    ]
    return float(line.split()[1])


def look_around(run: FakeRun) -> Outcome:
    """Report what a worker process finds itself in, as scores."""
    import numba
    import numpy as np
    import scipy.linalg

    mark = Path(run.folder) / "looked"
    looks = len(mark.read_text()) + 1 if mark.exists() else 1
    mark.write_text("x" * looks)
    before = threads()
    for process in (os.getppid(), os.getpid()):
        os.kill(process, signal.SIGTERM)  # which a batch system sends to all: neither server nor worker minds
    time.sleep(0.2)
    large = np.eye(600) + np.ones((600, 600))
    scipy.linalg.cholesky(large @ large)
    return Outcome(
        run.key(),
        "finished",
        scores={
            "looks": float(looks),
            "threads_allowed": float(os.environ["OMP_NUM_THREADS"]),
            "threads_of_numba": float(numba.get_num_threads()),
            "threads": before,
            "threads_after_large_products": threads(),
            "leads_its_group": float(os.getpgid(0) == os.getpid()),
            "memory_is_limited": float(resource.getrlimit(resource.RLIMIT_DATA)[0] > 0),
            "images_of_memory_kept": float(resource.getrlimit(resource.RLIMIT_CORE)[0]),
            "ignores_ctrl_c": float(signal.getsignal(signal.SIGINT) is signal.SIG_IGN),
            "stdout_is_stderr": float(os.path.samestat(os.fstat(1), os.fstat(2))),
            "kernels_are_loaded": float("rigbench.rig.simulate" in sys.modules),
        },
    )


ACTS = {
    "finish": finish,
    "raise": fail,
    "exit": leave,
    "segfault": segfault,
    "killed": killed,
    "hang": hang,
    "hang in c": hang_in_c,
    "unpicklable": lambda run: Unpicklable(),
    "unreadable": lambda run: Unreadable(),
    "nonsense": lambda run: 42,
    "other key": lambda run: Outcome("another", "finished"),
    "law-error": lambda run: Outcome(run.key(), "law-error", "ValueError: mine", trace="Traceback: mine"),
    "die once": lambda run: once(run, signal.SIGKILL, os.getpid()),
    "kill the server once": lambda run: once(run, signal.SIGKILL, os.getppid()),
    "look around": look_around,
}

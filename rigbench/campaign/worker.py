"""Inside a worker process: how it is set up, and how it serves runs.

Workers are forked from a server process, itself a fresh interpreter in which the engine, the compiler
and the kernels are loaded once. :mod:`rigbench.campaign.workers` starts them.
"""

from __future__ import annotations

import contextlib
import ctypes
import faulthandler
import multiprocessing
import os
import pickle
import resource
import signal
import sys
import traceback
from dataclasses import dataclass
from multiprocessing.connection import Connection
from pathlib import Path

from rigbench.campaign.memory import hold_to
from rigbench.campaign.work import summary

__all__ = ["OUT_OF_MEMORY", "READY", "Trouble", "answer", "prepare_server", "serve"]

LIBRARIES = ("OMP", "OPENBLAS", "MKL", "BLIS", "NUMEXPR", "NUMBA")
ONE_THREAD = {f"{library}_NUM_THREADS": "1" for library in LIBRARIES}
"""Every core has a worker of its own, so the libraries in it must not start threads of theirs."""

READY = b"ready"
"""What a worker says before it takes its first run."""

OUT_OF_MEMORY = 71
"""The exit code of a worker that ran into its limit of memory (EX_OSERR of sysexits.h)."""

FIRST_TO_GO = "500"
"""Added to a worker's badness, should the system have to kill something for want of memory: a worker can
be replaced, the campaign's process can't."""

PR_SET_PDEATHSIG = 1
"""Linux, prctl(2)."""


@dataclass(frozen=True)
class Trouble:
    """What kept a worker from returning an outcome: an exception, as text."""

    summary: str
    trace: str


def prepare_server() -> None:
    """Make the server ready to fork workers: all is loaded and compiled; it ends with its parent."""
    _die_with_parent()
    _leave_stopping_to_the_parent()
    os.environ.update(ONE_THREAD)  # read when the libraries are loaded, so before that
    os.dup2(2, 1)  # stdout belongs to the command's own result, not to what a law or the engine prints
    with contextlib.suppress(Exception):  # whatever is wrong, the runs will meet it, and each says so
        import rigbench.scores.of_run  # noqa: F401
        from rigbench.rig import warm_up

        warm_up()


def serve(runs: Connection, words: Connection, share: int | None) -> None:
    """Be a worker: answer what comes through ``runs`` until that is closed.

    ``words`` takes the traceback of a crash, ``share`` is the memory [bytes] that the runs may take. A run
    for which that is too little ends this process, and with it whatever was left in its memory.
    """
    _prepare(words, share)
    with contextlib.suppress(EOFError, OSError):  # closed: the campaign is over, or its process is gone
        runs.send_bytes(READY)
        while True:
            payload = runs.recv_bytes()
            try:
                result = answer(payload)
            except MemoryError:
                with contextlib.suppress(MemoryError):
                    os.write(words.fileno(), traceback.format_exc().encode("utf-8", "backslashreplace"))
                os._exit(OUT_OF_MEMORY)
            runs.send_bytes(result)


def answer(payload: bytes) -> bytes:
    """Do one run; ``payload`` is the pickled pair (work, run), the return a pickled outcome or Trouble.

    Pickling on both sides is done here, so that nothing that a law or a run holds can break the way back.
    Raises MemoryError, and nothing else.
    """
    try:
        work, run = pickle.loads(payload)
        return pickle.dumps(work(run))
    except MemoryError:
        raise
    except BaseException as error:
        return pickle.dumps(Trouble(summary(error), traceback.format_exc()))


def _prepare(words: Connection, share: int | None) -> None:
    """Bind this process to its parent's life, and keep what a law does from reaching beyond it."""
    _die_with_parent()
    parent = multiprocessing.parent_process()
    if parent is not None and not parent.is_alive():
        os._exit(1)  # it died before the line above could tell
    os.setpgid(0, 0)  # a group of its own, with whatever processes a law may start: they end together
    os.environ.update(ONE_THREAD)  # as in the server, should that have been started by somebody else
    os.dup2(2, 1)
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    _leave_stopping_to_the_parent()
    faulthandler.enable(words.fileno())
    resource.setrlimit(resource.RLIMIT_CORE, (0, resource.getrlimit(resource.RLIMIT_CORE)[1]))
    with contextlib.suppress(OSError):
        Path("/proc/self/oom_score_adj").write_text(FIRST_TO_GO)
    if share is not None:
        hold_to(share)


def _leave_stopping_to_the_parent() -> None:
    """Take no notice of SIGTERM, which a batch system sends to all: the parent lets runs end, or kills.

    A handler that does nothing, not SIG_IGN: that would be inherited by what a law starts.
    """
    signal.signal(signal.SIGTERM, lambda number, frame: None)


def _die_with_parent() -> None:
    """Ask the kernel to kill this process when its parent ends, however that ends. Linux alone has it."""
    if sys.platform == "linux":
        ctypes.CDLL(None).prctl(PR_SET_PDEATHSIG, signal.SIGKILL)

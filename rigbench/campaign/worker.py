"""Inside a worker process: how it is set up, and how it serves one run.

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
import signal
import sys
import traceback
from dataclasses import dataclass
from pathlib import Path

from rigbench.campaign.work import summary

__all__ = ["Trouble", "prepare_server", "prepare_worker", "serve"]

LIBRARIES = ("OMP", "OPENBLAS", "MKL", "BLIS", "NUMEXPR", "NUMBA")
ONE_THREAD = {f"{library}_NUM_THREADS": "1" for library in LIBRARIES}
"""Every core has a worker of its own, so the libraries in it must not start threads of theirs."""

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
    os.environ.update(ONE_THREAD)  # read when the libraries are loaded, so before that
    os.dup2(2, 1)  # stdout belongs to the command's own result, not to what a law or the engine prints
    with contextlib.suppress(Exception):  # whatever is wrong, the runs will meet it, and each says so
        import rigbench.scores.of_run  # noqa: F401
        from rigbench.rig import warm_up

        warm_up()


def prepare_worker(folder: str) -> None:
    """Bind a worker to its parent's life; ``folder`` takes the traceback of a crash, in a file of its id."""
    _die_with_parent()
    parent = multiprocessing.parent_process()
    if parent is not None and not parent.is_alive():
        os._exit(1)  # it died before the line above could tell
    os.environ.update(ONE_THREAD)  # as in the server, should that have been started by somebody else
    os.dup2(2, 1)
    signal.signal(signal.SIGINT, signal.SIG_IGN)  # Ctrl-C reaches the whole group; the parent decides
    signal.signal(signal.SIGTERM, signal.SIG_DFL)  # at once, even from within a kernel that never returns
    faulthandler.enable((Path(folder) / str(os.getpid())).open("w"))


def serve(payload: bytes) -> bytes:
    """Do one run; ``payload`` is the pickled pair (work, run), the return a pickled outcome or Trouble.

    Pickling on both sides is done here, so that nothing that a law or a run holds can break the pool.
    """
    try:
        work, run = pickle.loads(payload)
        return pickle.dumps(work(run))
    except BaseException as error:
        return pickle.dumps(Trouble(summary(error), traceback.format_exc()))


def _die_with_parent() -> None:
    """Ask the kernel to kill this process when its parent ends, however that ends. Linux alone has it."""
    if sys.platform == "linux":
        ctypes.CDLL(None).prctl(PR_SET_PDEATHSIG, signal.SIGKILL)

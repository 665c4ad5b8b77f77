"""A crew of worker processes, from outside: starting it, giving it runs, ending it."""

from __future__ import annotations

import contextlib
import multiprocessing
import os
import signal
import sys
import tempfile
from collections.abc import Iterator
from concurrent.futures import Future
from multiprocessing import forkserver, resource_tracker
from pathlib import Path
from types import TracebackType

from pebble import ProcessPool

from rigbench.campaign.preload import SERVER_OF
from rigbench.campaign.worker import prepare_worker, serve
from rigbench.errors import RigbenchError

__all__ = ["Crew", "usable_cores"]

LIBRARIES = ("OMP", "OPENBLAS", "MKL", "BLIS", "NUMEXPR", "NUMBA")
ONE_THREAD = {f"{library}_NUM_THREADS": "1" for library in LIBRARIES}
"""Every core has its own worker, so the libraries within it must not start threads of theirs."""


def usable_cores() -> int:
    """Return the number of cores that this process may use."""
    if hasattr(os, "sched_getaffinity"):
        return len(os.sched_getaffinity(0))
    return os.cpu_count() or 1


class Crew:
    """Worker processes, each of which does one run at a time; one that dies is replaced."""

    def __init__(self, size: int) -> None:
        self._folder = tempfile.TemporaryDirectory(prefix="rigbench-workers-")
        _start_server()
        self._pool = ProcessPool(
            max_workers=size,
            initializer=prepare_worker,
            initargs=(self._folder.name,),
            context=multiprocessing.get_context("forkserver"),
        )

    def __enter__(self) -> Crew:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.stop()

    def give(self, payload: bytes, limit_s: float) -> Future[bytes]:
        """Give a run to whichever worker is free next; BrokenCrew if there are none any more.

        The future raises TimeoutError after ``limit_s`` of work on it, pebble's ProcessExpired if its
        worker died, and BrokenProcessPool if the whole crew broke down.
        """
        try:
            future: Future[bytes] = self._pool.schedule(serve, args=(payload,), timeout=limit_s)
        except RuntimeError as error:
            raise BrokenCrew(str(error)) from error
        return future

    @property
    def whole(self) -> bool:
        """Whether the crew still takes and finishes runs."""
        return bool(self._pool.active)

    def last_words(self, worker: int | None) -> str:
        """Return the traceback that a crashed worker left behind, '' if it had no time for one."""
        with contextlib.suppress(OSError):
            return (Path(self._folder.name) / str(worker)).read_text("utf-8", "replace")
        return ""

    def stop(self) -> None:
        """End all workers at once, whatever they are doing."""
        self._pool.stop()  # type: ignore[no-untyped-call]
        self._pool.join()
        self._folder.cleanup()


class BrokenCrew(RigbenchError):
    """Worker processes can't be had."""


def _start_server() -> None:
    """Start the process from which workers are forked, unless it runs already.

    It looks for modules where this process does, holds native libraries to one thread, and never sees
    Ctrl-C, not even while it starts.
    """
    context = multiprocessing.get_context("forkserver")
    context.set_forkserver_preload(["rigbench.campaign.preload"])
    resource_tracker.ensure_running()  # it meddles with the signal mask, so it must not start within
    places = os.pathsep.join(place or os.getcwd() for place in sys.path)
    surroundings = {**ONE_THREAD, SERVER_OF: str(os.getpid()), "PYTHONPATH": places, "PYTHONSAFEPATH": "1"}
    with _environment(surroundings), _interrupts_held_back():
        forkserver.ensure_running()


@contextlib.contextmanager
def _environment(values: dict[str, str]) -> Iterator[None]:
    before = {name: os.environ.get(name) for name in values}
    os.environ.update(values)
    try:
        yield
    finally:
        for name, value in before.items():
            if value is None:
                del os.environ[name]
            else:
                os.environ[name] = value


@contextlib.contextmanager
def _interrupts_held_back() -> Iterator[None]:
    """Block SIGINT in here; one that comes meanwhile is delivered afterwards. Children inherit the block."""
    before = signal.pthread_sigmask(signal.SIG_BLOCK, {signal.SIGINT})
    try:
        yield
    finally:
        signal.pthread_sigmask(signal.SIG_SETMASK, before)

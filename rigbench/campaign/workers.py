"""A crew of worker processes, from outside: starting it, giving it runs, ending it."""

from __future__ import annotations

import contextlib
import os
import signal
import tempfile
from collections.abc import Iterator
from concurrent.futures import Future
from multiprocessing import forkserver, resource_tracker
from multiprocessing.context import ForkServerContext
from multiprocessing.synchronize import RLock
from pathlib import Path
from types import TracebackType

from pebble import ProcessPool

from rigbench.campaign.worker import prepare_worker, serve
from rigbench.errors import RigbenchError

__all__ = ["BrokenCrew", "Crew", "usable_cores"]


def usable_cores() -> int:
    """Return the number of cores that this process may use."""
    if hasattr(os, "sched_getaffinity"):
        return len(os.sched_getaffinity(0))
    return os.cpu_count() or 1


class Crew:
    """Worker processes, each of which does one run at a time; one that dies is replaced.

    BrokenCrew if the system refuses them (no temporary folder, too many processes ...).
    """

    def __init__(self, size: int) -> None:
        self._context = _Context()
        try:
            _start_server()
            self._folder = tempfile.TemporaryDirectory(prefix="rigbench-workers-")
        except OSError as error:
            raise BrokenCrew(str(error)) from error
        self._pool = ProcessPool(
            max_workers=size,
            initializer=prepare_worker,
            initargs=(self._folder.name,),
            context=self._context,
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
            raise BrokenCrew(str(error.__cause__ or error)) from error
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
        self._context.locks.clear()
        self._folder.cleanup()


class BrokenCrew(RigbenchError):
    """Worker processes can't be had."""


class _Context(ForkServerContext):
    """Keeps the pool's locks until the crew has gone: a worker still starting would miss them, loudly."""

    def __init__(self) -> None:
        super().__init__()
        self.locks: list[RLock] = []

    def RLock(self) -> RLock:
        lock = super().RLock()
        self.locks.append(lock)
        return lock


def _start_server() -> None:
    """Start the process from which workers are forked, unless it runs already.

    It looks for no module in the current folder, and never sees Ctrl-C, not even while it starts.
    """
    forkserver.set_forkserver_preload(["rigbench.campaign.preload"])
    with _environment("PYTHONSAFEPATH", "1"):
        resource_tracker.ensure_running()  # it sets the signal mask itself, so it must not start below
        with _interrupts_held_back():
            forkserver.ensure_running()


@contextlib.contextmanager
def _environment(name: str, value: str) -> Iterator[None]:
    before = os.environ.get(name)
    os.environ[name] = value
    try:
        yield
    finally:
        if before is None:
            del os.environ[name]
        else:
            os.environ[name] = before


@contextlib.contextmanager
def _interrupts_held_back() -> Iterator[None]:
    """Block SIGINT in here; one that comes meanwhile is delivered afterwards. Children inherit the block."""
    before = signal.pthread_sigmask(signal.SIG_BLOCK, {signal.SIGINT})
    try:
        yield
    finally:
        signal.pthread_sigmask(signal.SIG_SETMASK, before)

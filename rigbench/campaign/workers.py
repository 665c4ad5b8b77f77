"""A crew of worker processes, from outside: starting it, giving it runs, ending it.

One thread tends one worker: it sends a run, waits for the answer until the run's limit, and replaces the
worker if it dies or does not answer. Workers share nothing, neither locks nor pipes, so what one of them
suffers reaches no other. All waiting is by the monotonic clock: the time of day may change meanwhile.
"""

from __future__ import annotations

import atexit
import contextlib
import os
import signal
import threading
from collections.abc import Iterator
from concurrent.futures import Future, ThreadPoolExecutor
from multiprocessing import forkserver, get_context, resource_tracker
from multiprocessing.connection import wait
from queue import SimpleQueue
from types import TracebackType

from rigbench.campaign.memory import free_bytes, share_of
from rigbench.campaign.worker import READY, serve
from rigbench.errors import RigbenchError

__all__ = ["BrokenCrew", "Crew", "Overdue", "WorkerDied", "usable_cores"]

PAUSES_S = (0.0, 0.1, 0.5, 2.0)
"""Before each try to replace a worker: a killed server may for a moment be neither alive nor dead."""

START_S = 60.0
"""How long a worker may take to be ready once it is forked, and to be gone once it is killed."""

LONGEST_WAIT_S = 2e6
"""A longer limit is one of 23 days: the system counts what it waits for in milliseconds, of 31 bits."""

WORDS_S = 2.0
"""How long a worker that is told to end may take to leave its traceback."""

WORDS_LENGTH = 65_536
"""What a pipe holds, in bytes: more of last words would not fit."""


def usable_cores() -> int:
    """Return the number of cores that this process may use."""
    if hasattr(os, "sched_getaffinity"):
        return len(os.sched_getaffinity(0))
    return os.cpu_count() or 1


class BrokenCrew(RigbenchError):
    """Worker processes can't be had, or don't stay alive before they are given anything."""


class Overdue(RigbenchError):
    """A run did not end within its limit; ``words`` is the traceback of where it was."""

    def __init__(self, words: str) -> None:
        self.words = words
        super().__init__(words)


class WorkerDied(RigbenchError):
    """A worker died on a run; ``exitcode`` as multiprocessing has it, ``words`` the traceback it left."""

    def __init__(self, exitcode: int, words: str) -> None:
        self.exitcode, self.words = exitcode, words
        super().__init__(exitcode, words)


class Crew:
    """Worker processes, each of which does one run at a time; one that dies is replaced.

    ``share`` is the memory [bytes] that each may take (see :mod:`rigbench.campaign.memory`), None for no
    limit. BrokenCrew if the system refuses them (no temporary folder, too many processes ...).
    """

    def __init__(self, size: int) -> None:
        self.share = share_of(size, free_bytes())
        self._lock = threading.Lock()  # multiprocessing doesn't expect threads to start and to reap at once
        self._stopped = threading.Event()
        self._workers: set[_Worker] = set()
        self._idle: SimpleQueue[_Worker] = SimpleQueue()
        self._threads = ThreadPoolExecutor(size, "worker")
        atexit.register(self.stop)  # should nobody else: workers that wait would be waited for
        try:
            for _ in range(size):
                self._idle.put(self._started())
        except BaseException as error:
            self.stop()
            if isinstance(error, OSError | EOFError):
                raise BrokenCrew(_said(error)) from error
            raise

    def __enter__(self) -> Crew:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.stop()

    def give(self, payload: bytes, limit_s: float) -> Future[bytes]:
        """Give a run to whichever worker is free next.

        The future raises Overdue after ``limit_s`` of work on it, WorkerDied if its worker died, and
        BrokenCrew if no worker can be had.
        """
        return self._threads.submit(self._done, payload, limit_s)

    def stop(self) -> None:
        """End all workers at once, whatever they are doing."""
        with self._lock:
            self._stopped.set()
            for worker in self._workers:
                worker.end()
        self._threads.shutdown(cancel_futures=True)
        for worker in self._workers:
            worker.bury()
        atexit.unregister(self.stop)

    def _done(self, payload: bytes, limit_s: float) -> bytes:
        worker = self._idle.get()  # there are as many as threads
        try:
            worker = self._sound(worker)
            return worker.do(payload, limit_s)
        finally:
            self._idle.put(worker)

    def _sound(self, worker: _Worker) -> _Worker:
        """Return the worker if it waits for a run, else one in its place that does."""
        reason = "it ends before it is ready"
        for pause in PAUSES_S:
            if worker.is_ready():
                return worker
            self._stopped.wait(pause)
            try:
                worker = self._started(worker)
            except (OSError, EOFError) as error:
                reason = _said(error)
        if worker.is_ready():
            return worker
        raise BrokenCrew(reason)

    def _started(self, instead_of: _Worker | None = None) -> _Worker:
        with self._lock:
            if self._stopped.is_set():
                raise BrokenCrew("the crew was sent home")
            if instead_of is not None:
                instead_of.bury()
                self._workers.discard(instead_of)
            worker = _Worker(self.share, self._lock)
            self._workers.add(worker)
            return worker


class _Worker:
    """One worker process, the pipe that it gets runs through, and the one for its last words."""

    def __init__(self, share: int | None, lock: threading.Lock) -> None:
        _start_server()
        context = get_context("forkserver")
        self._runs, runs = context.Pipe()
        self._words, words = context.Pipe(duplex=False)
        self._lock, self._greeted = lock, False
        self._process = context.Process(target=serve, args=(runs, words, share), name="rigbench-worker")
        try:
            self._process.start()
            self._pid = self._process.pid or 0
        except BaseException:
            self._runs.close()
            self._words.close()
            raise
        finally:
            runs.close()  # with the worker's own end the only one left, its death closes the pipe
            words.close()

    def is_ready(self) -> bool:
        """Whether it lives and waits for a run; a new one is waited for, and ended if it takes too long."""
        try:
            if self._greeted:
                return not self._signs(0)
            if self._runs in self._signs(START_S):
                self._greeted = self._runs.recv_bytes() == READY
        except (EOFError, OSError):
            return False
        if not self._greeted:
            self.end()
        return self._greeted

    def do(self, payload: bytes, limit_s: float) -> bytes:
        """Return its answer; Overdue after ``limit_s``, WorkerDied if it died. It is dead after either."""
        try:
            self._runs.send_bytes(payload)
            signs = self._signs(limit_s)
            if self._runs in signs:
                return self._runs.recv_bytes()
        except (EOFError, OSError):
            signs = [self._process.sentinel]
        if signs:
            self._kill()
            raise WorkerDied(self._exitcode(), self._last_words())
        with contextlib.suppress(ProcessLookupError):
            os.kill(self._pid, signal.SIGABRT)  # its faulthandler says where it is, even within a kernel
        wait([self._process.sentinel], WORDS_S)
        self._kill()
        raise Overdue(self._last_words())

    def end(self) -> None:
        """Kill it if it lives; if it doesn't, its id may be another's by now."""
        if not wait([self._process.sentinel], 0):
            self._kill()

    def bury(self) -> None:
        """Take note of its end, once it is killed or dead."""
        self._process.join(START_S)
        self._runs.close()
        self._words.close()

    def _kill(self) -> None:
        """Kill it, and whatever processes a law has started in it."""
        for kill in (os.killpg, os.kill):  # it has no group of its own in its first moments
            with contextlib.suppress(ProcessLookupError, PermissionError):
                kill(self._pid, signal.SIGKILL)

    def _signs(self, timeout: float) -> list[object]:
        """Return what has happened within so many seconds: an answer, its end, or nothing."""
        return list(wait([self._runs, self._process.sentinel], min(timeout, LONGEST_WAIT_S)))

    def _exitcode(self) -> int:
        with self._lock:
            self._process.join(START_S)
            return self._process.exitcode or 0

    def _last_words(self) -> str:
        os.set_blocking(self._words.fileno(), False)
        with contextlib.suppress(OSError):
            return os.read(self._words.fileno(), WORDS_LENGTH).decode("utf-8", "replace")
        return ""


def _said(error: BaseException) -> str:
    return str(error) or type(error).__name__


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

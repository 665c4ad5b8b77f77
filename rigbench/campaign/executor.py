"""Executors: who does the runs. Each yields outcomes as they come and never raises for what a run did.

=====================================  =====================================================
what goes wrong                        what becomes of the run
=====================================  =====================================================
the law raises                         'law-error', with the law's own traceback
the draw's plant can't exist           'no-plant', with what of it can't
engine and drive disagree              'disagrees', with by how much
anything else raises                   'crashed', with the traceback
the result can't be pickled            'crashed', with the reason
the worker dies (signal, exit)         done once more; the second time 'crashed', with the signal
the worker has no memory left          done once more; the second time 'crashed', with the limit
the run does not end                   'timed-out' after its limit, with the traceback of where it was
the campaign's process is killed       nothing is left of it: its workers die with it (Linux)
=====================================  =====================================================

A worker that died or was given up is replaced, and the processes that a law started in it end with it.
``tests/campaign/test_failures.py`` holds the same table for the whole command.
"""

from __future__ import annotations

import pickle
import signal
import traceback
from collections import deque
from collections.abc import Callable, Generator, Iterable, Iterator
from concurrent.futures import FIRST_COMPLETED, Future, wait
from contextlib import AbstractContextManager, contextmanager, nullcontext
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Protocol

from rigbench.campaign.outcomes import checked, unpacked
from rigbench.campaign.plan import Entry
from rigbench.campaign.work import Outcome, do, failed, summary
from rigbench.campaign.worker import OUT_OF_MEMORY
from rigbench.campaign.workers import BrokenCrew, Crew, Overdue, WorkerDied, usable_cores
from rigbench.errors import RigbenchError

if TYPE_CHECKING:
    from rigbench.rig.run import Run  # not at run time: it brings the engine and the compiler

__all__ = [
    "Executor",
    "InProcess",
    "Processes",
    "Standing",
    "Work",
    "cause_of_death",
    "executor_for",
    "given_up_after",
    "time_limit_s",
]

Work = Callable[["Run"], Outcome]

IN_HAND = 2
"""Runs given out for each worker: one that it does and one that waits, so that it never idles."""

LEAST_LIMIT_S = 60.0
TICK_LIMIT_S = 0.05
"""A run's limit: so long, and so much for each control tick."""


class Standing(Protocol):
    """Whoever can do runs, and stands by for more."""

    def run_all(self, entries: Iterable[Entry]) -> Generator[Outcome]:
        """Do the entries' runs and yield an outcome for each, under its key, in the order they end.

        Entries are drawn only as they can be done, so when ``entries`` ends early, what is in hand is
        finished and no more. Closing the iterator drops what is in hand at once.
        """
        ...


class Executor(Standing, Protocol):
    """Whoever can do runs: one list of them, or with those who stand by for one after the other."""

    def standing(self) -> AbstractContextManager[Standing]:
        """Return a context that yields whoever does list after list, and ends them."""
        ...


def executor_for(jobs: int | None, runs: int, limit_s: float | None = None) -> InProcess | Processes:
    """Return an executor for so many runs: ``jobs`` worker processes, None for one a core, 0 for none.

    There are never more workers than runs; without workers the runs are done in this process. With workers a
    run is given up after ``limit_s``, see :func:`given_up_after`.
    """
    if jobs == 0 or runs == 0:
        return InProcess()
    workers = min(runs, usable_cores() if jobs is None else jobs)
    return Processes(workers, limit_s=given_up_after(limit_s))


def time_limit_s(run: Run) -> float:
    """Return when a run is given up: 60 s and 50 ms for each control tick.

    That is a thousand times what a built-in law takes, and fifty times slower than the clock at 1 kHz:
    a law that solves an optimisation at each tick has its time, a law that hangs costs minutes.
    """
    return LEAST_LIMIT_S + TICK_LIMIT_S * run.motion.duration_s * run.rates.control_hz


def given_up_after(limit_s: float | None) -> Callable[[Run], float]:
    """Return what tells when a run is given up: after so long [s], whichever it is; None: time_limit_s."""
    return time_limit_s if limit_s is None else lambda _: limit_s


@dataclass(frozen=True)
class InProcess:
    """Does the runs here, one by one, without limits of time or memory; if the engine dies, so does all."""

    work: Work = do

    def run_all(self, entries: Iterable[Entry]) -> Generator[Outcome]:
        """See :class:`Standing`."""
        for entry in entries:
            try:
                outcome = self.work(entry.run)
            except Exception as error:
                outcome = failed(entry.key, "crashed", summary(error), traceback.format_exc())
            yield checked(entry, outcome)

    def standing(self) -> AbstractContextManager[InProcess]:
        """See :class:`Executor`."""
        return nullcontext(self)


@dataclass(eq=False)
class _Task:
    """A run on its way: its payload, how long it may take, and how often its worker has died on it."""

    entry: Entry
    payload: bytes
    limit_s: float
    deaths: int = 0


@dataclass(frozen=True)
class Processes:
    """Does the runs in worker processes of this machine."""

    jobs: int
    work: Work = do
    limit_s: Callable[[Run], float] = field(default=time_limit_s)

    def run_all(self, entries: Iterable[Entry]) -> Generator[Outcome]:
        """See :class:`Standing`. RigbenchError if worker processes can't be had."""
        with self.standing() as crew:
            yield from crew.run_all(entries)

    @contextmanager
    def standing(self) -> Iterator[StandingCrew]:
        """See :class:`Executor`."""
        with _told(), Crew(self.jobs) as crew:
            yield StandingCrew(self, crew)


@dataclass(frozen=True, eq=False)
class StandingCrew:
    """Does lists of runs, one after the other, by a crew that is there already."""

    how: Processes
    crew: Crew

    def run_all(self, entries: Iterable[Entry]) -> Generator[Outcome]:
        """See :class:`Standing`; what is in hand when the iterator is closed is dropped with the crew."""
        with _told():
            yield from _Shift(self.how, self.crew, iter(entries)).outcomes()


@contextmanager
def _told() -> Iterator[None]:
    """Say what to do where worker processes can't be had."""
    try:
        yield
    except BrokenCrew as error:
        raise RigbenchError(
            f"worker processes can't be started or don't stay alive ({error}); '--jobs 0' does without them"
        ) from error


class _Shift:
    """What a crew does, until all is done."""

    def __init__(self, how: Processes, crew: Crew, source: Iterator[Entry]) -> None:
        self._how, self._crew, self._source = how, crew, source
        self._again: deque[_Task] = deque()
        self._in_hand: dict[Future[bytes], _Task] = {}

    def outcomes(self) -> Iterator[Outcome]:
        """Yield outcomes until nothing is left to do; BrokenCrew if there is nobody to do it."""
        while True:
            yield from self._give()
            if not self._in_hand:
                return
            done, _ = wait(self._in_hand, return_when=FIRST_COMPLETED)
            for future in done:
                yield from self._taken(future, self._in_hand.pop(future))

    def _give(self) -> Iterator[Outcome]:
        while len(self._in_hand) < IN_HAND * self._how.jobs:
            if not self._again:
                entry = next(self._source, None)
                if entry is None:
                    return
                try:
                    payload = pickle.dumps((self._how.work, entry.run))
                except Exception as error:
                    yield failed(entry.key, "crashed", f"the run can't be sent to a worker: {summary(error)}")
                    continue
                self._again.append(_Task(entry, payload, self._how.limit_s(entry.run)))
            task = self._again.popleft()
            self._in_hand[self._crew.give(task.payload, task.limit_s)] = task

    def _taken(self, future: Future[bytes], task: _Task) -> Iterator[Outcome]:
        """Yield the outcome of a task that has ended, unless it is to be done once more."""
        key = task.entry.key
        try:
            yield unpacked(task.entry, future.result())
        except Overdue as error:
            reason = f"took longer than its limit of {task.limit_s:.6g} s"
            yield failed(key, "timed-out", reason, error.words)
        except WorkerDied as error:
            task.deaths += 1
            if task.deaths == 1:
                self._again.append(task)
            else:
                yield failed(key, "crashed", cause_of_death(error.exitcode, self._crew.share), error.words)


def cause_of_death(exitcode: int, share: int | None) -> str:
    """Say how a run's process has died twice; ``share`` is the memory [bytes] that it might take."""
    if exitcode == OUT_OF_MEMORY and share is not None:
        return (
            f"ran out of memory twice: a worker may take {share / 2**20:,.0f} MiB here; "
            "fewer --jobs leave more for each"
        )
    return f"its worker process died twice on it: {_name(exitcode)}"


def _name(exitcode: int) -> str:
    if exitcode >= 0:
        return f"exit code {exitcode}"
    number = -exitcode
    name = signal.Signals(number).name if number in {s.value for s in signal.Signals} else f"signal {number}"
    return f"{name}, likely for want of memory" if number == signal.SIGKILL else name

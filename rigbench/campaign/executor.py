"""Executors: who does the runs. Each yields outcomes as they come and never raises for what a run did.

=====================================  =====================================================
what goes wrong                        what becomes of the run
=====================================  =====================================================
the law raises                         'law-error', with the law's own traceback
the draw's plant can't exist           'no-plant', with what of it can't
engine and drive disagree              'disagrees', with by how much
anything else raises                   'crashed', with the traceback
the result can't be pickled            'crashed', with the reason
the worker dies (signal, memory)       done once more; the second time 'crashed', with the signal
the run does not end                   'timed-out' after its limit; the worker is replaced
the crew of workers breaks down        done again by a new crew
the campaign's process is killed       nothing is left of it: its workers die with it (Linux)
=====================================  =====================================================
"""

from __future__ import annotations

import pickle
import signal
import time
from collections import deque
from collections.abc import Callable, Generator, Iterable, Iterator
from concurrent.futures import FIRST_COMPLETED, Future, wait
from concurrent.futures.process import BrokenProcessPool
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Protocol

from pebble import ProcessExpired

from rigbench.campaign.plan import Entry
from rigbench.campaign.work import Outcome, do, failed, summary
from rigbench.campaign.worker import Trouble
from rigbench.campaign.workers import BrokenCrew, Crew, usable_cores
from rigbench.errors import RigbenchError

if TYPE_CHECKING:
    from rigbench.rig.run import Run  # not at run time: it brings the engine and the compiler

__all__ = ["Executor", "InProcess", "Processes", "executor_for", "time_limit_s"]

Work = Callable[["Run"], Outcome]

IN_HAND = 2
"""Runs given out for each worker: one that it does and one that waits, so that it never idles."""

PATIENCE_S = 60.0
"""How long past its limit a run may stay silent before the whole crew is taken for broken."""

CREWS = 3
"""Crews to try in a row without a single outcome before giving up."""


class Executor(Protocol):
    """Whoever can do runs."""

    def run_all(self, entries: Iterable[Entry]) -> Generator[Outcome]:
        """Do the entries' runs and yield an outcome for each, under its key, in the order they end.

        Entries are drawn only as they can be done, so when ``entries`` ends early, what is in hand is
        finished and no more. Closing the iterator drops what is in hand at once.
        """
        ...


def executor_for(jobs: int | None, runs: int) -> Executor:
    """Return an executor for so many runs: ``jobs`` worker processes, None for one a core, 0 for none.

    There are never more workers than runs; without workers the runs are done in this process.
    """
    if jobs == 0 or runs == 0:
        return InProcess()
    return Processes(min(runs, usable_cores() if jobs is None else jobs))


def time_limit_s(run: Run) -> float:
    """Return when a run is given up: 60 s and 50 ms for each control tick.

    That is a thousand times what a built-in law takes, and fifty times slower than the clock at 1 kHz:
    a law that solves an optimisation at each tick has its time, a law that hangs costs minutes.
    """
    return 60 + 0.05 * run.motion.duration_s * run.rates.control_hz


@dataclass(frozen=True)
class InProcess:
    """Does the runs here, one after the other, without a time limit; if the engine dies, so does all else."""

    work: Work = do

    def run_all(self, entries: Iterable[Entry]) -> Generator[Outcome]:
        """See :class:`Executor`."""
        for entry in entries:
            try:
                outcome = self.work(entry.run)
            except Exception as error:
                outcome = failed(entry.key, "crashed", summary(error))
            yield _checked(entry, outcome)


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
        """See :class:`Executor`. RigbenchError if worker processes can't be had at all."""
        source, again = iter(entries), deque[_Task]()
        idle_crews, reason = 0, ""
        while idle_crews < CREWS:
            idle_crews += 1
            try:
                with Crew(self.jobs) as crew:
                    for outcome in _Shift(self, crew, source, again).outcomes():
                        idle_crews = 0
                        yield outcome
                return
            except (BrokenCrew, BrokenProcessPool) as error:
                reason = str(error)
        raise RigbenchError(
            f"worker processes can't be started or don't stay alive ({reason}); '--jobs 0' does without them"
        )


class _Shift:
    """What one crew does, until all is done or the crew breaks down."""

    def __init__(self, how: Processes, crew: Crew, source: Iterator[Entry], again: deque[_Task]) -> None:
        self._how, self._crew, self._source, self._again = how, crew, source, again
        self._in_hand: dict[Future[bytes], _Task] = {}
        self._last_sign = time.monotonic()

    def outcomes(self) -> Iterator[Outcome]:
        """Yield outcomes until nothing is left to do.

        BrokenCrew or BrokenProcessPool if the crew breaks down, with what it had in hand put into ``again``.
        """
        try:
            while True:
                yield from self._give()
                if not self._in_hand:
                    return
                done, _ = wait(self._in_hand, timeout=1.0, return_when=FIRST_COMPLETED)
                for future in done:
                    yield from self._taken(future)
                self._check(bool(done))
        except (BrokenCrew, BrokenProcessPool):
            self._again.extend(self._in_hand.values())
            raise

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
            future = self._crew.give(self._again[0].payload, self._again[0].limit_s)
            self._in_hand[future] = self._again.popleft()

    def _taken(self, future: Future[bytes]) -> Iterator[Outcome]:
        """Yield the outcome of a task that has ended, unless it is to be done once more."""
        task, key = self._in_hand[future], self._in_hand[future].entry.key
        try:
            yield _unpacked(task.entry, future.result())
        except BrokenProcessPool:
            raise
        except TimeoutError:
            yield failed(key, "timed-out", f"took longer than its limit of {task.limit_s:.0f} s")
        except ProcessExpired as error:
            task.deaths += 1
            if task.deaths == 1:
                self._again.append(task)
            else:
                reason = f"its worker process died twice on it: {_cause(error.exitcode)}"
                yield failed(key, "crashed", reason, self._crew.last_words(error.pid))
        except Exception as error:
            yield failed(key, "crashed", f"its result was lost: {summary(error)}")
        del self._in_hand[future]

    def _check(self, sign: bool) -> None:
        """Raise BrokenCrew if the pool is broken or no task has ended that should have long ago."""
        now = time.monotonic()
        if sign:
            self._last_sign = now
        longest = max((task.limit_s for task in self._in_hand.values()), default=0.0)
        if now - self._last_sign > longest + PATIENCE_S or not self._crew.whole:
            raise BrokenCrew("the crew fell silent")


def _unpacked(entry: Entry, result: bytes) -> Outcome:
    try:
        outcome = pickle.loads(result)
    except Exception as error:
        return failed(entry.key, "crashed", f"its result can't be read: {summary(error)}")
    if isinstance(outcome, Trouble):
        return failed(entry.key, "crashed", outcome.summary, outcome.trace)
    return _checked(entry, outcome)


def _checked(entry: Entry, outcome: object) -> Outcome:
    """Refuse what is no outcome, or one of other inputs than planned: somebody edits a law meanwhile."""
    if not isinstance(outcome, Outcome):
        return failed(entry.key, "crashed", f"the work yielded no outcome but {outcome!r:.60}")
    if outcome.key != entry.key:
        return failed(entry.key, "crashed", "the law's source files have changed since the campaign began")
    return outcome


def _cause(exitcode: int) -> str:
    if exitcode >= 0:
        return f"exit code {exitcode}"
    number = -exitcode
    name = signal.Signals(number).name if number in {s.value for s in signal.Signals} else f"signal {number}"
    return f"{name}, likely for want of memory" if number == signal.SIGKILL else name

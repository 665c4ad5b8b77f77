"""What the workers of a cluster do, list after list: chunks given out, taken back, and done again."""

from __future__ import annotations

import pickle
import time
from collections import deque
from collections.abc import Generator, Iterable, Iterator
from concurrent.futures import CancelledError, Future
from dataclasses import dataclass, field
from functools import partial
from queue import Empty, SimpleQueue
from typing import TYPE_CHECKING

from rigbench.campaign.alike import differences, host_for
from rigbench.campaign.cluster_link import Link
from rigbench.campaign.cluster_worker import Broken, Died, Done, Late, Reply, do_each
from rigbench.campaign.executor import cause_of_death
from rigbench.campaign.outcomes import unpacked
from rigbench.campaign.plan import Entry
from rigbench.campaign.work import Host, Outcome, failed, summary
from rigbench.campaign.worker import Trouble
from rigbench.errors import ClusterLost, counted

if TYPE_CHECKING:
    from rigbench.campaign.cluster import Cluster

__all__ = ["Shift", "host_or_problem"]

CHUNK_S = 1.0
"""Work in a chunk: long beside the milliseconds that it costs scheduler and network, short beside the wait
for the last one."""

MOST_RUNS = 256
"""Runs in a chunk at most; and at most twice as many as in the one before, as what comes may take longer."""

NEWEST = 0.2
"""Weight of the newest chunk in the time that a run takes."""

IN_HAND = 2
"""Chunks given out for each thread of a worker: one that it does and one that waits."""

PAUSE_S = 0.5
"""How long to wait for a chunk before looking who is there."""


@dataclass(eq=False)
class _Task:
    """A run on its way; how often its process died on it alone, and how often its worker was lost with it."""

    entry: Entry
    limit_s: float
    deaths: int = 0
    losses: int = 0


@dataclass(eq=False)
class _Chunk:
    """Runs that a worker is given together."""

    tasks: list[_Task]
    worker: _Worker
    future: Future[Reply]

    @property
    def suspect(self) -> bool:
        """Whether a worker was lost with one of its runs."""
        return any(task.losses for task in self.tasks)


@dataclass(eq=False)
class _Worker:
    """A worker that may be given runs, and the chunks that it has in hand."""

    address: str
    threads: int
    chunks: set[_Chunk] = field(default_factory=set)

    @property
    def load(self) -> float:
        """Chunks in hand for each thread."""
        return len(self.chunks) / self.threads

    @property
    def has_suspect(self) -> bool:
        """Whether it has a run in hand with which another worker was lost."""
        return any(chunk.suspect for chunk in self.chunks)


class Shift:
    """Gives runs to whoever is at the other end of the link, and takes back what they came to.

    From one list to the next it knows its workers, who keep their crews, and how long a run takes.
    """

    def __init__(self, how: Cluster, link: Link) -> None:
        self._how, self._link = how, link
        self._here = host_for(how.plugins)
        self._cpus = {self._here.cpu}
        self._asked: dict[str, Future[Host]] = {}
        self._refused: set[str] = set()
        self._workers: dict[str, _Worker] = {}
        self._run_s, self._size = CHUNK_S, 1
        self._begin(())

    def _begin(self, entries: Iterable[Entry]) -> None:
        self._source, self._exhausted = iter(entries), False
        self._again: deque[_Task] = deque()
        self._ended: SimpleQueue[_Chunk] = SimpleQueue()
        self._seen_anybody = time.monotonic()

    def run_all(self, entries: Iterable[Entry]) -> Generator[Outcome]:
        """See :class:`rigbench.campaign.executor.Standing`. ClusterLost if there is nobody to do them."""
        self._begin(entries)
        try:
            while True:
                yield from self._look_who_is_there()
                yield from self._give()
                if self._exhausted and not self._again and not any(w.chunks for w in self._workers.values()):
                    return
                try:
                    chunk = self._ended.get(timeout=PAUSE_S)
                except Empty:
                    continue
                if chunk in chunk.worker.chunks:  # else its worker was lost, and it is done again elsewhere
                    chunk.worker.chunks.remove(chunk)
                    yield from self._taken(chunk)
        finally:
            for worker in self._workers.values():
                for chunk in worker.chunks:
                    chunk.future.cancel()
                worker.chunks.clear()

    def _look_who_is_there(self) -> Iterator[Outcome]:
        there = self._link.sizes
        if self._link.lost is not None:
            raise ClusterLost(self._how.address, f"the scheduler went away ({self._link.lost})")
        for address in self._workers.keys() - there.keys():
            yield from self._lost(self._workers.pop(address))
        for address in self._asked.keys() - there.keys():
            self._asked.pop(address).cancel()
        for address in there.keys() - self._workers.keys() - self._asked.keys() - self._refused:
            self._asked[address] = self._link.ask_host(address, self._how.plugins)
        for address in [address for address, future in self._asked.items() if future.done()]:
            self._welcome(address, there[address], host_or_problem(self._asked.pop(address)))
        if self._workers or self._asked:
            self._seen_anybody = time.monotonic()
        elif time.monotonic() - self._seen_anybody > self._how.patience_s:
            problem = f"no worker that can be used has been there for {self._how.patience_s:g} s"
            raise ClusterLost(self._how.address, problem)

    def _welcome(self, address: str, threads: int, host: Host | str) -> None:
        """Give a worker that has joined a crew, unless it differs from this machine in what decides bits."""
        if isinstance(host, str):
            self._refuse(address, host)
            return
        faults = differences(self._here, {address: host})
        if faults:
            self._refuse(address, "; ".join(f"{f.key} {f.problem}, not {f.expected}" for f in faults))
            return
        if host.cpu not in self._cpus:
            self._cpus.add(host.cpu)
            self._how.tell(
                f"note: worker {address} has another type of CPU, {host.cpu}, than this machine, "
                f"{self._here.cpu}: last digits may differ, and the store keeps which type did each run"
            )
        self._link.open(address, threads)
        self._workers[address] = _Worker(address, threads)

    def _refuse(self, address: str, problem: str) -> None:
        self._refused.add(address)
        self._how.tell(f"note: worker {address} gets no runs: {problem}")

    def _lost(self, worker: _Worker) -> Iterator[Outcome]:
        """Have done again what a lost worker had in hand."""
        chunks = self._given_up(worker)
        runs = sum(len(chunk.tasks) for chunk in chunks)
        hands = f"; {counted(runs, 'run')} in its hands are done again" if runs else ""
        self._how.tell(f"note: worker {worker.address} is lost{hands}")
        for chunk in chunks:
            yield from self._suspected(chunk)

    def _suspected(self, chunk: _Chunk) -> Iterator[Outcome]:
        """Have the runs of a chunk done again whose worker was lost, perhaps because of one of them."""
        for task in chunk.tasks:
            task.losses += 1
            if task.losses > 1:
                yield failed(task.entry.key, "crashed", "the worker that did it was lost, twice")
            else:
                self._again.append(task)

    def _give(self) -> Iterator[Outcome]:
        while True:
            free = [worker for worker in self._workers.values() if worker.load < IN_HAND]
            tasks, worker = self._next_for(free)
            if worker is None:
                return
            runs = [task.entry.run for task in tasks]
            try:
                payload = pickle.dumps((do_each, (self._how.work, runs)))
            except Exception as error:
                problem = f"the run can't be sent to a worker: {summary(error)}"
                yield from self._one_by_one(tasks, "crashed", problem, "")
                continue
            limit_s = max(task.limit_s for task in tasks)
            chunk = _Chunk(tasks, worker, self._link.give(worker.address, payload, limit_s))
            worker.chunks.add(chunk)
            chunk.future.add_done_callback(partial(self._end, chunk))

    def _end(self, chunk: _Chunk, _: Future[Reply]) -> None:
        self._ended.put(chunk)

    def _next_for(self, free: list[_Worker]) -> tuple[list[_Task], _Worker | None]:
        """Return what to do next, and which of the free workers is to do it; None if there is nothing."""
        calm = free
        if self._again and self._again[0].losses:
            calm = [worker for worker in free if not worker.has_suspect]
        if self._again and calm:
            return [self._again.popleft()], min(calm, key=lambda worker: worker.load)
        tasks = self._drawn() if free else []
        return tasks, min(free, key=lambda worker: worker.load) if tasks else None

    def _drawn(self) -> list[_Task]:
        """Draw a chunk from the source."""
        self._size = max(1, min(int(CHUNK_S / self._run_s), 2 * self._size, MOST_RUNS))
        tasks: list[_Task] = []
        while len(tasks) < self._size and not self._exhausted:
            entry = next(self._source, None)
            if entry is None:
                self._exhausted = True
            else:
                tasks.append(_Task(entry, self._how.limit_s(entry.run)))
        return tasks

    def _taken(self, chunk: _Chunk) -> Iterator[Outcome]:
        """Yield the outcomes of a chunk that has ended, but for what is to be done again."""
        try:
            reply = chunk.future.result()
        except Exception as error:
            yield from self._not_done(chunk, error)
            return
        match reply:
            case Done(result):
                yield from self._done(chunk.tasks, result)
            case Late(words):
                problem = f"took longer than its limit of {chunk.tasks[0].limit_s:.6g} s"
                yield from self._one_by_one(chunk.tasks, "timed-out", problem, words)
            case Died(exitcode, words, share):
                alone = chunk.tasks[0] if len(chunk.tasks) == 1 else None
                if alone is not None and alone.deaths == 0:
                    alone.deaths = 1
                    self._again.append(alone)
                else:
                    cause = cause_of_death(exitcode, share)
                    yield from self._one_by_one(chunk.tasks, "crashed", cause, words)
            case Broken(reason):
                self._again += chunk.tasks
                self._drop(chunk.worker, f"no worker processes can be had there ({reason})")

    def _done(self, tasks: list[_Task], result: bytes) -> Iterator[Outcome]:
        found = pickle.loads(result)
        if isinstance(found, Trouble):  # the chunk could not be unpacked there
            yield from self._one_by_one(tasks, "crashed", found.summary, found.trace)
            return
        seconds, answers = found
        self._run_s += NEWEST * (max(seconds, 1e-6) / len(tasks) - self._run_s)
        for task, answer in zip(tasks, answers, strict=True):
            yield unpacked(task.entry, answer)

    def _not_done(self, chunk: _Chunk, error: BaseException) -> Iterator[Outcome]:
        """Take a chunk back that dask could not get done, or whose result it could not bring."""
        from distributed import KilledWorker

        if isinstance(error, KilledWorker):
            yield from self._suspected(chunk)
            return
        self._again += chunk.tasks
        if not isinstance(error, CancelledError):  # that is the scheduler's end, which is seen next
            self._drop(chunk.worker, summary(error))

    def _drop(self, worker: _Worker, problem: str) -> None:
        """Give a worker no more runs, and what it has in hand to others."""
        if self._workers.pop(worker.address, None) is not None:
            self._refuse(worker.address, problem)
            for chunk in self._given_up(worker):
                self._again += chunk.tasks

    def _given_up(self, worker: _Worker) -> list[_Chunk]:
        """Take from a worker all that it has in hand, and return that."""
        chunks = list(worker.chunks)
        worker.chunks.clear()
        self._link.forget(worker.address)
        for chunk in chunks:
            chunk.future.cancel()
        return chunks

    def _one_by_one(self, tasks: list[_Task], outcome: str, reason: str, trace: str) -> Iterator[Outcome]:
        """Have a chunk that failed done again run by run; a single run has its outcome."""
        if len(tasks) > 1:
            self._again += tasks
        else:
            yield failed(tasks[0].entry.key, outcome, reason, trace)


def host_or_problem(answered: Future[Host]) -> Host | str:
    """Return what a worker has answered, or what kept it from it."""
    try:
        return answered.result()
    except Exception as error:
        return f"rigbench can't be used there: {summary(error)}"

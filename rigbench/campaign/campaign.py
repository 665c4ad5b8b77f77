"""The campaign: all runs of a plan that are not stored yet, done and stored."""

from __future__ import annotations

import signal
import threading
import time
from collections import Counter
from collections.abc import Callable, Iterable, Iterator, Sequence
from contextlib import closing, contextmanager
from dataclasses import dataclass
from types import FrameType

from rigbench.arm.mismatch import draw_values
from rigbench.campaign.executor import Executor, executor_for
from rigbench.campaign.plan import Entry, Plan
from rigbench.campaign.reading import Counts
from rigbench.campaign.store import Store
from rigbench.errors import Stopped
from rigbench.scores.row import MACHINE_OUTCOMES, SETTLED_TROUBLES

__all__ = ["Progress", "run_campaign"]


@dataclass(frozen=True)
class Progress:
    """How far a campaign is, in planned runs; ``rate`` [1/s] and ``seconds_left`` once they can be told."""

    planned: int
    done: int
    failed: int
    rate: float | None = None
    seconds_left: float | None = None


def run_campaign(
    plan: Plan,
    store: Store,
    jobs: int | None = None,
    on_progress: Callable[[Progress], None] | None = None,
    *,
    again: Sequence[str] = (),
    executor: Executor | None = None,
) -> Counts:
    """Do every run of the plan that the store does not hold, and return how far the campaign is then.

    ``jobs`` worker processes (None: one a core; 0: in this process) or the given ``executor``; ``again``
    names laws to be run anew, see :meth:`Store.run_anew`. An outcome is stored as it comes, in a
    transaction of its own. ``on_progress`` is called at the start and after each.

    The first SIGINT or SIGTERM lets the runs in hand end and stores them, the second drops them; both
    end in Stopped, unless nothing was left to do. StoreError if the disk refuses.
    """
    store.record_plan(plan)
    for law in again:
        store.run_anew(law)
    missing = store.missing(plan)
    tracker = _Tracker(plan, missing, _settled_troubles(store))
    report = on_progress or (lambda _: None)
    draws = _Draws()
    executor = executor or executor_for(jobs, len(missing))
    entries = {entry.key: entry for entry in missing}
    with _stop_signals() as stop:
        report(tracker.progress())
        try:
            with closing(executor.run_all(stop.until(missing))) as outcomes:
                for outcome in outcomes:
                    if stop.at_once:  # and should a law have swallowed the interrupt, its run is dropped too
                        break
                    store.add([outcome], draws.of(entries[outcome.key]))
                    tracker.count(outcome.key, outcome.outcome)
                    report(tracker.progress())
        except KeyboardInterrupt:
            stop.asked = True
    counts = store.counts()
    if stop.asked and counts.done + counts.failed < counts.planned:
        raise Stopped(counts.done + counts.failed, counts.planned, plan.resume)
    return counts


def _settled_troubles(store: Store) -> int:
    """Return how many planned runs came to nothing and would do so again."""
    found = store.outcomes()
    return sum(found.get(outcome, 0) for outcome in SETTLED_TROUBLES)


class _Tracker:
    """Counts planned runs as they are done; one that stands for several entries counts for all of them."""

    def __init__(self, plan: Plan, missing: list[Entry], failed: int) -> None:
        weights = Counter(entry.key for entry in plan.entries)
        self._weights = {entry.key: weights[entry.key] for entry in missing}
        self._planned, self._failed = len(plan.entries), failed
        self._done = self._planned - sum(self._weights.values()) - failed
        self._began = time.monotonic()
        self._ran = 0

    def count(self, key: str, outcome: str) -> None:
        if outcome in MACHINE_OUTCOMES:
            self._done += self._weights[key]
        else:
            self._failed += self._weights[key]
        self._ran += self._weights[key]

    def progress(self) -> Progress:
        if not self._ran:
            return Progress(self._planned, self._done, self._failed)
        rate = self._ran / max(time.monotonic() - self._began, 1e-9)
        left = self._planned - self._done - self._failed
        return Progress(self._planned, self._done, self._failed, rate, left / rate)


class _Draws:
    """The values of draws, each told once."""

    def __init__(self) -> None:
        self._told: set[tuple[object, ...]] = set()

    def of(self, entry: Entry) -> Iterator[tuple[int, int, dict[str, float]]]:
        run = entry.run
        if run.draw is None or not run.sources:
            return
        for source in run.sources:
            mark = (run.arm, run.seed, run.draw, source)
            if mark not in self._told:
                self._told.add(mark)
                values = draw_values(run.arm.arm(), run.mismatch, (source,), run.seed, run.draw)
                yield run.seed, run.draw, values


class _Stop:
    """Whether somebody has asked the campaign to stop."""

    asked = False
    at_once = False

    def until(self, entries: Iterable[Entry]) -> Iterator[Entry]:
        """Yield the entries for as long as nobody has asked."""
        for entry in entries:
            if self.asked:
                return
            yield entry

    def on_signal(self, number: int, frame: FrameType | None) -> None:
        if self.asked:
            signal.signal(number, signal.SIG_IGN)  # a third one must not break the tidying up
            self.at_once = True
            raise KeyboardInterrupt
        self.asked = True


@contextmanager
def _stop_signals() -> Iterator[_Stop]:
    """Take SIGINT and SIGTERM in here, where signals can be taken: in a program's main thread."""
    stop = _Stop()
    if threading.current_thread() is not threading.main_thread():
        yield stop
        return
    before = {number: signal.signal(number, stop.on_signal) for number in (signal.SIGINT, signal.SIGTERM)}
    try:
        yield stop
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)

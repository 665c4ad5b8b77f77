"""The campaign: all runs of a plan that are not stored yet, done and stored."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from contextlib import closing

from rigbench.arm.mismatch import draw_values
from rigbench.campaign.executor import Executor, executor_for
from rigbench.campaign.part import Part
from rigbench.campaign.plan import Entry, Plan
from rigbench.campaign.progress import Progress, Tracker
from rigbench.campaign.reading import Counts
from rigbench.campaign.stopping import stop_signals
from rigbench.campaign.store import Store
from rigbench.campaign.tally import Tally
from rigbench.errors import Stopped

__all__ = ["Draws", "run_campaign"]

ALL = Part()


def run_campaign(
    plan: Plan,
    store: Store,
    jobs: int | None = None,
    on_progress: Callable[[Progress], None] | None = None,
    *,
    again: Sequence[str] = (),
    part: Part = ALL,
    executor: Executor | None = None,
    on_stop: Callable[[], None] = lambda: None,
) -> Counts:
    """Do every run of the plan's ``part`` that the store does not hold; return how far the plan is then.

    ``jobs`` worker processes (None: one a core; 0: in this process) or the given ``executor``; ``again``
    names laws to be run anew, see :meth:`Store.run_anew`. An outcome is stored as it comes, in a
    transaction of its own. ``on_progress`` is called at the start and after each.

    The first SIGINT or SIGTERM lets the runs in hand end and stores them, the second drops them; ``on_stop``
    is called at the first, from within the signal's handler. When the part's time is up, the runs in
    hand end and are stored. Each ends in Stopped, unless nothing was left to do. The runs are begun in
    the plan's order, so a new campaign that stops has cells whose draws differ by one at most (but for
    runs of the host's trouble, and for draws that are all one and the same run). StoreError if the
    disk refuses.
    """
    store.record_plan(plan)
    for law in again:
        store.run_anew(law)
    missing = [entry for entry in store.missing(plan) if part.has(entry)]
    tally = None if on_progress is None else Tally(plan, store, missing)
    tracker = Tracker(plan, part, missing, store.settled_troubles(part.draws), tally)
    report = on_progress or (lambda _: None)
    draws = Draws()
    executor = executor or executor_for(jobs, len(missing))
    entries = {entry.key: entry for entry in missing}
    with stop_signals(part.ends, on_stop) as stop:
        report(tracker.progress())
        try:
            with closing(executor.run_all(stop.until(missing))) as outcomes:
                for outcome in outcomes:
                    if stop.at_once:  # and should a law have swallowed the interrupt, its run is dropped too
                        break
                    store.add([outcome], draws.of(entries[outcome.key]))
                    tracker.count(outcome)
                    report(tracker.progress())
        except KeyboardInterrupt:
            stop.asked = True
    counts = store.counts()
    if stop.why and tracker.left:
        raise Stopped(counts.done + counts.failed, counts.planned, part.resume(plan.resume), stop.why)
    return counts


class Draws:
    """The values of draws, each told once."""

    def __init__(self) -> None:
        self._told: set[tuple[object, ...]] = set()

    def of(self, entry: Entry) -> Iterator[tuple[int, int, dict[str, float]]]:
        """Yield (seed, draw, {parameter: u}) of what is random in an entry's run and was not told yet."""
        run = entry.run
        if run.draw is None or not run.sources:
            return
        for source in run.sources:
            mark = (run.arm, run.seed, run.draw, source)
            if mark not in self._told:
                self._told.add(mark)
                values = draw_values(run.arm.arm(), run.mismatch, (source,), run.seed, run.draw)
                yield run.seed, run.draw, values

"""The campaign: all runs of a plan that are not stored yet, done and stored."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence

from rigbench.campaign.doing import Doing, Studying, record_known
from rigbench.campaign.executor import Executor
from rigbench.campaign.part import Part
from rigbench.campaign.plan import Entry, Plan
from rigbench.campaign.progress import Progress, Tracker
from rigbench.campaign.reading import Counts
from rigbench.campaign.settling import Settling
from rigbench.campaign.stopping import stop_signals
from rigbench.campaign.store import Store
from rigbench.campaign.tally import Tally
from rigbench.campaign.work import Outcome
from rigbench.errors import Stopped

__all__ = ["run_campaign", "run_first"]

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
    limit_s: float | None = None,
    on_stop: Callable[[], None] = lambda: None,
) -> Counts:
    """Do every run of the plan's ``part`` that the store does not hold; return how far the plan is then.

    ``jobs`` worker processes (None: one a core; 0: in this process) or the given ``executor``; workers give a
    run up after ``limit_s`` [s], see :func:`given_up_after`; ``again`` names laws to be run anew, see
    :meth:`Store.run_anew`. An outcome is stored as it comes, in a
    transaction of its own. ``on_progress`` is called at the start and after each.

    Where the plan is to stop early, a column's runs are no longer begun once it is settled; what is in hand
    then is stored all the same. See :class:`Settling`.

    A study that comes first is put down with what is known of it, no more: see :func:`run_first`. The
    plan's studies follow, each with rounds of runs until it is finished; not where a part of the draws is
    asked for, since what a study asks next depends on all of them: then those that were begun before are
    put down with what is known of them.

    The first SIGINT or SIGTERM lets the runs in hand end and stores them, the second drops them; ``on_stop``
    is called at the first, from within the signal's handler. When the part's time is up, the runs in
    hand end and are stored. Each ends in Stopped, unless nothing was left to do. The runs are begun in
    the plan's order, so a new campaign that stops has cells whose draws differ by one at most (but for
    runs of the host's trouble, and for draws that are all one and the same run). StoreError if the
    disk refuses.
    """
    before = store.begun()
    store.record_plan(plan)
    if plan.first is not None:
        record_known(plan.first, store)
    for law in again:
        store.run_anew(law)
    missing = [entry for entry in store.missing(plan) if part.has(entry)]
    settling = Settling.read(plan, store)
    store.record_settled(settling.settled)
    tally = None if on_progress is None else Tally(plan, store, missing)
    tracker = Tracker(plan, part, missing, store.settled_troubles(part.draws), tally)
    tracker.settle(settling)
    report = on_progress or (lambda _: None)
    studying: list[Studying] = []
    with stop_signals(part.ends, on_stop) as stop, Doing(store, stop, jobs, executor, limit_s) as doing:
        report(tracker.progress())
        for outcome in _matrix(doing, missing, settling):
            if settling.count(outcome):
                store.record_settled(settling.settled)
                tracker.settle(settling)
            tracker.count(outcome)
            report(tracker.progress())
        for study in plan.studies if part.draws is None else ():
            if not stop.why:
                studying.append(Studying(study, store, doing))
                studying[-1].go(report)
    if part.draws is not None and not stop.why:
        for study in plan.studies:
            if study.name in before:
                record_known(study, store)
    counts = store.counts()
    unfinished = store.unfinished() if part.draws is None else ()
    if stop.why and (tracker.left or unfinished):
        done = counts.done + counts.failed + sum(study.done for study in studying)
        planned = counts.planned + sum(study.asked for study in studying)
        raise Stopped(done, planned, part.resume(plan.resume), stop.why, unfinished)
    return counts


def run_first(
    plan: Plan,
    store: Store,
    jobs: int | None = None,
    on_progress: Callable[[Progress], None] | None = None,
    *,
    part: Part = ALL,
    executor: Executor | None = None,
    limit_s: float | None = None,
    on_stop: Callable[[], None] = lambda: None,
) -> None:
    """Do the study on which the plan's entries depend, whole, and none of these; the rest as in run_campaign.

    The plan that follows from it is for :func:`run_campaign`.
    """
    if plan.first is None:
        return
    store.record_plan(plan)
    with stop_signals(part.ends, on_stop) as stop, Doing(store, stop, jobs, executor, limit_s) as doing:
        studying = Studying(plan.first, store, doing)
        studying.go(on_progress or (lambda _: None))
    if stop.why:  # if only just finished too: the plan's own runs are to follow
        resume = part.resume(plan.resume)
        raise Stopped(studying.done, studying.asked, resume, stop.why, store.unfinished())


def _matrix(doing: Doing, missing: Sequence[Entry], settling: Settling) -> Iterator[Outcome]:
    """Do the runs of the matrix that are wanted, until none is left.

    A column that was settled is open again if a run that had come to nothing comes to another result when it
    is done anew: then there is more to do.
    """
    left = {entry.key: entry for entry in missing}
    while todo := [entry for entry in left.values() if settling.wants(entry)]:
        for outcome in doing.outcomes(todo, settling.wants):
            del left[outcome.key]
            yield outcome
        if doing.stop.why or all(entry.key in left for entry in todo):
            return

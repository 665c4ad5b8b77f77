"""The campaign: all runs of a plan that are not stored yet, done and stored."""

from __future__ import annotations

from collections.abc import Callable, Sequence

from rigbench.campaign.doing import Doing, Studying
from rigbench.campaign.executor import Executor
from rigbench.campaign.part import Part
from rigbench.campaign.plan import Plan
from rigbench.campaign.progress import Progress, Tracker
from rigbench.campaign.reading import Counts
from rigbench.campaign.stopping import stop_signals
from rigbench.campaign.store import Store
from rigbench.campaign.tally import Tally
from rigbench.errors import Stopped

__all__ = ["run_campaign"]

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

    The plan's studies follow, each with rounds of runs until it is finished; not where a part of the draws is
    asked for, since what a study asks next depends on all of them.

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
    studying = None
    with stop_signals(part.ends, on_stop) as stop:
        doing = Doing(store, stop, jobs, executor)
        report(tracker.progress())
        for outcome in doing.outcomes(missing):
            tracker.count(outcome)
            report(tracker.progress())
        for study in plan.studies if part.draws is None else ():
            if not stop.why:
                studying = Studying(study, store, doing)
                studying.go(report)
    counts = store.counts()
    done, planned = counts.done + counts.failed, counts.planned
    if studying is not None:
        done, planned = done + studying.done, planned + studying.asked
    if stop.why and (tracker.left or (studying is not None and studying.done < studying.asked)):
        raise Stopped(done, planned, part.resume(plan.resume), stop.why)
    return counts

"""``rigbench run``: a campaign from start to end."""

from __future__ import annotations

import datetime
import shlex
import time
from collections import Counter
from collections.abc import Callable, Collection, Iterable, Iterator, Sequence
from dataclasses import replace
from pathlib import Path

from rigbench.campaign.campaign import run_campaign, run_first
from rigbench.campaign.cluster import cluster_executor
from rigbench.campaign.executor import Executor
from rigbench.campaign.owner import Owner
from rigbench.campaign.part import Part
from rigbench.campaign.plan import Plan
from rigbench.campaign.settling import to_do
from rigbench.campaign.store import Store
from rigbench.campaign.studies.tune import Tune
from rigbench.cli.fresh import make_room
from rigbench.cli.gains import gains_notes
from rigbench.cli.loading import loaded
from rigbench.cli.output import interrupts_alike, print_json, say, show, tell_notes
from rigbench.cli.progress import OnProgress, progress_shown, tell_stopping
from rigbench.cli.spans import duration_words
from rigbench.cli.stored import CAUTION, picture_path, status_text
from rigbench.cli.wishes import Wishes, limit_of, part_of
from rigbench.errors import ClusterLost, Stopped, counted, listed
from rigbench.experiment import store_path
from rigbench.report.json_form import results_json
from rigbench.report.matrix import matrix_picture
from rigbench.scores.results import Results
from rigbench.scores.row import HOST_OUTCOMES

__all__ = ["run_experiment"]


def run_experiment(file: str, wishes: Wishes, as_json: bool) -> None:
    """Do what is missing of what is wished for, then print and draw the results.

    After a stop what there is is told first. InputFaults for wishes that the experiment can't fulfil.
    """
    began = time.monotonic(), time.time()
    with interrupts_alike():
        experiment = loaded(file)
        part = part_of(experiment, wishes, began)
        tell_notes(experiment.notes)
        plan = experiment.plan(wishes.store)
        path = store_path(file, wishes.store)
        executor = None
        if wishes.limit is not None:
            plan = replace(plan, resume=f"{plan.resume} --limit {wishes.limit}")
        if wishes.cluster is not None:  # before anything is set aside or stored
            plan = replace(plan, resume=f"{plan.resume} --cluster {shlex.quote(wishes.cluster)}")
            executor = cluster_executor(wishes.cluster, plan.entries, say, limit_of(wishes))
        if wishes.fresh:
            make_room(path, plan, wishes.sure)
        with Store.open_for_writing(path, plan) as opened:
            _tell_move(opened, plan)
            for law in wishes.again:
                opened.studies_anew(law)
            stopped = _first(experiment.tune, plan, part, opened, wishes, executor)
            if stopped is None:
                if experiment.tune is not None:
                    tuned = experiment.with_stored_gains(opened)
                    plan = replace(tuned.plan(wishes.store), resume=plan.resume)
                say(_intent(plan, part, opened, path, wishes.again))
                stopped = _campaign(plan, part, opened, wishes, executor)
            results, notes = opened.results(brief=not as_json), list(gains_notes(opened))
            unfinished = opened.unfinished()
            troubles = [*_troubles(opened), *_ways_out(opened, plan)]
        for trouble in troubles:
            say(trouble)
        if stopped is not None:
            if as_json:
                print_json(results_json(results, str(path)))
            else:
                _show_results(results, notes)
            say(str(stopped))
            raise SystemExit(Stopped.exit_code)
        _tell_results(results, notes, path, as_json)
        _tell_part(part, results, plan, unfinished)
        if part.draws is None and any(study.name == "needs" for study in plan.studies):
            say(f"what must be known, and how well: {shlex.join(['rigbench', 'needs', str(path)])}")


def _first(
    tune: Tune | None, plan: Plan, part: Part, store: Store, wishes: Wishes, executor: Executor | None
) -> Stopped | None:
    """Find the gains that the store does not have yet, and return how that stopped, if before its end."""
    if tune is None or tune.found(store.row_of) is not None:
        return None
    say(
        f"gains first: at most {counted(tune.most_runs, 'run')} of 'tune', then the matrix with what it finds"
    )
    return _done(
        plan,
        part,
        store,
        lambda on_progress: run_first(
            plan,
            store,
            wishes.jobs,
            on_progress,
            part=part,
            executor=executor,
            limit_s=limit_of(wishes),
            on_stop=tell_stopping,
        ),
    )


def _campaign(
    plan: Plan, part: Part, store: Store, wishes: Wishes, executor: Executor | None
) -> Stopped | None:
    """Do the runs, and return how the campaign stopped, if it did so before its end."""
    return _done(
        plan,
        part,
        store,
        lambda on_progress: run_campaign(
            plan,
            store,
            wishes.jobs,
            on_progress,
            again=wishes.again,
            part=part,
            executor=executor,
            limit_s=limit_of(wishes),
            on_stop=tell_stopping,
        ),
    )


def _done(plan: Plan, part: Part, store: Store, work: Callable[[OnProgress], object]) -> Stopped | None:
    """Do some work while its progress is shown, and return how it stopped, if it did so before its end."""
    try:
        with progress_shown() as on_progress:
            work(on_progress)
    except Stopped as stopped:
        return stopped
    except ClusterLost as lost:
        counts = store.counts()
        unfinished = store.unfinished() if part.draws is None else ()
        done, resume = counts.done + counts.failed, part.resume(plan.resume)
        return Stopped(done, counts.planned, resume, f"as {lost}", unfinished)
    return None


def _tell_move(store: Store, plan: Plan) -> None:
    """Say so where the store was filled from another file, which it may as well belong to."""
    before, now = store.owner, Owner.of(plan)
    if before is not None and before.origin and before.origin != now.origin:
        say(
            f"note: {store.path} was filled from {before.origin}, of the same title and arm; "
            "if that is another experiment, stop and name another file with --store"
        )


def _intent(plan: Plan, part: Part, store: Store, path: Path, again: Collection[str]) -> str:
    wanted = [entry for entry in plan.entries if part.has(entry)]
    keys = {entry.key for entry in to_do(plan, store)}
    keys |= {entry.key for entry in wanted if entry.law in again}
    missing = sum(entry.key in keys for entry in wanted)
    first = "" if part.draws is None else f" of the first {counted(part.draws, 'draw')}"
    begun = store.begun()
    studies = [study.name for study in plan.studies if missing or not begun.get(study.name)]
    then = f"; then {listed(studies)}" if studies and part.draws is None else ""
    if missing == 0:
        all_of = "all runs that are wanted" if plan.stop_early else f"all {len(wanted)} runs"
        return f"{all_of}{first} are stored in {path}{then or ': nothing to run'}"
    most = "at most " if plan.stop_early else ""
    said = f"{most}{missing} of {counted(len(wanted), 'run')}{first} to do, stored in {path}{then}"
    if part.ends is None:
        return said
    return f"{said}; none begins when {duration_words(part.ends - time.monotonic())} have passed"


def _tell_part(part: Part, results: Results, plan: Plan, unfinished: Sequence[str]) -> None:
    """Say so where more is declared than was asked for: other draws, and studies that are not finished."""
    left = results.planned - results.done - results.failed
    if part.draws is not None and (left or unfinished):
        said = f"the first {part.draws} of {plan.draws} draws are done, as asked"
        others = [f"the other {counted(left, 'run')}"] if left else []
        say(f"{said}; '{plan.resume}' does {listed([*others, *unfinished])}")


def _tell_results(results: Results, notes: Iterable[str], path: Path, as_json: bool) -> None:
    """Print and draw; a picture that can't be drawn loses no text, and JSON stays one document."""
    if not as_json:
        _show_results(results, notes)
    picture = picture_path(path)
    matrix_picture(results, picture, datetime.date.today())
    if as_json:
        print_json(results_json(results, str(path)))
    say(f"picture: {picture}\nstore: {path}\n{CAUTION}")


def _show_results(results: Results, notes: Iterable[str]) -> None:
    show(f"{status_text(results, notes)}\n")


def _ways_out(store: Store, plan: Plan) -> Iterator[str]:
    """Say how runs that ended with their law's error can be done anew."""
    errors = Counter(record.row.law for record in store.records_with(["law-error"]))
    for law, count in errors.items():
        runs, them = ("1 run", "it") if count == 1 else (f"{count} runs", "them")
        command = f"{plan.resume} --again {shlex.quote(law)}"
        yield f"{law}: {runs} ended with its error: '{command}' does {them} anew"


def _troubles(store: Store) -> Iterator[str]:
    """Say what failed, each reason of each law once, with the traceback of the first run that met it."""
    met: dict[tuple[str, str, str], list[str]] = {}
    for record in store.records_with(HOST_OUTCOMES):
        row = record.row
        met.setdefault((row.law, row.outcome, row.reason), []).append(record.trace)
    for (law, outcome, reason), traces in met.items():
        runs = "1 run" if len(traces) == 1 else f"{len(traces)} runs"
        yield f"{runs} of '{law}' came to nothing ({outcome}): {reason}\n{traces[0]}".rstrip()

"""``rigbench run``: a campaign from start to end."""

from __future__ import annotations

import datetime
import shlex
from collections import Counter
from collections.abc import Collection, Iterable, Iterator, Sequence
from pathlib import Path

from rigbench.campaign.campaign import run_campaign
from rigbench.campaign.owner import Owner
from rigbench.campaign.plan import Plan
from rigbench.campaign.store import Store
from rigbench.cli.output import paragraph, print_json, say, show, tell_notes, width
from rigbench.cli.progress import progress_shown
from rigbench.cli.stored import CAUTION, picture_path
from rigbench.errors import Fault, InputFaults, Stopped, nearest
from rigbench.experiment import load_experiment
from rigbench.report.json_form import results_json
from rigbench.report.matrix import matrix_picture
from rigbench.report.text import matrix_text
from rigbench.scores.results import Results
from rigbench.scores.row import HOST_OUTCOMES

__all__ = ["run_experiment", "store_path"]


def store_path(file: str, store: str | None) -> Path:
    """Return where the runs of an experiment file are stored."""
    return Path("results") / f"{Path(file).stem}.sqlite" if store is None else Path(store)


def run_experiment(
    file: str, jobs: int | None, store: str | None, as_json: bool, again: Sequence[str] = ()
) -> None:
    """Do what is missing, and the laws named in ``again`` anew, then print and draw the results.

    After a stop what there is is told first. InputFaults for a law that the experiment doesn't have.
    """
    experiment = load_experiment(file)
    _check_laws(file, again, experiment.laws)
    tell_notes(experiment.notes)
    plan = experiment.plan(store)
    path = store_path(file, store)
    stopped = None
    with Store.open_for_writing(path, plan) as opened:
        _tell_move(opened, plan)
        say(_intent(plan, opened, path, again))
        try:
            with progress_shown() as on_progress:
                run_campaign(plan, opened, jobs, on_progress, again=again)
        except Stopped as error:
            stopped = error
        results = opened.results()
        troubles = [*_troubles(opened), *_ways_out(opened, plan)]
    for trouble in troubles:
        say(trouble)
    if stopped is not None:
        if as_json:
            print_json(results_json(results, str(path)))
        else:
            _show_results(results)
        say(str(stopped))
        raise SystemExit(Stopped.exit_code)
    _tell_results(results, path, as_json)


def _check_laws(file: str, again: Iterable[str], laws: Collection[str]) -> None:
    known = f"one of {', '.join(laws)}"
    faults = [
        Fault(file, None, "--again", f"there is no law '{law}'", known, nearest(law, laws))
        for law in again
        if law not in laws
    ]
    if faults:
        raise InputFaults(faults)


def _tell_move(store: Store, plan: Plan) -> None:
    """Say so where the store was filled from another file, which it may as well belong to."""
    before, now = store.owner, Owner.of(plan)
    if before is not None and before.origin and before.origin != now.origin:
        say(
            f"note: {store.path} was filled from {before.origin}, of the same title and arm; "
            "if that is another experiment, stop and name another file with --store"
        )


def _intent(plan: Plan, store: Store, path: Path, again: Collection[str]) -> str:
    planned = len(plan.entries)
    keys = {entry.key for entry in store.missing(plan)}
    keys |= {entry.key for entry in plan.entries if entry.law in again}
    missing = sum(entry.key in keys for entry in plan.entries)
    if missing == 0:
        return f"all {planned} runs are stored in {path}: nothing to run"
    return f"{missing} of {planned} runs to do, stored in {path}"


def _tell_results(results: Results, path: Path, as_json: bool) -> None:
    """Print and draw; a picture that can't be drawn loses no text, and JSON stays one document."""
    if not as_json:
        _show_results(results)
    picture = picture_path(path)
    matrix_picture(results, picture, datetime.date.today())
    if as_json:
        print_json(results_json(results, str(path)))
    say(f"picture: {picture}\nstore: {path}\n{CAUTION}")


def _show_results(results: Results) -> None:
    show(matrix_text(results, width()))
    show(f"\n{paragraph(results.advice)}\n")


def _ways_out(store: Store, plan: Plan) -> Iterator[str]:
    """Say how runs that ended with their law's error can be done anew."""
    errors = Counter(record.row.law for record in store.records() if record.row.outcome == "law-error")
    for law, count in errors.items():
        runs, them = ("1 run", "it") if count == 1 else (f"{count} runs", "them")
        command = f"{plan.resume} --again {shlex.quote(law)}"
        yield f"{law}: {runs} ended with its error: '{command}' does {them} anew"


def _troubles(store: Store) -> Iterator[str]:
    """Say what failed, each reason of each law once, with the traceback of the first run that met it."""
    met: dict[tuple[str, str, str], list[str]] = {}
    for record in store.records():
        row = record.row
        if row.outcome in HOST_OUTCOMES:
            met.setdefault((row.law, row.outcome, row.reason), []).append(record.trace)
    for (law, outcome, reason), traces in met.items():
        runs = "1 run" if len(traces) == 1 else f"{len(traces)} runs"
        yield f"{runs} of '{law}' came to nothing ({outcome}): {reason}\n{traces[0]}".rstrip()

"""``rigbench run``: a campaign from start to end."""

from __future__ import annotations

import datetime
from collections.abc import Iterator
from pathlib import Path

from rigbench.campaign.campaign import run_campaign
from rigbench.campaign.store import Store
from rigbench.cli.output import paragraph, print_json, say, show, tell_notes, width
from rigbench.cli.progress import progress_shown
from rigbench.cli.stored import CAUTION, picture_path
from rigbench.errors import Stopped
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


def run_experiment(file: str, jobs: int | None, store: str | None, as_json: bool) -> None:
    """Do what is missing, then print and draw the results; Stopped comes after what there is was told."""
    experiment = load_experiment(file)
    tell_notes(experiment.notes)
    plan = experiment.plan(store)
    path = store_path(file, store)
    stopped = None
    with Store.open_for_writing(path, plan.title) as opened:
        missing = len(opened.missing(plan))
        say(_intent(len(plan.entries), missing, path))
        try:
            with progress_shown() as on_progress:
                run_campaign(plan, opened, jobs, on_progress)
        except Stopped as error:
            stopped = error
        results = opened.results()
        troubles = list(_troubles(opened))
    for trouble in troubles:
        say(trouble)
    if stopped is not None:
        if as_json:
            print_json(results_json(results, str(path)))
        say(str(stopped))
        raise SystemExit(Stopped.exit_code)
    _tell_results(results, path, as_json)


def _intent(planned: int, missing: int, path: Path) -> str:
    if missing == 0:
        return f"all {planned} runs are stored in {path}: nothing to run"
    return f"{missing} of {planned} runs to do, stored in {path}"


def _tell_results(results: Results, path: Path, as_json: bool) -> None:
    """Print and draw; a picture that can't be drawn loses no text, and JSON stays one document."""
    if not as_json:
        show(matrix_text(results, width()))
        show(f"\n{paragraph(results.advice)}\n")
    picture = picture_path(path)
    matrix_picture(results, picture, datetime.date.today())
    if as_json:
        print_json(results_json(results, str(path)))
    say(f"picture: {picture}\nstore: {path}\n{CAUTION}")


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

"""``rigbench check``: the plan of an experiment, and what it will take."""

from __future__ import annotations

import contextlib
from collections import Counter
from collections.abc import Iterator
from dataclasses import asdict, dataclass
from pathlib import Path
from typing import Any

from rigbench.campaign.ahead import StudyAhead, studies_ahead
from rigbench.campaign.owner import Owner
from rigbench.campaign.plan import Plan
from rigbench.campaign.settling import to_do
from rigbench.campaign.store import Store
from rigbench.cli.estimate import Estimate, estimate_of
from rigbench.cli.loading import loaded
from rigbench.cli.output import print_json, show, tell_notes
from rigbench.cli.spans import duration_words, size_words
from rigbench.errors import Fault, StoreError, counted
from rigbench.experiment import Experiment, store_path
from rigbench.scores.anytime import draws_to_settle
from rigbench.scores.intervals import draws_needed, misses_allowed

__all__ = ["check_experiment"]


@dataclass(frozen=True)
class Stored:
    """How many of the planned runs the store at ``path`` holds; None where there is no such store.

    ``ahead``: what the studies have ahead of them, the one that comes first included.
    """

    path: Path
    runs: int | None
    ahead: tuple[StudyAhead, ...]
    notes: tuple[Fault, ...] = ()
    spared: int = 0  # neither stored nor wanted: their columns were settled before


def check_experiment(file: str, as_json: bool) -> None:
    """Print the plan of an experiment that is in order."""
    experiment = loaded(file)
    path = store_path(file)
    experiment = _with_gains(experiment, path)
    plan = experiment.plan()
    stored = _stored(plan, path)
    estimate = estimate_of(experiment, plan, (stored.runs or 0) + stored.spared, stored.ahead)
    tell_notes([*experiment.notes, *stored.notes, *estimate.notes])
    if as_json:
        print_json(_document(experiment, plan, stored, estimate))
    else:
        show("\n".join(_lines(experiment, plan, stored, estimate)))


def _with_gains(experiment: Experiment, path: Path) -> Experiment:
    """Return the experiment with the gains that its store holds."""
    if experiment.tune is not None and path.exists():
        with contextlib.suppress(StoreError), Store.open_for_reading(path) as store:
            return experiment.with_stored_gains(store)
    return experiment


def _stored(plan: Plan, path: Path) -> Stored:
    nothing = tuple(studies_ahead(plan, None))
    if not path.exists():
        return Stored(path, None, nothing)
    try:
        with Store.open_for_reading(path) as store:
            owner = store.owner
            ahead = tuple(studies_ahead(plan, store))
            missing = {entry.key for entry in store.missing(plan)}
            wanted = {entry.key for entry in to_do(plan, store)}
    except StoreError as error:
        return Stored(path, None, nothing, (Fault(error.path, None, "", error.problem),))
    if owner is not None and not owner.is_same(Owner.of(plan)):
        problem = f"belongs to {owner}: 'run' will want another one, named with --store"
        return Stored(path, None, nothing, (Fault(str(path), None, "", problem),))
    counts = Counter((entry.key in missing, entry.key in wanted) for entry in plan.entries)
    return Stored(path, counts[False, False], ahead, spared=counts[True, False])


def _lines(experiment: Experiment, plan: Plan, stored: Stored, estimate: Estimate) -> Iterator[str]:
    yield f"{plan.title}: in order"
    yield f"plan: {_product(plan)} = {counted(len(plan.entries), 'run')}"
    if plan.sheets != ("",):
        yield f"sheets: {'; '.join(plan.sheets)}"
    yield f"laws: {', '.join(plan.laws)}"
    yield f"conditions: {', '.join(column.name for column in plan.columns)}"
    if stored.runs is not None:
        spared = f"; {stored.spared} more are not wanted, as their columns are settled"
        yield f"stored: {stored.runs} of them, in {stored.path}{spared if stored.spared else ''}"
    yield from _draws_lines(experiment)
    for ahead in stored.ahead:
        yield _study_line(experiment, ahead, estimate)
    left = any(ahead.left for ahead in stored.ahead)
    if stored.ahead:
        runs = len(plan.entries) + sum(ahead.study.most_runs for ahead in stored.ahead)
        yield f"in all: at most {counted(runs, 'run')}"
    if (stored.runs or 0) + stored.spared == len(plan.entries) and not left:
        yield "time: none, all is stored"
    elif estimate.seconds is None:
        yield "time: can't be told, for not every law finishes its nominal run"
    else:
        cores = counted(estimate.cores, "core")
        said = f"{duration_words(estimate.seconds)} on {cores}"
        most = "at most " if experiment.stop_early or left else ""
        yield f"time: {most}{said}; an estimate, from a short run of each law"
    if estimate.store_bytes is not None:
        most = "at most " if left else ""
        done = f"{most}{size_words(estimate.store_bytes)} when all is done"
        yield f"store: {done}; an estimate, from a small one"


def _study_line(experiment: Experiment, ahead: StudyAhead, estimate: Estimate) -> str:
    """Say what a study takes, and how far it is."""
    study, runs = ahead.study, counted(ahead.study.most_runs, "run")
    said = f"{study.name}: at most {runs} more, after those of the plan"
    if experiment.tune is not None and study.name == experiment.tune.name:
        each = f"{experiment.tune.runs} for each law in each sheet"
        said = f"{study.name}: at most {runs}, {each}, before those of the plan"
    if ahead.finished:
        return f"{said}; done, with {ahead.stored}"
    if ahead.stored:
        said += f"; {ahead.stored} of them stored"
    seconds = estimate.studies.get(study.name)
    return said if seconds is None else f"{said}; {duration_words(seconds)}"


def _product(plan: Plan) -> str:
    """Say how many runs there are as the product that makes them."""
    random = sum(column.random for column in plan.columns)
    conditions = counted(len(plan.columns), "condition")
    if random:
        exact = len(plan.columns) - random
        drawn = f"{counted(random, 'random condition')} x {counted(plan.draws, 'draw')}"
        conditions = f"({exact} exact + {drawn})" if exact else drawn
    rows = f"{counted(len(plan.sheets), 'sheet')} x {counted(len(plan.laws), 'law')}"
    nowhere = {(sheet, law) for sheet, law, _ in plan.absent} - {(e.sheet, e.law) for e in plan.entries}
    if nowhere:
        rows = f"({rows} - {len(nowhere)} that can't be)"
    less = sum((sheet, law) not in nowhere for sheet, law, _ in plan.absent)
    cells = f", less {counted(less, 'cell')} that can't be," if less else ""
    return " x ".join([rows, counted(len(plan.motions), "motion"), conditions]) + cells


def _draws_lines(experiment: Experiment) -> Iterator[str]:
    """Say how many draws it takes to show the required share, and what the declared number allows."""
    if experiment.tolerance is None or not experiment.random:
        return
    share = experiment.tolerance.required_share
    if experiment.stop_early:
        needed = draws_to_settle(share)
        said = f"draws: to settle that a share of {share:g} keeps takes {needed} that all keep the tolerance"
        yield f"{said}; a column stops once all its laws are settled, at {experiment.draws} the latest"
        return
    allowed = misses_allowed(share, experiment.draws)
    said = f"draws: to show a share of {share:g} takes {draws_needed(share)} that all keep the tolerance"
    if allowed is None:
        yield f"{said}; {experiment.draws} can't"
    else:
        yield f"{said}; of {experiment.draws}, {allowed or 'none'} may miss it"


def _document(experiment: Experiment, plan: Plan, stored: Stored, estimate: Estimate) -> dict[str, Any]:
    share = (
        None if experiment.tolerance is None or not experiment.random else experiment.tolerance.required_share
    )
    needed = draws_to_settle if experiment.stop_early else draws_needed
    return {
        "title": plan.title,
        "arm": plan.arm,
        "sheets": list(plan.sheets),
        "laws": list(plan.laws),
        "skipped": [
            {"sheet": skipped.sheet, "law": skipped.law or None, "reason": skipped.reason}
            for skipped in experiment.skipped
        ],
        "motions": list(plan.motions),
        "conditions": [asdict(column) for column in plan.columns],
        "draws": plan.draws if experiment.random else None,
        "required_share": share,
        "stop_early": plan.stop_early,
        "draws_needed": None if share is None else needed(share),
        "misses_allowed": None if share is None or plan.stop_early else misses_allowed(share, plan.draws),
        "runs": {"planned": len(plan.entries), "stored": stored.runs, "not_wanted": stored.spared},
        "studies": [
            {
                "name": ahead.study.name,
                "before_the_plan": ahead.study is plan.first,
                "most_runs": ahead.study.most_runs,
                "stored": ahead.stored,
                "done": ahead.finished,
                "seconds": estimate.studies.get(ahead.study.name),
            }
            for ahead in stored.ahead
        ],
        "estimate": {
            "seconds": estimate.seconds,
            "cores": estimate.cores,
            "store_bytes": estimate.store_bytes,
        },
        "notes": [asdict(note) for note in (*experiment.notes, *stored.notes, *estimate.notes)],
    }

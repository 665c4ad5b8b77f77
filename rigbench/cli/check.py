"""``rigbench check``: the plan of an experiment, and what it will take."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import asdict, dataclass, replace
from pathlib import Path
from typing import Any

from rigbench.campaign.plan import Plan
from rigbench.campaign.store import Store
from rigbench.campaign.work import Outcome, do
from rigbench.campaign.workers import usable_cores
from rigbench.cli.output import print_json, show, tell_notes
from rigbench.cli.progress import duration_words
from rigbench.cli.run import store_path
from rigbench.errors import Fault, InputFaults, StoreError
from rigbench.experiment import Experiment, load_experiment
from rigbench.rig.run import Run
from rigbench.scores.intervals import draws_needed, misses_allowed

__all__ = ["check_experiment"]

QUICK_S = 2.0


@dataclass(frozen=True)
class Estimate:
    """What a campaign will take, judged by one run of each law: ``seconds`` on so many ``cores``."""

    seconds: float | None
    cores: int
    notes: tuple[Fault, ...]


@dataclass(frozen=True)
class Stored:
    """How many of the planned runs the store at ``path`` holds; None where there is no such store."""

    path: Path
    runs: int | None
    notes: tuple[Fault, ...] = ()


def check_experiment(file: str, as_json: bool) -> None:
    """Print the plan of an experiment that is in order."""
    experiment = load_experiment(file)
    plan = experiment.plan()
    stored = _stored(plan, store_path(file, None))
    estimate = _estimate(experiment, plan, stored)
    tell_notes([*experiment.notes, *stored.notes, *estimate.notes])
    if as_json:
        print_json(_document(experiment, plan, stored, estimate))
    else:
        show("\n".join(_lines(experiment, plan, stored, estimate)))


def _stored(plan: Plan, path: Path) -> Stored:
    if not path.exists():
        return Stored(path, None)
    try:
        with Store.open_for_reading(path) as store:
            owner = store.labels.title
            missing = {entry.key for entry in store.missing(plan)}
    except StoreError as error:
        return Stored(path, None, (Fault(error.path, None, "", error.problem),))
    if owner != plan.title:
        problem = f"belongs to the experiment '{owner}': 'run' will want another one, named with --store"
        return Stored(path, None, (Fault(str(path), None, "", problem),))
    return Stored(path, sum(entry.key not in missing for entry in plan.entries))


def _estimate(experiment: Experiment, plan: Plan, stored: Stored) -> Estimate:
    """Do the nominal run of each law along the shortest motion, and scale its time to all that is missing.

    It is done in the first sheet that has the law. A run takes a time in proportion to its steps.
    InputFaults if a law raises in it.
    """
    from rigbench.rig import warm_up

    warm_up()
    firsts = {law: _shortest(experiment, law) for law in experiment.laws}
    outcomes = {law: _measured(run) for law, (_, run) in firsts.items()}
    faults, notes = [], []
    for law, outcome in outcomes.items():
        line, key = experiment.law_lines[law], f"laws.{law}"
        if outcome.outcome == "law-error":
            problem = f"raised {outcome.reason}\n{outcome.trace}".rstrip()
            faults.append(Fault(experiment.path, line, key, problem))
        elif outcome.outcome != "finished":
            name = firsts[law][0]
            problem = f"does not finish motion {name} even in nominal ({outcome.outcome}): {outcome.reason}"
            notes.append(Fault(experiment.path, line, key, f"{problem}\n{outcome.trace}".rstrip()))
    if faults:
        raise InputFaults(faults)
    seconds = None
    times = [outcome.wall_s for outcome in outcomes.values() if outcome.wall_s is not None]
    if not notes and len(times) == len(outcomes):  # a run that broke off says nothing about a whole one
        per_step = {law: outcome.wall_s / _steps(firsts[law][1]) for law, outcome in outcomes.items() if outcome.wall_s}
        left = 1 - (stored.runs or 0) / len(plan.entries)
        steps = _steps_by_law(experiment)
        seconds = sum(steps[law] * time for law, time in per_step.items()) * left / usable_cores()
    return Estimate(seconds, usable_cores(), tuple(notes))


def _shortest(experiment: Experiment, law: str) -> tuple[str, Run]:
    """Return the nominal run of a law along the shortest motion, with the motion's name."""
    sheet = next(sheet for sheet in experiment.sheets if law in sheet.laws)
    name, motion = min(sheet.motions.items(), key=lambda item: item[1].duration_s)
    return name, replace(sheet.first, law=sheet.laws[law], motion=motion)


def _steps(run: Run) -> float:
    """Return how many steps of the engine and calls of the law a run takes."""
    return run.motion.duration_s * (run.rates.physics_hz + run.rates.control_hz)


def _steps_by_law(experiment: Experiment) -> dict[str, float]:
    """Return the steps of all runs of each law."""
    steps = dict.fromkeys(experiment.laws, 0.0)
    for sheet in experiment.sheets:
        random = sum(condition.column.random for condition in sheet.conditions)
        runs = len(sheet.conditions) - random + random * experiment.draws
        once = sum(_steps(replace(sheet.first, motion=motion)) for motion in sheet.motions.values())
        for law in sheet.laws:
            steps[law] += runs * once
    return steps


def _measured(run: Run) -> Outcome:
    """Do a run; twice if it is quick, for the first of a process may have something to compile."""
    outcome = do(run)
    quick = outcome.outcome == "finished" and outcome.wall_s is not None and outcome.wall_s < QUICK_S
    return do(run) if quick else outcome


def _lines(experiment: Experiment, plan: Plan, stored: Stored, estimate: Estimate) -> Iterator[str]:
    yield f"{plan.title}: in order"
    yield f"plan: {_product(plan)} = {_count(len(plan.entries), 'run')}"
    if plan.sheets != ("",):
        yield f"sheets: {'; '.join(plan.sheets)}"
    yield f"laws: {', '.join(plan.laws)}"
    yield f"conditions: {', '.join(column.name for column in plan.columns)}"
    if stored.runs is not None:
        yield f"stored: {stored.runs} of them, in {stored.path}"
    yield from _draws_lines(experiment)
    if stored.runs == len(plan.entries):
        yield "time: none, all is stored"
    elif estimate.seconds is None:
        yield "time: can't be told, for not every law finishes its nominal run"
    else:
        cores = _count(estimate.cores, "core")
        yield f"time: {duration_words(estimate.seconds)} on {cores}; an estimate, from one run of each law"


def _product(plan: Plan) -> str:
    """Say how many runs there are as the product that makes them."""
    random = sum(column.random for column in plan.columns)
    conditions = _count(len(plan.columns), "condition")
    if random:
        exact, draws = len(plan.columns) - random, _count(plan.draws, "draw")
        conditions = f"({exact} exact + {_count(random, 'random condition')} x {draws})"
    rows = f"{_count(len(plan.sheets), 'sheet')} x {_count(len(plan.laws), 'law')}"
    nowhere = {(sheet, law) for sheet, law, _ in plan.absent} - {(e.sheet, e.law) for e in plan.entries}
    if nowhere:
        rows = f"({rows} - {len(nowhere)} that can't be)"
    return " x ".join([rows, _count(len(plan.motions), "motion"), conditions])


def _count(number: int, what: str) -> str:
    return f"{number} {what}" if number == 1 else f"{number} {what}s"


def _draws_lines(experiment: Experiment) -> Iterator[str]:
    """Say how many draws it takes to show the required share, and what the declared number allows."""
    if experiment.tolerance is None or not experiment.random:
        return
    share = experiment.tolerance.required_share
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
        "draws_needed": None if share is None else draws_needed(share),
        "misses_allowed": None if share is None else misses_allowed(share, plan.draws),
        "runs": {"planned": len(plan.entries), "stored": stored.runs},
        "estimate": {"seconds": estimate.seconds, "cores": estimate.cores},
        "notes": [asdict(note) for note in (*experiment.notes, *stored.notes, *estimate.notes)],
    }

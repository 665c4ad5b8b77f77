"""How long a campaign will take, judged by one run of each law."""

from __future__ import annotations

from dataclasses import dataclass, replace

from rigbench.campaign.work import Outcome, do
from rigbench.campaign.workers import usable_cores
from rigbench.errors import Fault, InputFaults
from rigbench.experiment import Experiment
from rigbench.rig.run import Run

__all__ = ["Estimate", "estimate_of"]

QUICK_S = 2.0


@dataclass(frozen=True)
class Estimate:
    """What a campaign will take, judged by one run of each law: ``seconds`` on so many ``cores``."""

    seconds: float | None
    cores: int
    notes: tuple[Fault, ...]


def estimate_of(experiment: Experiment, stored: int) -> Estimate:
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
        per_step = {
            law: outcome.wall_s / _steps(firsts[law][1])
            for law, outcome in outcomes.items()
            if outcome.wall_s
        }
        left = 1 - stored / experiment.runs
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

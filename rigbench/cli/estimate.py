"""How long a campaign will take, judged by one short run of each law."""

from __future__ import annotations

import contextlib
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from itertools import islice
from statistics import fmean
from typing import Any

from rigbench.arm.arm import Floats
from rigbench.campaign.ahead import StudyAhead
from rigbench.campaign.executor import InProcess, Processes
from rigbench.campaign.plan import Entry, Plan
from rigbench.campaign.size import store_bytes
from rigbench.campaign.study import Study
from rigbench.campaign.work import Outcome, do
from rigbench.campaign.workers import usable_cores
from rigbench.errors import Fault, InputFaults, RigbenchError, StoreError
from rigbench.experiment import Experiment
from rigbench.motion.motion import Motion
from rigbench.rig.run import Run

__all__ = ["Estimate", "estimate_of"]

QUICK_S = 10.0  # what compiling a law takes at most, on a slow machine

MOTION_S = 3.0
"""How much of the motion is enough to tell how long a step takes [s]."""

EXAMPLES = 300
"""Runs of a study whose steps are counted."""

LIMIT_S = 60.0
"""When a law's run is given up [s]: a law that hangs must not hang its check."""


@dataclass(frozen=True)
class Estimate:
    """What a campaign will take, judged by one short run of each law: ``seconds`` on so many ``cores``.

    ``studies`` holds the seconds that each study takes at most, which are in ``seconds`` as well;
    ``store_bytes`` is the size of the store when all is done. None is what can't be told: both, if not every
    law finishes its run.
    """

    seconds: float | None
    cores: int
    notes: tuple[Fault, ...]
    store_bytes: float | None = None
    studies: Mapping[str, float] = field(default_factory=dict)


def estimate_of(experiment: Experiment, plan: Plan, stored: int, ahead: Sequence[StudyAhead]) -> Estimate:
    """Do the nominal run of each law along the shortest motion, and scale its time to all that is missing.

    Of the plan all but the ``stored`` runs are; of a study at most what is ``ahead`` of it.

    It is done in the first sheet that has the law, in a worker process as in a campaign, for MOTION_S of
    the motion at most and no longer than LIMIT_S. A run takes a time in proportion to its steps.
    InputFaults if a law raises in it.
    """
    firsts = {law: _shortest(experiment, law) for law in experiment.laws}
    outcomes = _outcomes(firsts.values())
    faults, notes = [], []
    for law, first in firsts.items():
        outcome = outcomes[first.key]
        line, key = experiment.law_lines[law], f"laws.{law}"
        if outcome.outcome == "law-error":
            problem = f"raised {outcome.reason}\n{outcome.trace}".rstrip()
            faults.append(Fault(experiment.path, line, key, problem))
        elif outcome.outcome != "finished":
            problem = (
                f"does not finish motion {first.motion} even in nominal ({outcome.outcome}): {outcome.reason}"
            )
            notes.append(Fault(experiment.path, line, key, f"{problem}\n{outcome.trace}".rstrip()))
    if faults:
        raise InputFaults(faults)
    seconds = size = None
    studies: dict[str, float] = {}
    times = {law: outcomes[first.key].wall_s for law, first in firsts.items()}
    if not notes and None not in times.values():  # a run that broke off says nothing about a whole one
        per_step = {law: wall_s / _steps(firsts[law].run) for law, wall_s in times.items() if wall_s}
        left = 1 - stored / experiment.runs
        steps = _steps_by_law(experiment)
        seconds = sum(steps[law] * time for law, time in per_step.items()) * left / usable_cores()
        for one in ahead:
            share = one.left / one.study.most_runs if one.left else 0.0
            studies[one.study.name] = _seconds_of(one.study, per_step) * share / usable_cores()
        seconds += sum(studies.values())
        with contextlib.suppress(OSError, StoreError):  # no room for a temporary file
            size = store_bytes(plan, {law: outcomes[first.key] for law, first in firsts.items()}, ahead)
    return Estimate(seconds, usable_cores(), tuple(notes), size, studies)


def _seconds_of(study: Study, per_step: Mapping[str, float]) -> float:
    """Return how long all runs of a study take one after the other, at most."""
    seconds = 0.0
    for most, examples in study.examples():
        times = [_steps(entry.run) * per_step.get(entry.law, 0.0) for entry in islice(examples, EXAMPLES)]
        seconds += most * fmean(times) if times else 0.0
    return seconds


def _shortest(experiment: Experiment, law: str) -> Entry:
    """Return the nominal run of a law along the beginning of the shortest motion."""
    sheet = next(sheet for sheet in experiment.sheets if law in sheet.laws)
    name, motion = min(sheet.motions.items(), key=lambda item: item[1].duration_s)
    run = replace(sheet.first, law=sheet.laws[law], motion=_Beginning(motion))
    return Entry(sheet.name, law, name, "nominal", None, None, run)


def _outcomes(entries: Iterable[Entry]) -> dict[str, Outcome]:
    """Do the runs and return their outcomes by key; here if there are no worker processes to be had."""
    once = list({entry.key: entry for entry in entries}.values())
    try:
        return _done(Processes(1, _measured, lambda _: LIMIT_S), once)
    except RigbenchError:
        return _done(InProcess(_measured), once)


def _done(executor: Processes | InProcess, entries: list[Entry]) -> dict[str, Outcome]:
    with contextlib.closing(executor.run_all(entries)) as outcomes:
        return {outcome.key: outcome for outcome in outcomes}


@dataclass(frozen=True)
class _Beginning:
    """The first MOTION_S seconds of a motion."""

    whole: Motion

    @property
    def duration_s(self) -> float:
        return min(self.whole.duration_s, MOTION_S)

    @property
    def rests(self) -> tuple[tuple[float, float], ...]:
        return tuple(rest for rest in self.whole.rests if rest[1] <= self.duration_s)

    def reference(self, t: Floats) -> tuple[Floats, Floats, Floats]:
        return self.whole.reference(t)

    def paced(self, factor: float) -> _Beginning:
        return _Beginning(self.whole.paced(factor))

    def inputs(self) -> dict[str, Any]:
        return {"kind": "beginning", "of": self.whole.inputs(), "duration_s": self.duration_s}


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
    """Do a run; twice if it is quick, for the first under a law may have its kernels to compile."""
    outcome = do(run)
    quick = outcome.outcome == "finished" and outcome.wall_s is not None and outcome.wall_s < QUICK_S
    return do(run) if quick else outcome

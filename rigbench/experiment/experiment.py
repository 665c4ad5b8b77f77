"""The experiment: an experiment file that was read, checked and found in order."""

from __future__ import annotations

import shlex
from collections.abc import Mapping
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

from rigbench.arm.arm import Arm
from rigbench.campaign.plan import Plan, fair_order
from rigbench.errors import Fault, InputFaults
from rigbench.experiment.checks import (
    arm_files,
    check_conditions,
    check_model,
    check_names,
    check_start,
    joint_list,
    mismatch_of,
    rates_of,
)
from rigbench.experiment.expand import Condition, conditions_of, entries_of, spreading
from rigbench.experiment.findings import Findings
from rigbench.experiment.laws import law_choices
from rigbench.experiment.motions import motions_of
from rigbench.experiment.schema import ExperimentKeys
from rigbench.experiment.tolerance import check_applies, tolerance_of
from rigbench.laws.registry import LawChoice
from rigbench.motion.motion import Motion
from rigbench.rig.run import Run
from rigbench.scores.intervals import draws_needed, misses_allowed
from rigbench.scores.results import Tolerance
from rigbench.yamlfile import load, partial, read_text

__all__ = ["Experiment", "load_experiment"]

MOST_RUNS = 1_000_000
"""Runs that an experiment may declare; each of them has to be held in memory."""


@dataclass(frozen=True)
class Experiment:
    """All that an experiment file declares, defaults included.

    ``path`` as the user named it; ``first`` the first run, which holds what all of them share; ``draws``
    the machines drawn in each random condition; ``law_lines`` where the laws stand in the file; ``notes``
    what the user should know but need not change.
    """

    path: str
    text: str
    title: str
    arm: Arm
    first: Run
    laws: Mapping[str, LawChoice]
    motions: Mapping[str, Motion]
    conditions: tuple[Condition, ...]
    draws: int
    tolerance: Tolerance | None
    law_lines: Mapping[str, int | None]
    notes: tuple[Fault, ...] = ()

    @property
    def random(self) -> bool:
        """Whether any condition is random."""
        return any(condition.column.random for condition in self.conditions)

    @property
    def runs(self) -> int:
        """How many runs are declared: one a law, motion and column, and in random columns one a draw."""
        random = sum(condition.column.random for condition in self.conditions)
        columns = len(self.conditions) - random + random * self.draws
        return len(self.laws) * len(self.motions) * columns

    def plan(self, store: str | None = None) -> Plan:
        """Return every run, in order; ``store`` is the store's path if the user named one."""
        resume = ["rigbench", "run", self.path, *(() if store is None else ("--store", store))]
        return Plan(
            title=self.title,
            arm=self.arm.name,
            experiment_text=self.text,
            experiment_path=self.path,
            sheets=("",),
            laws=tuple(self.laws),
            motions=tuple(self.motions),
            columns=tuple(condition.column for condition in self.conditions),
            draws=self.draws,
            tolerance=self.tolerance,
            entries=fair_order(entries_of(self.first, self.laws, self.motions, self.conditions, self.draws)),
            resume=shlex.join(resume),
        )


def load_experiment(path: str | Path) -> Experiment:
    """Read and check an experiment file.

    InputFaults with every fault of the file, of its arm files, motion files and law files, at once. A
    second look is taken at whatever parsed, so a fault in one place hides none elsewhere.
    """
    file = str(path)
    text = read_text(Path(path), file, "the experiment file")
    document = load(file, text)
    keys, faults = partial(document, ExperimentKeys)
    if keys is None:
        raise InputFaults(faults)
    findings = Findings(document, faults)
    experiment = _check(keys, findings, Path(path), text)
    if experiment is None or findings.faults:
        raise InputFaults(findings.in_order())
    return experiment


def _check(keys: ExperimentKeys, findings: Findings, path: Path, text: str) -> Experiment | None:
    """Cross-check all that parsed; None where anything is at fault."""
    folder = path.parent
    check_names(keys, findings)
    found = arm_files("arm", keys.arm, findings, folder)
    believed = arm_files("model", keys.model, findings, folder)
    arm = None if found is None else found[1]
    rates = rates_of(keys.rates, findings)
    control_hz = keys.rates.control_hz if findings.clean("rates", "control_hz") else None
    laws = law_choices(keys.laws or {}, findings, folder, None if arm is None else arm.n, control_hz)
    mismatch = mismatch_of(keys.mismatch, arm, findings)
    check_conditions(keys, spreading(mismatch), findings)
    tolerance, settle_band_mm = tolerance_of(keys.tolerance, keys.required_share, arm, findings)
    if arm is None or found is None:
        return None
    if believed is not None:
        check_model(believed[1], arm, findings)
    motions = motions_of(keys.motions or {}, findings, folder, arm, control_hz or 1000.0)
    if tolerance is not None and motions and findings.clean("motions"):
        check_applies(tolerance, motions, arm, findings)
    gain_pose = joint_list("gain_pose_deg", keys.gain_pose_deg, arm, findings)
    start_offset = joint_list("start_offset_deg", keys.start_offset_deg, arm, findings)
    if start_offset is not None:
        check_start(start_offset, motions, arm, findings)
    if findings.faults or rates is None:
        return None
    law, motion = next(iter(laws.values())), next(iter(motions.values()))
    x, y, z = keys.gravity_m_s2
    first = Run(
        arm=found[0],
        law=law,
        motion=motion,
        rates=rates,
        gain_pose=gain_pose or tuple(motion.reference(np.zeros(1))[0][0].tolist()),
        settle_band_mm=settle_band_mm,
        seed=keys.seed,
        model=None if believed is None else believed[0],
        mismatch=mismatch,
        start_offset=start_offset or (),
        gravity=(x, y, z),
    )
    experiment = Experiment(
        path=findings.document.file,
        text=text,
        title=keys.title or path.stem,
        arm=arm,
        first=first,
        laws=laws,
        motions=motions,
        conditions=conditions_of(mismatch, keys.conditions),
        draws=keys.draws,
        tolerance=tolerance,
        law_lines={name: findings.document.line(("laws", name)) for name in laws},
    )
    _look_over(experiment, keys, findings)
    return replace(experiment, notes=tuple(dict.fromkeys(findings.notes)))


def _look_over(experiment: Experiment, keys: ExperimentKeys, findings: Findings) -> None:
    """Look at the experiment as a whole: what is allowed, but may not be what was meant."""
    if experiment.runs > MOST_RUNS:
        findings.fault(("draws",), f"{experiment.runs} runs in all", f"at most {MOST_RUNS}")
    if keys.tolerance is None:
        findings.note((), "no tolerance is declared: the matrix will show scores, but no verdicts")
    if spreading(experiment.first.mismatch) and not experiment.random:
        findings.note(("mismatch",), "no condition uses it: declare each_alone or together under conditions")
    tolerance = experiment.tolerance
    if tolerance is None or not experiment.random:
        return
    if misses_allowed(tolerance.required_share, experiment.draws) is None:
        needed = draws_needed(tolerance.required_share)
        findings.note(
            ("draws",),
            f"{experiment.draws} draws can't show a required share of {tolerance.required_share:g}; "
            f"it takes {needed} without a miss",
        )

"""worst_case as an experiment declares it: the checks, and the study."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from itertools import pairwise

from rigbench.arm.draws import draw_values
from rigbench.arm.mismatch import Mismatch
from rigbench.campaign.studies.worst_case import Subject, WorstCase, least_runs
from rigbench.errors import counted
from rigbench.experiment.expand import Sheet, bare_run, spreading
from rigbench.experiment.findings import Findings
from rigbench.experiment.law_names import check_law_names, is_named
from rigbench.experiment.schema import ExperimentKeys
from rigbench.experiment.worst_case_keys import WorstCaseKeys
from rigbench.scores.results import Tolerance

__all__ = ["check_worst_case", "worst_case_study"]


def check_worst_case(
    keys: ExperimentKeys,
    variants: Mapping[str, str],
    mismatch: Mismatch,
    tolerance: Tolerance | None,
    findings: Findings,
) -> None:
    """Check laws, levels and budget, and that there is a mismatch to search and a tolerance to be missed."""
    asked = keys.worst_case
    if asked is None:
        return
    check_law_names(("worst_case", "law"), asked.law, tuple(keys.laws or ()), variants, findings)
    if not spreading(mismatch) and findings.clean("mismatch"):
        findings.fault(("worst_case",), "needs a mismatch", "a source with a spread under mismatch")
    if tolerance is None and findings.clean("tolerance") and findings.clean("motions"):
        findings.fault(("worst_case",), "needs a tolerance to be missed", "a limit under tolerance")
    for number, (below, level) in enumerate(pairwise(asked.levels or ()), 1):
        if level <= below:
            expected = "levels that rise, each once"
            findings.fault(("worst_case", "levels", number), f"{level:g} after {below:g}", expected)
    levels, motions = _levels(asked, keys), len(keys.motions or ())
    least = least_runs(len(levels), motions)
    if motions and asked.runs < least and findings.clean("conditions"):
        what = f"{counted(len(levels), 'level')} and {counted(motions, 'motion')}"
        findings.fault(("worst_case", "runs"), f"{asked.runs} are too few for {what}", f"at least {least}")


def worst_case_study(
    keys: ExperimentKeys, sheets: Sequence[Sheet], variants: Mapping[str, str], tolerance: Tolerance | None
) -> WorstCase | None:
    """Return the study that is declared, if one is: its laws in every sheet in which they are possible."""
    asked = keys.worst_case
    if asked is None or tolerance is None:
        return None
    subjects = (
        _subject(sheet, law) for sheet in sheets for law in sheet.laws if is_named(asked.law, law, variants)
    )
    return WorstCase(tuple(subjects), _levels(asked, keys), asked.runs, tolerance, keys.seed)


def _levels(asked: WorstCaseKeys, keys: ExperimentKeys) -> tuple[float, ...]:
    return tuple(asked.levels or keys.conditions.together or (1.0,))


def _subject(sheet: Sheet, law: str) -> Subject:
    sources, first = spreading(sheet.first.mismatch), sheet.first
    runs = {motion: replace(bare_run(sheet, law, motion), sources=sources) for motion in sheet.motions}
    parameters = tuple(draw_values(first.arm.arm(), first.mismatch, sources, first.seed, 0))
    return Subject(sheet.name, law, runs, parameters)

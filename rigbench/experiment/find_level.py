"""Find_level as an experiment declares it: the checks, and the study; and those of stop_early."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import replace

from rigbench.arm.mismatch import Mismatch
from rigbench.campaign.studies.find_level import FindLevel, Rung, Searching
from rigbench.errors import Fault
from rigbench.experiment.expand import Sheet, bare_run, spreading
from rigbench.experiment.find_level_keys import FindLevelKeys
from rigbench.experiment.findings import Findings
from rigbench.experiment.schema import ExperimentKeys
from rigbench.scores.anytime import draws_to_settle
from rigbench.scores.intervals import draws_needed
from rigbench.scores.results import Tolerance
from rigbench.yamlfile import Document

__all__ = ["check_find_level", "check_stop_early", "find_level_study", "stop_early_notes"]

MOST_WITHOUT_LADDER = 4.0
MOST_LEVEL = 100.0


def check_find_level(
    keys: ExperimentKeys, mismatch: Mismatch, tolerance: Tolerance | None, findings: Findings
) -> None:
    """Check that there is a mismatch to scale, a tolerance to be kept, and the range of level and draws."""
    asked = keys.find_level
    if asked is None:
        return
    if not spreading(mismatch) and findings.clean("mismatch"):
        findings.fault(("find_level",), "needs a mismatch", "a source with a spread under mismatch")
    if tolerance is None and findings.clean("tolerance") and findings.clean("motions"):
        findings.fault(("find_level",), "needs a tolerance to be kept", "a limit under tolerance")
    top = max(keys.conditions.together or [0.0])
    if asked.most is not None and asked.most < top and findings.clean("conditions"):
        problem = f"{asked.most:g} is below the largest level of conditions.together"
        findings.fault(("find_level", "most"), problem, f"at least {top:g}")
    if asked.draws is not None and asked.draws > keys.draws and findings.clean("draws"):
        problem = f"{asked.draws} draws are asked for"
        findings.fault(("find_level", "draws"), problem, f"at most the {keys.draws} declared")
    needed = draws_needed(keys.required_share)
    if asked.draws is not None and needed is not None and asked.draws < needed:
        said = f"{asked.draws} draws can't show a level that {keys.required_share:g} of the draws keep"
        findings.note(("find_level", "draws"), f"{said}; it takes {needed}")


def check_stop_early(keys: ExperimentKeys, tolerance: Tolerance | None, findings: Findings) -> None:
    """Check that there is a tolerance by which columns can be settled."""
    if keys.stop_early and tolerance is None and findings.clean("tolerance") and findings.clean("motions"):
        findings.fault(("stop_early",), "needs a tolerance to be kept", "a limit under tolerance")


def stop_early_notes(document: Document, keys: ExperimentKeys, random: bool) -> Iterator[Fault]:
    """Yield what makes stop_early of little use: nothing ``random``, or too few draws to settle 'keeps'."""
    needed = draws_to_settle(keys.required_share)
    if not random:
        yield document.fault(("stop_early",), "nothing in it is random, so there is nothing to stop early")
    elif needed is not None and keys.draws < needed:
        said = f"{keys.draws} draws can't settle that a share of {keys.required_share:g} keeps, looked at as"
        yield document.fault(("draws",), f"{said} they come (stop_early); it takes {needed} without a miss")


def find_level_study(
    keys: ExperimentKeys, sheets: Sequence[Sheet], tolerance: Tolerance | None
) -> FindLevel | None:
    """Return the study that is declared, if one is: of every law in every sheet in which it is possible."""
    asked = keys.find_level
    if asked is None or tolerance is None:
        return None
    return FindLevel(
        searching=tuple(_searching(sheet, law) for sheet in sheets for law in sheet.laws),
        tolerance=tolerance,
        draws=keys.draws if asked.draws is None else asked.draws,
        most=_most(asked, keys.conditions.together or []),
        steps=asked.steps,
        rungs_missing=keys.stop_early,
    )


def _most(asked: FindLevelKeys, together: Sequence[float]) -> float:
    if asked.most is not None:
        return asked.most
    return min(2.0 * max(together), MOST_LEVEL) if together else MOST_WITHOUT_LADDER


def _searching(sheet: Sheet, law: str) -> Searching:
    sources = spreading(sheet.first.mismatch)
    runs = {motion: replace(bare_run(sheet, law, motion), sources=sources) for motion in sheet.motions}
    columns = (condition.column for condition in sheet.conditions if condition.column.ladder)
    rungs = (Rung(column.name, column.level or 0.0, column.random) for column in columns)
    return Searching(sheet.name, law, runs, tuple(sorted(rungs, key=lambda rung: rung.level)))

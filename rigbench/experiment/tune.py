"""tune as an experiment declares it: the checks, and the study."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Any

from rigbench.arm.arm import Arm
from rigbench.campaign.studies.tune import Aim, Gain, Subject, Tune, least_runs
from rigbench.errors import counted, nearest
from rigbench.experiment.expand import Sheet, bare_run
from rigbench.experiment.findings import Findings
from rigbench.experiment.law_names import check_law_names, is_named
from rigbench.experiment.schema import ExperimentKeys, LawKeys
from rigbench.experiment.tolerance import check_limits, limits_of
from rigbench.experiment.tune_keys import RANGES, TuneKeys
from rigbench.experiment.vary import Axis
from rigbench.laws.registry import LawChoice
from rigbench.motion.motion import Motion
from rigbench.scores.names import SCORES, main_score
from rigbench.scores.results import Tolerance
from rigbench.yamlfile import Document, KeyPath

__all__ = ["check_tune", "check_tune_scores", "tune_study"]


def check_tune(
    keys: ExperimentKeys,
    laws: Mapping[str, LawChoice],
    variants: Mapping[str, str],
    axes: Sequence[Axis],
    findings: Findings,
) -> None:
    """Check laws, gains and their ranges, score and budget; note the laws that are left alone, and why."""
    asked = keys.tune
    if asked is None:
        return
    check_law_names(("tune", "law"), asked.law, tuple(keys.laws or ()), variants, findings)
    _check_ranges(asked, findings)
    if asked.score is not None and (asked.score not in SCORES or SCORES[asked.score].host):
        known = [name for name, info in SCORES.items() if not info.host]
        near = nearest(asked.score, known)
        expected = "" if near else f"one of {', '.join(known)}"
        findings.fault(("tune", "score"), f"'{asked.score}' is not a score of the arm", expected, near)
    least = least_runs(_aim(asked, keys, {}, None), len(keys.motions or ()))
    if keys.motions and asked.runs < least:
        problem = f"{asked.runs} are too few for {counted(len(keys.motions), 'motion')}"
        findings.fault(("tune", "runs"), problem, f"at least {least}")
    if not laws or not findings.clean("laws") or not findings.clean("tune"):
        return
    why = {
        row: _left_alone(asked, keys.laws or {}, row, choice, _varied(row, variants, axes))
        for row, choice in laws.items()
        if is_named(asked.law, row, variants)
    }
    if why and all(why.values()):
        said = "; ".join(f"'{row}': {reason}" for row, reason in why.items())
        findings.fault(("tune",), f"leaves every law alone ({said})", "a law that has these gains")
        return
    for row, reason in why.items():
        if reason:
            findings.note(("laws", row), f"is left alone by tune: {reason}")


def check_tune_scores(
    keys: ExperimentKeys, motions: Mapping[str, Motion], arm: Arm, findings: Findings
) -> None:
    """Check that the score and those under ``most`` are the arm's, and that its motions have them."""
    if keys.tune is None:
        return
    bands: dict[str, float] = {}
    limits = limits_of(("tune", "most"), keys.tune.most, arm, bands, "", findings)
    if bands:
        findings.fault(("tune", "most", "settle_band_mm"), "is no limit", "settle_band_mm under tolerance")
    if motions and findings.clean("motions"):
        check_limits(("tune", "most"), limits, motions, arm, findings)
        score = keys.tune.score
        if score is not None and score in SCORES:
            probe = Findings(findings.document)
            check_limits(("tune", "score"), [score], motions, arm, probe)
            for fault in probe.faults:
                findings.fault(("tune", "score"), fault.problem, fault.expected)


def tune_study(
    document: Document,
    keys: ExperimentKeys,
    laws: Mapping[str, LawKeys],
    sheets: Sequence[Sheet],
    variants: Mapping[str, str],
    axes: Sequence[Axis],
    tolerance: Tolerance | None,
) -> Tune | None:
    """Return the study that is declared, if one is: its laws in every sheet in which they are possible.

    ``laws`` are the rows of the matrix as the file has them, variants included.
    """
    asked = keys.tune
    if asked is None:
        return None
    gains = tuple(Gain(name, low, high) for name, (low, high) in _ranges(asked).items())
    subjects = [
        _subject(sheet, law, gains, laws)
        for sheet in sheets
        for law, choice in sheet.laws.items()
        if is_named(asked.law, law, variants)
        and not _left_alone(asked, laws, law, choice, _varied(law, variants, axes))
    ]
    arm = sheets[0].first.arm.arm()
    limits = limits_of(("tune", "most"), asked.most, arm, {}, "", Findings(document))
    aim = _aim(asked, keys, limits, tolerance)
    return Tune(tuple(subjects), gains, aim, asked.runs, keys.seed)


def _check_ranges(asked: TuneKeys, findings: Findings) -> None:
    for place, name in enumerate(asked.gains):
        path: KeyPath = ("tune", "gains", name if isinstance(asked.gains, dict) else place)
        if isinstance(asked.gains, dict):
            low, high = asked.gains[name]
            if low >= high:
                findings.fault(path, f"{low:g} to {high:g} is no range", "the lower value first")
        elif name not in RANGES:
            problem = f"the range of '{name}' is not known"
            findings.fault(path, problem, f"a mapping: gains: {{{name}: [LOW, HIGH]}}", nearest(name, RANGES))
        elif name in asked.gains[:place]:
            findings.fault(path, f"'{name}' a second time", "each gain once")


def _ranges(asked: TuneKeys) -> dict[str, tuple[float, float]]:
    if isinstance(asked.gains, dict):
        return {name: (low, high) for name, (low, high) in asked.gains.items()}
    return {name: RANGES[name] for name in asked.gains}


def _varied(row: str, variants: Mapping[str, str], axes: Sequence[Axis]) -> set[str]:
    """Return the options in which the variants of a row's law differ."""
    return {str(axis.path[2]) for axis in axes if axis.law is not None and axis.law == variants.get(row)}


def _left_alone(
    asked: TuneKeys, laws: Mapping[str, LawKeys], row: str, choice: LawChoice, varied: set[str]
) -> str:
    """Say why a law keeps its declared gains; '' if it doesn't."""
    gains, options = list(asked.gains), dict(choice.options)
    lacking = [name for name in gains if not isinstance(options.get(name), float)]
    if lacking:
        return f"it has no gain {lacking[0]} to look for"
    both = [name for name in gains if name in varied]
    if both:
        return f"its {both[0]} is varied"
    given = {name for name, value in (_extra(laws, row)).items() if value is not None}
    conflict = choice.law_class().conflict(frozenset({*given, *gains}))
    return f"with {' and '.join(gains)} found besides, {conflict}" if conflict else ""


def _extra(laws: Mapping[str, LawKeys], row: str) -> dict[str, Any]:
    return dict((laws[row].model_extra if row in laws else None) or {})


def _aim(
    asked: TuneKeys, keys: ExperimentKeys, limits: Mapping[str, float], tolerance: Tolerance | None
) -> Aim:
    score = asked.score or main_score(() if tolerance is None else tolerance.limited)
    kept = (
        {} if tolerance is None else {motion: tolerance.limits_for(motion) for motion in keys.motions or ()}
    )
    return Aim(score, limits, asked.delay_margin_ms, asked.delay_factor, kept)


def _subject(sheet: Sheet, law: str, gains: Sequence[Gain], laws: Mapping[str, LawKeys]) -> Subject:
    draw = 0 if sheet.first.noisy else None
    runs = {motion: replace(bare_run(sheet, law, motion), draw=draw) for motion in sheet.motions}
    choice = sheet.laws[law]
    options = dict(choice.options)
    declared = tuple(float(options[gain.name]) for gain in gains)
    return Subject(sheet.name, law, runs, declared, {"law": choice.plugin} | _extra(laws, law))

"""Needs as an experiment declares it: the checks against its laws, mismatch and motions, and the study."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import replace
from typing import Any

from rigbench.arm.arm import Arm
from rigbench.arm.mismatch import Knowledge, Mismatch, Payload, Spread, names_of
from rigbench.campaign.studies.needs import NeedsStudy
from rigbench.errors import Fault, nearest
from rigbench.experiment.expand import NAMES, Sheet, bare_run, spreading
from rigbench.experiment.findings import Findings
from rigbench.experiment.law_names import check_law_names, is_named
from rigbench.experiment.needs_keys import POINTS, NeedsKeys
from rigbench.experiment.tolerance import check_applies
from rigbench.motion.motion import Motion
from rigbench.rig.run import Run
from rigbench.scores.limit_search import search_draws
from rigbench.scores.names import SCORES, main_score, score_info
from rigbench.scores.needs_design import Group, NeedsDesign, Subject
from rigbench.scores.results import Tolerance
from rigbench.scores.spread_at import FACTOR, LOAD, SHIFT
from rigbench.yamlfile import Document

__all__ = ["check_needs", "check_needs_score", "needs_size_faults", "needs_study"]

LEAST_POINTS = 16

MOST_POINTS = 2**16

UNITS = {
    "link_cog_mm": "mm", "torque_bias_percent": "% of the torque limit", "encoder_offset_deg": "deg",
    "delay_ms": "ms", "base_tilt_deg": "deg", "identification": "times its standard deviations",
}  # fmt: skip
"""The units of spreads that shift; those of the other sources but the payload are factors, in %."""


def check_needs(
    needs: NeedsKeys | None,
    rows: Sequence[str],
    variants: Mapping[str, str],
    mismatch: Mismatch,
    tolerance: Tolerance | None,
    findings: Findings,
) -> None:
    """Check that there are such laws, a mismatch to ask about, and a tolerance to be kept."""
    if needs is None:
        return
    check_law_names(("needs", "law"), needs.law, rows, variants, findings)
    if not spreading(mismatch) and findings.clean("mismatch"):
        findings.fault(("needs",), "needs a mismatch", "a source with a spread under mismatch")
    if tolerance is None and findings.clean("tolerance") and findings.clean("motions"):
        findings.fault(("needs",), "needs a tolerance to be kept", "a limit under tolerance")


def check_needs_score(
    needs: NeedsKeys | None, motions: Mapping[str, Motion], arm: Arm, findings: Findings
) -> None:
    """Check that the score is one of the arm, and that its motions have it."""
    if needs is None or needs.score is None:
        return
    place, info = ("needs", "score"), score_info(needs.score)
    base, _, joint = needs.score.partition(".")
    if info is None or (joint and joint not in arm.joints):
        known = [name for name, each in SCORES.items() if not each.host]
        known += [f"{base}.{name}" for name in arm.joints if base in SCORES and SCORES[base].per_joint]
        near = nearest(needs.score, known)
        expected = "" if near else f"one of {', '.join(known)}"
        findings.fault(place, f"'{needs.score}' is not a score", expected, near)
    elif info.host:
        findings.fault(place, "tells about this computer, not about the arm", "a score of the arm")
    elif motions and findings.clean("motions"):
        probe = Findings(findings.document)
        check_applies(Tolerance({needs.score: 1.0}), motions, arm, probe)
        for fault in probe.faults:
            findings.fault(place, fault.problem, fault.expected)


def needs_study(
    needs: NeedsKeys | None, sheets: Sequence[Sheet], variants: Mapping[str, str], tolerance: Tolerance | None
) -> NeedsStudy | None:
    """Return the study that is declared, if one is: its laws in every sheet in which they are possible.

    Its design has the largest power of 2 of rows that ``runs`` allow, LEAST_POINTS at least.
    """
    if needs is None or tolerance is None:
        return None
    subjects: list[Subject] = []
    base: dict[tuple[str, str, str], Run] = {}
    for sheet in sheets:
        groups = tuple(_groups(sheet, needs.per_link))
        for law in sheet.laws:
            if is_named(needs.law, law, variants):
                subjects.append(Subject(sheet.name, law, tuple(sheet.motions), groups))
                base |= {(sheet.name, law, motion): bare_run(sheet, law, motion) for motion in sheet.motions}
    design = NeedsDesign(
        score=needs.score or main_score(tolerance.limited),
        level=needs.level,
        points=LEAST_POINTS,
        draws=search_draws(tolerance.required_share),
        required_share=tolerance.required_share,
        subjects=tuple(subjects),
    )
    return NeedsStudy(_sized(design, needs.runs), base, tolerance, sheets[0].first.seed)


def needs_size_faults(
    document: Document, needs: NeedsKeys | None, study: NeedsStudy | None
) -> Iterator[Fault]:
    """Yield a fault if the runs that are allowed are too few for the smallest design."""
    if needs is not None and needs.runs is not None and study is not None and study.most_runs > needs.runs:
        problem = f"{needs.runs} runs are too few for so many laws, sheets, motions and sources"
        yield document.fault(("needs", "runs"), problem, f"at least {study.most_runs}")


def _sized(design: NeedsDesign, runs: int | None) -> NeedsDesign:
    if runs is None:
        return replace(design, points=POINTS)
    while design.points < MOST_POINTS:
        larger = replace(design, points=2 * design.points)
        if larger.share_runs + larger.most_search_runs > runs:
            break
        design = larger
    return design


def _groups(sheet: Sheet, per_link: bool) -> Iterator[Group]:
    """Yield the groups of parameters: the sources, or their links and joints one by one."""
    arm, mismatch = sheet.first.arm.arm(), sheet.first.mismatch
    for source in spreading(mismatch):
        spread = getattr(mismatch, source)
        shared = isinstance(spread, Spread) and spread.shared
        names = names_of(arm, mismatch, source)
        if not per_link or shared or not isinstance(spread, Spread):
            yield Group(NAMES[source], source, "", names, _declared(source, spread))
            continue
        for part, value in zip(_parts(names), spread.of(_parts(names)).tolist(), strict=True):
            own = tuple(name for name in names if name.split(".")[1] == part)
            if value:
                stated = {"grows": _grows(source), "unit": UNITS.get(source, "%"), "values": {part: value}}
                yield Group(f"{NAMES[source]} of {part}", source, part, own, stated)


def _parts(names: Sequence[str]) -> tuple[str, ...]:
    """Return the links or joints that the parameters belong to."""
    return tuple(dict.fromkeys(name.split(".")[1] for name in names))


def _grows(source: str) -> str:
    return SHIFT if source in UNITS else FACTOR


def _declared(source: str, spread: Spread | Payload | Knowledge | float) -> dict[str, Any]:
    """Return what is declared of a source, see spread_at."""
    if isinstance(spread, Payload):
        values = {name: getattr(spread, name) for name in ("believed_kg", "least_kg", "most_kg", "cog_mm")}
        return {"grows": LOAD, "unit": "kg", "values": values}
    if isinstance(spread, Spread):
        values = {"all": spread.all, **dict(spread.each)}
    else:
        values = {"all": 1.0 if isinstance(spread, Knowledge) else float(spread)}
    values = {name: value for name, value in values.items() if value}
    return {"grows": _grows(source), "unit": UNITS.get(source, "%"), "values": values}

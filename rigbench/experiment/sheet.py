"""One sheet of an experiment: the cross-check of all that parsed, and what it makes."""

from __future__ import annotations

import math
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from rigbench.arm.arm import Arm
from rigbench.errors import Fault
from rigbench.experiment.arms import arms_of, note_free_gears
from rigbench.experiment.combinations import Combination
from rigbench.experiment.expand import Sheet, conditions_of, spreading
from rigbench.experiment.find_level import check_find_level, check_stop_early
from rigbench.experiment.findings import Findings
from rigbench.experiment.laws import is_whole, law_choices
from rigbench.experiment.meeting import sensing_of, timing_of
from rigbench.experiment.mismatch import cases_of, check_conditions, mismatch_of
from rigbench.experiment.motions import check_without_arm, motions_of
from rigbench.experiment.needs import check_needs, check_needs_score
from rigbench.experiment.positions import check_start, joint_list
from rigbench.experiment.scenes import scene_choice
from rigbench.experiment.schema import ExperimentKeys, RatesKeys
from rigbench.experiment.tolerance import SETTLE_BAND_MM, check_applies, tolerance_of
from rigbench.experiment.tune import check_tune, check_tune_scores
from rigbench.experiment.vary import Axis
from rigbench.experiment.worst_case import check_worst_case
from rigbench.rig.run import Rates, Run
from rigbench.scores.results import Tolerance
from rigbench.yamlfile import partial

__all__ = ["Checked", "check_sheet"]

FORMAT = 1
"""Version of the experiment file's format."""

REQUIRED = ("rigbench", "arm", "motions", "laws")


@dataclass(frozen=True, eq=False)
class Checked:
    """What came of checking a combination: the sheet, if nothing stands in its way, and what was found.

    ``keys`` None: the file is none.
    """

    combination: Combination
    findings: Findings
    keys: ExperimentKeys | None
    arm: Arm | None = None
    sheet: Sheet | None = None
    tolerance: Tolerance | None = None


def check_sheet(combination: Combination, axes: tuple[Axis, ...], folder: Path) -> Checked:
    """Check a combination of the sweep over ``axes``; paths in the file are relative to ``folder``."""
    document = combination.document
    keys, faults = partial(document, ExperimentKeys)
    findings = Findings(document, faults)
    if keys is None:
        return Checked(combination, findings, None)
    _check_names(keys, findings)
    arms = arms_of(keys.arm, keys.model, keys.drives, findings, folder)
    arm = None if arms is None else arms.arm
    rates = _rates_of(keys.rates, findings)
    timing = None if rates is None else timing_of(keys.timing, rates, findings)
    control_hz = keys.rates.control_hz if findings.clean("rates", "control_hz") else None
    laws = law_choices(keys.laws or {}, findings, folder, None if arm is None else arm.n, control_hz)
    mismatch = mismatch_of(keys.mismatch, arm, findings, folder)
    check_conditions(keys.conditions, spreading(mismatch), findings)
    cases = cases_of(keys.conditions, mismatch, arm, findings)
    tolerance, bands = tolerance_of(keys, arm, findings)
    check_find_level(keys, mismatch, tolerance, findings)
    check_stop_early(keys, tolerance, findings)
    check_needs(keys.needs, tuple(keys.laws or ()), combination.variants, mismatch, tolerance, findings)
    check_worst_case(keys, combination.variants, mismatch, tolerance, findings)
    check_tune(keys, laws, combination.variants, axes, findings)
    if arm is None or arms is None:
        check_without_arm(keys.motions or {}, findings, folder)
        scene_choice(keys.scene, None, findings, folder)
        return Checked(combination, findings, keys)
    gain_pose = joint_list("gain_pose_deg", keys.gain_pose_deg, arm, findings)
    motions = motions_of(keys.motions or {}, findings, folder, arm, control_hz or 1000.0, gain_pose)
    if tolerance is not None and motions and findings.clean("motions"):
        check_applies(tolerance, motions, arm, findings)
    check_needs_score(keys.needs, motions, arm, findings)
    check_tune_scores(keys, motions, arm, findings)
    start_offset = joint_list("start_offset_deg", keys.start_offset_deg, arm, findings)
    if start_offset is not None:
        check_start(start_offset, motions, arm, findings)
    for axis in axes:
        if axis.path[0] == "drives" and axis.path[2:] == ("gear_ratio",):
            note_free_gears(axis.path, arms.files, findings)
    sensing = sensing_of(keys.sensing, arm, findings)
    scene = scene_choice(keys.scene, arms.files, findings, folder)
    checked = Checked(combination, findings, keys, arm, None, tolerance)
    if findings.faults or rates is None or timing is None or not laws or not motions:
        return checked
    law, motion = next(iter(laws.values())), next(iter(motions.values()))
    x, y, z = keys.gravity_m_s2
    about_x, about_y = map(math.radians, keys.base_tilt_deg)
    first = Run(
        arm=arms.files,
        law=law,
        motion=motion,
        rates=rates,
        gain_pose=gain_pose or tuple(motion.reference(np.zeros(1))[0][0].tolist()),
        settle_band_mm=bands.get("", SETTLE_BAND_MM),
        seed=keys.seed,
        model=arms.believed,
        mismatch=mismatch,
        start_offset=start_offset or (),
        gravity=(x, y, z),
        sensing=sensing,
        timing=timing,
        base_tilt=(about_x, about_y),
        scene=scene,
    )
    sheet = Sheet(
        name=combination.name,
        first=first,
        laws=laws,
        motions=motions,
        conditions=conditions_of(spreading(mismatch), keys.conditions, cases, first.noisy),
        settle_bands_mm={name: bands.get(name, first.settle_band_mm) for name in motions},
    )
    return Checked(combination, findings, keys, arm, sheet, tolerance)


def _check_names(keys: ExperimentKeys, findings: Findings) -> None:
    """Check that what is required is there, the format's version, and that the user's names fit a line."""
    for key in REQUIRED:
        if getattr(keys, key) is not None or not findings.clean(key):
            continue
        if key in findings.document.data:
            findings.fault((key,), "is empty", "a value")
        else:
            findings.take([Fault(findings.document.file, None, key, "missing")])
    if keys.rigbench not in (None, FORMAT):
        findings.fault(("rigbench",), f"{keys.rigbench} is not a version that is read here", str(FORMAT))
    for section in ("motions", "laws"):
        for name in getattr(keys, section) or {}:
            if not name or name != " ".join(name.split()):
                problem = f"the name '{name}' is empty or has odd blanks in it"
                findings.fault((section, name), problem, "words with single blanks between them")


def _rates_of(keys: RatesKeys, findings: Findings) -> Rates | None:
    """Return the rates; None where they are at fault."""
    if not findings.clean("rates"):
        return None
    physics_hz = 2.0 * keys.control_hz if keys.physics_hz is None else keys.physics_hz
    if not is_whole(physics_hz / keys.control_hz):
        problem = f"{physics_hz:g} is not a whole multiple of control_hz, {keys.control_hz:g}"
        findings.clash(("rates", "physics_hz"), problem, "1, 2, 3 ... times control_hz")
        return None
    return Rates(keys.control_hz, physics_hz)

"""The mismatch of an experiment and its conditions, held against the arm's links and joints."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from pathlib import Path

import numpy as np

from rigbench.arm.arm import Arm
from rigbench.arm.mismatch import Case, Knowledge, Mismatch, Payload, Spread, carriers, unknown_names
from rigbench.errors import InputFaults
from rigbench.experiment.condition_keys import CaseKeys, ConditionsKeys, StatedKeys
from rigbench.experiment.expand import NAMES, nominal_and_levels, spreading
from rigbench.experiment.findings import Findings, unreadable
from rigbench.experiment.mismatch_keys import MismatchKeys, SpreadKeys
from rigbench.yamlfile import KeyPath

__all__ = ["cases_of", "check_conditions", "mismatch_of"]

MOST_LEVEL = 100.0

IDLE = {
    "coulomb_percent": ("static", 0.0, "no drive has Coulomb friction"),
    "viscous_percent": ("viscous", 0.0, "no drive has viscous friction"),
    "rotor_inertia_percent": ("rotor_inertia", 0.0, "no drive has rotor inertia"),
    "torque_bias_percent": ("torque_limit", np.inf, "no drive has a torque limit"),
    "stiffness_percent": ("stiffness", np.inf, "every transmission is rigid"),
}
"""Sources without effect where an array of the drives has this value for all joints, and what that means."""


def mismatch_of(
    keys: MismatchKeys,
    arm: Arm | None,
    findings: Findings,
    folder: Path,
    place: KeyPath = ("mismatch",),
) -> Mismatch:
    """Return the mismatch that stands at ``place`` of the file; what of it is at fault is left out.

    Paths are relative to ``folder``.
    """
    given: dict[str, Spread | Payload | Knowledge | float | None] = {
        "payload": _payload(keys, findings, (*place, "payload"))
    }
    if keys.identification is not None and arm is not None and findings.clean(*place, "from"):
        given["identification"] = _identification(
            folder, keys.identification, arm, findings, (*place, "from")
        )
    for source in MismatchKeys.model_fields:
        value = getattr(keys, source)
        if source in given or value is None or source == "identification":
            continue
        path: KeyPath = (*place, source)
        if isinstance(value, SpreadKeys):
            _check_names(path, source, value.__pydantic_extra__ or {}, arm, findings)
            if not any((value.all, *(value.__pydantic_extra__ or {}).values())) and findings.clean(*path):
                findings.fault(path, "spreads nothing", "a number above 0 for all, or for one by its name")
        if findings.clean(*path):
            given[source] = Spread.declared(value.model_dump()) if isinstance(value, SpreadKeys) else value
            _note_idle(path, source, arm, findings)
    return Mismatch(**given)  # type: ignore[arg-type]  # each by its own name


def _payload(keys: MismatchKeys, findings: Findings, path: KeyPath) -> Payload | None:
    if keys.payload is None or not findings.clean(*path):
        return None
    given = keys.payload
    if given.least_kg > given.most_kg:
        problem = f"{given.least_kg:g} is above most_kg"
        findings.fault((*path, "least_kg"), problem, f"at most {given.most_kg:g}")
    elif not given.least_kg <= given.believed_kg <= given.most_kg:
        problem = f"{given.believed_kg:g} is not between least_kg and most_kg"
        findings.fault((*path, "believed_kg"), problem, f"{given.least_kg:g} to {given.most_kg:g}")
    else:
        return Payload(given.believed_kg, given.least_kg, given.most_kg, given.cog_mm)
    return None


def _identification(folder: Path, name: str, arm: Arm, findings: Findings, path: KeyPath) -> Knowledge | None:
    """Return what an identification left unknown; faults of its file go to ``findings``."""
    from rigbench.identify.covariance_file import read_knowledge  # slow to import

    if (problem := unreadable(folder / name)) is not None:
        findings.fault(path, f"'{name}' {problem}", f"a covariance file, relative to {folder}")
        return None
    try:
        knowledge, same = read_knowledge(folder / name, arm)
    except InputFaults as error:
        findings.take(error.faults)  # and one here, so that nothing else misses a mismatch
        findings.fault(path, f"'{name}' is at fault", "a covariance file in order")
        return None
    if not same:
        findings.note(path, "is of other parameters than the arm's: its errors are put about the arm's own")
    return knowledge


def _check_names(
    path: KeyPath, source: str, names: Iterable[str], arm: Arm | None, findings: Findings
) -> None:
    """Add a fault for each name that is none of the arm's links, or joints where the source is theirs."""
    if arm is None:
        return
    valid = carriers(arm, source)
    what = "link" if valid == arm.links else "joint"
    for name, near in unknown_names(arm, source, names):
        expected = "" if near else f"all, or one of {', '.join(valid)}"
        findings.fault((*path, name), f"the arm has no {what} '{name}'", expected, near)


def _note_idle(path: KeyPath, source: str, arm: Arm | None, findings: Findings) -> None:
    """Note a source, or a case's key, that acts on nothing in this arm."""
    if arm is not None and source in IDLE:
        array, nothing, why = IDLE[source]
        if np.all(getattr(arm.drives, array) == nothing):
            findings.note(path, f"has no effect: {why}")


def check_conditions(keys: ConditionsKeys, sources: tuple[str, ...], findings: Findings) -> None:
    """Check that the levels rise and that there is something for the conditions to vary."""
    together = keys.together or []
    for i, level in enumerate(together):
        path: KeyPath = ("conditions", "together", i)
        if level == 0:
            findings.fault(path, "level 0 is the column 'nominal', which is always there", "above 0")
        elif not 0 < level <= MOST_LEVEL:
            findings.fault(path, f"{level:g} is out of range", f"above 0, at most {MOST_LEVEL:g}")
        elif i and level <= together[i - 1]:
            findings.fault(path, f"{level:g} after {together[i - 1]:g}", "levels that rise, each once")
    if sources or not findings.clean("mismatch"):
        return
    need: list[KeyPath] = [
        ("conditions", key) for key in ("each_alone", "together") if getattr(keys, key) is not None
    ]
    need += [
        ("conditions", "cases", name, "level") for name, case in (keys.cases or {}).items() if case.level
    ]
    for path in need:
        findings.fault(path, "needs a mismatch", "a source with a spread under mismatch")


def cases_of(
    keys: ConditionsKeys, mismatch: Mismatch, arm: Arm | None, findings: Findings
) -> dict[str, Case]:
    """Return the cases by name; what is not in order goes to ``findings``."""
    alone = () if keys.each_alone is None else spreading(mismatch)
    taken = [*(NAMES[source] for source in alone), *nominal_and_levels(keys)]
    cases = {}
    for name, case in (keys.cases or {}).items():
        path: KeyPath = ("conditions", "cases", name)
        if not name or name != " ".join(name.split()):
            findings.fault(
                path, f"the name '{name}' is empty or has odd blanks in it", "words with single blanks"
            )
        elif name in taken:
            findings.fault(path, f"'{name}' is the name of another condition", "another name")
        _check_case(path, case, mismatch, arm, findings)
        if findings.clean(*path):
            cases[name] = _case(case)
    return cases


def _check_case(
    path: KeyPath, keys: CaseKeys, mismatch: Mismatch, arm: Arm | None, findings: Findings
) -> None:
    stated = [key for key in CaseKeys.model_fields if key != "level" and getattr(keys, key) is not None]
    if not stated and findings.clean(*path):
        findings.fault(path, "states nothing", "a departure of the plant, such as payload_kg")
    for key in stated:
        value, here = getattr(keys, key), (*path, key)
        if isinstance(value, StatedKeys):
            _check_names(here, key, value.__pydantic_extra__ or {}, arm, findings)
            if not any((value.all, *(value.__pydantic_extra__ or {}).values())) and findings.clean(*here):
                findings.fault(here, "states nothing", "a number for all, or for one by its name")
        elif key == "link_cog_mm":
            _check_names(here, key, value, arm, findings)
        _note_idle(here, key, arm, findings)
    without = keys.payload_kg is None and (mismatch.payload is None or mismatch.payload.most_kg == 0)
    if "payload_cog_mm" in stated and (keys.payload_kg == 0 or without) and findings.clean("mismatch"):
        findings.note((*path, "payload_cog_mm"), "has no effect: there is no payload")


def _case(keys: CaseKeys) -> Case:
    """Return what the keys of a case state."""

    def spread(given: float | StatedKeys | None) -> Spread | None:
        if given is None:
            return None
        return Spread.declared(given.model_dump() if isinstance(given, StatedKeys) else given)

    shifts: Mapping[str, list[float]] = keys.link_cog_mm or {}
    tilt = keys.base_tilt_deg
    return Case(
        payload_kg=keys.payload_kg,
        payload_cog_mm=None if keys.payload_cog_mm is None else _triple(keys.payload_cog_mm),
        link_mass_percent=spread(keys.link_mass_percent),
        link_cog_mm=tuple((link, _triple(shift)) for link, shift in shifts.items()),
        link_inertia_percent=spread(keys.link_inertia_percent),
        coulomb_percent=spread(keys.coulomb_percent),
        viscous_percent=spread(keys.viscous_percent),
        rotor_inertia_percent=spread(keys.rotor_inertia_percent),
        torque_constant_percent=spread(keys.torque_constant_percent),
        torque_bias_percent=spread(keys.torque_bias_percent),
        encoder_offset_deg=spread(keys.encoder_offset_deg),
        stiffness_percent=spread(keys.stiffness_percent),
        delay_ms=keys.delay_ms,
        base_tilt_deg=None if tilt is None else (tilt[0], tilt[1]),
    )


def _triple(values: list[float]) -> tuple[float, float, float]:
    x, y, z = values
    return x, y, z

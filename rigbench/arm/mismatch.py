"""The mismatch: the stated ways in which the plant departs from the model.

Each source names its parameters, and each parameter of each link and joint has its own factor u,
uniform in [-1, 1), from its own stream (see ``draws``). At a level L a percent source multiplies by
(1 + spread)^(L u): positive whatever L, and symmetric in the logarithm. A case comes on top of the draw.

What an identification left unknown goes first; all else is on top of that. Links change in this order:
mass, centre of gravity, principal second moments of mass, payload. Two sources are no part of the arm: the
delay between law and torque, and the tilt of the base.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping
from dataclasses import replace

import numpy as np

from rigbench.arm.arm import Arm, Floats
from rigbench.arm.case import Case
from rigbench.arm.departures import drives, links, loaded, with_payload
from rigbench.arm.draws import draw_values, exponents_of, factors_of, names_of, parameter_names, uniform
from rigbench.arm.knowledge import Knowledge, known_arm
from rigbench.arm.physical import impossible, possible
from rigbench.arm.sources import Mismatch, Payload
from rigbench.arm.spread import Spread, carriers, unknown_names
from rigbench.errors import InputFaults

__all__ = [
    "Case",
    "Knowledge",
    "Mismatch",
    "Payload",
    "Spread",
    "believed",
    "carriers",
    "delay_of",
    "draw_values",
    "names_of",
    "parameter_names",
    "plant",
    "tilt_of",
    "uniform",
    "unknown_names",
]

NOTHING = Case()

MUST_BE_FINITE = (
    "coulomb",
    "static",
    "viscous",
    "rotor_inertia",
    "torque_gain",
    "torque_bias",
    "encoder_offset",
)


def believed(arm: Arm, mismatch: Mismatch) -> Arm:
    """Return the arm with the believed payload as a point mass at the tool point: the model."""
    mass = mismatch.believed_kg
    return arm if mass == 0 else arm.replaced(loaded(arm, arm.parameters, mass, np.zeros(3)))


def plant(
    arm: Arm,
    mismatch: Mismatch,
    level: float,
    sources: Iterable[str],
    seed: int,
    draw: int | None,
    case: Case | None = None,
    directions: Mapping[str, float] | None = None,
) -> Arm:
    """Return the arm as the given draw has it when ``sources`` act at ``level``, and ``case`` on top.

    ``directions`` give each parameter's u in [-1, 1] in place of the draw's.

    At level 0, and without sources, nothing is random: it is the model of :func:`believed`, bit for
    bit, or that with what the case states. InputFaults if the outcome could not exist, naming the
    source (``mismatch.<source>``) or else the case's key (``case.<key>``) that made it so; ValueError
    if the level is negative or not finite, if a source is not declared, if a spread names a link or
    joint that the arm lacks, if something is random and ``draw`` is None, or if ``directions`` lack a
    parameter that acts.
    """
    if not 0 <= level < math.inf:
        raise ValueError(f"a level is finite and not below 0, not {level}")
    active = mismatch.active(sources) if level > 0 else ()
    exponents = exponents_of(arm, mismatch, level, active, factors_of(seed, draw, directions))
    case = NOTHING if case is None else case
    built = _built(arm, mismatch, exponents, case)
    if _flaw(built) is not None:
        raise _fault(arm, mismatch, exponents, case)
    return built


def delay_of(
    declared_ms: float,
    mismatch: Mismatch,
    level: float,
    sources: Iterable[str],
    seed: int,
    draw: int | None,
    case: Case | None = None,
    directions: Mapping[str, float] | None = None,
) -> float:
    """Return the plant's delay from tick to torque [ms]: declared + level u spread, but never below 0.

    The rest as in :func:`plant`. What a case states is the whole delay.
    """
    if case is not None and case.delay_ms is not None:
        return case.delay_ms
    if mismatch.delay_ms is None or "delay_ms" not in mismatch.active(sources) or level == 0:
        return declared_ms
    return max(declared_ms + level * mismatch.delay_ms * factors_of(seed, draw, directions)("delay_ms"), 0.0)


def tilt_of(
    declared: tuple[float, float],
    mismatch: Mismatch,
    level: float,
    sources: Iterable[str],
    seed: int,
    draw: int | None,
    case: Case | None = None,
    directions: Mapping[str, float] | None = None,
) -> tuple[float, float]:
    """Return the tilt of the plant's base [rad] about its x and y axes: declared + level u spread of each.

    The rest as in :func:`plant`. What a case states is the whole tilt.
    """
    if case is not None and case.base_tilt_deg is not None:
        x, y = case.base_tilt_deg
        return math.radians(x), math.radians(y)
    if mismatch.base_tilt_deg is None or "base_tilt_deg" not in mismatch.active(sources) or level == 0:
        return declared
    reach = level * math.radians(mismatch.base_tilt_deg)
    u, w = (factors_of(seed, draw, directions)(f"base_tilt_deg.{axis}") for axis in "xy")
    return declared[0] + reach * u, declared[1] + reach * w


def _built(arm: Arm, mismatch: Mismatch, exponents: Mapping[str, Floats], case: Case) -> Arm:
    """Build the plant from level times u of every parameter, by source, and the case."""
    if not exponents and not case.keys:
        return believed(arm, mismatch)
    if mismatch.identification is not None and "identification" in exponents:
        arm = known_arm(arm, mismatch.identification, exponents["identification"])
    with np.errstate(over="ignore", invalid="ignore"):
        changed = links(arm, mismatch, exponents, case)
        parameters = with_payload(arm, mismatch, exponents, case, changed)
        return arm.replaced(parameters, replace(arm.drives, **drives(arm, mismatch, exponents, case)))


def _flaw(arm: Arm) -> str | None:
    """Say what of an arm could not exist, or return None."""
    if not possible(arm.parameters):
        for link, parameters in zip(arm.links, arm.parameters, strict=True):
            if (why := impossible(parameters)) is not None:
                return f"link '{link}' can't exist: {why}"
    for name in MUST_BE_FINITE:
        if not np.isfinite(getattr(arm.drives, name)).all():
            return f"{name.replace('_', ' ')} is not finite"
    return None


def _fault(arm: Arm, mismatch: Mismatch, exponents: Mapping[str, Floats], case: Case) -> InputFaults:
    """Name the first source, in order, or else the first key of the case, that makes the plant impossible."""
    drawn: dict[str, Floats] = {}
    flaw = _flaw(_built(arm, mismatch, drawn, NOTHING))
    if flaw is not None:
        return InputFaults.one(arm.name, "", flaw, "an arm that can exist before any mismatch")
    for source, exponent in exponents.items():
        drawn[source] = exponent
        flaw = _flaw(_built(arm, mismatch, drawn, NOTHING))
        if flaw is not None:
            key = "from" if source == "identification" else source
            return InputFaults.one(arm.name, f"mismatch.{key}", flaw, "less spread or level")
    stated = NOTHING
    for key in case.keys:
        stated = replace(stated, **{key: getattr(case, key)})
        flaw = _flaw(_built(arm, mismatch, drawn, stated))
        if flaw is not None:
            return InputFaults.one(arm.name, f"case.{key}", flaw, "a case that can exist")
    raise AssertionError("a plant that is impossible has a first source or key that made it so")

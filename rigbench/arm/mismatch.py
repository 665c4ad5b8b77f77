"""The mismatch: the stated ways in which the plant departs from the model.

Each source names its parameters, and each parameter of each link and joint has its own factor u,
uniform in [-1, 1), from its own stream (see ``draws``). At a level L a percent source multiplies by
(1 + spread)^(L u): positive whatever L, and symmetric in the logarithm. A case comes on top of the draw.

Links change in this order: mass, centre of gravity, principal second moments of mass, payload.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping
from dataclasses import replace

import numpy as np

from rigbench.arm.arm import Arm, Floats
from rigbench.arm.case import Case
from rigbench.arm.departures import friction, links, loaded, with_payload
from rigbench.arm.draws import draw_values, exponents_of, parameter_names, uniform
from rigbench.arm.physical import impossible, possible
from rigbench.arm.sources import Mismatch, Payload
from rigbench.arm.spread import Spread, carriers, unknown_names
from rigbench.errors import InputFaults

__all__ = [
    "Case",
    "Mismatch",
    "Payload",
    "Spread",
    "believed",
    "carriers",
    "draw_values",
    "parameter_names",
    "plant",
    "uniform",
    "unknown_in",
    "unknown_names",
]

NOTHING = Case()


def unknown_in(arm: Arm, declared: Mismatch | Case) -> tuple[tuple[str, str, str | None], ...]:
    """Return what ``declared`` names that the arm lacks: (key, name, nearest name or None), in order."""
    found: list[tuple[str, str, str | None]] = []
    for key in declared.sources if isinstance(declared, Mismatch) else declared.keys:
        value = getattr(declared, key)
        named = value.each if isinstance(value, Spread) else value if key == "link_cog_mm" else ()
        found += [(key, *unknown) for unknown in unknown_names(arm, key, (name for name, _ in named))]
    return tuple(found)


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
) -> Arm:
    """Return the arm as the given draw has it when ``sources`` act at ``level``, and ``case`` on top.

    At level 0, and without sources, nothing is random: it is the model of :func:`believed`, bit for
    bit, or that with what the case states. InputFaults if the outcome could not exist, naming the
    source (``mismatch.<source>``) or else the case's key (``case.<key>``) that made it so; ValueError
    if the level is negative or not finite, if a source is not declared, if a spread names a link or
    joint that the arm lacks, or if something is random and ``draw`` is None.
    """
    if not 0 <= level < math.inf:
        raise ValueError(f"a level is finite and not below 0, not {level}")
    active = mismatch.active(sources) if level > 0 else ()
    if active and draw is None:
        raise ValueError("a plant of random sources needs the number of a draw")
    exponents = exponents_of(arm, mismatch, level, active, seed, draw or 0)
    case = NOTHING if case is None else case
    built = _built(arm, mismatch, exponents, case)
    if _flaw(built) is not None:
        raise _fault(arm, mismatch, exponents, case)
    return built


def _built(arm: Arm, mismatch: Mismatch, exponents: Mapping[str, Floats], case: Case) -> Arm:
    """Build the plant from level times u of every parameter, by source, and the case."""
    if not exponents and not case.keys:
        return believed(arm, mismatch)
    with np.errstate(over="ignore", invalid="ignore"):
        changed = links(arm, mismatch, exponents, case)
        parameters = with_payload(arm, mismatch, exponents, case, changed)
        return arm.replaced(parameters, replace(arm.drives, **friction(arm, mismatch, exponents, case)))


def _flaw(arm: Arm) -> str | None:
    """Say what of an arm could not exist, or return None."""
    if not possible(arm.parameters):
        for link, parameters in zip(arm.links, arm.parameters, strict=True):
            if (why := impossible(parameters)) is not None:
                return f"link '{link}' can't exist: {why}"
    drives = arm.drives
    for name in ("coulomb", "static", "viscous", "rotor_inertia"):
        if not np.isfinite(getattr(drives, name)).all():
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
            return InputFaults.one(arm.name, f"mismatch.{source}", flaw, "less spread or level")
    stated = NOTHING
    for key in case.keys:
        stated = replace(stated, **{key: getattr(case, key)})
        flaw = _flaw(_built(arm, mismatch, drawn, stated))
        if flaw is not None:
            return InputFaults.one(arm.name, f"case.{key}", flaw, "a case that can exist")
    raise AssertionError("a plant that is impossible has a first source or key that made it so")

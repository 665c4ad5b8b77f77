"""The parameters that were drawn for a run, in words, those that depart most first."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np

from rigbench.arm.arm import PRISMATIC, Arm
from rigbench.arm.knowledge import deviations
from rigbench.arm.mismatch import Knowledge, Mismatch, Payload, Spread, carriers
from rigbench.arm.spread import WHOLE_SOURCES
from rigbench.rig.run import Run

__all__ = ["Drawn", "case_words", "drawn_of", "parameter_words"]

UNITS = {"percent": "%", "mm": "mm", "deg": "deg", "ms": "ms", "kg": "kg"}
"""Units as the names of sources end, and as they are written."""

ADDED_PERCENT = ("torque_bias_percent",)
"""Sources in percent that add, where the others multiply by (1 + spread)^(level u)."""

REPLACED_BY = {
    "payload.mass": "payload_kg",
    "payload.cog": "payload_cog_mm",
    "delay_ms": "delay_ms",
    "base_tilt_deg": "base_tilt_deg",
}
"""Beginnings of the names of parameters that a case states whole, and the case's key that does."""

WITH_ENDINGS = ("link_cog_mm", "link_inertia_percent")
"""Sources with several parameters a link, whose names end in an axis or a number."""


@dataclass(frozen=True)
class Drawn:
    """One parameter: its name, how it is called, its factor u in [-1, 1), and what that makes of it."""

    name: str
    words: str
    u: float
    amount: str


def drawn_of(run: Run) -> tuple[Drawn, ...]:
    """Return the parameters that are random in a run, the largest abs(u) first.

    Without those whose spread is 0 and those in whose place the run's case states a value.
    """
    arm = run.arm.arm()
    found = [
        Drawn(name, parameter_words(name), u, amount)
        for name, u in run.factors().items()
        if not _is_replaced(run, name) and (amount := _amount(run, arm, name, u)) is not None
    ]
    return tuple(sorted(found, key=lambda one: -abs(one.u)))


def _is_replaced(run: Run, name: str) -> bool:
    stated = () if run.case is None else run.case.keys
    return any(name.startswith(beginning) and key in stated for beginning, key in REPLACED_BY.items())


def case_words(run: Run) -> str:
    """Say what the run's case states, '' if it has none: 'payload_kg 3, viscous_percent 60'."""
    stated = {} if run.case is None else run.case.inputs()
    return ", ".join(f"{key} {words}" for key, value in stated.items() for words in _stated(value))


def _stated(value: object) -> Iterator[str]:
    """Yield the parts of a case's value: one number, or what it says of each link or joint."""
    if isinstance(value, dict):
        for name, inner in value.items():
            if name == "each":
                yield from _stated(inner)
            elif name != "shared" and not (name == "all" and inner == 0):
                yield f"{next(_stated(inner))} ({name})"
    elif isinstance(value, list):
        yield " ".join(f"{item:g}" for item in value)
    else:
        yield f"{value:g}"


def parameter_words(name: str) -> str:
    """Return 'coulomb, j3' for coulomb_percent.j3, 'link cog x, wrist' for link_cog_mm.wrist.x."""
    source, _, rest = name.partition(".")
    words = source.removesuffix(f"_{source.rpartition('_')[2]}") if _unit(source) else source
    words = words.replace("_", " ")
    if source in WITH_ENDINGS:
        rest, _, end = rest.rpartition(".")
        return f"{words} {end}, {rest}"
    return f"{words} {rest.replace('.', ' ')}" if source in WHOLE_SOURCES else f"{words}, {rest}"


def _unit(source: str) -> str:
    return UNITS.get(source.rpartition("_")[2], "")


def _amount(run: Run, arm: Arm, name: str, u: float) -> str | None:
    """Say what u makes of a parameter at the run's level; None if its spread is 0."""
    source, _, rest = name.partition(".")
    declared, unit = getattr(run.mismatch, source), _unit(source)
    if isinstance(declared, Knowledge):
        return f"{run.level * deviations(np.array(u)):+.2g} sd"
    if isinstance(declared, Payload):
        return _payload(run, arm, declared, rest, u)
    if not isinstance(declared, Spread):
        return None if declared == 0 else f"{run.level * u * declared:+.2g} {unit}"
    names = carriers(arm, source)
    spread = declared.of(names)
    if not declared.shared:
        part = rest.rpartition(".")[0] if source in WITH_ENDINGS else rest
        spread = spread[[names.index(part)]]
        unit = "mm" if unit == "deg" and arm.kinds[names.index(part)] == PRISMATIC else unit
    spread = spread[spread != 0]
    if not spread.size:
        return None
    multiplies = source.endswith("_percent") and source not in ADDED_PERCENT
    exponent = run.level * u
    departs = 100 * ((1 + spread / 100) ** exponent - 1) if multiplies else exponent * spread
    ends = dict.fromkeys(f"{end:+.2g}" for end in (departs.min(), departs.max()))
    return f"{' to '.join(ends)} {unit}"


def _payload(run: Run, arm: Arm, payload: Payload, rest: str, u: float) -> str | None:
    if rest != "mass":
        return None if payload.cog_mm == 0 else f"{run.level * u * payload.cog_mm:+.2g} mm"
    if payload.least_kg == payload.most_kg:
        return None
    alone = replace(run, mismatch=Mismatch(payload=payload), sources=("payload",), case=None).plant()
    return f"{np.sum(alone.parameters[:, 0] - arm.parameters[:, 0]):.3g} kg"

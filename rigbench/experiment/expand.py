"""From a sheet to its runs: the columns of the matrix, and every run of the sheet."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace

from rigbench.arm.mismatch import Case, Mismatch
from rigbench.campaign.plan import Entry
from rigbench.experiment.condition_keys import ConditionsKeys
from rigbench.laws.registry import LawChoice
from rigbench.motion.motion import Motion
from rigbench.rig.run import Run
from rigbench.scores.results import Column, level_name

__all__ = [
    "NAMES",
    "Condition",
    "Sheet",
    "bare_run",
    "conditions_of",
    "entries_of",
    "nominal_and_levels",
    "spreading",
]

NAMES = {
    "link_mass_percent": "link mass",
    "link_cog_mm": "link cog",
    "link_inertia_percent": "link inertia",
    "payload": "payload",
    "coulomb_percent": "coulomb",
    "viscous_percent": "viscous",
    "rotor_inertia_percent": "rotor inertia",
    "torque_constant_percent": "torque constant",
    "torque_bias_percent": "torque bias",
    "encoder_offset_deg": "encoder offset",
    "stiffness_percent": "stiffness",
    "delay_ms": "delay",
    "base_tilt_deg": "base tilt",
    "identification": "identification",
}
"""The sources as the columns of the matrix are headed."""


@dataclass(frozen=True)
class Condition:
    """A column of the matrix, the sources of mismatch that act in it, and what it states besides."""

    column: Column
    sources: tuple[str, ...] = ()
    case: Case | None = None

    def drawn(self, random: bool) -> Condition:
        """Return the same condition, to be run once a draw or once."""
        return replace(self, column=replace(self.column, random=random))


@dataclass(frozen=True)
class Sheet:
    """One results matrix: what its runs share (``first``), and what they differ in.

    ``laws``: the rows that are possible in it, by name; ``settle_bands_mm`` by the name of the motion.
    """

    name: str
    first: Run
    laws: Mapping[str, LawChoice]
    motions: Mapping[str, Motion]
    conditions: tuple[Condition, ...]
    settle_bands_mm: Mapping[str, float]


def spreading(mismatch: Mismatch) -> tuple[str, ...]:
    """Return the sources that spread at all: a payload that is known for certain is none."""
    payload = mismatch.payload
    certain = payload is not None and payload.least_kg == payload.most_kg and payload.cog_mm == 0
    return tuple(source for source in mismatch.sources if not (certain and source == "payload"))


def nominal_and_levels(keys: ConditionsKeys) -> dict[str, float]:
    """Return the levels of the columns that make the ladder, by the names of these."""
    return {"nominal": 0.0} | {level_name(level): level for level in keys.together or ()}


def conditions_of(
    sources: tuple[str, ...], keys: ConditionsKeys, cases: Mapping[str, Case], noisy: bool
) -> tuple[Condition, ...]:
    """Return the columns: nominal, each source alone, all sources together by level, the cases.

    Where sensing or timing is ``noisy`` all of them are random, also those in which no source acts.
    """
    found = [Condition(Column("nominal", 0.0, random=noisy, ladder=True))]
    if keys.each_alone is not None:
        for source in sources:
            column = Column(NAMES[source], keys.each_alone, random=True, ladder=False)
            found.append(Condition(column, (source,)))
    for name, level in list(nominal_and_levels(keys).items())[1:]:
        found.append(Condition(Column(name, level, random=True, ladder=True), sources))
    for name, case in cases.items():
        level = (keys.cases or {})[name].level
        acting = sources if level > 0 else ()
        found.append(Condition(Column(name, level, random=noisy or level > 0, ladder=False), acting, case))
    return tuple(found)


def bare_run(sheet: Sheet, law: str, motion: str) -> Run:
    """Return the run of a law in a motion that all its conditions have in common: no source acts."""
    band = sheet.settle_bands_mm[motion]
    return replace(sheet.first, law=sheet.laws[law], motion=sheet.motions[motion], settle_band_mm=band)


def entries_of(sheet: Sheet, draws: int) -> Iterator[Entry]:
    """Yield every run of a sheet, law by law: once where nothing is random, else once a draw.

    In a column that is random in another sheet alone, the draws stand for one and the same run.
    """
    for law in sheet.laws:
        for motion in sheet.motions:
            shared = bare_run(sheet, law, motion)
            for condition in sheet.conditions:
                column = condition.column
                level = column.level or 0.0
                for draw in range(draws) if column.random else (None,):
                    one = replace(
                        shared, level=level, sources=condition.sources, draw=draw, case=condition.case
                    )
                    yield Entry(sheet.name, law, motion, column.name, column.level, draw, one)

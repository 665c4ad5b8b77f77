"""From an experiment to its runs: the columns of the matrix, and every run in the order to do them."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace

from rigbench.arm.mismatch import Mismatch
from rigbench.campaign.plan import Entry
from rigbench.experiment.schema import ConditionsKeys
from rigbench.laws.registry import LawChoice
from rigbench.motion.motion import Motion
from rigbench.rig.run import Run
from rigbench.scores.results import Column

__all__ = ["Condition", "conditions_of", "entries_of", "spreading"]

NAMES = {
    "link_mass_percent": "link mass",
    "link_cog_mm": "link cog",
    "link_inertia_percent": "link inertia",
    "payload": "payload",
    "coulomb_percent": "coulomb",
    "viscous_percent": "viscous",
    "rotor_inertia_percent": "rotor inertia",
}
"""The sources as the columns of the matrix are headed."""


@dataclass(frozen=True)
class Condition:
    """A column of the matrix and the sources of mismatch that act in it."""

    column: Column
    sources: tuple[str, ...] = ()


def spreading(mismatch: Mismatch) -> tuple[str, ...]:
    """Return the sources that spread at all: a payload that is known for certain is none."""
    payload = mismatch.payload
    certain = payload is not None and payload.least_kg == payload.most_kg and payload.cog_mm == 0
    return tuple(source for source in mismatch.sources if not (certain and source == "payload"))


def conditions_of(mismatch: Mismatch, keys: ConditionsKeys) -> tuple[Condition, ...]:
    """Return the columns: nominal, each source alone, all sources together by level."""
    sources = spreading(mismatch)
    found = [Condition(Column("nominal", 0.0, random=False, ladder=True))]
    if keys.each_alone is not None:
        for source in sources:
            found.append(
                Condition(Column(NAMES[source], keys.each_alone, random=True, ladder=False), (source,))
            )
    for level in keys.together or ():
        name = f"all at {str(float(level)).removesuffix('.0')}"
        found.append(Condition(Column(name, level, random=True, ladder=True), sources))
    return tuple(found)


def entries_of(
    run: Run,
    laws: Mapping[str, LawChoice],
    motions: Mapping[str, Motion],
    conditions: tuple[Condition, ...],
    draws: int,
) -> Iterator[Entry]:
    """Yield every run, law by law: once where nothing is random, else once a draw.

    ``run`` holds what all of them share.
    """
    for law, choice in laws.items():
        for motion, reference in motions.items():
            for condition in conditions:
                column = condition.column
                level = column.level or 0.0
                for draw in range(draws) if column.random else (None,):
                    one = replace(
                        run, law=choice, motion=reference, level=level, sources=condition.sources, draw=draw
                    )
                    yield Entry("", law, motion, column.name, column.level, draw, one)

"""A spread: by how much a source departs, for all links or joints alike or for each by name."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from rigbench.arm.arm import Arm, Floats
from rigbench.errors import nearest

__all__ = ["LINK_SOURCES", "RESERVED", "WHOLE_SOURCES", "Spread", "carriers", "unknown_names"]

RESERVED = ("all", "shared")
"""Words of a declaration that no link or joint can be named by."""

LINK_SOURCES = ("link_mass_percent", "link_cog_mm", "link_inertia_percent")
"""Sources whose parameters belong to links; those of others that have a spread by name, to joints."""

WHOLE_SOURCES = ("payload", "delay_ms", "base_tilt_deg", "identification")
"""Sources whose parameters belong to the machine as a whole."""


@dataclass(frozen=True)
class Spread:
    """A number for each link or joint: ``all`` for those not named in ``each`` ((name, number), ...).

    With ``shared`` one factor u is drawn for all of them (one per axis for a centre of gravity, one per
    principal moment for an inertia) instead of one for each. The order of ``each`` means nothing: it is
    kept sorted. ValueError for numbers that aren't finite, and names that are reserved or given twice.
    """

    all: float = 0.0
    each: tuple[tuple[str, float], ...] = ()
    shared: bool = False

    def __post_init__(self) -> None:
        each = tuple(sorted((name, float(value)) for name, value in self.each))
        object.__setattr__(self, "all", float(self.all))
        object.__setattr__(self, "each", each)
        names = [name for name, _ in each]
        if len(set(names)) < len(names):
            raise ValueError(f"a name is given twice among {names}")
        if set(names) & set(RESERVED):
            raise ValueError(f"{' and '.join(RESERVED)} name no link or joint")
        if not all(map(math.isfinite, self.values)):
            raise ValueError(f"a spread of {self.values} is not finite")

    @classmethod
    def declared(cls, given: float | Mapping[str, float | bool]) -> Spread:
        """Return the spread of a declaration: 5, {all: 5, wrist: 25} or {all: 5, shared: true}."""
        if not isinstance(given, Mapping):
            return cls(given)
        each = tuple((name, value) for name, value in given.items() if name not in RESERVED)
        return cls(given.get("all", 0.0), each, bool(given.get("shared", False)))

    @property
    def values(self) -> tuple[float, ...]:
        """Every number that is declared: that for all, then those by name."""
        return (self.all, *(value for _, value in self.each))

    def of(self, names: Sequence[str]) -> Floats:
        """Return the number of each name, shape (n,); ValueError if a declared name isn't among them."""
        values = np.full(len(names), self.all)
        for name, value in self.each:
            if name not in names:
                raise ValueError(f"no part is called '{name}'; there are {', '.join(names)}")
            values[names.index(name)] = value
        return values

    def inputs(self) -> float | dict[str, object]:
        """Return it JSON-able: a plain number where that says it all; names that say nothing new left out."""
        each = {name: value for name, value in self.each if value != self.all}
        if not each and not self.shared:
            return self.all
        return {"all": self.all, "each": each, "shared": self.shared}


def carriers(arm: Arm, source: str) -> tuple[str, ...]:
    """Return the names that a spread of ``source`` may use: links, joints, none where it has no names."""
    if source in WHOLE_SOURCES:
        return ()
    return arm.links if source in LINK_SOURCES else arm.joints


def unknown_names(arm: Arm, source: str, given: Iterable[str]) -> tuple[tuple[str, str | None], ...]:
    """Return those of ``given`` that ``source`` can't use, each with the nearest name that it can."""
    valid = carriers(arm, source)
    return tuple((name, nearest(name, valid)) for name in given if name not in valid)

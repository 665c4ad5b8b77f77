"""What the study ``needs`` runs, as its runs are named in the store."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import asdict, dataclass
from typing import Any

from rigbench.scores.limit_search import decisive, most_probes

__all__ = ["TOGETHER", "A", "B", "Group", "NeedsDesign", "Subject", "alone", "swapped"]

A, B, TOGETHER = "shares a", "shares b", "together"
"""Conditions: the two halves of the design, and the search for the common factor."""


def swapped(group: str) -> str:
    """Return the condition of the design's page in which a group is taken from b."""
    return f"shares a, {group} from b"


def alone(group: str) -> str:
    """Return the condition of the search in which a group acts alone."""
    return f"{group} alone"


@dataclass(frozen=True)
class Group:
    """A source, or what of it belongs to one link or joint: what is known, or not, as one.

    ``name`` in words; ``source`` the key under ``mismatch``, ``part`` the link or joint ('' for all);
    ``parameters`` those that it draws; ``spread`` what is declared of it, see spread_at.py.
    """

    name: str
    source: str
    part: str
    parameters: tuple[str, ...]
    spread: Mapping[str, Any]


@dataclass(frozen=True)
class Subject:
    """A law in a sheet, the motions that it runs in, and the groups that make its machine uncertain."""

    sheet: str
    law: str
    motions: tuple[str, ...]
    groups: tuple[Group, ...]

    def runs_per_point(self) -> int:
        """Return how many runs a row of the design takes."""
        return (len(self.groups) + 2) * len(self.motions)

    def most_search_runs(self, draws: int, lowest: int) -> int:
        """Return how many runs its searches take at most: one for each group, and one for all together."""
        return (len(self.groups) + 1) * len(self.motions) * most_probes(draws, lowest)


@dataclass(frozen=True)
class NeedsDesign:
    """The whole: ``points`` rows of the pick-freeze design at ``level``, and ``draws`` in each search.

    ``score`` is what is shared out; ``required_share`` what of the draws must keep the tolerance.
    """

    score: str
    level: float
    points: int
    draws: int
    required_share: float
    subjects: tuple[Subject, ...]

    @property
    def lowest(self) -> int:
        """How many of the lowest limits decide in each search."""
        return decisive(self.draws, self.required_share)

    @property
    def share_runs(self) -> int:
        """How many runs the shares take."""
        return self.points * sum(subject.runs_per_point() for subject in self.subjects)

    @property
    def most_search_runs(self) -> int:
        """How many runs the searches take at most."""
        return sum(subject.most_search_runs(self.draws, self.lowest) for subject in self.subjects)

    def declared(self) -> dict[str, Any]:
        """Return it in JSON's types."""
        return asdict(self)

    @classmethod
    def of(cls, declared: Mapping[str, Any]) -> NeedsDesign:
        """Read what :meth:`declared` returned, and a store kept."""
        subjects = tuple(
            Subject(
                each["sheet"],
                each["law"],
                tuple(each["motions"]),
                tuple(
                    Group(**{**group, "parameters": tuple(group["parameters"])}) for group in each["groups"]
                ),
            )
            for each in declared["subjects"]
        )
        return cls(**{**declared, "subjects": subjects})

"""Whose store it is: what tells one experiment from another."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

from rigbench.campaign.plan import Plan

__all__ = ["Owner"]


@dataclass(frozen=True)
class Owner:
    """An experiment: its title, its arm's name, and where its file is (absolute; '' if that isn't known)."""

    title: str
    arm: str
    origin: str

    @classmethod
    def of(cls, plan: Plan) -> Owner:
        """Return the experiment that a plan is of."""
        return cls(plan.title, plan.arm, str(Path(plan.experiment_path).resolve()))

    def is_same(self, other: Owner) -> bool:
        """Whether both are one experiment: the same file, or the same title and arm.

        So an experiment may be given another title, and its folder may be moved, but not both at once;
        two experiments of one title, or without any, are told apart by their arms.
        """
        same_file = self.origin == other.origin != ""
        return same_file or (self.title, self.arm) == (other.title, other.arm)

    def __str__(self) -> str:
        where = f" in {self.origin}" if self.origin else ""
        return f"the experiment '{self.title}' of arm '{self.arm}'{where}"

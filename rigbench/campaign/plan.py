"""The plan: every run that an experiment declares, named as the experiment names it, in order."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING

from rigbench.scores.results import Column, Tolerance

if TYPE_CHECKING:
    from rigbench.campaign.study import Study
    from rigbench.rig.run import Run  # not at run time: it brings the engine and the compiler

__all__ = ["Entry", "Plan", "fair_order"]


@dataclass(frozen=True)
class Entry:
    """One planned run and its place in the results: a sheet, law, motion, condition and draw.

    ``draw`` is None where nothing is random. Several entries may stand for one and the same run (one
    source alone, and all together where only one is declared): they share its key, and it is done once.
    """

    sheet: str
    law: str
    motion: str
    condition: str
    level: float | None
    draw: int | None
    run: Run

    @cached_property
    def key(self) -> str:
        """The run's key (hex, 40 digits), worked out once."""
        return self.run.key()


def fair_order(entries: Iterable[Entry]) -> tuple[Entry, ...]:
    """Return the entries in the order to run them: what is not random first, then draw by draw.

    Within a draw they keep the order they came in. So whenever a campaign is stopped, every sheet, law,
    motion and condition has been run on the same machines, but for the draw in hand.
    """
    return tuple(sorted(entries, key=lambda entry: -1 if entry.draw is None else entry.draw))


@dataclass(frozen=True)
class Plan:
    """All runs of an experiment, in the order of :func:`fair_order`, and the names to show them under."""

    title: str
    arm: str  # the arm's name
    experiment_text: str
    experiment_path: str
    sheets: tuple[str, ...]  # ('',) where nothing is swept
    laws: tuple[str, ...]
    motions: tuple[str, ...]
    columns: tuple[Column, ...]
    draws: int
    tolerance: Tolerance | None
    entries: tuple[Entry, ...]
    resume: str  # the command line that goes on where a stopped campaign ended
    absent: tuple[tuple[str, str, str], ...] = ()  # (sheet, law, condition) that can't be combined: no runs
    studies: tuple[Study, ...] = ()  # done after the entries, in order
    first: Study | None = None  # on which the entries depend; see run_first
    stop_early: bool = False  # a column gets no more draws once it is settled for all its laws
    model: str = ""  # the file of another arm that the laws of all sheets believe

    @property
    def seed(self) -> int | None:
        """The seed of the draws; None where nothing is random."""
        return next((entry.run.seed for entry in self.entries if entry.draw is not None), None)

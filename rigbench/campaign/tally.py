"""How the laws stand while a campaign runs, counted run by run, so that nothing is read twice."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass

from rigbench.campaign.plan import Entry, Plan
from rigbench.campaign.reading import Reader
from rigbench.campaign.work import Outcome
from rigbench.scores.columns import telling_column
from rigbench.scores.verdict import run_keeps

__all__ = ["SoFar", "Standing", "Tally"]


@dataclass(frozen=True)
class SoFar:
    """A law under one condition so far: of ``draws`` that count, in all sheets, ``passed`` keep."""

    law: str
    passed: int
    draws: int


@dataclass(frozen=True)
class Standing:
    """The laws under one condition, in the order of the plan, over so many ``sheets``."""

    condition: str
    laws: tuple[SoFar, ...]
    sheets: int = 1


class Tally:
    """Counts the draws that pass under the telling condition.

    As in the results, a draw counts once every motion has the machine's verdict, and passes when each has
    finished and keeps its limits. Without a tolerance nothing passes, and there is no standing.
    """

    def __init__(self, plan: Plan, store: Reader, missing: Iterable[Entry]) -> None:
        """Count what the store holds already; ``missing`` are the runs that may come."""
        column = telling_column(plan.columns) if plan.tolerance is not None else None
        self._condition = None if column is None else column.name
        self._limits = {
            motion: {} if plan.tolerance is None else plan.tolerance.limits_for(motion)
            for motion in plan.motions
        }
        self._sheets = len(plan.sheets)
        self._sums = {law: [0, 0] for law in plan.laws}
        self._draws: dict[tuple[str, str, int | None], dict[str, bool | None]] = {}
        self._standing: Standing | None = None
        keys = {entry.key for entry in missing}
        self._places: dict[str, list[Entry]] = {}
        for entry in plan.entries if column is not None else ():
            if entry.condition == self._condition and entry.key in keys:
                self._places.setdefault(entry.key, []).append(entry)
        for law in plan.laws if self._condition is not None else ():
            for record in store.records_of(law, self._condition or ""):
                row = record.row
                self._put((row.sheet, law, row.draw), row.motion, row.outcome, row.scores)

    def count(self, outcome: Outcome) -> None:
        """Count what came of a run, in place of what had come of it before."""
        for entry in self._places.get(outcome.key, ()):
            place = entry.sheet, entry.law, entry.draw
            self._put(place, entry.motion, outcome.outcome, outcome.scores)

    @property
    def standing(self) -> Standing | None:
        """The standing as of now; None as long as no draw counts."""
        if self._condition is None or not any(draws for _, draws in self._sums.values()):
            return None
        if self._standing is None:
            laws = tuple(SoFar(law, passed, draws) for law, (passed, draws) in self._sums.items())
            self._standing = Standing(self._condition, laws, self._sheets)
        return self._standing

    def _put(
        self, place: tuple[str, str, int | None], motion: str, outcome: str, scores: Mapping[str, float]
    ) -> None:
        runs = self._draws.setdefault(place, {})
        sums = self._sums[place[1]]
        for sign in (-1, 1):
            if sign > 0:
                runs[motion] = run_keeps(outcome, scores, self._limits[motion])
            verdicts = runs.values()
            if len(runs) == len(self._limits) and None not in verdicts:
                sums[0] += sign * all(verdicts)
                sums[1] += sign
        self._standing = None

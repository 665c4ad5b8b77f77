"""Stopping early: a column gets no more draws once the cells of all its laws are settled.

A column is a condition in a sheet. Its laws are looked at after each draw of its gapless beginning, in which
every run of every law has come to something; it is settled after the first draw at which the interval that
holds at any time (see scores/anytime.py) lies on one side of the required share for each law. So the laws of
a column keep the same draws, and the number of them follows from the stored rows alone, in whichever order
they came. A draw with a host's trouble does not count for its law, as in the cells; a law of which none of
the first 20 counts holds nobody up any more, and opens the column again once a run of it comes to something.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from rigbench.campaign.plan import Entry, Plan
from rigbench.campaign.reading import Reader
from rigbench.campaign.work import Outcome
from rigbench.scores.anytime import settled
from rigbench.scores.results import Tolerance
from rigbench.scores.row import Row
from rigbench.scores.run_table import FINISHED, MISSING, STATES
from rigbench.scores.verdict import keeps

__all__ = ["ColumnKey", "Settling", "to_do"]

ColumnKey = tuple[str, str]
"""Sheet and condition."""

UNKNOWN, TROUBLE, MISSED, KEPT = range(4)
"""What came of a run: nothing yet, a host's trouble, the machine's verdicts."""

PATIENCE = 20
"""Draws in which a law may come to nothing before the others go on without it."""

_settled = lru_cache(maxsize=65536)(settled)


class Settling:
    """Which columns of a plan are settled, run by run; none unless the plan is to stop early."""

    def __init__(self, plan: Plan) -> None:
        """Begin with nothing known; see :meth:`read`."""
        self._columns: dict[ColumnKey, _Column] = {}
        self._places: dict[str, list[Entry]] = {}
        self._tolerance = plan.tolerance
        if plan.tolerance is None or not plan.stop_early:
            return
        rows: dict[ColumnKey, dict[str, None]] = {}
        for entry in plan.entries:
            if entry.draw is not None:
                rows.setdefault((entry.sheet, entry.condition), {})[entry.law] = None
                self._places.setdefault(entry.key, []).append(entry)
        share = plan.tolerance.required_share
        for key, laws in rows.items():
            self._columns[key] = _Column(tuple(laws), plan.motions, plan.draws, share)

    @classmethod
    def read(cls, plan: Plan, store: Reader) -> Settling:
        """Return what the rows of a store say in which the plan is recorded.

        What is to be done anew stands as it is until it has been.
        """
        found = cls(plan)
        if plan.tolerance is not None and found._columns:
            names, places = plan.tolerance.limited, store.places()
            limits = {motion: _ceiling(plan.tolerance, motion, names) for motion in plan.motions}
            for block in store.blocks(names):
                state = np.array([STATES[outcome] for outcome in block.outcome])
                for number in np.unique(block.place).tolist():
                    place = places[number]
                    column = found._columns.get((place.sheet, place.condition))
                    rows = np.flatnonzero(block.place == number)
                    if column is not None:
                        scores = block.scores[rows]
                        kept = np.all(np.isnan(scores) | (scores <= limits[place.motion]), axis=1)
                        code = np.where((state[rows] == FINISHED) & kept, KEPT, MISSED)
                        code[state[rows] == MISSING] = TROUBLE
                        column.put_all((place.law, place.motion), block.draw[rows], code)
            for column in found._columns.values():
                column.look()
        return found

    @property
    def settled(self) -> Mapping[ColumnKey, int]:
        """After how many draws each settled column was so."""
        return {key: column.after for key, column in self._columns.items() if column.after is not None}

    @property
    def active(self) -> bool:
        """Whether any column may stop early."""
        return bool(self._columns)

    def wants(self, entry: Entry) -> bool:
        """Whether an entry's run is still wanted, in any place for which it stands."""
        places = self._places.get(entry.key)
        return places is None or any(self._wants(place) for place in places)

    def _wants(self, place: Entry) -> bool:
        after = self._columns[place.sheet, place.condition].after
        return after is None or place.draw is None or place.draw < after

    def count(self, outcome: Outcome) -> bool:
        """Learn what came of a run; return whether that settled a column, or left one open again."""
        if self._tolerance is None:
            return False
        changed = False
        for place in self._places.get(outcome.key, ()):
            row = Row(
                place.sheet,
                place.law,
                place.motion,
                place.condition,
                place.level,
                place.draw,
                outcome.outcome,
                outcome.scores,
            )
            kept = keeps([row], self._tolerance)
            code = TROUBLE if kept is None else KEPT if kept else MISSED
            column = self._columns[place.sheet, place.condition]
            before = column.after
            column.put((place.law, place.motion), place.draw or 0, code)
            changed |= column.after != before
        return changed


class _Column:
    """What came of the runs of a column, and after how many draws it was settled."""

    def __init__(self, laws: tuple[str, ...], motions: tuple[str, ...], draws: int, share: float) -> None:
        self._rows = {(law, motion): (i, k) for i, law in enumerate(laws) for k, motion in enumerate(motions)}
        self._state: NDArray[np.int8] = np.zeros((len(laws), len(motions), draws), dtype=np.int8)
        self._share = share
        self._begin()

    def _begin(self) -> None:
        self.after: int | None = None
        self._seen = 0  # draws of the gapless beginning that were looked at
        self._counted = [[0, 0] for _ in self._state]  # passed and draws that count, by law

    def put_all(self, row: tuple[str, str], draws: NDArray[np.int64], codes: NDArray[np.int64]) -> None:
        """Put down what came of runs of a law in a motion, before the first look."""
        self._state[self._rows[row]][draws] = codes

    def put(self, row: tuple[str, str], draw: int, code: int) -> None:
        """Put down what came of one run, and look."""
        self._state[*self._rows[row], draw] = code
        if draw < self._seen:  # a run that was done anew
            self._begin()
        self.look()

    def look(self) -> None:
        """Go on through the gapless beginning to the first draw at which all laws are settled."""
        draws = self._state.shape[2]
        while self.after is None and self._seen < draws:
            here = self._state[:, :, self._seen]
            if not here.all():
                return
            self._seen += 1
            for sums, codes in zip(self._counted, here.tolist(), strict=True):
                if TROUBLE not in codes:
                    sums[0] += MISSED not in codes
                    sums[1] += 1
            patient = self._seen < PATIENCE
            counted = [(passed, count) for passed, count in self._counted if count or patient]
            if counted and all(_settled(*sums, self._share) != "open" for sums in counted):
                self.after = self._seen


def _ceiling(tolerance: Tolerance, motion: str, names: Iterable[str]) -> NDArray[np.float64]:
    limits = tolerance.limits_for(motion)
    return np.array([limits.get(name, np.inf) for name in names])


def to_do(plan: Plan, store: Reader) -> list[Entry]:
    """Return the entries that are neither stored nor in a column of which the store says that it is settled.

    The store may be of an older plan: a column counts as settled only if the draws that settled it are
    all stored under this one's keys, and are judged by the same tolerance.
    """
    missing = store.missing(plan)
    labels = store.labels if plan.stop_early and store.owner is not None else None
    if labels is None or labels.tolerance != plan.tolerance:
        return missing
    ends = {(sheet, condition): after for sheet, condition, after in labels.settled}

    def within(entry: Entry) -> bool:
        after = ends.get((entry.sheet, entry.condition))
        return after is None or entry.draw is None or entry.draw < after

    for entry in missing:
        if within(entry):
            ends.pop((entry.sheet, entry.condition), None)
    return [entry for entry in missing if within(entry)]

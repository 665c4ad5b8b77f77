"""How far a campaign is, while it runs."""

from __future__ import annotations

import time
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass

from rigbench.campaign.part import Part
from rigbench.campaign.plan import Entry, Plan
from rigbench.campaign.settling import Settling
from rigbench.campaign.tally import Standing, Tally
from rigbench.campaign.work import Outcome
from rigbench.scores.row import MACHINE_OUTCOMES

__all__ = ["Progress", "Tracker"]


@dataclass(frozen=True)
class Progress:
    """How far a campaign is, in planned runs of the part that is asked for.

    ``rate`` [1/s] since the first run ended, and ``seconds_left`` by it, once they can be told; ``ends_in``
    [s] until its time is up, if that is limited; ``standing`` how the laws stand so far, if that is counted.
    ``settled``: so many columns stopped early, whose further runs are not planned any more.
    ``study`` names the study that is at work, if one is: then the runs are those it has asked for so far.
    """

    planned: int
    done: int
    failed: int
    rate: float | None = None
    seconds_left: float | None = None
    ends_in: float | None = None
    standing: Standing | None = None
    study: str = ""
    settled: int = 0


class Tracker:
    """Counts planned runs as they are done; one that stands for several entries counts for all of them."""

    def __init__(
        self, plan: Plan, part: Part, missing: Sequence[Entry], failed: int, tally: Tally | None = None
    ) -> None:
        weights = Counter(entry.key for entry in plan.entries if part.has(entry))
        self._weights = {entry.key: weights[entry.key] for entry in missing}
        self._planned, self._failed = weights.total(), failed
        self._done = self._planned - sum(self._weights.values()) - failed
        self._ends, self._tally = part.ends, tally
        self._left = {entry.key: entry for entry in missing}
        self._spared: set[str] = set()
        self._settled = 0
        self._first: tuple[float, int] | None = None  # when a run first ended, and its weight
        self._ran = 0

    def count(self, outcome: Outcome) -> None:
        """Count what came of a run."""
        weight = self._weights[outcome.key]
        self._left.pop(outcome.key, None)
        self._spared.discard(outcome.key)
        if outcome.outcome in MACHINE_OUTCOMES:
            self._done += weight
        else:
            self._failed += weight
        self._ran += weight
        self._first = self._first or (time.monotonic(), weight)
        if self._tally is not None:
            self._tally.count(outcome)

    def settle(self, settling: Settling) -> None:
        """Learn which columns are settled: runs that nobody wants any more are no longer planned."""
        self._spared = {key for key, entry in self._left.items() if not settling.wants(entry)}
        self._settled = len(settling.settled)

    @property
    def planned(self) -> int:
        """Runs that are planned still."""
        return self._planned - sum(self._weights[key] for key in self._spared)

    @property
    def left(self) -> int:
        """Planned runs that have come to nothing yet."""
        return self.planned - self._done - self._failed

    def progress(self) -> Progress:
        """Return how far the campaign is now."""
        now = time.monotonic()
        rate = None
        if self._first is not None and self._ran > self._first[1]:  # before, workers start and compile
            rate = (self._ran - self._first[1]) / max(now - self._first[0], 1e-9)
        return Progress(
            self.planned,
            self._done,
            self._failed,
            rate,
            None if rate is None else self.left / rate,
            None if self._ends is None else max(0.0, self._ends - now),
            None if self._tally is None else self._tally.standing,
            settled=self._settled,
        )

"""How large a store will be, by filling small ones."""

from __future__ import annotations

import tempfile
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from itertools import islice
from pathlib import Path

from rigbench.campaign.ahead import StudyAhead
from rigbench.campaign.doing import Draws
from rigbench.campaign.plan import Entry, Plan
from rigbench.campaign.store import Store
from rigbench.campaign.study import Study
from rigbench.campaign.work import Outcome

__all__ = ["store_bytes"]

SAMPLE = 1000
"""Runs of a small store."""

BEGINNING = 200
"""Runs of the plan that are in a small store of a study's runs, so that what they share is there."""


def store_bytes(plan: Plan, outcomes: Mapping[str, Outcome], ahead: Iterable[StudyAhead] = ()) -> float:
    """Return the size of a store [bytes] that holds the plan and all its runs, and those of its studies.

    Each run gets the outcome of its law in ``outcomes``. Of a plan of more than SAMPLE runs the first half
    and all of the first SAMPLE are stored, and what the second half adds is taken as what every further
    run adds: arms, laws and the texts of runs are stored once. Likewise the examples of a study's runs, which
    are as many as it takes at most or, if it is finished, as it took. StoreError if the disk refuses.
    """
    whole = _Filling(plan, outcomes)
    size = _extrapolated(len(plan.entries), len(plan.entries), whole.bytes_of_plan)
    for one in ahead:
        left = one.stored if one.finished else one.study.most_runs
        for most, examples in one.study.examples():
            runs = min(most, left)
            left -= runs
            size += whole.study_bytes(one.study, runs, list(islice(examples, SAMPLE)))
    return size


def _extrapolated(runs: int, known: int, size_of: Callable[[int], int]) -> float:
    """Return the size at so many runs, the first ``known`` of which can be stored."""
    sample = min(known, SAMPLE)
    if runs <= sample or sample < 2:
        return float(size_of(min(runs, sample)))
    half, whole = size_of(sample // 2), size_of(sample)
    return whole + (whole - half) / (sample - sample // 2) * (runs - sample)


@dataclass(frozen=True)
class _Filling:
    """Small stores of a plan's runs and of studies'."""

    plan: Plan
    outcomes: Mapping[str, Outcome]

    def bytes_of_plan(self, number: int) -> int:
        """Return the size of a store of the first so many runs of the plan."""
        return self._bytes(self.plan.entries[:number], None, ())

    def study_bytes(self, study: Study, runs: int, examples: Sequence[Entry]) -> float:
        """Return what so many runs of a study add to a store in which the plan has begun."""
        beginning = self.plan.entries[:BEGINNING]
        planned = {entry.key for entry in self.plan.entries}
        once = list({entry.key: entry for entry in examples if entry.key not in planned}.values())

        def with_examples(number: int) -> int:
            return self._bytes(beginning, study, once[:number])

        return _extrapolated(runs, len(once), with_examples) - with_examples(0)

    def _bytes(self, entries: Sequence[Entry], study: Study | None, studied: Sequence[Entry]) -> int:
        part, draws = replace(self.plan, entries=tuple(entries)), Draws()
        once = {entry.key: entry for entry in entries}
        with tempfile.TemporaryDirectory() as folder:
            path = Path(folder) / "small.sqlite"
            with Store.open_for_writing(path, part) as store:
                store.record_plan(part)
                if study is not None:
                    store.record_study(study, studied, finished=False)
                # the whole plan has the values of its draws: a study adds those of its own
                new = [entry for entry in studied if entry.draw is not None and entry.draw >= self.plan.draws]
                store.add(
                    (
                        replace(self.outcomes[entry.law], key=entry.key)
                        for entry in (*once.values(), *studied)
                    ),
                    (values for entry in (*once.values(), *new) for values in draws.of(entry)),
                )
            return path.stat().st_size

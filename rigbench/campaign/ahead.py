"""What studies have ahead of them: which of their runs a store holds, and how many more they ask for."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

from rigbench.campaign.plan import Entry, Plan
from rigbench.campaign.reading import SETTLED, Reader
from rigbench.campaign.study import Study
from rigbench.scores.row import Row

__all__ = ["StudyAhead", "studies_ahead"]


@dataclass(frozen=True)
class StudyAhead:
    """A study of which so many runs are ``stored``, beside those that the plan has as well."""

    study: Study
    stored: int = 0
    finished: bool = False

    @property
    def left(self) -> int:
        """How many runs it asks for yet, at most."""
        return 0 if self.finished else max(self.study.most_runs - self.stored, 0)


def studies_ahead(plan: Plan, store: Reader | None) -> Iterator[StudyAhead]:
    """Yield the plan's studies, the one that comes first included, by asking each for its rounds."""
    planned = {entry.key for entry in plan.entries}
    for study in (plan.first, *plan.studies):
        if study is not None:
            yield StudyAhead(study) if store is None else _ahead(study, store, planned)


def _ahead(study: Study, store: Reader, planned: set[str]) -> StudyAhead:
    def known(entry: Entry) -> Row | None:
        row = store.row_of(entry)
        return row if row is not None and row.outcome in SETTLED else None

    asked = {entry.key: known(entry) for entries in study.rounds(known) for entry in entries}
    stored = sum(row is not None for key, row in asked.items() if key not in planned)
    return StudyAhead(study, stored, None not in asked.values())

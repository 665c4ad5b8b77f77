"""What came back for a run, whoever did it: read, checked, and always one outcome under the run's own key."""

from __future__ import annotations

import pickle

from rigbench.campaign.plan import Entry
from rigbench.campaign.work import Outcome, failed, summary
from rigbench.campaign.worker import Trouble

__all__ = ["checked", "unpacked"]


def unpacked(entry: Entry, result: bytes) -> Outcome:
    """Return the outcome that :func:`rigbench.campaign.worker.answer` packed, 'crashed' if it is none."""
    try:
        outcome = pickle.loads(result)
    except Exception as error:
        return failed(entry.key, "crashed", f"its result can't be read: {summary(error)}")
    if isinstance(outcome, Trouble):
        return failed(entry.key, "crashed", outcome.summary, outcome.trace)
    return checked(entry, outcome)


def checked(entry: Entry, outcome: object) -> Outcome:
    """Refuse what is no outcome, or one of other inputs than planned: somebody edits a law meanwhile."""
    if not isinstance(outcome, Outcome):
        return failed(entry.key, "crashed", f"the work yielded no outcome but {outcome!r:.60}")
    if outcome.key != entry.key:
        return failed(entry.key, "crashed", "the law's source files have changed since the campaign began")
    return outcome

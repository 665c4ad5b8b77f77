"""Finding one stored run: by its key's beginning, or as the worst of a law under a condition."""

from __future__ import annotations

import math
import re
from collections import defaultdict
from collections.abc import Iterable, Sequence

from rigbench.campaign.labels import Labels
from rigbench.campaign.reading import Reader, Record
from rigbench.errors import Fault, InputFaults, nearest
from rigbench.scores.names import main_score
from rigbench.scores.row import HOST_OUTCOMES, MACHINE_OUTCOMES

__all__ = ["main_score_of", "run_by_key", "worst_run"]

SHOWN = 4
"""Keys that are named where several begin alike."""

Draw = tuple[str, int | None]
"""A sheet and the number of a draw."""


def main_score_of(labels: Labels) -> str:
    """Return the score by which the campaign's laws are compared."""
    return main_score(labels.tolerance.limited if labels.tolerance else ())


def run_by_key(store: Reader, beginning: str) -> Record:
    """Return the stored run whose key begins so.

    InputFaults if there is none, if there are several, if it has not been run yet, and if the experiment
    has changed since it was run so that it is no longer planned.
    """
    file, digits = str(store.path), beginning.strip().lower()
    expected = "the beginning of a run's key, as 'rigbench export' has it in its column key"
    if not re.fullmatch("[0-9a-f]{1,40}", digits):
        raise InputFaults.one(file, "RUN", f"'{beginning}' is no hexadecimal number", expected)
    planned, others = store.keys(digits)
    if len(planned) > 1:
        shown = ", ".join(planned[:SHOWN]) + (", ..." if len(planned) > SHOWN else "")
        problem = f"'{beginning}' is the beginning of {len(planned)} keys: {shown}"
        raise InputFaults.one(file, "RUN", problem, "more of its digits")
    if not planned and others:
        problem = "is stored, but the experiment has changed since and no longer plans that run"
        raise InputFaults.one(file, "RUN", f"'{beginning}' {problem}", "a run that is planned")
    if not planned:
        raise InputFaults.one(file, "RUN", f"no run's key begins with '{beginning}'", expected)
    record = store.record(planned[0])
    if record is None:
        raise InputFaults.one(file, "RUN", f"run {planned[0]} is planned, but has not been run yet")
    return record


def worst_run(
    store: Reader, law: str, condition: str, motion: str | None = None, sheet: str | None = None
) -> Record:
    """Return the worst of a law's runs under a condition, of one motion and sheet or of all.

    That is the first that did not finish, or else the one with the largest main score. Only draws that
    count are looked at: those that have the machine's verdict in every motion (or in the given one), and
    of a column that stopped early those after which it was settled.
    InputFaults if a name is none of the campaign's, or if no draw counts yet.
    """
    labels = store.labels
    names = {"law": law, "condition": condition, "motion": motion, "sheet": sheet}
    known = {
        "law": labels.laws,
        "condition": tuple(column.name for column in labels.columns),
        "motion": labels.motions,
        "sheet": labels.sheets,
    }
    faults = [_unknown(store, what, name, known[what]) for what, name in names.items() if name is not None]
    if any(faults):
        raise InputFaults(fault for fault in faults if fault)
    ends = {own: after for own, of, after in labels.settled if of == condition}
    records = [
        record
        for record in store.records_of(law, condition)
        if motion in (None, record.row.motion)
        and sheet in (None, record.row.sheet)
        and (record.row.draw or 0) < ends.get(record.row.sheet, math.inf)
    ]
    motions = labels.motions if motion is None else (motion,)
    counted = _counted(records, motions)
    if not counted:
        problem = f"no draw of '{law}' under '{condition}' has the machine's verdict in every motion"
        raise InputFaults.one(store.path, "--worst", f"{problem}{_trouble(records)}")
    score = main_score_of(labels)
    return max(counted, key=lambda record: _badness(record, score))


def _unknown(store: Reader, what: str, name: str, known: Sequence[str]) -> Fault | None:
    if name in known:
        return None
    near = nearest(name, known)
    expected = "" if near else "one of " + ", ".join(repr(each) for each in known)
    return Fault(str(store.path), None, what, f"no {what} is called '{name}'", expected, near)


def _counted(records: Iterable[Record], motions: Sequence[str]) -> list[Record]:
    """Return the runs of the draws on which the machine gave its verdict in every motion."""
    by_draw: dict[Draw, list[Record]] = defaultdict(list)
    for record in records:
        if record.row.outcome in MACHINE_OUTCOMES:
            by_draw[record.row.sheet, record.row.draw].append(record)
    return [
        record
        for found in by_draw.values()
        if {record.row.motion for record in found} == set(motions)
        for record in found
    ]


def _trouble(records: Iterable[Record]) -> str:
    """Say what the first run that came to nothing came to, with its traceback; '' if none did."""
    for record in records:
        row = record.row
        if row.outcome in HOST_OUTCOMES:
            return f"; its runs came to nothing ({row.outcome}): {row.reason}\n{record.trace}".rstrip()
    return ""


def _badness(record: Record, score: str) -> float:
    if record.row.outcome != "finished":
        return math.inf
    return record.row.scores.get(score, -math.inf)

"""``rigbench worst``: the machines that a search found to break the laws."""

from __future__ import annotations

import datetime
import math
from pathlib import Path
from typing import TYPE_CHECKING, Any

from rigbench.campaign.store import Store
from rigbench.campaign.studied import asked_study
from rigbench.campaign.studies.worst_case import NAME, WorstFound
from rigbench.cli.output import print_json, say, show
from rigbench.cli.stored import CAUTION, check_output
from rigbench.scores.results import Tolerance

if TYPE_CHECKING:
    from rigbench.report.worst_words import LawWorst

__all__ = ["tell_worst"]


def tell_worst(path: str, output: str | None, as_json: bool) -> None:
    """Print what the search found of each law; draw it where an ``output`` is named."""
    from rigbench.report.worst_laws import worst_laws
    from rigbench.report.worst_words import worst_text

    if output is not None:
        check_output(Path(output), path)
    with Store.open_for_reading(path) as store, store.one_moment():
        study, labels = asked_study(store, NAME, " {}"), store.labels
        laws = list(worst_laws(store, study, labels.tolerance or Tolerance({})))
    if output is not None:
        from rigbench.report.worst_picture import worst_picture

        worst_picture(laws, labels.title, Path(output), datetime.date.today())
    if as_json:
        about = {"store": path, "picture": output, "finished": study.finished}
        print_json(about | {"laws": [_law(law) for law in laws]})
    else:
        show(worst_text(laws, path))
    if not study.finished:
        say(f"the search is not finished: '{labels.resume}' goes on with it")
    if output is not None and not as_json:
        say(f"picture: {output}")
    say(CAUTION)


def _law(law: LawWorst) -> dict[str, Any]:
    smallest = law.smallest
    below = [one.level for one in law.levels if smallest is None or one.level < smallest.level]
    return {
        "sheet": law.sheet,
        "law": law.law,
        "smallest_level_found_to_miss": None if smallest is None else smallest.level,
        "largest_level_below": max(below, default=None),
        "levels": [_level(one, law) for one in law.levels],
        "direction": {
            "level": law.told.level,
            "run": None if law.told.record is None else law.told.record.key,
            "parameters": [
                {
                    "name": one.drawn.name,
                    "u": one.drawn.u,
                    "amount": one.drawn.amount,
                    "difference_by_itself": _finite(one.difference),
                }
                for one in law.departures
            ],
        },
    }


def _level(one: WorstFound, law: LawWorst) -> dict[str, Any]:
    row = None if one.record is None else one.record.row
    return {
        "level": one.level,
        "searched": one.searched,
        "misses": one.misses,
        "runs": one.runs,
        "without_verdict": one.dropped,
        "share_of_limit": None if one.used is None else _finite(one.used.share),
        "score": None if one.used is None else one.used.score or None,
        "value": None if one.used is None else _finite(one.used.value),
        "motion": None if row is None else row.motion,
        "outcome": None if row is None else row.outcome,
        "run": None if one.record is None else one.record.key,
        "share_of_draws": _finite(law.drawn[one.level][0]) if one.level in law.drawn else None,
    }


def _finite(value: float | None) -> float | None:
    return None if value is None or math.isinf(value) else value

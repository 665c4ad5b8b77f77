"""The worst machines found, where the experiment asked for them."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Any

from rigbench.campaign.reading import Reader
from rigbench.campaign.studies.worst_case import NAME
from rigbench.errors import StoreError
from rigbench.report.words import level
from rigbench.report.worst_laws import worst_laws
from rigbench.report.worst_words import (
    LawWorst,
    difference_words,
    draws_words,
    found_words,
    more_words,
    replay_command,
    runs_words,
    smallest_words,
    told_words,
    used_words,
)
from rigbench.scores.results import Tolerance

__all__ = ["FoundWorst", "found_worst", "worst_laws_told"]


@dataclass(frozen=True)
class FoundWorst:
    """What the search has found of each law and sheet; ``note`` says why that can't be told here."""

    laws: Sequence[LawWorst]
    finished: bool
    note: str = ""


def found_worst(store: Reader, tolerance: Tolerance | None) -> FoundWorst | None:
    """Return what the search has found; None where the store has none."""
    study = store.study(NAME)
    if study is None:
        return None
    try:
        return FoundWorst(list(worst_laws(store, study, tolerance or Tolerance({}))), study.finished)
    except StoreError as error:  # a run that this rigbench can't restore: the rest of the page can be told
        return FoundWorst((), study.finished, f"It can't be told here: {error}")


def worst_laws_told(found: FoundWorst, store: str) -> Iterator[dict[str, Any]]:
    """Yield what was found of each law: a row a level, what departs most, and how to replay it."""
    for law in found.laws:
        record = law.told.record
        yield {
            "subject": f"{law.law} ({law.sheet})" if law.sheet else law.law,
            "smallest": _sentence(smallest_words(law)),
            "levels": [
                (level(one.level), found_words(one), used_words(one), runs_words(one), draws_words(law, one))
                for one in law.levels
                if one.searched
            ],
            "told": _sentence(told_words(law)),
            "departures": [
                (one.drawn.words, f"{one.drawn.u:+g}", one.drawn.amount, difference_words(one))
                for one in law.shown
            ],
            "more": more_words(law),
            "replay": "" if record is None else replay_command(record.key, store),
        }


def _sentence(words: str) -> str:
    return f"{words[:1].upper()}{words[1:]}."

"""The gains that were found for the laws, where the experiment asked for them."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

from rigbench.campaign.reading import Reader
from rigbench.campaign.studies.tune import NAME, Aim, GainsFound, gains_found
from rigbench.report.gains_words import declared_words, found_words, gains_words

__all__ = ["FoundGains", "found_gains", "gains_rows"]

NONE_FOUND = "none within the limits: the declared stay"


@dataclass(frozen=True)
class FoundGains:
    """What the search has found of each law and sheet, and what it set out to do."""

    laws: Sequence[GainsFound]
    aim: Aim
    finished: bool


def found_gains(store: Reader) -> FoundGains | None:
    """Return what the search has found; None where the store has none."""
    study = store.study(NAME)
    if study is None:
        return None
    return FoundGains(gains_found(study), Aim(**study.declared["aim"]), study.finished)


def gains_rows(found: FoundGains) -> Iterator[tuple[str, ...]]:
    """Yield sheet, law, gains found, their score, the declared gains, their score, and the number of runs."""
    for one in found.laws:
        own = (gains_words(one.gains), found_words(one, found.aim)) if one.within else (NONE_FOUND, "")
        declared = gains_words(one.declared), declared_words(one, found.aim)
        yield (one.sheet, one.law, *own, *declared, str(one.runs))
